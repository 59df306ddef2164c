"""Binds a spec's names to the shelves before the first frame is opened.

Targets, methods, options, quantities, parameters and units: what is not known is complained about here.
"""

import difflib
import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, fields, replace
from typing import Any

from runner.errors import Complaint, SpecError, UsageError
from runner.measure import shelf
from runner.measure.chart_options import Filled, filled
from runner.measure.contract import Method, QuantityInfo, Target, Wanted
from runner.measure.natural_range import against_range
from runner.measure.options import describe
from runner.spec import units
from runner.spec.build import DEFAULT_PROBABILITY, DEFAULT_RULE
from runner.spec.lint import CROSSING, NATURAL
from runner.spec.model import Bound, Capture, Limit, Spec, Station, UncertaintyComponent

ALWAYS = ("exposure",)
"""Methods that run on every region: without level and clipping nobody can tell a dark lamp from a bad unit."""
REPEATS = frozenset({"repeat", "page"})
"""Axes along which frames are repeats of one another."""


_Asked = dict[str, dict[str, tuple[Wanted, ...]]]
"""Wanted readings by method, then by region or name of a group."""


@dataclass(frozen=True)
class MethodPlan:
    """One method on one capture."""

    method: Method
    """The module."""
    options: Any
    """Its options record."""
    wanted: Mapping[str, tuple[Wanted, ...]]
    """Readings that limits ask for, by region; for a method that gathers, by the name that its readings carry."""
    groups: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    """For a method that gathers: the regions meant by each such name, besides all of them."""
    own: Mapping[str, Any] = field(default_factory=dict)
    """Options by region, where the chart's features have values of their own."""

    def options_in(self, region: str) -> Any:
        """Return the options for a region."""
        return self.own.get(region, self.options)

    @property
    def gathers(self) -> bool:
        """It takes all regions together, after the other methods."""
        return bool(getattr(self.method, "GATHERS", False))

    @property
    def together(self) -> bool:
        """It takes all frames of the capture at once."""
        return bool(getattr(self.method, "TOGETHER", False))


@dataclass(frozen=True)
class CapturePlan:
    """One capture, bound."""

    capture: Capture
    """As asked."""
    target: Target
    """The module."""
    target_options: Any
    """Its options record."""
    methods: tuple[MethodPlan, ...]
    """In the order of measuring."""
    axes: tuple[str, ...] = ()
    """Axes along which its frames differ in more than repeats."""
    own: Mapping[str, Any] = field(default_factory=dict)
    """The target's options by region, where the chart's features have values of their own."""

    def of_the_chart(self) -> dict[str, Any]:
        """Return options that the chart's features fill by region, as plain JSON data."""
        by_module = {self.target.NAME: self.own} | {m.method.NAME: m.own for m in self.methods}
        return {name: {r: describe(o) for r, o in own.items()} for name, own in by_module.items() if own}


@dataclass(frozen=True)
class Plan:
    """A whole spec, bound."""

    spec: Spec
    """As asked; a limit on all of its regions together says so in `where`."""
    captures: tuple[CapturePlan, ...]
    """In the order of the spec."""
    uncertainty: tuple[UncertaintyComponent, ...]
    """Declared components of spec and station together."""
    asked: Spec | None = None
    """The spec before it was bound; only that can be bound once more."""

    def defaults(self) -> dict[str, Any]:
        """Return what the program filled in, as plain JSON data for the results."""
        captures = {
            plan.capture.name: {
                "target": {plan.target.NAME: describe(plan.target_options)},
                "measure": {m.method.NAME: describe(m.options) for m in plan.methods},
            }
            | ({"by region": own} if (own := plan.of_the_chart()) else {})
            for plan in self.captures
        }
        asked = self.spec.expanded.get("decision") or {}
        decision = {"rule": DEFAULT_RULE, "conformance_probability": DEFAULT_PROBABILITY}
        return {"captures": captures, "decision": {k: v for k, v in decision.items() if k not in asked}}


