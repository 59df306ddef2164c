"""Frames that were lost, repeated, put out of order or torn, and how evenly they came.

A frame's counter and time stamp come from its sidecar (`counter`, `time`); a time may also stand in the file's name
(`seq-{time}.tif`). What they do not tell is not measured. Repeated and torn frames show in the pixels themselves.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import sqrt

from runner.capture.frame import Crop
from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.numerics.frame_order import Order, numbered, put_in_order, row_digests, timing
from runner.measure.options import lookups, number, reader
from runner.measure.reading import Component, Reading, Refusal, Spot
from runner.measure.steps import position
from runner.spec.units import FrequencyContext, convert

NAME = "frame order"
TITLE = "Order and timing of frames"
GROUP = "stray light and time"
NEEDS = frozenset({"sequence"})
TOGETHER = True
AXES = frozenset({"time"})
REFERENCES = ("Counts and a straight line by least squares; common practice, no source", "JCGM 100:2008 (uncertainty)")
ESTIMATOR = "counters and times"

_COUNTS: Mapping[str, str] = {
    "lost_frames": "Frames missing between the first and the last one, by counters or times.",
    "repeated_frames": "Frames delivered again: the same counter, or the same pixels.",
    "reordered_frames": "Frames that come after a later one.",
    "torn_frames": "Frames of which some rows belong to the frame before.",
}
_QUANTITIES: Mapping[str, QuantityInfo] = {
    **{name: QuantityInfo("1", sentence, least=0.0) for name, sentence in _COUNTS.items()},
    "frame_rate": QuantityInfo("Hz", "Frames a second, from the times of all frames.", least=0.0),
    "timing_jitter": QuantityInfo("ms", "Standard deviation of the frames' times from an even rate.", least=0.0),
}


@dataclass(frozen=True)
class Options:
    """How times are read."""

    time_resolution: float | str = field(
        default=0.0, metadata={"sentence": "Step in which time stamps are given, e.g. 1 ms; its rounding is no jitter."}
    )

    def __post_init__(self) -> None:
        """Turn the step into seconds."""
        asked = self.time_resolution
        if isinstance(asked, str) and asked.strip().endswith("ms"):
            step = number("time_resolution", asked, "ms", 0.0, 1e4) / 1e3
        else:
            step = number("time_resolution", asked, "s", 0.0, 10.0)
        object.__setattr__(self, "time_resolution", step)


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def times_of(frames: Sequence[Crop]) -> list[float] | None:
    """Return the time of every frame in s, or None where one has none: its sidecar's, else that of its name."""
    found = []
    for frame in frames:
        said = frame.taken.get("time") or position(frame, "time")
        try:
            found.append(convert(said.value, said.unit, "s", FrequencyContext()) if said else None)
        except UsageError:
            found.append(None)
    return None if None in found else [float(time or 0.0) for time in found]


def refuse_constant(frames: Sequence[Crop]) -> None:
    """Refuse frames of a dead unit: one single code tells neither order nor level.

    Raises:
        MeasurementRefused: A frame holds one value only.
    """
    for frame in frames:
        if frame.codes.min() >= frame.camera.white_level:
            raise MeasurementRefused("clipped", f"{frame.file}: all pixels lie at the white level")
        if frame.codes.min() == frame.codes.max():
            raise MeasurementRefused("no picture", f"{frame.file}: every pixel has the code {frame.codes.flat[0]:g}")


def measure(sample: Sample, options: Options) -> Measurement:
    """Look through all frames of a capture in the order of their files.

    Raises:
        MeasurementRefused: A frame holds no picture; what else cannot be told is refused reading by reading.
    """
    frames = sample.frames
    refuse_constant(frames)
    counters = [_counter(frame) for frame in frames]
    times = times_of(frames)
    order = put_in_order(counters, times or [None] * len(frames), [row_digests(frame.codes) for frame in frames])
    readings = [*_counts(sample, order), *_timing(sample, counters, times, float(options.time_resolution))]
    return Measurement(tuple(readings), spots=tuple(_spots(sample, order)))


def _counter(frame: Crop) -> int | None:
    said = frame.taken.get("counter")
    return int(said.value) if said is not None and said.unit == "1" else None


def _counts(sample: Sample, order: Order) -> list[Reading]:
    lost = None if order.lost is None else sum(number for _, number in order.lost)
    reordered = None if order.reordered is None else len(order.reordered)
    found = {
        "lost_frames": lost,
        "repeated_frames": len(order.repeated),
        "reordered_frames": reordered,
        "torn_frames": len(order.torn),
    }
    made = []
    for name, count in found.items():
        blank = Reading(sample.found.region, name, "1", None, None, estimator=ESTIMATOR, method=REFERENCES[0])
        if len(sample.frames) < 2:
            because = f"the capture holds {len(sample.frames)} frame, an order needs two"
            made.append(replace(blank, refusal=Refusal("too few frames", because)))
        elif count is None:
            because = "neither counters nor times of all frames are known; sidecars must say one of them"
            made.append(replace(blank, refusal=Refusal("not defined", because)))
        else:
            trials = len(sample.frames) + (lost or 0)
            made.append(replace(blank, value=float(count), u=0.0, count=True, trials=trials))
    return made


def _timing(
    sample: Sample, counters: Sequence[int | None], times: Sequence[float] | None, resolution: float
) -> list[Reading]:
    blanks = [
        Reading(sample.found.region, name, unit, None, None, estimator="straight line", method=REFERENCES[0])
        for name, unit in (("frame_rate", "Hz"), ("timing_jitter", "ms"))
    ]
    if times is None:
        because = "the times of the frames are not known; sidecars or file names must say them"
        return [replace(blank, refusal=Refusal("not defined", because)) for blank in blanks]
    numbers = numbered(times) if None in counters else [int(counter or 0) for counter in counters]
    found = timing(numbers, times, resolution)
    if found is None or found.period <= 0:
        because = f"{len(set(numbers))} different frames give no even rate"
        return [replace(blank, refusal=Refusal("too few frames", because)) for blank in blanks]
    rate = 1 / found.period
    noise = Component("timing", rate * found.period_u / found.period, "A", dof=float(len(times) - 2))
    spread = [Component("timing", 1e3 * found.jitter_u, "A")]
    spread.append(Component("time resolution", 1e3 * resolution / sqrt(12 * len(times)), "B"))
    u = sqrt(sum(part.u**2 for part in spread))
    return [
        replace(blanks[0], value=rate, u=noise.u, components=(noise,)),
        replace(blanks[1], value=1e3 * found.jitter, u=u, components=tuple(spread)),
    ]


def _spots(sample: Sample, order: Order) -> list[Spot]:
    """List the frames concerned by the middle of their region, with the words that name the file."""
    box = sample.found.box
    x, y = (box.x0 + box.x1) / 2, (box.y0 + box.y1) / 2
    listed = [("lost frames", place, f"{number} lost before it") for place, number in order.lost or ()]
    listed += [("repeated frame", place, "delivered before") for place in order.repeated]
    listed += [("frame out of order", place, "a later one came before it") for place in order.reordered or ()]
    listed += [("torn frame", place, "rows of the frame before") for place in order.torn]
    return [Spot(sample.found.region, kind, x, y, f"{sample.frames[n].file}: {words}") for kind, n, words in listed]
