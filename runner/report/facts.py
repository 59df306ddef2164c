"""Everything a page says, as finished text: rounded, worded and drawn once, the same for screen and paper.

Templates put these strings into place and do nothing else.
"""

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from hashlib import sha256
from typing import Any

from runner.judge.lot import distance
from runner.judge.sentences import joined
from runner.judge.verdict import CANNOT_DECIDE, CONFORMS, DOES_NOT_CONFORM, NOT_MEASURED, REPORT_ONLY
from runner.report import drawing
from runner.report.check_facts import (
    CheckFact,
    VerdictFact,
    WhyFact,
    blame_texts,
    check_fact,
    fault_text,
    limit_text,
    place,
    reason_texts,
    value_text,
    verdict_fact,
    why_facts,
)
from runner.report.circumstance_facts import (
    MOST_ROWS,
    Document,
    Pair,
    capital,
    capture_fact,
    capture_title,
    deviations_fact,
    first_attempts,
    frame_fact,
    machine_fact,
    methods_fact,
    said_facts,
    sentence,
    station_fact,
    station_file_fact,
    uncertainty_fact,
)
from runner.report.document import canonical
from runner.report.evidence_facts import (
    CurveFact,
    MapFact,
    PictureFact,
    curve_facts,
    map_facts,
    picture_facts,
    plain_curve_facts,
    plan_facts,
    spot_facts,
)
from runner.spec.model import SIMPLE_ACCEPTANCE

WORST = 3
"""Margins drawn on page one."""
REASONS = 4
"""Reasons on page one."""


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
    not_measured: tuple[WhyFact, ...]
    """What has no value, and why."""
    not_measured_because: tuple[str, ...]
    """Who is at fault for it and why, each once."""
    reported: tuple[CheckFact, ...]
    """Values without a limit."""
    pictures: tuple[PictureFact, ...]
    """Overviews."""
    curves: tuple[CurveFact, ...]
    """Curves per region."""
    curves_left_out: str
    """How many curves are left to results.json, or empty."""
    more_evidence: str
    """Title of the section with maps, profiles and spots; empty if there are none."""
    plain_curves: tuple[CurveFact, ...]
    """Other curves: profiles, spectra of bands."""
    maps: tuple[MapFact, ...]
    """Maps."""
    spots: tuple[tuple[str, str, str, str], ...]
    """Kind, place, where, words of each spot."""
    evidence_left_out: tuple[str, ...]
    """How many of these are left to results.json, a sentence each."""
    conditions: tuple[TableFact, ...]
    """Conditions per capture."""
    station: tuple[Pair, ...]
    """Station and instruments."""
    captures: tuple[tuple[str, str, str, str], ...]
    """Capture, attempt, state, remarks."""
    said: tuple[TableFact, ...]
    """By capture: what its sidecars had to say, and what they said of each frame."""
    frames: tuple[tuple[str, str, str], ...]
    """File, size, digest."""
    station_files: tuple[tuple[str, str, str], ...]
    """Manifest or sidecar, which of both, digest."""
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
    reasons = reason_texts(document["reasons"])
    curves, more_curves = curve_facts(document)
    (plain, more_plain), (maps, more_maps) = plain_curve_facts(document), map_facts(document)
    (spots, more_spots), plans = spot_facts(document), plan_facts(document)
    left = ((more_plain, "profiles"), (more_maps, "maps"), (more_spots, "spots"))
    return Report(
        title=f"Test report {unit['serial']}",
        identity=f"{asked['number']}-{asked['revision']} / {unit['serial']} / {digest[:12]}",
        time=_time(document["time"]),
        serial=unit["serial"],
        serial_parts=_grouped(unit["serial"]),
        product=unit["product"],
        simulated=_simulated(document),
        verdict=verdict_fact(document["verdict"], 96),
        fault=fault_text(document["at_fault"]),
        because=capital(sentence(document["because"])),
        next=document["next"],
        reasons=reasons[:REASONS],
        more_reasons=_more(len(reasons) - REASONS, "reasons", "the results below"),
        margins=_margins(document),
        who=_who(document, digest),
        conformity=_conformity(document),
        checks=tuple(check_fact(c, document) for c in kept),
        left_out=left_out,
        combined=tuple(dict.fromkeys(sentence(c["steps"]) for c in kept if c["steps"])),
        not_measured=why_facts(document),
        not_measured_because=blame_texts(checks),
        reported=tuple(check_fact(c, document) for c in checks if c["verdict"] == REPORT_ONLY),
        pictures=picture_facts(document),
        curves=curves,
        curves_left_out=_more(more_curves, "curves", "results.json"),
        more_evidence="Evidence: " + joined(shown) if (shown := _named((*maps, *plans), plain, spots)) else "",
        plain_curves=plain,
        maps=(*maps, *plans),
        spots=spots,
        evidence_left_out=tuple(_more(number, what, "results.json") for number, what in left if number),
        conditions=_conditions(document),
        station=station_fact(document),
        captures=tuple(capture_fact(c) for c in document["captures"]),
        said=tuple(TableFact(title, rows) for title, rows in said_facts(document)),
        station_files=tuple(station_file_fact(one) for one in document.get("station_files", ())),
        frames=tuple(dict.fromkeys(frame_fact(c, f) for c in document["captures"] for f in c["frames"])),
        methods=methods_fact(document),
        uncertainty=uncertainty_fact(document),
        deviations=deviations_fact(document),
        machine=f"{machine_fact(document['program'])}; results.json has the SHA-256 digest {digest}",
    )


