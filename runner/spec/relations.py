"""Refuses or warns of what the parts of a spec ask of one another: limits, file patterns, things nobody uses."""

import re
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations

from runner.errors import UsageError
from runner.spec import units
from runner.spec.captures import Draft
from runner.spec.lint import CROSSING
from runner.spec.model import Limit
from runner.spec.shapes import LimitShape, RootShape
from runner.spec.tree import Complaints


def relate(root: RootShape, drafts: tuple[Draft, ...], found: Complaints) -> None:
    """Add complaints about limits that contradict or imply one another, and about what is shared or unused.

    Args:
        root: The whole file, for its lines.
        drafts: The captures that could be built.
        found: Takes the complaints.
    """
    _patterns(drafts, found)
    whole = root.captures is not None and len(drafts) == len(root.captures)
    if whole:
        _unused(root, drafts, found)
    for draft in drafts:
        _same_quantity(draft, found)
        _transfer_claims(draft, found)


# ---- files


def _patterns(drafts: tuple[Draft, ...], found: Complaints) -> None:
    """A file belongs to one capture: two patterns that share a file are refused."""
    for first, second in combinations([draft for draft in drafts if draft.capture.frames is not None], 2):
        one, other = (draft.capture.frames.names for draft in (first, second) if draft.capture.frames is not None)
        place = second.shape.at("frames", "names")
        if one == other:
            note = f"captures '{first.capture.name}' and '{second.capture.name}' have the same files"
            found.error(place, note, "", f"write same_frames_as: {first.capture.name} or another pattern")
        elif _matches(one, _sample(other)) or _matches(other, _sample(one)):
            note = f"a file such as {_sample(other if _matches(one, _sample(other)) else one)} fits two patterns"
            captures = f"of '{first.capture.name}' ({one}) and '{second.capture.name}' ({other})"
            found.error(place, f"{note}, {captures}", "", "write patterns that match their own files only")


def _sample(pattern: str) -> str:
    return re.sub(r"\{[^{}]*\}|\*", "1", pattern)


def _matches(pattern: str, name: str) -> bool:
    """Tell whether a name fits: `*` is any text inside one name, a named part is letters, digits and . _ -."""
    parts = re.split(r"(\{[^{}]*\}|\*)", pattern)
    regex = "".join(re.escape(p) if i % 2 == 0 else "[^/]*" if p == "*" else "[\\w.-]+" for i, p in enumerate(parts))
    return re.fullmatch(regex, name) is not None


# ---- unused


def _unused(root: RootShape, drafts: tuple[Draft, ...], found: Complaints) -> None:
    companions = {name for draft in drafts for name in draft.capture.uses.values()}
    if not any(not limit.report_only for draft in drafts for limit, _ in draft.limits):
        found.warn(root.at("captures"), "no limit judges anything: no unit could ever conform", "", "write limits")
    for draft in drafts:
        capture, shape = draft.capture, draft.shape
        if not capture.limits:
            if capture.name not in companions:
                note = f"capture '{capture.name}' has no limits and no other capture uses it"
                found.warn(root.at("captures", capture.name), note, "", "drop it or give it limits")
            continue
        if any(not limit.where for limit in capture.limits):
            continue  # a value of the whole capture may use every region
        used = {region for limit in capture.limits for region in (*limit.where, *limit.against)}
        for name in shape.regions or {}:
            if not any(region.name in used for region in capture.regions if name in {region.name, region.group}):
                note = f"no limit asks for region '{name}' of capture '{capture.name}'"
                found.warn(shape.at("regions", name), note, "", "drop it or give it a limit")


# ---- limits on one quantity


def _same_quantity(draft: Draft, found: Complaints) -> None:
    """Two limits on the same thing: together they must leave a value, and neither should be idle."""
    for (first, _), (second, shape) in combinations(draft.limits, 2):
        if _thing(first, draft) != _thing(second, draft) or not set(first.where) & set(second.where or first.where):
            continue
        low, high = _in_unit(first, second.unit, draft)
        for lower, upper in ((low, second.at_most), (second.at_least, high)):
            if lower is not None and upper is not None and lower > upper:
                _contradiction(first, second, shape, found)
        same_rule = (first.rule, first.conformance_probability) == (second.rule, second.conformance_probability)
        if not same_rule or first.report_only or second.report_only:
            continue
        for idle, other in ((second, first), (first, second)):
            if set(idle.where) <= set(other.where) and _implied(idle, other, draft):
                _idle(idle, other, shape, found)
                break


