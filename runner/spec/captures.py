"""Builds captures and their limits from their shapes: names resolved, units joined, nothing measured."""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from decimal import Decimal

from runner.errors import UsageError
from runner.spec import units
from runner.spec.device_leaves import Chosen
from runner.spec.devices import build_camera, build_chart, build_optics, overridden
from runner.spec.file_shapes import SidecarShape
from runner.spec.files import FIELDS, Agreed, Sidecar
from runner.spec.leaves import Inequality, share
from runner.spec.limit_leaves import PARAMETERS
from runner.spec.model import Amount, Bound, Camera, Capture, FramePattern, Limit, Optics
from runner.spec.regions import expand, names
from runner.spec.shapes import CaptureShape, LimitShape, OpticsShape, RootShape
from runner.spec.tree import Complaints, nearest


@dataclass(frozen=True)
class Defaults:
    """What holds where a limit does not say otherwise."""

    rule: str
    """Decision rule."""
    probability: float
    """Conformance probability, a fraction."""


@dataclass(frozen=True)
class Draft:
    """A capture with the shapes that it was built from, for complaints with their lines."""

    capture: Capture
    """The record, with the limits that are whole."""
    shape: CaptureShape
    """As written."""
    limits: tuple[tuple[Limit, LimitShape], ...]
    """Each limit with its shape."""
    fill: float | None
    """Fill of the pixel as stated, or None."""


def build_captures(
    root: RootShape, camera: Camera | None, optics: Optics, defaults: Defaults, complaints: Complaints
) -> tuple[Draft, ...]:
    """Return the captures that are whole, in the order of the spec.

    Args:
        root: The whole file.
        camera: The spec's camera; without one (it is broken) names are checked all the same, and nothing is built.
        optics: The spec's optics.
        defaults: Decision rule and probability of limits that state none.
        complaints: Takes the complaints.
    """
    shapes = {name: shape for name, shape in (root.captures or {}).items() if shape is not None}
    _check_companions(shapes, tuple(root.captures or ()), complaints)
    drafts = tuple(_build(name, shape, root, camera, optics, defaults, complaints) for name, shape in shapes.items())
    whole = tuple(draft for draft in drafts if draft is not None)
    _check_numbers(whole, complaints)
    return whole


def _build(
    name: str,
    shape: CaptureShape,
    root: RootShape,
    camera: Camera | None,
    optics: Optics,
    defaults: Defaults,
    complaints: Complaints,
) -> Draft | None:
    if not shape.sound("camera") or not shape.sound("optics"):
        camera = None
    elif shape.camera is not None and root.camera is not None:
        camera = build_camera(overridden(root.camera, shape.camera), complaints, shape.camera)
    if shape.optics is not None:
        optics = build_optics(root.optics or OpticsShape(), complaints, shape.optics)
    context = units.context_of(camera, optics) if camera is not None else None
    meant = names(shape.regions or {}) if shape.sound("regions") else None
    limits = tuple(
        (limit, one)
        for one in shape.limits or ()
        if one is not None and (limit := _limit(one, name, meant, context, defaults, complaints)) is not None
    )
    if camera is None or context is None:
        return None
    chart = build_chart(shape.chart, context, complaints)
    broken = not shape.sound("chart") or (shape.chart is not None and shape.chart.file is not None and not chart.file)
    regions = () if broken else expand(shape.regions or {}, camera, chart.file, complaints)
    frames = shape.frames
    target, target_options = next(iter((shape.target or Chosen({"": {}})).options.items()))
    capture = Capture(
        name=name,
        target=target,
        frames=None if frames is None else FramePattern(frames.names, frames.count),
        same_frames_as=shape.same_frames_as,
        uses=shape.uses or {},
        camera=camera,
        optics=optics,
        chart=chart,
        regions=regions,
        measure=shape.measure.options if shape.measure is not None else {},
        target_options=target_options,
        usable_if=tuple(_bounds(shape)),
        limits=tuple(limit for limit, _ in limits),
        sidecar=_sidecar(shape.sidecar),
    )
    stated = any(one is not None and one.stated("fill") for one in (root.camera, shape.camera))
    return Draft(capture, shape, limits, camera.fill if stated else None)


