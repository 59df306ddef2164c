"""Everything a page says, as finished text: rounded, worded and drawn once, the same for screen and paper.

Templates put these strings into place and do nothing else.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from hashlib import sha256
from typing import Any

from runner.judge.lot import margin
from runner.judge.sentences import decimals, show
from runner.judge.verdict import CONFORMS, NOT_MEASURED, REPORT_ONLY
from runner.report import drawing
from runner.report.circumstance_facts import (
    MOST_ROWS,
    Document,
    Pair,
    capture_fact,
    capture_title,
    deviations_fact,
    first_attempts,
    frame_fact,
    machine_fact,
    methods_fact,
    sentence,
    station_fact,
    uncertainty_fact,
)
from runner.report.document import canonical
from runner.report.evidence_facts import CurveFact, PictureFact, curve_facts, picture_facts

WORST = 3
"""Margins drawn on page one."""
PROBABLE = 0.9995
"""From here on a probability prints as `> 99.9 %`."""


@dataclass(frozen=True)
class VerdictFact:
    """A verdict as it appears."""

    word: str
    """The word."""
    slug: str
    """The word as a class name."""
    shape: str
    """Its shape as SVG."""


@dataclass(frozen=True)
class MarginFact:
    """One of the worst margins on page one."""

    title: str
    """Characteristic, quantity and place."""
    text: str
    """Value and requirement."""
    picture: str
    """SVG."""


@dataclass(frozen=True)
class CheckFact:
    """One row of the results."""

    number: str
    """Characteristic."""
    where: str
    """Place."""
    quantity: str
    """Quantity."""
    value: str
    """Value ± U with unit, or a bound, or a dash."""
    limit: str
    """Limits."""
    acceptance: str
    """Acceptance limits."""
    probability: str
    """Probability of conformity."""
    rule: str
    """Decision rule."""
    verdict: VerdictFact
    """Verdict."""
    reason: str
    """Sentence."""
    because: str
    """Who is at fault and why, for what was not measured."""


@dataclass(frozen=True)
class TableFact:
    """A small table of pairs with a title."""

    title: str
    """Title."""
    rows: tuple[Pair, ...]
    """Label and text."""


@dataclass(frozen=True)
class Report:
    """A whole page as finished text."""

    title: str
    """Title of the document."""
    identity: str
    """Identification that stands on every page."""
    time: str
    """Time of the verdict."""
    serial: str
    """Serial."""
    serial_parts: tuple[str, ...]
    """Serial in groups for reading at a distance."""
    product: str
    """Product."""
    simulated: str
    """Sentence of the band across page one, or empty."""
    verdict: VerdictFact
    """The verdict."""
    fault: str
    """Who is at fault, as a sentence, or empty."""
    because: str
    """Why."""
    next: str
    """What the operator does now."""
    reasons: tuple[str, ...]
    """The first reasons."""
    more_reasons: str
    """How many more there are, or empty."""
    margins: tuple[MarginFact, ...]
    """Worst margins."""
    who: tuple[Pair, ...]
    """Who, what, by which document."""
    conformity: tuple[str, ...]
    """Statement of conformity, one paragraph each."""
    checks: tuple[CheckFact, ...]
    """Results."""
    left_out: str
    """What the results table leaves to results.json, or empty."""
    combined: tuple[str, ...]
    """How values of several regions came about, one sentence each."""
    not_measured: tuple[CheckFact, ...]
    """What has no value, and why."""
    not_measured_because: tuple[str, ...]
    """Who is at fault for it and why, each once."""
    reported: tuple[CheckFact, ...]
    """Values without a limit."""
    pictures: tuple[PictureFact, ...]
    """Overviews."""
    curves: tuple[CurveFact, ...]
    """Curves per region."""
    conditions: tuple[TableFact, ...]
    """Conditions per capture."""
    station: tuple[Pair, ...]
    """Station and instruments."""
    captures: tuple[tuple[str, str, str, str], ...]
    """Capture, attempt, state, remarks."""
    frames: tuple[tuple[str, str, str], ...]
    """File, size, digest."""
    methods: tuple[tuple[str, str, str], ...]
    """Title, options, sources."""
    uncertainty: tuple[tuple[str, str, str], ...]
    """Reading, u, components."""
    deviations: tuple[str, ...]
    """Deviations, warnings, files not used, earlier results."""
    machine: str
    """Program, versions and machine."""


def report_facts(document: Document) -> Report:
    """Return what a page says about one unit.

    Args:
        document: The results.
    """
    unit, asked = document["unit"], document["document"]
    checks = document["checks"]
    digest = sha256(canonical(document)).hexdigest()
    kept, left_out = _kept(checks)
    return Report(
        title=f"Test report {unit['serial']}",
        identity=f"{asked['number']}-{asked['revision']} / {unit['serial']} / {digest[:12]}",
        time=_time(document["time"]),
        serial=unit["serial"],
        serial_parts=_grouped(unit["serial"]),
        product=unit["product"],
        simulated=_simulated(document),
        verdict=verdict_fact(document["verdict"], 96),
        fault=_fault(document["at_fault"]),
        because=_capital(sentence(document["because"])),
        next=document["next"],
        reasons=tuple(sentence(r) for r in document["reasons"][:4]),
        more_reasons=_more(len(document["reasons"]) - 4),
        margins=_margins(checks),
        who=_who(document, digest),
        conformity=_conformity(document),
        checks=tuple(check_fact(c) for c in kept),
        left_out=left_out,
        combined=tuple(sentence(c["steps"]) for c in kept if c["steps"]),
        not_measured=tuple(check_fact(c) for c in checks if c["verdict"] == NOT_MEASURED),
        not_measured_because=tuple(
            dict.fromkeys(check_fact(c).because for c in checks if c["verdict"] == NOT_MEASURED)
        ),
        reported=tuple(check_fact(c) for c in checks if c["verdict"] == REPORT_ONLY),
        pictures=picture_facts(document),
        curves=curve_facts(document),
        conditions=tuple(
            TableFact(capture_title(c), tuple((a, b) for a, b in c["conditions"])) for c in first_attempts(document)
        ),
        station=station_fact(document),
        captures=tuple(capture_fact(c) for c in document["captures"]),
        frames=tuple(frame_fact(c, f) for c in document["captures"] for f in c["frames"]),
        methods=methods_fact(document),
        uncertainty=uncertainty_fact(document),
        deviations=deviations_fact(document),
        machine=machine_fact(document["program"]),
    )


def verdict_fact(word: str, size: int = 14) -> VerdictFact:
    """Return a verdict with its shape."""
    return VerdictFact(word, drawing.slug(word), drawing.verdict_shape(word, size))


def check_fact(check: Mapping[str, Any]) -> CheckFact:
    """Return one check as a row."""
    unit = check["measured_in"]
    at_fault = _fault(check["at_fault"])
    return CheckFact(
        number=str(check["characteristic"]),
        where=check["where"] or "whole frame",
        quantity=check["label"],
        value=value_text(check),
        limit=_limits(check["at_least"], check["at_most"], unit, exact=True),
        acceptance=_limits(check["acceptance"]["at_least"], check["acceptance"]["at_most"], unit, u=check["u"]),
        probability=probability_text(check["probability"]),
        rule=f"{check['rule']}, {100 * check['conformance_probability']:g} %",
        verdict=verdict_fact(check["verdict"]),
        reason=sentence(check["reason"]),
        because=f"{at_fault} {_capital(sentence(check['because'] or ''))}".strip(),
    )


def value_text(check: Mapping[str, Any]) -> str:
    """Return value ± U of a check with enough digits to see why, a bound, or a dash."""
    if check["bound"] is not None:
        side, end = check["bound"]
        return f"{side} {show(end, None, check['measured_in'])}"
    if check["value"] is None:
        return "–"
    return show(check["value"], check["u"], check["measured_in"], against=(check["at_least"], check["at_most"]))


def probability_text(probability: float | None) -> str:
    """Return a probability of conformity; what rounds to 0 or 100 % is told as a bound."""
    if probability is None:
        return "–"
    if probability >= PROBABLE:
        return "> 99.9 %"
    return "< 0.1 %" if probability < 1 - PROBABLE else f"{100 * probability:.1f} %"


def _limits(low: float | None, high: float | None, unit: str, *, exact: bool = False, u: float | None = None) -> str:
    if low is not None and high is not None and low > high:
        return "none: no value can be accepted"
    parts = [f"{sign} {_number(end, exact=exact, u=u)}" for sign, end in (("≥", low), ("≤", high)) if end is not None]
    return " and ".join(parts) + ("" if unit in {"1", ""} or not parts else f" {unit}") or "–"


def _number(value: float, *, exact: bool, u: float | None) -> str:
    if exact or not u:
        return f"{value:.10g}"
    return f"{value:.{decimals(value, 2 * u)}f}"


def _kept(checks: Sequence[Mapping[str, Any]]) -> tuple[list[Mapping[str, Any]], str]:
    judged = [c for c in checks if c["verdict"] != REPORT_ONLY]
    if len(judged) <= MOST_ROWS:
        return judged, ""
    other = [c for c in judged if c["verdict"] != CONFORMS]
    near = sorted((c for c in judged if c["verdict"] == CONFORMS), key=_distance)
    chosen = [*other, *near][:MOST_ROWS]
    kept = [c for c in judged if any(c is one for one in chosen)]
    return kept, f"{len(judged) - len(kept)} more checks, farther from their limits, stand in results.json."


def _distance(check: Mapping[str, Any]) -> float:
    distance = margin(check)
    return float("inf") if distance is None else distance


def _margins(checks: Sequence[Mapping[str, Any]]) -> tuple[MarginFact, ...]:
    judged = [c for c in checks if c["verdict"] != REPORT_ONLY and margin(c) is not None]
    rows = []
    for check in sorted(judged, key=_distance)[:WORST]:
        title = f"{check['characteristic']}. {check['label']}, {check['where'] or 'whole frame'}"
        limit = _limits(check["at_least"], check["at_most"], check["measured_in"], exact=True)
        text = f"{value_text(check)}; limit {limit}"
        rows.append(MarginFact(title, text, drawing.margin_picture(check, f"{title}: {text}")))
    return tuple(rows)


def _fault(word: str | None) -> str:
    return {
        None: "",
        "unit": "At fault: the unit.",
        "capture": "At fault: the capture, not the unit.",
        "cannot tell": "At fault: cannot tell.",
        "program": "At fault: the program.",
    }.get(word, f"At fault: {word}.")


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def _more(number: int) -> str:
    return f"{number} more of this kind stand in the results below." if number > 0 else ""


def _grouped(serial: str) -> tuple[str, ...]:
    """Split the digits at a serial's end into threes, so that they can be read out loud."""
    head = serial.rstrip("0123456789")
    tail = serial[len(head) :]
    first = len(tail) % 3
    groups = ([tail[:first]] if first else []) + [tail[i : i + 3] for i in range(first, len(tail), 3)]
    return (head + groups[0], *groups[1:]) if groups else (serial,)