def _thing(limit: Limit, draft: Draft) -> tuple[object, ...]:
    at = tuple(sorted((name, _base(a.value, a.unit, draft)) for name, a in limit.parameters.items()))
    combined = (limit.combine, frozenset(limit.where), limit.against) if limit.combine else None
    return (limit.quantity, at, limit.part, limit.estimator, limit.channel, limit.method, combined)


def _base(value: float, unit: str, draft: Draft) -> tuple[float, str]:
    base = {"spatial frequency": "cy/px", "ratio": "1", "length": "px"}.get(units.UNITS[unit].kind, unit)
    try:
        context = units.context_of(draft.capture.camera, draft.capture.optics)
        return round(units.convert(value, unit, base, context), 12), base
    except UsageError:
        return value, unit


def _in_unit(limit: Limit, unit: str, draft: Draft) -> tuple[float | None, float | None]:
    context = units.context_of(draft.capture.camera, draft.capture.optics)
    try:
        low, high = (
            None if end is None else units.convert(end, limit.unit, unit, context)
            for end in (limit.at_least, limit.at_most)
        )
    except UsageError:
        return None, None
    return low, high


def _implied(idle: Limit, other: Limit, draft: Draft) -> bool:
    low, high = _in_unit(other, idle.unit, draft)
    lower = idle.at_least is None or (low is not None and low >= idle.at_least)
    upper = idle.at_most is None or (high is not None and high <= idle.at_most)
    return lower and upper


def _contradiction(first: Limit, second: Limit, shape: LimitShape, found: Complaints) -> None:
    note = (
        f"characteristics {first.characteristic} and {second.characteristic} contradict each other: no value meets both"
    )
    found.error(shape.at(), note, "", "correct one of them")


def _idle(idle: Limit, other: Limit, shape: LimitShape, found: Complaints) -> None:
    note = (
        f"characteristic {idle.characteristic} is implied by {other.characteristic}: it can only fail where that fails"
    )
    found.warn(shape.at(), note, "", "drop it, or correct one of them")


# ---- limits on the transfer function at different places


HOLDS, FALLS, POINT = "holds", "falls", "point"


@dataclass(frozen=True)
class _Claim:
    limit: Limit
    """The limit."""
    shape: LimitShape
    """As written."""
    kind: str
    """`HOLDS` the modulation up to the frequency, `FALLS` to it by the frequency, or lies above it at that `POINT`."""
    modulation: float
    """A fraction."""
    frequency: float
    """cy/px."""

    def bears_on(self, other: "_Claim") -> bool:
        """Tell whether two limits of different quantities are about the same edges, method and rule."""
        one, two = self.limit, other.limit
        same = [(a.part, a.estimator, a.channel, a.rule, a.conformance_probability) for a in (one, two)]
        return one.quantity != two.quantity and same[0] == same[1] and bool(set(one.where) & set(two.where))


def _transfer_claims(draft: Draft, found: Complaints) -> None:
    """Limits on mtf and on its crossings bear on one another.

    `mtf50` at least F means that the transfer function holds 50 % up to F. `mtf` at f at most m, or `mtf30` at most f,
    means that it falls to that modulation by f; `mtf` at f at least m, that it lies above m at f.
    """
    claims = [claim for limit, shape in draft.limits for claim in _claims(limit, shape, draft)]
    for strong in (claim for claim in claims if claim.kind == HOLDS):
        for other in claims:
            if not strong.bears_on(other) or other.frequency > strong.frequency:
                continue
            earlier, later = sorted((strong, other), key=lambda claim: claim.shape.at())
            if other.kind == FALLS and other.modulation < strong.modulation:
                _contradiction(earlier.limit, later.limit, later.shape, found)
            covered = set(other.limit.where) <= set(strong.limit.where) and other.limit.at_most is None
            if other.kind != FALLS and other.modulation <= strong.modulation and covered:
                _idle(other.limit, strong.limit, later.shape, found)


def _claims(limit: Limit, shape: LimitShape, draft: Draft) -> Iterator[_Claim]:
    if limit.combine not in {None, "worst"}:
        return
    crossing = CROSSING.fullmatch(limit.quantity)
    if crossing:
        for kind, end in zip((HOLDS, FALLS), _in_unit(limit, "cy/px", draft), strict=True):
            if end is not None:
                yield _Claim(limit, shape, kind, int(crossing[1]) / 100, end)
    elif limit.quantity == "mtf" and "frequency" in limit.parameters:
        frequency, unit = _base(limit.parameters["frequency"].value, limit.parameters["frequency"].unit, draft)
        for kind, end in zip((POINT, FALLS), _in_unit(limit, "1", draft), strict=True):
            if end is not None and unit == "cy/px":
                yield _Claim(limit, shape, kind, end, frequency)