def _sidecar(shape: SidecarShape | None) -> Sidecar:
    if shape is None:
        return Sidecar()
    agreed = []
    for name in FIELDS:
        one: Inequality | None = getattr(shape, name, None) if name != "counter" else None
        if one is not None:
            low, high = one.at_least, one.at_most
            unit = (high or low or Amount(0, "1")).unit
            agreed.append(Agreed(name, low.value if low else None, high.value if high else None, unit))
    return Sidecar(shape.require or (), tuple(agreed), shape.counter is not None)


def _bounds(shape: CaptureShape) -> Iterable[Bound]:
    for quantity, one in sorted((shape.usable_if or {}).items()):
        low, high = one.at_least, one.at_most
        unit = (high or low or Amount(0, "1")).unit
        yield Bound(quantity, low.value if low else None, high.value if high else None, unit)


# ---- limits


def _limit(
    shape: LimitShape,
    capture: str,
    meant: Mapping[str, tuple[str, ...]] | None,
    context: units.FrequencyContext | None,
    defaults: Defaults,
    complaints: Complaints,
) -> Limit | None:
    if meant is None or not shape.sound("where") or not shape.sound("against"):  # complained of already
        return None
    where = _regions(shape, "where", shape.where or (), meant, complaints)
    against = _regions(shape, "against", shape.against or (), meant, complaints)
    ends = _ends(shape, context, complaints) if context is not None and shape.whole() else None
    if where is None or against is None or ends is None:
        return None
    if shape.combine == "range" and len(where) < 2:
        complaints.error(
            shape.at("combine"), "a range needs two regions or more", "", "name a group or a list in where"
        )
    unit, low, high, nominal = ends
    probability = shape.conformance_probability
    return Limit(
        characteristic=shape.characteristic,
        capture=capture,
        quantity=shape.quantity,
        parameters={key: getattr(shape, key) for key in PARAMETERS if getattr(shape, key) is not None}
        | dict(shape.parameters or {}),
        where=where,
        where_label=", ".join(shape.where or ()),
        unit=unit,
        at_least=low,
        at_most=high,
        rule=shape.rule or defaults.rule,
        conformance_probability=share(probability) if probability is not None else defaults.probability,
        combine=shape.combine,
        against=against,
        against_label=", ".join(shape.against or ()),
        nominal=nominal,
        channel=shape.channel,
        part=shape.part or "system",
        method=shape.method,
        estimator=shape.estimator,
        beyond_nyquist=bool(shape.beyond_nyquist),
        report_only=bool(shape.report_only),
        count_bound=shape.bound,
    )


def _regions(
    shape: LimitShape, key: str, wanted: tuple[str, ...], meant: Mapping[str, tuple[str, ...]], complaints: Complaints
) -> tuple[str, ...] | None:
    found_regions: list[str] = []
    good = True
    for name in wanted:
        if name not in meant:
            known = f"regions: {', '.join(meant)}" if meant else "the capture has no regions"
            complaints.error(shape.at(key), f"there is no region '{name}'", known, nearest(name, meant))
            good = False
        for region in meant.get(name, ()):
            if region in found_regions:
                complaints.error(shape.at(key), f"{key} names region '{region}' twice", "", "keep one of them")
                good = False
            found_regions.append(region)
    return tuple(found_regions) if good else None


