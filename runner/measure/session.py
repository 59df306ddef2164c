"""Measures one unit: every capture, frame, region and method of the plan, repeats combined, nothing judged.

A fault of one method leaves its readings refused with the cause `fault`; all others go on.
"""

import traceback
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace

from runner.capture.frame import Box, Crop, Frame, crop
from runner.capture.mosaic import grey
from runner.errors import FrameRefused, MeasurementRefused
from runner.measure.contract import Found, Measurement, NotFound, QuantityInfo, Sample, Wanted
from runner.measure.evidence import CaptureEvidence, FrameFact, RegionFact, UnitEvidence
from runner.measure.plan import CapturePlan, MethodPlan, Plan
from runner.measure.reading import Curve, Map, Reading, Refusal, Spot
from runner.measure.uncertainty import mean_of_repeats, with_declared
from runner.spec import units

Loader = Callable[[str], Sequence[Frame]]
"""Gives the frames of a capture by its name; raises FrameRefused."""
Painter = Callable[[str, int, Frame, Sequence[RegionFact]], None]
"""Is shown each capture's first frame with its regions, for pictures: (capture, attempt, frame, regions)."""


@dataclass(frozen=True)
class Attempt:
    """What one attempt gave."""

    captures: tuple[CaptureEvidence, ...]
    """Every capture of the plan."""
    measured: Measurement
    """Readings with repeats combined, curves, maps and spots."""


@dataclass
class Faults:
    """Tracebacks of the program's own faults, for the person who mends it."""

    tracebacks: list[str] = field(default_factory=list)
    """One text each."""


def measure_attempt(
    plan: Plan,
    attempt: int,
    load: Loader,
    known_faults: Mapping[str, tuple[str, ...]],
    *,
    painter: Painter | None = None,
    faults: Faults | None = None,
) -> Attempt:
    """Measure every capture of one attempt.

    Args:
        plan: The bound spec.
        attempt: Its number, from 1.
        load: Gives a capture's frames.
        known_faults: Sentences from the survey, by capture; such a capture is not measured.
        painter: Is shown the frames, for pictures.
        faults: Collects the program's own faults.
    """
    companions = _Companions(plan, load, known_faults)
    parts = [
        _measure_capture(plan, one, attempt, load, known_faults, companions, painter, faults) for one in plan.captures
    ]
    return Attempt(tuple(evidence for evidence, _ in parts), _joined([measured for _, measured in parts]))


def unit_evidence(serial: str, attempts: Sequence[Attempt]) -> UnitEvidence:
    """Put the attempts of a unit together, in one fixed order."""
    all_of = _joined([attempt.measured for attempt in attempts])
    return UnitEvidence(
        serial,
        tuple(capture for attempt in attempts for capture in attempt.captures),
        tuple(sorted(all_of.readings, key=_order)),
        tuple(sorted(all_of.curves, key=lambda c: (*_place(c), c.name, c.estimator))),
        tuple(sorted(all_of.maps, key=lambda m: (*_place(m), m.name))),
        tuple(sorted(all_of.spots, key=lambda s: (*_place(s), s.kind, s.y, s.x))),
    )


def _joined(parts: Sequence[Measurement]) -> Measurement:
    return Measurement(
        tuple(reading for part in parts for reading in part.readings),
        tuple(curve for part in parts for curve in part.curves),
        tuple(one for part in parts for one in part.maps),
        tuple(spot for part in parts for spot in part.spots),
    )


def _place(one: Reading | Curve | Map | Spot) -> tuple[str, int, str, str]:
    return one.capture, one.attempt, one.region, one.channel


def _order(reading: Reading) -> tuple[object, ...]:
    parameters = sorted((k, a.value, a.unit) for k, a in reading.parameters.items())
    return (*_place(reading), reading.quantity, parameters, reading.part, reading.estimator)


