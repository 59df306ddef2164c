"""One limit against its readings: a check for each region, or one for a combination of them."""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from math import inf, isfinite

from runner.judge import blame, decision_rule
from runner.judge.combine import Member, combine, combine_bounds
from runner.judge.decision_rule import Limits
from runner.judge.sentences import combination_steps, consequence, joined, requirement, show, whole
from runner.judge.verdict import (
    AT_FAULT_UNIT,
    CANNOT_DECIDE,
    CONFORMS,
    DOES_NOT_CONFORM,
    NOT_MEASURED,
    REPORT_ONLY,
    Check,
)
from runner.measure.reading import Component, Reading, Refusal, label
from runner.measure.uncertainty import effective_dof
from runner.spec import units
from runner.spec.model import Capture, Limit

Table = Mapping[str, Sequence[Reading]]
"""Readings of one capture and attempt by region."""


def checks_of(capture: Capture, limit: Limit, readings: Table, attempt: int) -> list[Check]:
    """Return every check of a usable capture's limit: each region, and each colour channel unless one is named."""
    regions = limit.where or ("",)
    checks = []
    for one in _by_channel(capture, limit):
        if one.combine is None:
            checks += [_one(capture, one, region, _find(one, readings, region), attempt) for region in regions]
        else:
            members = [_find(one, readings, region) for region in regions]
            against = [_find(one, readings, region) for region in one.against]
            checks.append(_combined(capture, one, members, against, attempt))
    return checks


def not_measured(capture: Capture, limit: Limit, attempt: int, reason: str, at_fault: str, because: str) -> list[Check]:
    """Return every check of a limit whose capture cannot be judged."""
    places = [_where(limit)] if limit.combine else list(limit.where or ("",))
    return [
        replace(
            _blank(capture, one, place, attempt),
            verdict=NOT_MEASURED,
            reason=reason,
            at_fault=at_fault,
            because=because,
        )
        for one in _by_channel(capture, limit)
        for place in places
    ]


def _by_channel(capture: Capture, limit: Limit) -> list[Limit]:
    return [replace(limit, channel=channel) for channel in capture.camera.channels if limit.channel in {None, channel}]


def _find(limit: Limit, readings: Table, region: str) -> Reading:
    for reading in readings.get(region, ()):
        if _answers(reading, limit):
            return reading
    lost = Refusal("fault", f"{label(limit.quantity, limit.parameters, limit.part)} has no reading")
    channel = limit.channel or "mono"
    return Reading(
        region, limit.quantity, limit.unit, None, None, parameters=limit.parameters, channel=channel, refusal=lost
    )


def _answers(reading: Reading, limit: Limit) -> bool:
    same = (reading.quantity, reading.part) == (limit.quantity, limit.part)
    channel = limit.channel in {None, reading.channel}
    estimator = limit.estimator in {None, reading.estimator} or reading.refusal is not None
    return same and channel and estimator and dict(reading.parameters) == dict(limit.parameters)


def _where(limit: Limit) -> str:
    if limit.combine == "ratio":
        return f"ratio of {limit.where_label} to {limit.against_label or joined(limit.against)}"
    return f"{limit.combine} of {limit.where_label}"


def _blank(capture: Capture, limit: Limit, where: str, attempt: int) -> Check:
    return Check(
        characteristic=limit.characteristic,
        capture=limit.capture,
        where=where,
        channel=limit.channel or "mono",
        quantity=limit.quantity,
        label=label(limit.quantity, limit.parameters, limit.part),
        measured_in=limit.unit,
        verdict=NOT_MEASURED,
        reason="",
        at_least=limit.at_least,
        at_most=limit.at_most,
        rule=limit.rule,
        conformance_probability=limit.conformance_probability,
        part=limit.part,
        parameters=limit.parameters,
        attempt=attempt,
        place=where or whole(capture.name, regions=bool(capture.regions)),
    )


def _one(capture: Capture, limit: Limit, region: str, reading: Reading, attempt: int) -> Check:
    blank = replace(
        _blank(capture, limit, region, attempt),
        channel=reading.channel,
        estimator=reading.estimator or (limit.estimator or ""),
    )
    if not limit.unit:
        blank = replace(blank, measured_in=reading.measured_in)
    if reading.refusal is not None:
        return _refused(blank, reading.refusal)
    if reading.bound is not None:
        side, end = reading.bound[0], _in_unit(capture, reading.bound[1], reading.measured_in, limit.unit)
        return _bounded(blank, limit, side, end)
    if reading.value is None or reading.u is None:
        return _refused(blank, Refusal("fault", "the reading has neither value nor reason"))
    value = _in_unit(capture, reading.value, reading.measured_in, limit.unit)
    u = abs(_in_unit(capture, reading.u, reading.measured_in, limit.unit))
    dof = inf if any(c.shared for c in reading.components) else effective_dof(reading.components)
    return _judged(blank, limit, value, u, dof, reading)


