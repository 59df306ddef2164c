"""One unit's judgement: usable captures, every limit's checks, the roll-up, blame, reasons and the next step."""

from collections.abc import Sequence

from runner.judge import blame
from runner.judge.checks import checks_of, not_measured
from runner.judge.sentences import joined
from runner.judge.usability import judge_capture
from runner.judge.verdict import (
    AT_FAULT_CANNOT_TELL,
    AT_FAULT_CAPTURE,
    AT_FAULT_PROGRAM,
    AT_FAULT_UNIT,
    CANNOT_DECIDE,
    CONFORMS,
    DOES_NOT_CONFORM,
    NOT_MEASURED,
    REPORT_ONLY,
    CaptureState,
    Check,
    Judgement,
)
from runner.measure.evidence import UnitEvidence
from runner.measure.reading import Reading
from runner.spec.model import Capture, Spec

COPY = "again from the station"
"""Part of every sentence that asks for a file to be copied again; a word of capture in it comes second."""
CAPTURE = "capture again"
MOST_PLACES = 4
"""Places named in one sentence; the checks name all."""
_BLAME_ORDER = (AT_FAULT_PROGRAM, AT_FAULT_CAPTURE, AT_FAULT_CANNOT_TELL, AT_FAULT_UNIT)
"""Whose fault a unit's `not measured` is when its checks disagree: what can be mended at once comes first."""


def judge_unit(spec: Spec, evidence: UnitEvidence) -> Judgement:
    """Judge one unit from its spec and its evidence alone, now or months later.

    Args:
        spec: Limits and rules.
        evidence: Readings and the state of files, over all attempts.
    """
    states = tuple(
        judge_capture(spec.capture(c.name), c, _readings(evidence, c.name, c.attempt)) for c in evidence.captures
    )
    checks = tuple(check for c in spec.captures for check in _capture_checks(c, states, evidence))
    return _rolled_up(checks, states)


def roll_up(verdicts: Sequence[str]) -> str:
    """Return a unit's verdict from its checks' verdicts; report-only ones never enter."""
    judged = [v for v in verdicts if v != REPORT_ONLY]
    for verdict in (DOES_NOT_CONFORM, NOT_MEASURED, CANNOT_DECIDE):
        if verdict in judged:
            return verdict
    return CONFORMS if judged and all(v == CONFORMS for v in judged) else NOT_MEASURED


def _readings(evidence: UnitEvidence, capture: str, attempt: int) -> list[Reading]:
    return [r for r in evidence.readings if (r.capture, r.attempt) == (capture, attempt)]


def _capture_checks(capture: Capture, states: Sequence[CaptureState], evidence: UnitEvidence) -> list[Check]:
    mine = [s for s in states if s.name == capture.name]
    whole = [s for s in mine if s.usable and all(o.usable for o in states if o.attempt == s.attempt)]
    usable = whole or [s for s in mine if s.usable]
    checks: list[Check] = []
    for limit in capture.limits:
        if len(usable) == 1:
            attempt = usable[0].attempt
            readings: dict[str, list[Reading]] = {}
            for reading in _readings(evidence, capture.name, attempt):
                readings.setdefault(reading.region, []).append(reading)
            checks += checks_of(capture, limit, readings, attempt)
        elif usable:
            numbers = joined([str(s.attempt) for s in usable])
            reason = f"two valid attempts, no rule: attempts {numbers} of '{capture.name}' can be used"
            two = blame.TWO_ATTEMPTS
            checks += not_measured(capture, limit, usable[-1].attempt, reason, two.at_fault, two.because)
        elif mine:
            last = mine[-1]
            reason = f"'{capture.name}' cannot be used: {last.faults[0]}"
            fault, because = last.at_fault or AT_FAULT_CANNOT_TELL, last.because or ""
            checks += not_measured(capture, limit, last.attempt, reason, fault, because)
        else:
            reason = f"'{capture.name}' was not captured"
            checks += not_measured(capture, limit, 1, reason, blame.FILE.at_fault, "there is no frame of it")
    return checks


def _rolled_up(checks: tuple[Check, ...], states: tuple[CaptureState, ...]) -> Judgement:
    verdict = roll_up([c.verdict for c in checks])
    deciding = [c for c in checks if c.verdict == verdict]
    at_fault, because = _blame(verdict, deciding)
    reasons = tuple(
        dict.fromkeys(c.reason for c in sorted(checks, key=_weight) if c.verdict not in {CONFORMS, REPORT_ONLY})
    )
    if not [c for c in checks if c.verdict != REPORT_ONLY]:
        return Judgement(
            NOT_MEASURED,
            AT_FAULT_CANNOT_TELL,
            "the spec holds no limit to judge",
            ("No limit was judged.",),
            "Add limits to the spec.",
            checks,
            states,
        )
    if verdict == CONFORMS:
        reasons = (_all_well(checks),)
    return Judgement(verdict, at_fault, because, reasons, _next(verdict, at_fault, deciding, states), checks, states)


def _weight(check: Check) -> tuple[object, ...]:
    """Return a key that sorts the gravest check first.

    What does not conform comes first, then what was not measured, then what cannot be decided; among the first and the
    last what lies furthest beyond its limit in units of U, among the second what the unit's own blame is taken from.
    """
    order = (DOES_NOT_CONFORM, NOT_MEASURED, CANNOT_DECIDE, CONFORMS, REPORT_ONLY)
    blamed = _BLAME_ORDER.index(check.at_fault) if check.at_fault in _BLAME_ORDER else len(_BLAME_ORDER)
    beyond = (float(blamed), 0.0) if check.verdict == NOT_MEASURED else _beyond(check)
    return order.index(check.verdict), beyond, _natural(check.characteristic), check.characteristic