def bind(spec: Spec, station: Station | None = None) -> Plan:
    """Bind every name of a spec.

    Raises:
        SpecError: With all complaints: unknown targets, methods, options, quantities, parameters, units.
        ShelfError: A module cannot be used.
    """
    complaints: list[Complaint] = []
    captures = tuple(plan for c in spec.captures if (plan := _bind_capture(spec, c, complaints)) is not None)
    declared = spec.uncertainty + (station.uncertainty if station else ())
    placed = tuple(replace(c, where=spec.place(c.where)) for c in complaints)
    if any(c.severity == "error" for c in placed):
        raise SpecError(placed)
    bound = replace(spec, captures=tuple(plan.capture for plan in captures), warnings=(*spec.warnings, *placed))
    return Plan(bound, captures, declared, spec)


def _bind_capture(spec: Spec, capture: Capture, complaints: list[Complaint]) -> CapturePlan | None:
    place = f"{spec.source}: captures, {capture.name}"
    target = shelf.targets().get(capture.target)
    if target is None:
        complaints.append(_unknown(place, "target", capture.target, shelf.targets()))
        return None
    axes = _axes(spec, capture)
    chosen: dict[str, Mapping[str, Any]] = dict(capture.measure) or {name: {} for name in target.METHODS}
    if not axes:  # along an axis, level and clipping change from step to step
        chosen |= {name: {} for name in ALWAYS if name not in chosen}
    bound: list[tuple[Method, Filled]] = []
    for name, asked in chosen.items():
        method = shelf.methods().get(name)
        if method is None:
            complaints.append(_unknown(f"{place}, measure", "method", name, shelf.methods()))
            continue
        if not method.NEEDS <= target.OFFERS:
            found = f"method '{name}' needs {', '.join(sorted(method.NEEDS))}; target '{target.NAME}' does not offer it"
            complaints.append(Complaint(f"{place}, measure", found, next_step="choose another method or target"))
            continue
        try:
            bound.append((method, filled(method.read_options, method.Options, asked, capture)))
        except UsageError as error:
            complaints.append(Complaint(f"{place}, measure, {name}", error.found, error.allowed, error.next_step))
    methods = [method for method, _ in bound]
    _bind_axes(capture, axes, methods, place, complaints)
    try:
        asked = {**_shared_options(target, chosen), **capture.target_options}
        target_options = filled(target.read_options, target.Options, asked, capture)
    except UsageError as error:
        complaints.append(Complaint(f"{place}, target", error.found, error.allowed, error.next_step))
        target_options = Filled(None, {})
    meant = [m for m in methods if not axes or _along(m, axes)]
    if not meant and axes:  # complained of; what its limits ask for cannot be known
        return CapturePlan(capture, target, target_options.options, (), axes, target_options.own)
    capture, wanted, groups = _bind_limits(capture, place, meant, complaints)
    for one in capture.usable_if:
        _bind_bound(capture, one, place, meant, wanted, complaints)
    _bind_wants(capture, place, bound, wanted, complaints)
    plans = tuple(MethodPlan(m, o.options, wanted.get(m.NAME, {}), groups.get(m.NAME, {}), o.own) for m, o in bound)
    return CapturePlan(capture, target, target_options.options, plans, axes, target_options.own)


def _bind_wants(
    capture: Capture, place: str, bound: Sequence[tuple[Method, Any]], wanted: _Asked, complaints: list[Complaint]
) -> None:
    """Ask other methods, in every region, for what a method that gathers builds upon."""
    context = units.context_of(capture.camera, capture.optics)
    others = [method for method, _ in bound if not getattr(method, "GATHERS", False)]
    for method, options in bound:
        for quantity, parameters in method.wants(options.options) if hasattr(method, "wants") else ():
            where = f"{place}, measure, {method.NAME}"
            other, info = _provider(quantity, None, others)
            if other is None or info is None:
                complaints.append(_no_provider(where, quantity, None, others))
                continue
            try:
                at = {n: units.convert(a.value, a.unit, info.parameters[n], context) for n, a in parameters.items()}
            except UsageError as error:
                complaints.append(Complaint(where, error.found, error.allowed, error.next_step))
                continue
            mine, one = wanted.setdefault(other.NAME, {}), Wanted(quantity, parameters, at)
            for region in [r.name for r in capture.regions] or [""]:
                if one not in mine.get(region, ()):
                    mine[region] = (*mine.get(region, ()), one)