def _judged(blank: Check, limit: Limit, value: float, u: float, dof: float, reading: Reading | None = None) -> Check:
    limits = Limits(limit.at_least, limit.at_most, limit.rule, limit.conformance_probability)
    if limit.report_only:
        text = f"{_place(blank)}{blank.label} {show(value, u, blank.measured_in)}; reported only"
        verdict = REPORT_ONLY if decision_rule.decide(value, u, limits)[0] != NOT_MEASURED else NOT_MEASURED
        if verdict == NOT_MEASURED:
            return _refused(blank, Refusal("fault", "the value is no number"))
        return replace(blank, value=value, u=u, verdict=verdict, reason=text)
    if reading is not None and reading.count:
        verdict, inside = decision_rule.decide_count(value, reading.trials, limit.count_bound, limits)
        low, high = limit.at_least, limit.at_most
    else:
        verdict, inside = decision_rule.decide(value, u, limits, dof)
        low, high = decision_rule.acceptance_limits(limits, u, dof)
    if verdict == NOT_MEASURED:
        return _refused(blank, Refusal("fault", "the value is no number"))
    check = replace(
        blank,
        value=value,
        u=u,
        verdict=verdict,
        probability=inside,
        acceptance_at_least=low,
        acceptance_at_most=high,
    )
    return _with_reason(check, show(value, u, blank.measured_in, against=(limit.at_least, limit.at_most)))


def _bounded(blank: Check, limit: Limit, side: str, end: float) -> Check:
    limits = Limits(limit.at_least, limit.at_most, limit.rule, limit.conformance_probability)
    check = replace(blank, bound=(side, end), verdict=decision_rule.decide_bound(side, end, limits))
    text = f"{side} {show(end, None, blank.measured_in)}"
    if limit.report_only:
        return replace(check, verdict=REPORT_ONLY, reason=f"{_place(blank)}{blank.label} {text}; reported only")
    return _with_reason(check, text)


def _with_reason(check: Check, found: str) -> Check:
    told = f"{_place(check)}{check.label} {found}, {requirement(check)}"
    if check.verdict == CONFORMS:
        return replace(check, reason=told)
    if check.verdict == DOES_NOT_CONFORM:
        meaning = consequence(check)
        return replace(check, reason=f"{told}; {meaning}", at_fault=AT_FAULT_UNIT, because=meaning)
    why = "the uncertainty straddles the limit" if check.bound is None else "only a bound is known"
    return replace(check, verdict=CANNOT_DECIDE, reason=f"{told}; {why}")


def _refused(blank: Check, refusal: Refusal) -> Check:
    known = blame.BY_CAUSE.get(refusal.cause, blame.BY_CAUSE["fault"])
    reason = f"{_place(blank)}{blank.label} not measured: {refusal.because}"
    return replace(blank, verdict=NOT_MEASURED, reason=reason, at_fault=known.at_fault, because=known.because)


def _combined(
    capture: Capture, limit: Limit, members: Sequence[Reading], against: Sequence[Reading], attempt: int
) -> Check:
    blank = _blank(capture, limit, _where(limit), attempt)
    everyone = [*members, *against]
    if not limit.unit:
        blank = replace(blank, measured_in="1" if limit.combine == "ratio" else everyone[0].measured_in)
    blank = replace(blank, estimator=everyone[0].estimator, channel=everyone[0].channel)
    refused = [r for r in everyone if r.refusal is not None]
    if refused:
        return _refused(blank, _worst_refusal(refused))
    unit = "" if limit.combine == "ratio" else limit.unit
    valued = [_member(capture, r, unit) for r in members if r.bound is None]
    bounds = [(r.bound[0], _in_unit(capture, r.bound[1], r.measured_in, unit)) for r in everyone if r.bound is not None]
    ends = {"at_least": limit.at_least, "at_most": limit.at_most}
    if bounds:
        known = combine_bounds(str(limit.combine), valued, bounds, **ends)
        if known is None:
            because = "a member is known only by a bound, and the combination needs its value"
            return _refused(blank, Refusal("not defined", because))
        if not isinstance(known, str):
            return _bounded(blank, limit, *known)
    others = [_member(capture, r, unit) for r in against]
    if not all(isfinite(m.value) and isfinite(m.u) for m in [*valued, *others]):
        return _refused(blank, Refusal("fault", "a member's value is no number"))
    try:
        made = combine(str(limit.combine), valued, others, **ends)
    except ZeroDivisionError as error:
        return _refused(blank, Refusal("not defined", str(error)))
    factor = 100.0 if limit.combine == "ratio" and limit.unit == "%" else 1.0
    check = _judged(blank, limit, factor * made.value, factor * made.u, inf)
    if check.value is None:
        return check
    steps = combination_steps(check, str(limit.combine), factor * made.plain, factor * made.excess)
    return replace(check, steps=steps)


def _worst_refusal(refused: Sequence[Reading]) -> Refusal:
    first = refused[0].refusal or Refusal("fault", "no reason")
    named = joined([r.region for r in refused])
    return Refusal(first.cause, f"{named}: {first.because}")


def _member(capture: Capture, reading: Reading, unit: str) -> Member:
    def size(x: float) -> float:
        return abs(_in_unit(capture, x, reading.measured_in, unit))

    value = float("nan") if reading.value is None else _in_unit(capture, reading.value, reading.measured_in, unit)
    parts = tuple(Component(c.name, size(c.u), c.type, c.dof, c.shared) for c in reading.components)
    return Member(reading.region, value, float("nan") if reading.u is None else size(reading.u), parts)


def _in_unit(capture: Capture, value: float, unit: str, wanted: str) -> float:
    return units.convert(value, unit, wanted, units.context_of(capture.camera, capture.optics))


def _place(check: Check) -> str:
    return f"{check.place}: " if check.channel == "mono" else f"{check.place} {check.channel}: "