def _beyond(check: Check) -> tuple[float, float]:
    """Return the distance inside the nearest limit, in U and in the limit's own unit; negative beyond it.

    A value without uncertainty beyond its limit is beyond by any number of U; one known by a bound alone has no U, and
    comes after all others.
    """
    value = check.value if check.bound is None else check.bound[1]
    ends = [] if value is None or check.at_least is None else [value - check.at_least]
    ends += [] if value is None or check.at_most is None else [check.at_most - value]
    inside = min(ends, default=0.0)
    if check.bound is not None or not ends:
        return float("inf"), inside
    wide = check.k * (check.u or 0.0)
    if wide:
        return inside / wide, inside
    return (0.0 if inside == 0 else inside * float("inf")), inside


def _blame(verdict: str, deciding: Sequence[Check]) -> tuple[str | None, str]:
    if verdict == CONFORMS:
        return None, ""
    if verdict == CANNOT_DECIDE:
        return None, "the uncertainty straddles a limit"
    if verdict == DOES_NOT_CONFORM:
        return AT_FAULT_UNIT, _what_is_wrong(deciding)
    for word in _BLAME_ORDER:
        for check in deciding:
            if check.at_fault == word:
                return word, check.because or ""
    return AT_FAULT_CANNOT_TELL, ""


def _what_is_wrong(deciding: Sequence[Check]) -> str:
    """Return what the failing checks say about the unit, each thing once, with its places, or captures as a whole."""
    places: dict[str, list[str]] = {}
    for check in sorted(deciding, key=_weight):
        what = (check.because or "").removesuffix(" there")
        places.setdefault(what, []).append(check.where or check.capture)
    said = []
    for what, where in places.items():
        named = list(dict.fromkeys(where))
        more = f" and {len(named) - MOST_PLACES} more" if len(named) > MOST_PLACES else ""
        words = joined(named) if not more else ", ".join(named[:MOST_PLACES]) + more
        said.append(f"{what} ({words})")
    return "; ".join(said)


def _all_well(checks: Sequence[Check]) -> str:
    judged = [c for c in checks if c.verdict == CONFORMS]
    known = [c for c in judged if c.probability is not None and not _none_of_none(c)]
    count = f"All {len(judged)} checks conform" if len(judged) > 1 else "The one check conforms"
    if not known:
        return f"{count}."
    nearest = min(known, key=_margin)
    return f"{count}; nearest to its limit: {nearest.reason}."


def _none_of_none(check: Check) -> bool:
    """Tell whether none was found of what there must be none: it lies on its limit, and could not lie better."""
    return check.value == 0 == check.at_most and not check.u


def _margin(check: Check) -> float:
    """Return the distance to the nearest limit in standard uncertainties; without any, only on the limit is near."""
    if check.value is None:
        return float("inf")
    ends = [e for e in (check.at_least, check.at_most) if e is not None]
    nearest = min((abs(check.value - e) for e in ends), default=float("inf"))
    return nearest / check.u if check.u else nearest * 1e9


def _next(verdict: str, at_fault: str | None, deciding: Sequence[Check], states: Sequence[CaptureState]) -> str:
    if verdict == CONFORMS:
        return "Release the unit."
    if verdict == DOES_NOT_CONFORM:
        return "Reject the unit; the report goes with it."
    if verdict == CANNOT_DECIDE:
        numbers = joined(sorted({c.characteristic for c in deciding}, key=_natural))
        return f"Hold the unit; take more frames for characteristic {numbers}, or let the engineer decide."
    names = joined(sorted({f"'{c.capture}'" for c in deciding}))
    if at_fault == AT_FAULT_PROGRAM:
        return "Keep the unit and its frames; tell whoever maintains the program."
    if at_fault == AT_FAULT_CAPTURE:
        return _again(deciding, states)
    return f"Capture again: {names}. First capture a unit known to be good in the same place: it tells unit from bench."


def _again(deciding: Sequence[Check], states: Sequence[CaptureState]) -> str:
    """Return which captures' files are copied again and which captures are made again, by what their faults ask for.

    A capture whose only lack is a companion that cannot be used need not be made again.
    """
    lost = blame.BY_CAUSE["missing companion"].because
    asked = {(c.capture, c.attempt) for c in deciding if c.because != lost} or {
        (c.capture, c.attempt) for c in deciding
    }
    copied, captured, doubted = set(), set(), set()
    for name, attempt in asked:
        faults = next((s.faults for s in states if (s.name, s.attempt) == (name, attempt)), ())
        copies = [sentence for sentence in faults if COPY in sentence]
        copied |= {f"'{name}'"} if copies else set()
        captured |= {f"'{name}'"} if len(copies) < len(faults) or not faults else set()
        doubted |= {f"'{name}'"} if any(CAPTURE in sentence for sentence in copies) else set()
    words = []
    if copied:
        doubt = (
            f"; if the reason stays, capture {joined(sorted(doubted))} again" if (doubted := doubted - captured) else ""
        )
        words.append(f"Copy again from the station: {joined(sorted(copied))}{doubt}.")
    if captured:
        words.append(f"Capture again: {joined(sorted(captured))}. First mend what the reason says.")
    return " ".join(words)


def _natural(word: str) -> tuple[int, str]:
    digits = "".join(c for c in word if c.isdecimal())
    return (int(digits) if digits else 0), word