def _kept(checks: Sequence[Mapping[str, Any]]) -> tuple[list[Mapping[str, Any]], str]:
    judged = [c for c in checks if c["verdict"] != REPORT_ONLY]
    if len(judged) <= MOST_ROWS:
        return judged, ""
    order = (DOES_NOT_CONFORM, CANNOT_DECIDE, NOT_MEASURED, CONFORMS)
    ranked = sorted(judged, key=lambda c: (order.index(c["verdict"]), _distance(c)))
    chosen = {id(c) for c in ranked[:MOST_ROWS]}
    left = ranked[MOST_ROWS:]
    return [c for c in judged if id(c) in chosen], f"{len(left)} more checks stand in results.json: {_counts(left)}."


def _distance(check: Mapping[str, Any]) -> float:
    away = distance(check)
    return float("inf") if away is None else away


def _margins(document: Document) -> tuple[MarginFact, ...]:
    judged = [c for c in document["checks"] if c["verdict"] != REPORT_ONLY and distance(c) is not None]
    rows = []
    for check in sorted(judged, key=_distance)[:WORST]:
        title = f"{check['characteristic']}. {check['label']}, {place(check, document)}"
        text = f"{value_text(check)}; limit {limit_text(check)}"
        rows.append(MarginFact(title, text, drawing.margin_picture(check, f"{title}: {text}")))
    return tuple(rows)


def _named(maps: Sequence[object], profiles: Sequence[object], spots: Sequence[object]) -> list[str]:
    kinds = (("maps", maps), ("profiles", profiles), ("spots", spots))
    return [words for words, there in kinds if there]


def _more(number: int, what: str, where: str) -> str:
    if number == 1:
        return f"1 more {what.removesuffix('s')} stands in {where}."
    return f"{number} more {what} stand in {where}." if number > 1 else ""


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
    statement = (
        f"Unit {document['unit']['serial']}, judged by test spec {asked['number']} revision {asked['revision']}: "
        f"{document['verdict']}. Checks: {len(judged)}; {_counts(judged) or 'nothing was judged'}."
    )
    rule = (
        f"Decision rule: {_rules(judged) or 'none applied'}. The probability is that of the true value lying inside "
        "the limits, given the value and its uncertainty (JCGM 106:2012, clause 7); the acceptance limit is the limit "
        "after the guard band."
    )
    return (
        statement,
        rule,
        "Values are judged unrounded. U is the expanded uncertainty, k = 2, a coverage of about 95 %.",
        "The statement relates only to the unit tested, as captured in the frames listed below.",
    )


def _conditions(document: Document) -> tuple[TableFact, ...]:
    """Return the conditions, those that several captures share once."""
    shared: dict[tuple[Pair, ...], list[str]] = {}
    for capture in first_attempts(document):
        shared.setdefault(tuple((a, b) for a, b in capture["conditions"]), []).append(capture_title(capture))
    return tuple(TableFact(", ".join(titles), rows) for rows, titles in shared.items())


def _counts(checks: Sequence[Mapping[str, Any]]) -> str:
    counts = Counter(c["verdict"] for c in checks)
    return ", ".join(f"{n} × {word}" for word, n in counts.items())


def _rules(checks: Sequence[Mapping[str, Any]]) -> str:
    """Return the decision rules, with the characteristics that each is for if there are several."""
    rules: dict[str, list[str]] = {}
    for check in checks:
        asked = f" at a conformance probability of {100 * check['conformance_probability']:.10g} %"
        words = check["rule"] + ("" if check["rule"] == SIMPLE_ACCEPTANCE else asked)
        rules.setdefault(words, []).append(str(check["characteristic"]))
    if len(rules) < 2:
        return "".join(rules)
    return "; ".join(f"{words} for {', '.join(dict.fromkeys(numbers))}" for words, numbers in rules.items())