class _Companions:
    """Frames of companion captures, read when first needed and kept while this attempt is measured."""

    def __init__(self, plan: Plan, load: Loader, known_faults: Mapping[str, tuple[str, ...]]) -> None:
        self._cameras = {one.capture.name: one.capture.camera for one in plan.captures}
        self._load, self._known_faults = load, known_faults
        self._frames: dict[str, Sequence[Frame]] = {}

    def crops(self, uses: Mapping[str, str], box: Box, channel: str) -> dict[str, tuple[Crop, ...]]:
        """Return the same box out of every companion that could be read; a role without frames is left out."""
        found = {}
        for role, name in uses.items():
            frames, camera = self._read(name), self._cameras[name]
            if frames and channel in camera.channels:
                found[role] = tuple(crop(frame, box, camera, channel) for frame in frames)
        return found

    def _read(self, name: str) -> Sequence[Frame]:
        if name not in self._frames:
            try:
                self._frames[name] = () if self._known_faults.get(name) else self._load(name)
            except FrameRefused:
                self._frames[name] = ()  # the companion's own capture tells why
        return self._frames[name]


def _measure_capture(
    plan: Plan,
    one: CapturePlan,
    attempt: int,
    load: Loader,
    known_faults: Mapping[str, tuple[str, ...]],
    companions: _Companions,
    painter: Painter | None,
    faults: Faults | None,
) -> tuple[CaptureEvidence, Measurement]:
    name = one.capture.name
    evidence = CaptureEvidence(name, attempt, one.capture.target, (), known_faults.get(name, ()))
    if evidence.faults:
        return evidence, Measurement(())
    try:
        frames = load(name)
    except FrameRefused as error:
        return replace(evidence, faults=(str(error),)), Measurement(())
    camera = one.capture.camera
    located = []
    for frame in frames:
        seen = replace(frame, codes=grey(frame.codes, camera))
        located.append(one.target.locate([seen], one.capture.regions, camera, one.target_options))
        if painter is not None and frame is frames[0]:
            painter(name, attempt, seen, tuple(_fact(found) for found in located[0]))
    regions = tuple(_fact(found) for found in located[0])
    each = [plan for plan in one.methods if not getattr(plan.method, "TOGETHER", False)]
    repeats = [
        _measure_frames(one, each, (frame,), found, companions, faults)
        for frame, found in zip(frames, located, strict=True)
    ]
    at_once = [plan for plan in one.methods if plan not in each]
    repeats.append(_measure_frames(one, at_once, frames, located[0], companions, faults))
    context = units.context_of(one.capture.camera, one.capture.optics)
    declared = [with_declared(r, plan.uncertainty, context) for r in _combine([m.readings for m in repeats])]
    shown = _joined([repeats[0], repeats[-1]])  # curves of the first frame stand for all, those of all frames as well
    measured = Measurement(
        tuple(replace(reading, capture=name, attempt=attempt) for reading in declared),
        tuple(replace(curve, capture=name, attempt=attempt) for curve in shown.curves),
        tuple(replace(area, capture=name, attempt=attempt) for area in shown.maps),
        tuple(replace(spot, capture=name, attempt=attempt) for spot in shown.spots),
    )
    return replace(evidence, frames=tuple(_frame_fact(f) for f in frames), regions=regions), measured


def _measure_frames(
    one: CapturePlan,
    plans: Sequence[MethodPlan],
    frames: Sequence[Frame],
    located: Sequence[Found | NotFound],
    companions: _Companions,
    faults: Faults | None,
) -> Measurement:
    """Let methods measure one frame, or all frames together, in every region and channel."""
    parts = []
    for found in located if plans else ():
        for channel in one.capture.camera.channels:
            for plan in plans:
                measured = _measure_region(one, frames, found, channel, plan, companions, faults)
                parts.append(
                    Measurement(
                        tuple(replace(reading, channel=channel) for reading in measured.readings),
                        tuple(replace(curve, channel=channel) for curve in measured.curves),
                        tuple(replace(area, channel=channel) for area in measured.maps),
                        tuple(replace(spot, channel=channel) for spot in measured.spots),
                    )
                )
    return _joined(parts)