def _time(stamp: str) -> str:
    return stamp.replace("T", " ").replace("Z", " UTC")


def _simulated(document: Document) -> str:
    return "Simulated: a rehearsal with synthetic frames, no evidence of any unit." if document["simulated"] else ""


def _who(document: Document, digest: str) -> tuple[Pair, ...]:
    unit, asked, expanded = document["unit"], document["document"], document["spec"]
    written = expanded.get("document", {}) if isinstance(expanded, Mapping) else {}
    station = document["station"]
    rows = [
        ("Product", unit["product"]),
        ("Serial", unit["serial"]),
        ("Lot", unit["lot"]),
        ("Test spec", f"{asked['number']} revision {asked['revision']}"),
        ("Title", str(written.get("title", ""))),
        ("Issued by", str(written.get("issuer", ""))),
        ("For", str(written.get("customer", ""))),
        ("Authorised by", str(written.get("authorised_by", ""))),
        ("Tested", _time(document["time"])),
        ("Operator", document["operator"]),
        ("Station", str(station.get("name", ""))),
        ("Digest of the spec", asked["digest"].removeprefix("sha256:")[:16]),
        ("Digest of the results", digest[:16]),
    ]
    return tuple((label, text) for label, text in rows if text)


def _conformity(document: Document) -> tuple[str, ...]:
    asked = document["document"]
    judged = [c for c in document["checks"] if c["verdict"] != REPORT_ONLY]
    counts = [
        f"{sum(c['verdict'] == word for c in judged)} {word}" for word in dict.fromkeys(c["verdict"] for c in judged)
    ]
    rules = dict.fromkeys((c["rule"], c["conformance_probability"]) for c in judged)
    named = "; ".join(f"{rule} at a conformance probability of {100 * p:g} %" for rule, p in rules)
    statement = (
        f"Unit {document['unit']['serial']}, judged by test spec {asked['number']} revision {asked['revision']}: "
        f"{document['verdict']}. Of {len(judged)} checks: {', '.join(counts) or 'none'}."
    )
    rule = (
        f"Decision rule: {named or 'none applied'}. The probability is that of the true value lying inside the limits, "
        "given the value and its uncertainty (JCGM 106:2012, clause 7); the acceptance limit is the limit after the "
        "guard band."
    )
    return (
        statement,
        rule,
        "Values are judged unrounded. U is the expanded uncertainty, k = 2, a coverage of about 95 %.",
        "The statement relates only to the unit tested, as captured in the frames listed below.",
    )


def sentences(document: Document) -> tuple[str, ...]:
    """Return every value, verdict and sentence that a page prints, for finding them in its text."""
    facts = report_facts(document)
    found = [
        facts.serial,
        facts.verdict.word,
        facts.fault,
        facts.because,
        facts.next,
        *facts.reasons,
        *facts.conformity,
    ]
    for check in (*facts.checks, *facts.not_measured, *facts.reported):
        found += [check.number, check.where, check.quantity, check.value, check.limit, check.verdict.word]
    found += [*facts.combined, *(check.reason for check in facts.not_measured)]
    found += [cell for row in (*facts.frames, *facts.uncertainty, *facts.captures) for cell in row]
    return tuple(dict.fromkeys(text for text in found if text))
