"""Measures one unit: every capture, frame, region and method of the plan, repeats combined, nothing judged.

A fault of one method leaves its readings refused with the cause `fault`; all others go on.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cache

from runner.capture.frame import Frame, crop
from runner.capture.mosaic import grey
from runner.errors import FrameRefused
from runner.measure import tone
from runner.measure.answers import attempted, refused
from runner.measure.chart_frames import poses
from runner.measure.chart_placing import locate, own_transfer
from runner.measure.chart_view import worn
from runner.measure.companions import Companions, Loader
from runner.measure.contract import Found, Measurement, NotFound, Sample, Wanted, in_channel, joined
from runner.measure.evidence import CaptureEvidence, FrameFact, RegionFact, UnitEvidence
from runner.measure.gathering import gather
from runner.measure.plan import CapturePlan, MethodPlan, Plan
from runner.measure.reading import Curve, Map, Reading, Refusal, Spot
from runner.measure.steps import groups
from runner.measure.uncertainty import mean_of_repeats, with_declared
from runner.spec import units

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
    time: str = "",
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
        time: Of the run, ISO 8601, by which charts are due; empty where days do not count.
        painter: Is shown the frames, for pictures.
        faults: Collects the program's own faults.
    """
    companions = Companions(plan, load, known_faults)
    parts: dict[str, tuple[CaptureEvidence, Measurement]] = {}
    for one in tone.in_order(plan.captures):
        known = known_faults.get(one.capture.name, ()) + worn(one.capture.chart, time)
        if tone.source(one) and not known:
            found = tone.linearised(one, [curve for _, measured in parts.values() for curve in measured.curves])
            one, known = (one, (found,)) if isinstance(found, str) else (found, known)  # noqa: PLW2901 - with its tone
        parts[one.capture.name] = _measure_capture(plan, one, attempt, load, known, companions, painter, faults)
    in_spec = [parts[one.capture.name] for one in plan.captures]
    return Attempt(tuple(evidence for evidence, _ in in_spec), joined([measured for _, measured in in_spec]))


def unit_evidence(serial: str, attempts: Sequence[Attempt]) -> UnitEvidence:
    """Put the attempts of a unit together, in one fixed order."""
    all_of = joined([attempt.measured for attempt in attempts])
    return UnitEvidence(
        serial,
        tuple(capture for attempt in attempts for capture in attempt.captures),
        tuple(sorted(all_of.readings, key=_order)),
        tuple(sorted(all_of.curves, key=lambda c: (*_place(c), c.name, c.estimator))),
        tuple(sorted(all_of.maps, key=lambda m: (*_place(m), m.name))),
        tuple(sorted(all_of.spots, key=lambda s: (*_place(s), s.kind, s.y, s.x))),
    )


def _place(one: Reading | Curve | Map | Spot) -> tuple[str, int, str, str]:
    return one.capture, one.attempt, one.region, one.channel


def _order(reading: Reading) -> tuple[object, ...]:
    parameters = sorted((k, a.value, a.unit) for k, a in reading.parameters.items())
    return (*_place(reading), reading.quantity, parameters, reading.part, reading.estimator)


@dataclass(frozen=True)
class _Bench:
    """What every measurement of one capture needs."""

    one: CapturePlan
    """The capture, bound."""
    companions: Companions
    """Frames of its companions."""
    tracebacks: list[str]
    """Takes the texts of faults of the program."""


def _measure_capture(
    plan: Plan,
    one: CapturePlan,
    attempt: int,
    load: Loader,
    known_faults: tuple[str, ...],
    companions: Companions,
    painter: Painter | None,
    faults: Faults | None,
) -> tuple[CaptureEvidence, Measurement]:
    name = one.capture.name
    evidence = CaptureEvidence(name, attempt, one.capture.target, (), known_faults)
    if evidence.faults:
        return evidence, Measurement(())
    try:
        frames = load(name)
    except FrameRefused as error:
        return replace(evidence, faults=(str(error),)), Measurement(())
    camera = one.capture.camera
    located = []
    views, unfit = poses(frames, one.capture, fixed=bool(one.axes))
    for frame, pose in zip(frames, views, strict=True):
        seen = replace(frame, codes=grey(frame.codes, camera))
        located.append([] if unfit else locate(one, seen, pose))
        if painter is not None and frame is frames[0]:
            painter(name, attempt, seen, tuple(_fact(found) for found in located[0]))
        if unfit:
            return replace(evidence, frames=tuple(_frame_fact(f) for f in frames), faults=unfit), Measurement(())
        del seen  # a picture of its own where there are colours; a large one would lie about while methods work
    regions = tuple(_fact(found) for found in located[0])
    bench = _Bench(one, companions, faults.tracebacks if faults is not None else [])
    shown = _measure_steps(bench, frames, located)
    context = units.context_of(one.capture.camera, one.capture.optics)
    measured = Measurement(
        tuple(
            replace(with_declared(r, plan.uncertainty, context), capture=name, attempt=attempt) for r in shown.readings
        ),
        tuple(replace(curve, capture=name, attempt=attempt) for curve in shown.curves),
        tuple(replace(area, capture=name, attempt=attempt) for area in shown.maps),
        tuple(replace(spot, capture=name, attempt=attempt) for spot in shown.spots),
    )
    return replace(evidence, frames=tuple(_frame_fact(f) for f in frames), regions=regions), measured