def _shared_options(target: Target, chosen: Mapping[str, Mapping[str, Any]]) -> dict[str, Any]:
    """Return options written under a method that its target takes too, e.g. how far an edge is searched for."""
    known = {f.name for f in fields(target.Options)}
    return {key: value for asked in chosen.values() for key, value in asked.items() if key in known}


def _axes(spec: Spec, capture: Capture) -> tuple[str, ...]:
    """Return the axes of a capture's files along which frames are no repeats of one another."""
    frames = capture.frames or (spec.capture(capture.same_frames_as).frames if capture.same_frames_as else None)
    named = re.findall(r"\{([^}]*)\}", frames.names) if frames is not None else []
    return tuple(axis for axis in dict.fromkeys(named) if axis not in REPEATS)


def _along(method: Method, axes: Sequence[str]) -> bool:
    """Tell whether a method takes frames that differ along these axes; else averaging would mix conditions."""
    return set(axes) <= set(getattr(method, "AXES", ()))


def _bind_axes(
    capture: Capture, axes: Sequence[str], methods: Sequence[Method], place: str, complaints: list[Complaint]
) -> None:
    """Some method must take the frames along their axes, and those that do not must feed one that gathers."""
    if not axes:
        return
    words = ", ".join(axes)
    takers = [m for m in methods if _along(m, axes)]
    if not takers:
        able = [name for name, m in shelf.methods().items() if _along(m, axes)]
        allowed = f"methods that do: {', '.join(able)}" if able else "{repeat} names repeats of one condition"
        found = f"no method of the target '{capture.target}' takes frames along '{words}'"
        complaints.append(Complaint(f"{place}, frames", found, allowed))
    elif not any(getattr(m, "GATHERS", False) for m in takers):
        for idle in [m.NAME for m in methods if m not in takers]:
            found = f"method '{idle}' takes no frames along '{words}', and no method of this capture gathers its values"
            complaints.append(Complaint(f"{place}, measure", found, next_step=f"leave '{idle}' out"))


def _unknown(place: str, kind: str, name: str, known: Iterable[str]) -> Complaint:
    near = difflib.get_close_matches(name, list(known), n=1)
    hint = f"did you mean '{near[0]}'?" if near else ""
    return Complaint(place, f"unknown {kind} '{name}'", f"known are: {', '.join(sorted(known))}", hint)


def _bind_limits(
    capture: Capture, place: str, methods: list[Method], complaints: list[Complaint]
) -> tuple[Capture, _Asked, dict[str, dict[str, tuple[str, ...]]]]:
    """Return the capture with its limits bound, what they want, and the groups of regions they mean."""
    wanted: _Asked = {}
    groups: dict[str, dict[str, tuple[str, ...]]] = {}
    limits: list[Limit] = []
    for asked in capture.limits:
        limit = asked
        limits.append(limit)
        where = f"{place}, limit {limit.characteristic}"
        method, info = _provider(limit.quantity, limit.method, methods)
        if method is None or info is None:
            complaints.append(_no_provider(where, limit.quantity, limit.method, methods))
            continue
        at = _parameters(capture, limit, info, where, complaints)
        _check_place(capture, limit, info, where, complaints)
        if at is None or not _unit_fits(capture, limit.unit, _yielded(limit, info), limit.quantity, where, complaints):
            continue
        if limit.quantity not in NATURAL and not CROSSING.fullmatch(limit.quantity):  # else the reader has done it
            complaints += against_range(limit, info, where, units.context_of(capture.camera, capture.optics))
        one = Wanted(limit.quantity, limit.parameters, at, limit.part, limit.estimator)
        if info.whole and limit.where:
            groups.setdefault(method.NAME, {})[limit.where_label] = limit.where
            limits[-1] = limit = replace(limit, where=(limit.where_label,))
        mine = wanted.setdefault(method.NAME, {})
        for region in (*limit.where, *limit.against) or ("",):
            if one not in mine.get(region, ()):
                mine[region] = (*mine.get(region, ()), one)
    return replace(capture, limits=tuple(limits)), wanted, groups


