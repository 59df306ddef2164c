"""Results for other programs: JUnit XML for CI jobs, a Markdown summary, a tidy CSV of the lot.

JUnit has no official specification; what is written is the common subset that CI hosts read. `failure` is a limit that
is not met, `error` a limit that was not measured (never a pass, never the unit's failure).
"""

import csv
import io
import re
from collections.abc import Iterator, Mapping, Sequence
from typing import Any
from xml.etree import ElementTree as ET

from runner.judge.lot import margin
from runner.judge.sentences import decimals
from runner.judge.verdict import CANNOT_DECIDE, CONFORMS, DOES_NOT_CONFORM, NOT_MEASURED, REPORT_ONLY

SUMMARY_BYTES = 200_000
"""CI hosts drop a whole summary above their limit; this stays far below every known one."""
WORST = 5
_ILLEGAL = re.compile("[^\t\n\r\x20-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")
_FORMULA = ("=", "+", "-", "@", "\t", "\r")

Document = Mapping[str, Any]


def junit_xml(documents: Sequence[Document], *, undecided: str = "failure") -> bytes:
    """Return one suite per unit with one case per check.

    Args:
        documents: Units' results.
        undecided: `failure` or `skipped`: how `cannot decide` appears.
    """
    root = ET.Element("testsuites", name="probatum")
    totals = dict.fromkeys(("tests", "failures", "errors", "skipped"), 0)
    for document in documents:
        suite = _suite(document, undecided)
        for key in totals:
            totals[key] += int(suite.get(key, "0"))
        root.append(suite)
    for key, value in totals.items():
        root.set(key, str(value))
    ET.indent(root)
    body: bytes = ET.tostring(root, encoding="utf-8")
    return b'<?xml version="1.0" encoding="UTF-8"?>\n' + body + b"\n"


def _suite(document: Document, undecided: str) -> ET.Element:
    serial = _clean(document["unit"]["serial"])
    suite = ET.Element("testsuite", name=serial, timestamp=str(document["time"]).rstrip("Z"))
    properties = ET.SubElement(suite, "properties")
    for name in ("verdict", "at_fault", "because", "next"):
        ET.SubElement(properties, "property", name=name, value=_clean(document[name] or ""))
    ET.SubElement(properties, "property", name="spec", value=_clean(_spec(document)))
    taken: set[str] = set()
    for check in document["checks"]:
        suite.append(_case(serial, check, undecided, taken))
    if not document["checks"]:
        case = ET.SubElement(suite, "testcase", classname=serial, name="unit", time="0")
        ET.SubElement(case, "error", type=NOT_MEASURED, message=_clean(document["because"]))
    for key, tag in (("failures", "failure"), ("errors", "error"), ("skipped", "skipped")):
        suite.set(key, str(len(suite.findall(f"testcase/{tag}"))))
    suite.set("tests", str(len(suite.findall("testcase"))))
    suite.set("time", "0")
    return suite


def _case(serial: str, check: Mapping[str, Any], undecided: str, taken: set[str]) -> ET.Element:
    words = [f"characteristic {check['characteristic']}", check["label"], check["where"]]
    if check["channel"] != "mono":
        words.append(check["channel"])
    name = base = _clean(", ".join(str(word) for word in words if word))
    n = 2
    while name in taken:
        name, n = f"{base} ({n})", n + 1
    taken.add(name)
    case = ET.Element("testcase", classname=f"{serial}.{_clean(check['capture'])}", name=name, time="0")
    properties = ET.SubElement(case, "properties")
    for key in ("value", "u", "measured_in", "at_least", "at_most", "probability", "rule", "verdict", "at_fault"):
        if check[key] is not None:
            ET.SubElement(properties, "property", name=key, value=_clean(check[key]))
    message = _clean(check["reason"])
    if check["verdict"] == DOES_NOT_CONFORM:
        ET.SubElement(case, "failure", type=DOES_NOT_CONFORM, message=message)
    elif check["verdict"] == CANNOT_DECIDE and undecided == "failure":
        ET.SubElement(case, "failure", type=CANNOT_DECIDE, message=message)
    elif check["verdict"] in {CANNOT_DECIDE, REPORT_ONLY}:
        ET.SubElement(case, "skipped", message=message)
    elif check["verdict"] != CONFORMS:
        ET.SubElement(case, "error", type=NOT_MEASURED, message=message)
    return case


def _clean(text: object) -> str:
    return _ILLEGAL.sub("\N{REPLACEMENT CHARACTER}", str(text))


