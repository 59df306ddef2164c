"""One check as it appears on a page: value, limits, probability and verdict as finished text, and why it has none."""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from runner.judge.sentences import decimals, show
from runner.judge.verdict import NOT_MEASURED
from runner.report import drawing
from runner.report.circumstance_facts import Document, capital, extent_of, sentence

PROBABLE = 0.9995
"""From here on a probability prints as `> 99.9 %`."""
MOST_PLACES = 9
"""Decimals of a probability in %, at most."""
JOIN = "\N{NO-BREAK SPACE}"
"""Keeps what belongs together on one line of a narrow column."""
_UNMEASURED = " not measured: "

Check = Mapping[str, Any]


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
    verdict: VerdictFact
    """Verdict."""


@dataclass(frozen=True)
class WhyFact:
    """Why some checks have no value."""

    checks: str
    """Number, place and quantity of each."""
    cause: str
    """What all of them have in common, as a sentence."""


def verdict_fact(word: str, size: int = 14) -> VerdictFact:
    """Return a verdict with its shape."""
    return VerdictFact(word, drawing.slug(word), drawing.verdict_shape(word, size))


def check_fact(check: Check, document: Document) -> CheckFact:
    """Return one check of a document as a row."""
    return CheckFact(
        number=str(check["characteristic"]),
        where=place(check, document),
        quantity=check["label"],
        value=value_text(check),
        limit=limit_text(check),
        acceptance=acceptance_text(check),
        probability=probability_text(check["probability"], check["conformance_probability"]),
        verdict=verdict_fact(check["verdict"]),
    )


def place(check: Check, document: Document) -> str:
    """Return where a check is, with its channel if there are several; without a region, in which capture."""
    where = check["where"] or f"{extent_of(check['capture'], document)} ({check['capture']})"
    return where if check["channel"] in {"mono", None, ""} else f"{where}, {check['channel']}"


def value_text(check: Check) -> str:
    """Return value ± U with enough digits to see its side of every limit and acceptance limit, a bound, or a dash."""
    ends = (check["at_least"], check["at_most"], *check["acceptance"].values())
    if check["bound"] is not None:
        side, end = check["bound"]
        return f"{side} {show(end, None, check['measured_in'], against=ends)}"
    if check["value"] is None:
        return "–"
    return show(check["value"], check["u"], check["measured_in"], against=ends).replace("± ", f"±{JOIN}")


def limit_text(check: Check) -> str:
    """Return the limits as the spec has them."""
    return _range(check["at_least"], check["at_most"], check["measured_in"], lambda end: f"{end:.10g}")


def acceptance_text(check: Check) -> str:
    """Return the acceptance limits, in the limits' unit, with the digits of the value or those that tell them apart."""
    low, high = check["acceptance"]["at_least"], check["acceptance"]["at_most"]
    if low is not None and high is not None and low > high:
        return "none: no value can be accepted"
    wide, value = 2 * (check["u"] or 0.0), check["value"]
    limits = (check["at_least"], check["at_most"])

    def number(end: float) -> str:
        return f"{end:.{decimals(end, wide, (value, *limits))}f}" if wide and end not in limits else f"{end:.10g}"

    return _range(low, high, "", number)


def probability_text(probability: float | None, asked: float) -> str:
    """Return a probability of conformity in %, on its own side of the one asked for; a bound where it is almost 0 or 1.

    Args:
        probability: The probability, or None.
        asked: Conformance probability of the decision rule.
    """
    if probability is None:
        return "–"
    if asked < PROBABLE and probability >= PROBABLE:
        return f">{JOIN}99.9{JOIN}%"
    if asked < PROBABLE and probability <= 1 - PROBABLE:
        return f"<{JOIN}0.1{JOIN}%"
    per_cent, edges = 100 * probability, (round(100 * asked, 9), round(100 * (1 - asked), 9))
    places = 1
    while places < MOST_PLACES and any(_hidden(per_cent, edge, places) for edge in edges):
        places += 1
    return f"{per_cent:.{places}f}{JOIN}%"


def fault_text(word: str | None) -> str:
    """Return who is at fault as a sentence, or nothing."""
    return {
        None: "",
        "unit": "At fault: the unit.",
        "capture": "At fault: the capture, not the unit.",
        "cannot tell": "At fault: cannot tell.",
        "program": "At fault: the program.",
    }.get(word, f"At fault: {word}.")


def why_facts(document: Document) -> tuple[WhyFact, ...]:
    """Return each cause of `not measured` once, with the checks of a document that it took."""
    unmeasured = [c for c in document["checks"] if c["verdict"] == NOT_MEASURED]
    groups = _by_cause(
        (_cause(c["reason"]), f"{c['characteristic']}.{JOIN}{place(c, document)}: {c['label']}") for c in unmeasured
    )
    return tuple(WhyFact("; ".join(names), capital(sentence(cause))) for cause, names in groups.items())


def blame_texts(checks: Sequence[Check]) -> tuple[str, ...]:
    """Return each answer to who is at fault for what was not measured once."""
    unmeasured = [c for c in checks if c["verdict"] == NOT_MEASURED]
    said = (f"{fault_text(c['at_fault'])} {capital(sentence(c['because'] or ''))}".strip() for c in unmeasured)
    return tuple(dict.fromkeys(text for text in said if text))


def reason_texts(reasons: Sequence[str]) -> tuple[str, ...]:
    """Return a unit's reasons, those that differ only in what was not measured as one."""
    texts = []
    for cause, mine in _by_cause((_cause(reason), reason) for reason in reasons).items():
        texts.append(sentence(mine[0] if len(mine) == 1 else f"{len(mine)} checks{_UNMEASURED}{cause}"))
    return tuple(texts)


def _cause(reason: str) -> str:
    """Return what a reason says behind the name of its check; another reason as it is."""
    return reason.partition(_UNMEASURED)[2] or reason


def _by_cause(rows: Iterable[tuple[str, str]]) -> dict[str, list[str]]:
    """Gather rows of cause and name by cause; a cause told of members by name belongs to the members' own."""
    groups: dict[str, list[str]] = {}
    for cause, name in rows:
        known = next((one for one in groups if cause == one or cause.endswith(f": {one}")), cause)
        groups.setdefault(known, []).append(name)
    return groups


def _range(low: float | None, high: float | None, unit: str, number: Any) -> str:
    parts = [f"{sign}{JOIN}{number(end)}" for sign, end in (("≥", low), ("≤", high)) if end is not None]
    return " and ".join(parts) + ("" if unit in {"1", ""} or not parts else f" {unit}") or "–"


def _hidden(value: float, edge: float, places: int) -> bool:
    """Tell whether a rounded value no longer shows on which side of an edge it is; ten digits alike are equal."""
    shown = round(value, places)
    return abs(value - edge) > 1e-9 and (shown == round(edge, places) or (shown < edge) != (value < edge))
