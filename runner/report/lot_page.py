"""The lot's page: counts, units with links to their reports, nearest misses, values against limits."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any
from urllib.parse import quote

from runner.judge.verdict import REPORT_ONLY, VERDICTS
from runner.report import drawing
from runner.report.check_facts import VerdictFact, place, verdict_fact
from runner.report.circumstance_facts import Pair, sentence
from runner.report.page import EDITION, environment, inline
from runner.resources import folder


@dataclass(frozen=True)
class UnitRow:
    """One unit of the lot."""

    serial: str
    """Serial."""
    link: str
    """Its report."""
    verdict: VerdictFact
    """Verdict."""
    fault: str
    """Who is at fault."""
    why: str
    """First reason."""
    next: str
    """What to do."""


@dataclass(frozen=True)
class StripFact:
    """All values of one characteristic."""

    title: str
    """Characteristic and quantity."""
    picture: str
    """SVG."""


@dataclass(frozen=True)
class LotReport:
    """A lot's page as finished text."""

    title: str
    """Title."""
    simulated: str
    """Sentence of the band, or empty."""
    total: str
    """How many units."""
    counts: tuple[tuple[VerdictFact, str], ...]
    """Verdict and number of units."""
    blame: tuple[Pair, ...]
    """Who is at fault and in how many units."""
    who: tuple[Pair, ...]
    """Who, what, by which document."""
    units: tuple[UnitRow, ...]
    """Units by serial."""
    worst: tuple[tuple[str, str, str], ...]
    """Unit, margin in standard uncertainties or `beyond`, sentence."""
    strips: tuple[StripFact, ...]
    """Values against limits."""
    unused: tuple[str, ...]
    """Files and folders that no pattern used."""


def html(lot: Mapping[str, Any], documents: Sequence[Mapping[str, Any]]) -> str:
    """Return the lot's page as one self-contained HTML file.

    Args:
        lot: Contents of `lot.json`.
        documents: Units' results.
    """
    style = (folder("templates") / EDITION / "screen.css").read_text(encoding="utf-8")
    template = environment().get_template("lot.html")
    return str(template.render(r=lot_facts(lot, documents), style=style, drawing=inline))


def lot_facts(lot: Mapping[str, Any], documents: Sequence[Mapping[str, Any]]) -> LotReport:
    """Return what a lot's page says."""
    asked = lot["document"]
    who = [
        ("Product", lot["product"]),
        ("Lot", lot["lot"]),
        ("Test spec", f"{asked['number']} revision {asked['revision']}"),
        ("Digest of the spec", asked["digest"].removeprefix("sha256:")[:16]),
        ("Station", lot["station"]),
        ("Operator", lot["operator"]),
        ("Tested", lot["time"].replace("T", " ").replace("Z", " UTC")),
    ]
    blame = tuple((word, str(n)) for word, n in sorted(lot["blame"].items()))
    return LotReport(
        title=lot["title"] or f"Lot by {asked['number']}",
        simulated="Simulated: a rehearsal with synthetic frames, no evidence of any unit." if lot["simulated"] else "",
        total=f"{lot['total']} units" if lot["total"] != 1 else "1 unit",
        counts=tuple((verdict_fact(word, 40), str(lot["counts"][word])) for word in VERDICTS),
        blame=blame,
        who=tuple((label, text) for label, text in who if text),
        units=tuple(_unit(u) for u in lot["units"]),
        worst=tuple((f"{w['serial']}", margin_text(w["margin"]), sentence(w["reason"])) for w in lot["worst"]),
        strips=_strips(documents),
        unused=tuple(lot["unused"]),
    )


def _unit(unit: Mapping[str, Any]) -> UnitRow:
    why = sentence(unit["reasons"][0]) if unit["reasons"] else ""
    link = f"{quote(unit['serial'])}/report.html"
    return UnitRow(unit["serial"], link, verdict_fact(unit["verdict"]), unit["at_fault"] or "–", why, unit["next"])


def _strips(documents: Sequence[Mapping[str, Any]]) -> tuple[StripFact, ...]:
    """Return one strip per requirement; each unit shows its value nearest to the limit."""
    values: dict[tuple[Any, ...], dict[str, Any]] = {}
    for document in documents:
        for check in document["checks"]:
            if check["value"] is None or check["verdict"] == REPORT_ONLY:
                continue
            key = tuple(check[k] for k in ("characteristic", "label", "measured_in", "at_least", "at_most"))
            row = values.setdefault(key, {"check": check, "units": {}, "places": {}})
            row["places"][place(check, document)] = None
            serial = document["unit"]["serial"]
            row["units"].setdefault(serial, []).append((check["value"], check["verdict"]))
    strips = []
    for row in values.values():
        check, places = row["check"], list(row["places"])
        limits = [end for end in (check["at_least"], check["at_most"]) if end is not None]
        nearest = [min(v, key=lambda pair: _inside(pair[0], check)) for v in row["units"].values()]
        unit = "" if check["measured_in"] == "1" else f", {check['measured_in']}"
        where = places[0] if len(places) == 1 else f"{len(places)} places"
        title = f"{check['characteristic']}. {check['label']}, {where}{unit}"
        strips.append(
            StripFact(title, drawing.strip_picture(nearest, limits, f"{title}: values of the lot with limits"))
        )
    return tuple(strips)


def margin_text(margin: float | None) -> str:
    """Return a margin with its sign, never as a zero that hides which side it is on; a failing count has none."""
    if margin is None:
        return "beyond"
    return f"{margin:+.1f}" if abs(margin) >= 0.05 or margin == 0 else f"{margin:+.1g}"


def _inside(value: float, check: Mapping[str, Any]) -> float:
    low, high = check["at_least"], check["at_most"]
    ends = ([value - low] if low is not None else []) + ([high - value] if high is not None else [])
    return min(ends, default=0.0)