def _spec(document: Document) -> str:
    asked = document["document"]
    return f"{asked['number']} revision {asked['revision']} ({asked['digest']})"


def markdown_summary(lot: Mapping[str, Any], documents: Sequence[Document]) -> str:
    """Return a summary under 200 kB: counts, the worst margins, a row per unit; what does not fit is pointed to."""
    counts = ", ".join(f"{n} {verdict}" for verdict, n in lot["counts"].items() if n) or "no unit was judged"
    asked = lot["document"]
    lines = [
        f"# {_cell(lot.get('title') or asked['number'])}",
        "",
        f"**{len(lot['units'])} units: {counts}**",
        "",
        f"Spec {_cell(asked['number'])} revision {_cell(asked['revision'])}, `{asked['digest']}`",
    ]
    if lot.get("simulated"):
        lines += ["", "**Simulated: a rehearsal, no evidence of any unit.**"]
    worst = [row for row in lot["worst"] if row["margin"] is None or row["margin"] < WORST][:WORST]
    if worst:
        lines += ["", "## Nearest to their limits, or beyond", ""]
        lines += ["| unit | characteristic | margin in u | |", "|---|---|---:|---|"]
        for r in worst:
            away = "beyond" if r["margin"] is None else f"{r['margin']:+.1f}"  # a count has no u
            lines.append(f"| {_cell(r['serial'])} | {_cell(r['characteristic'])} | {away} | {_cell(r['reason'])} |")
    lines += ["", "## Units", "", "| unit | verdict | at fault | why | next |", "|---|---|---|---|---|"]
    text = "\n".join(lines) + "\n"
    left = len(documents)
    for document in documents:
        row = "| " + " | ".join(_cell(x) for x in _row(document)) + " |\n"
        if len((text + row).encode()) > SUMMARY_BYTES - 200:
            return text + f"\n{left} more units are in lot.html and lot.csv.\n"
        text, left = text + row, left - 1
    return text


def _row(document: Document) -> Iterator[str]:
    yield document["unit"]["serial"]
    yield document["verdict"]
    yield document["at_fault"] or ""
    reasons = document["reasons"]
    more = f" (and {len(reasons) - 2} more)" if len(reasons) > 2 else ""
    yield "; ".join(reasons[:2]) + more
    yield document["next"]


def _cell(text: object) -> str:
    plain = " ".join(_clean(text).split())
    for mark, safe in (
        ("&", "&amp;"),
        ("<", "&lt;"),
        (">", "&gt;"),
        ("|", "\\|"),
        ("`", "'"),
        ("[", "\\["),
        ("]", "\\]"),
    ):
        plain = plain.replace(mark, safe)
    return plain


COLUMNS = (
    "serial",
    "time",
    "attempt",
    "characteristic",
    "capture",
    "where",
    "channel",
    "quantity",
    "part",
    "value",
    "U",
    "k",
    "unit",
    "at_least",
    "at_most",
    "acceptance_at_least",
    "acceptance_at_most",
    "rule",
    "probability",
    "margin_in_u",
    "verdict",
    "at_fault",
    "reason",
)


def lot_csv(documents: Sequence[Document]) -> bytes:
    """Return one row per check of every unit (RFC 4180, UTF-8), safe to open in a spreadsheet."""
    text = io.StringIO()
    writer = csv.writer(text)
    writer.writerow(COLUMNS)
    for document in documents:
        for check in document["checks"]:
            writer.writerow([_safe(x) for x in _cells(document, check)])
    return text.getvalue().encode()


def _cells(document: Document, check: Mapping[str, Any]) -> Iterator[object]:
    value, u = check["value"], check["u"]
    yield from (document["unit"]["serial"], document["time"], check["attempt"], check["characteristic"])
    yield from (check["capture"], check["where"], check["channel"], check["label"], check["part"])
    yield from (value, None if u is None else _rounded(check["k"] * u), check["k"], check["measured_in"])
    yield from (check["at_least"], check["at_most"], check["acceptance"]["at_least"], check["acceptance"]["at_most"])
    distance = margin(check)
    yield from (check["rule"], check["probability"], None if distance is None else round(distance, 3))
    yield from (check["verdict"], check["at_fault"], check["reason"])


def _rounded(wide: float) -> float:
    return round(wide, decimals(wide, wide) + 2)


def _safe(value: object) -> object:
    """Return a cell that no spreadsheet takes for a formula; numbers stay numbers."""
    if value is None:
        return ""
    if isinstance(value, (int, float)):
        return repr(value)
    text = _clean(value)
    return f"'{text}" if text.startswith(_FORMULA) else text