def _ends(
    shape: LimitShape, context: units.FrequencyContext, complaints: Complaints
) -> tuple[str, float | None, float | None, float | None] | None:
    """Return unit, lower limit, upper limit and nominal value, all in that unit."""
    if shape.report_only:
        try:
            return units.canonical(shape.measured_in) if shape.measured_in else "", None, None, None
        except UsageError as error:
            complaints.error(shape.at("measured_in"), error.found, error.allowed, error.next_step)
            return None
    try:
        if shape.nominal is not None and shape.tolerance is not None:
            unit = shape.nominal.unit
            minus, plus = (_tolerance(part, unit, context) for part in shape.tolerance)
            nominal = Decimal(repr(shape.nominal.value))  # 0.30 - 0.02 is 0.28, as whoever wrote it reckons
            lower, upper = nominal - Decimal(repr(minus)), nominal + Decimal(repr(plus))
            return unit, float(lower), float(upper), shape.nominal.value
        stated = shape.at_least or shape.at_most
        if stated is None:
            return None
        low, high = (
            None if end is None else units.convert(end.value, end.unit, stated.unit, context)
            for end in (shape.at_least, shape.at_most)
        )
    except UsageError as error:
        key = "tolerance" if shape.nominal is not None else "at_most"
        complaints.error(shape.at(key), error.found, error.allowed, error.next_step)
        return None
    if low is not None and high is not None and low > high:
        found = f"at_least {low:g} lies above at_most {high:g}: no value can conform"
        complaints.error(shape.at("at_least"), found, "", "exchange or correct them")
        return None
    return stated.unit, low, high, None


def _tolerance(part: Amount, unit: str, context: units.FrequencyContext) -> float:
    if part.unit != unit and "1" in {part.unit, unit}:
        spelled = "a plain number" if unit == "1" else unit
        raise units.UnitsError(
            f"a tolerance of {units.spell(part)} on a nominal value in {spelled} could mean two things",
            allowed=f"the nominal value's own unit, {spelled}",
        )
    return units.convert(part.value, part.unit, unit, context)


# ---- between captures


def _check_companions(shapes: Mapping[str, CaptureShape], known: tuple[str, ...], complaints: Complaints) -> None:
    for name, shape in shapes.items():
        if shape.sound("frames") and (shape.frames is None) == (shape.same_frames_as is None):
            found = f"capture '{name}' has either frames or same_frames_as"
            complaints.error(shape.at("same_frames_as"), found, "", "write one of the two")
        for role, other in {"same_frames_as": shape.same_frames_as, **(shape.uses or {})}.items():
            path = ("uses", role) if role in (shape.uses or {}) else ("same_frames_as",)
            if other is None:
                continue
            if other not in known:
                complaints.error(
                    shape.at(*path),
                    f"there is no capture '{other}'",
                    f"captures: {', '.join(known)}",
                    nearest(other, known),
                )
            elif other == name:
                complaints.error(shape.at(*path), f"capture '{name}' names itself", "another capture")
            elif role == "same_frames_as" and other in shapes and shapes[other].same_frames_as is not None:
                complaints.error(
                    shape.at(*path), f"capture '{other}' has no frames of its own", "", "name the one that has"
                )
            elif (
                path[0] == "uses"
                and _leads_to(other, name, shapes)
                and list(shapes).index(name) < list(shapes).index(other)
            ):
                complaints.error(
                    shape.at(*path), f"'{name}' uses '{other}', which uses '{name}' in turn", "", "break the circle"
                )


def _leads_to(start: str, goal: str, shapes: Mapping[str, CaptureShape]) -> bool:
    seen: set[str] = set()
    ahead = [start]
    while ahead:
        name = ahead.pop()
        if name == goal:
            return True
        if name not in seen and name in shapes:
            seen.add(name)
            ahead.extend((shapes[name].uses or {}).values())
    return False


def _check_numbers(drafts: tuple[Draft, ...], complaints: Complaints) -> None:
    """A characteristic with its place and channel names one check; a limit without a channel holds in each."""
    seen: dict[tuple[str, str, str], str] = {}
    for draft in drafts:
        for limit, shape in draft.limits:
            places = (f"{limit.combine} of {limit.where_label}",) if limit.combine else limit.where or ("",)
            channels = (limit.channel,) if limit.channel else draft.capture.camera.channels
            keys = [(limit.characteristic, place, channel) for place in places for channel in channels]
            doubled = next((key for key in keys if key in seen), None)
            if doubled is not None:
                at = f" at '{doubled[1]}'" if doubled[1] else ""
                at += f" in {doubled[2]}" if len(draft.capture.camera.channels) > 1 else ""
                found = f"characteristic {limit.characteristic}{at} stands twice; first in {seen[doubled]}"
                complaints.error(shape.at("characteristic"), found, "", "give each requirement its own number")
            seen |= {key: str(shape.at("characteristic")) for key in keys if key not in seen}