def _measure_steps(
    bench: _Bench, frames: Sequence[Frame], located: Sequence[Sequence[Found | NotFound]]
) -> Measurement:
    """Measure every step of a capture, then what takes its steps or its regions together."""
    one = bench.one
    steps = groups([frame.axes for frame in frames], one.axes)
    along = [plan for plan in one.methods if plan.together and (not one.axes or set(one.axes) <= _axes(plan))]
    gathers = [plan for plan in one.methods if plan.gathers]
    each = [plan for plan in one.methods if plan not in along and plan not in gathers]
    parts = []
    for step in steps:
        repeats = [_measure_frames(bench, each, (frames[n],), located[n]) for n in step.members]
        parts.append(replace(repeats[0], readings=tuple(_combine([m.readings for m in repeats]))))
    at_once = _measure_frames(bench, along, frames, located[0])

    @cache
    def sampler(number: int, channel: str) -> tuple[Sample, ...]:
        first = steps[number].members[0]
        return tuple(
            _sample(bench, (frames[first],), found, channel, (), together=False)
            for found in located[first]
            if isinstance(found, Found)
        )

    lost = [found for found in located[0] if isinstance(found, NotFound)]
    taken = [frames[step.members[0]].taken for step in steps]
    read = [(*part.readings, *at_once.readings) for part in parts]
    gathered = [
        in_channel(made, channel)
        for plan in gathers
        for channel in one.capture.camera.channels
        for made in gather(one, plan, channel, steps, taken, read, sampler, lost, bench.tracebacks)
    ]
    # Curves of the first frame stand for all repeats. Along an axis, other methods only feed those that gather.
    return joined([*([] if one.axes else parts), at_once, *gathered])


def _axes(plan: MethodPlan) -> frozenset[str]:
    return frozenset(getattr(plan.method, "AXES", ()))


def _measure_frames(
    bench: _Bench, plans: Sequence[MethodPlan], frames: Sequence[Frame], located: Sequence[Found | NotFound]
) -> Measurement:
    """Let methods measure one frame, or all frames together, in every region and channel."""
    return joined(
        [
            in_channel(_measure_region(bench, frames, found, channel, plan), channel)
            for found in (located if plans else ())
            for channel in bench.one.capture.camera.channels
            for plan in plans
        ]
    )


def _measure_region(
    bench: _Bench, frames: Sequence[Frame], found: Found | NotFound, channel: str, plan: MethodPlan
) -> Measurement:
    wanted = plan.wanted.get(found.region, ())
    first = frames[0]
    if isinstance(found, NotFound):
        if plan.method.NEEDS or found.box is None or not found.box.inside(first.shape[1], first.shape[0]):
            return refused(plan, found.region, wanted, Refusal(found.cause, found.because))
        found = Found(found.region, found.box)
    sample = _sample(bench, frames, found, channel, wanted, together=plan.together)
    place = f"{first.file}, {found.region}"
    return attempted(
        lambda: plan.method.measure(sample, plan.options_in(found.region)),
        plan,
        found.region,
        wanted,
        place,
        bench.tracebacks,
    )


def _sample(
    bench: _Bench, frames: Sequence[Frame], found: Found, channel: str, wanted: tuple[Wanted, ...], *, together: bool
) -> Sample:
    capture, companions = bench.one.capture, bench.companions
    crops = tuple(crop(frame, found.box, capture.camera, channel) for frame in frames)
    beside = capture.camera.channels if together else ()
    return Sample(
        found,
        crops[0],
        capture.camera,
        capture.optics,
        own_transfer(capture, found),
        wanted,
        companions.crops(capture.uses, found.box, channel),
        crops if together else (),
        {name: tuple(crop(frame, found.box, capture.camera, name) for frame in frames) for name in beside},
        companions.by_channel(capture.uses, found.box) if together else {},
        companions.lost(capture.uses),
    )


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