def _check_place(capture: Capture, limit: Limit, info: QuantityInfo, where: str, complaints: list[Complaint]) -> None:
    if info.whole and limit.combine:
        found = f"{limit.quantity} is one value of all its regions already"
        complaints.append(Complaint(where, found, next_step="leave combine: out"))
    elif not info.whole and not limit.where and capture.regions:
        known = f"regions: {', '.join(dict.fromkeys(r.group or r.name for r in capture.regions))}"
        complaints.append(Complaint(where, f"limit {limit.characteristic} does not say where", known, "add where:"))


def _yielded(limit: Limit, info: QuantityInfo) -> QuantityInfo:
    """Return what a limit's value is: a ratio of two readings is a plain number whatever their unit."""
    return replace(info, unit="1") if limit.combine == "ratio" else info


def _provider(quantity: str, method: str | None, methods: list[Method]) -> tuple[Method | None, QuantityInfo | None]:
    for candidate in methods:
        if method in {None, candidate.NAME} and (info := candidate.quantity(quantity)) is not None:
            return candidate, info
    return None, None


def _no_provider(where: str, quantity: str, method: str | None, methods: list[Method]) -> Complaint:
    known = sorted(name for m in methods if method in {None, m.NAME} for name in m.quantities())
    return _unknown(where, "quantity", quantity, known)


def _parameters(
    capture: Capture, limit: Limit, info: QuantityInfo, where: str, complaints: list[Complaint]
) -> dict[str, float] | None:
    context = units.context_of(capture.camera, capture.optics)
    at: dict[str, float] = {}
    good = True
    for name in limit.parameters:
        if name not in info.parameters:
            complaints.append(Complaint(where, f"{limit.quantity} takes no '{name}'", next_step="leave it out"))
            good = False
    for name, unit in info.parameters.items():
        amount = limit.parameters.get(name)
        if amount is None:
            complaints.append(Complaint(where, f"{limit.quantity} needs '{name}'", f"for example {name}: 0.25 {unit}"))
            good = False
            continue
        try:
            at[name] = units.convert(amount.value, amount.unit, unit, context)
        except UsageError as error:
            complaints.append(Complaint(where, error.found, error.allowed, error.next_step))
            good = False
    return at if good else None


def _unit_fits(
    capture: Capture, unit: str, info: QuantityInfo, quantity: str, where: str, complaints: list[Complaint]
) -> bool:
    if not unit:  # only reported: its own unit is right
        return True
    try:
        units.convert(1.0, info.unit, unit, units.context_of(capture.camera, capture.optics))
    except UsageError as error:
        found = f"{quantity} is measured in {info.unit}, its limit is given in {unit}: {error.found}"
        complaints.append(Complaint(where, found, error.allowed, error.next_step))
        return False
    return True


def _bind_bound(
    capture: Capture,
    bound: Bound,
    place: str,
    methods: list[Method],
    wanted: _Asked,
    complaints: list[Complaint],
) -> None:
    where = f"{place}, usable_if"
    method, info = _provider(bound.quantity, None, methods)
    if method is None or info is None:
        complaints.append(_no_provider(where, bound.quantity, None, methods))
    elif info.parameters:
        complaints.append(
            Complaint(where, f"{bound.quantity} needs parameters", "usable_if takes plain quantities only")
        )
    elif _unit_fits(capture, bound.unit, info, bound.quantity, where, complaints):
        mine = wanted.setdefault(method.NAME, {})
        for region in [""] if info.whole else [r.name for r in capture.regions] or [""]:
            mine[region] = (*mine.get(region, ()), Wanted(bound.quantity, {}, {}))