def _measure_region(
    one: CapturePlan,
    frames: Sequence[Frame],
    found: Found | NotFound,
    channel: str,
    plan: MethodPlan,
    companions: _Companions,
    faults: Faults | None,
) -> Measurement:
    wanted = plan.wanted.get(found.region, ())
    first = frames[0]
    if isinstance(found, NotFound):
        if plan.method.NEEDS or found.box is None or not found.box.inside(first.shape[1], first.shape[0]):
            return _refused(plan, found.region, wanted, Refusal(found.cause, found.because))
        found = Found(found.region, found.box)
    capture = one.capture
    crops = tuple(crop(frame, found.box, capture.camera, channel) for frame in frames)
    together = getattr(plan.method, "TOGETHER", False)
    beside = capture.camera.channels if together else ()
    others = {name: tuple(crop(frame, found.box, capture.camera, name) for frame in frames) for name in beside}
    sample = Sample(
        found,
        crops[0],
        capture.camera,
        capture.optics,
        capture.chart,
        wanted,
        companions.crops(capture.uses, found.box, channel),
        crops if together else (),
        others,
    )
    try:
        measured = plan.method.measure(sample, plan.options)
    except MeasurementRefused as error:
        return _refused(plan, found.region, wanted, Refusal(error.cause, str(error)))
    except Exception as error:  # noqa: BLE001 - one method's fault must not take the unit's other readings along
        if faults is not None:
            faults.tracebacks.append(f"{first.file}, {found.region}, {plan.method.NAME}\n{traceback.format_exc()}")
        because = f"the program failed in '{plan.method.NAME}': {type(error).__name__}: {error}"
        return _refused(plan, found.region, wanted, Refusal("fault", because))
    return _complete(measured, plan, found.region, wanted)


def _complete(measured: Measurement, plan: MethodPlan, region: str, wanted: tuple[Wanted, ...]) -> Measurement:
    """Add a refused reading for whatever was wanted and did not come: silence must never look like a pass."""
    missing = tuple(w for w in wanted if not any(_answers(r, w) for r in measured.readings))
    if not missing:
        return measured
    lost = _refused(plan, region, missing, Refusal("fault", f"'{plan.method.NAME}' gave no value for it"))
    return replace(measured, readings=(*measured.readings, *lost.readings))


def _answers(reading: Reading, wanted: Wanted) -> bool:
    return (reading.quantity, reading.part) == (wanted.quantity, wanted.part) and (
        dict(reading.parameters) == dict(wanted.parameters) and wanted.estimator in {None, reading.estimator}
    )


def _refused(plan: MethodPlan, region: str, wanted: tuple[Wanted, ...], refusal: Refusal) -> Measurement:
    """Give every reading that was wanted, or the method's plain ones where nothing was, its reason."""
    asked = wanted or tuple(Wanted(q, {}, {}) for q, info in plan.method.quantities().items() if not info.parameters)
    return Measurement(
        tuple(
            Reading(
                region,
                w.quantity,
                _unit(plan.method.quantity(w.quantity)),
                None,
                None,
                parameters=w.parameters,
                part=w.part,
                estimator=w.estimator or "",
                refusal=refusal,
            )
            for w in asked
        )
    )


def _unit(info: QuantityInfo | None) -> str:
    return info.unit if info is not None else "1"


def _combine(repeats: Sequence[tuple[Reading, ...]]) -> list[Reading]:
    groups: dict[tuple[object, ...], list[Reading]] = {}
    for readings in repeats:
        for reading in readings:
            parameters = tuple(sorted((k, a.value, a.unit) for k, a in reading.parameters.items()))
            key = (reading.region, reading.channel, reading.quantity, parameters, reading.part, reading.estimator)
            groups.setdefault(key, []).append(reading)
    return [mean_of_repeats(group) if len(group) > 1 else group[0] for group in groups.values()]


def _fact(found: Found | NotFound) -> RegionFact:
    box = found.box
    edges = None if box is None else (box.x0, box.y0, box.x1, box.y1)
    if isinstance(found, NotFound):
        return RegionFact(found.region, found=False, box=edges)
    return RegionFact(found.region, found=True, box=edges, outline=found.outline)


def _frame_fact(frame: Frame) -> FrameFact:
    return FrameFact(frame.file, frame.sha256, frame.shape, str(frame.codes.dtype), frame.page, frame.simulated)
