"""Level and colour of frames one after another: drift, flicker with its frequency, steadiness, settling.

The level is the mean light of the region. Frequencies are those that the frames show: a lamp that flickers faster than
half the frame rate appears folded, and the report says so. Bands that flicker draws into the rows of a rolling shutter
are measured as `row banding`.

A lamp on the bench drifts and flickers too: a capture of a steady reference beside the unit settles whose it is.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Crop
from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.methods.frame_order import refuse_constant, times_of
from runner.measure.numerics.level_series import LEAST_FRAMES, Series, describe, settled
from runner.measure.options import lookups, number, reader
from runner.measure.reading import Component, Curve, Reading, Refusal

NAME = "level over time"
TITLE = "Level and colour over time"
GROUP = "stray light and time"
NEEDS = frozenset({"sequence"})
TOGETHER = True
AXES = frozenset({"time"})
REFERENCES = (
    "IEEE Std 1789-2015 (per cent flicker)",
    "D. C. Rife and R. R. Boorstyn, IEEE Trans. Inf. Theory 20 (1974) 591",
    "JCGM 100:2008 (uncertainty)",
)
ESTIMATOR = "least squares"

MOST_CLIPPED = 0.001
"""Share of pixels at an end of the range from which on a level says less than the light did."""
DARKEST = 0.002
"""Mean light below this share of the range is no light."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "level_drift": QuantityInfo("%", "Change of the level's straight line from first to last frame, over the mean."),
    "level_unsteadiness": QuantityInfo(
        "%", "Standard deviation of the level about that line, pixel noise taken off, over the mean.", least=0.0
    ),
    "level_flicker": QuantityInfo(
        "%",
        "Amplitude of the strongest wave of the level over the mean (per cent flicker); 0 where none stands out.",
        least=0.0,
    ),
    "flicker_frequency": QuantityInfo("Hz", "Frequency of that wave as the frames show it.", least=0.0),
    "settling_frames": QuantityInfo("1", "Frames before the level stays near its end.", least=0.0),
    "settling_time": QuantityInfo("s", "Time from the first frame until the level stays near its end.", least=0.0),
    "colour_drift": QuantityInfo("%", "Drift of this channel's level over that of green."),
    "colour_settling_frames": QuantityInfo("1", "Frames before that ratio stays near its end.", least=0.0),
}


@dataclass(frozen=True)
class Options:
    """What counts as settled."""

    settled_within: float | str = field(
        default=0.02, metadata={"sentence": "Share of the end within which a level has settled, e.g. 2 %."}
    )

    def __post_init__(self) -> None:
        """Turn the share into a number."""
        object.__setattr__(self, "settled_within", number("settled_within", self.settled_within, "%", 1e-4, 0.5))


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure the level of every frame, in the order of their times, else of their files.

    Raises:
        MeasurementRefused: Too few frames, clipped or dark ones.
    """
    if len(sample.frames) < LEAST_FRAMES:
        found = f"the capture holds {len(sample.frames)} frames, a level over time needs {LEAST_FRAMES}"
        raise MeasurementRefused("too few frames", found)
    refuse_constant(sample.frames)
    stamps = times_of(sample.frames)
    if stamps is not None and len(set(stamps)) < len(stamps):
        stamps = None
    order = np.argsort(stamps) if stamps is not None else np.arange(len(sample.frames))
    times = np.array(stamps)[order] if stamps is not None else np.arange(len(sample.frames), dtype=np.float64)
    levels, noise = _levels([sample.frames[n] for n in order])
    made = _level_readings(sample, times, levels, noise, options, timed=stamps is not None)
    made += _colour_readings(sample, times, [int(n) for n in order], options)
    curve = Curve(
        sample.found.region,
        "level over time",
        tuple(float(t - times[0]) for t in times),
        tuple(float(100 * v) for v in levels),
        tuple(float(100 * v) for v in noise),
        "s" if stamps is not None else "frame",
        "%",
        estimator="mean",
    )
    return Measurement(tuple(made), (curve,))


def _levels(frames: list[Crop]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return mean light and its standard uncertainty by pixel noise, frame by frame."""
    means, us = [], []
    for frame in frames:
        own = frame.signal if frame.sites is None else frame.signal[frame.sites]
        codes = frame.codes if frame.sites is None else frame.codes[frame.sites]
        share = float(np.mean(codes >= frame.camera.white_level))
        mean = float(own.mean())
        if share > MOST_CLIPPED:
            found = f"{frame.file}: {100 * share:.2f} % of the pixels lie at the white level, at most 0.1 % may"
            raise MeasurementRefused("clipped", found)
        if mean < DARKEST:
            found = f"{frame.file}: the level is {100 * mean:.2f} % of the range over black, 0.2 % is needed"
            raise MeasurementRefused("too dark", found)
        steps = np.diff(frame.signal if frame.sites is None else frame.signal[:, ::2], axis=1)
        means.append(mean)
        us.append(1.4826 * float(np.median(np.abs(steps - np.median(steps)))) / sqrt(2 * own.size))
    return np.array(means), np.maximum(np.array(us), 1e-9)


def _level_readings(
    sample: Sample,
    times: NDArray[np.float64],
    levels: NDArray[np.float64],
    noise: NDArray[np.float64],
    options: Options,
    *,
    timed: bool,
) -> list[Reading]:
    series = describe(times, levels, noise)
    made = [
        _valued(sample, "level_drift", 100 * series.drift, 100 * series.drift_u),
        _valued(sample, "level_unsteadiness", 100 * series.unsteady, 100 * series.unsteady_u),
        _valued(sample, "level_flicker", 100 * series.wave.amplitude, 100 * series.wave.amplitude_u),
        _frequency(sample, series, timed=timed),
    ]
    count = settled(levels, float(options.settled_within))
    if count is None:
        because = f"the level leaves {100 * float(options.settled_within):g} % of its end again in its last quarter"
        return [*made, *(_refused(sample, name, because) for name in ("settling_frames", "settling_time"))]
    made.append(replace(_valued(sample, "settling_frames", float(count), 0.0), count=True, components=()))
    if not timed:
        return [*made, _refused(sample, "settling_time", "the times of the frames are not known")]
    before = times[max(0, count - 1)] - times[0]
    after = times[min(count, len(times) - 1)] - times[0]
    half = (after - before) / 2
    reading = _valued(sample, "settling_time", float(before + half), float(half / sqrt(3)))
    return [*made, replace(reading, components=(Component("between two frames", float(half / sqrt(3)), "B"),))]


def _frequency(sample: Sample, series: Series, *, timed: bool) -> Reading:
    name, wave = "flicker_frequency", series.wave
    if not timed:
        return _refused(sample, name, "the times of the frames are not known")
    if wave.frequency is None:
        return _refused(sample, name, "no wave stands out of the noise")
    reading = _valued(sample, name, wave.frequency, wave.frequency_u)
    return replace(reading, flags=("as the frames show it: faster flicker appears folded at the frame rate",))


def _colour_readings(sample: Sample, times: NDArray[np.float64], order: list[int], options: Options) -> list[Reading]:
    asked = {one.quantity for one in sample.wanted}
    channel = sample.crop.channel
    if channel in {"mono", "green"} or "green" not in sample.channels:
        because = "it compares red and blue with green"
        return [_refused(sample, n, because) for n in ("colour_drift", "colour_settling_frames") if n in asked]
    own, own_u = _levels([sample.frames[n] for n in order])
    green, green_u = _levels([sample.channels["green"][n] for n in order])
    ratio = own / green
    noise = ratio * np.hypot(own_u / own, green_u / green)
    series = describe(times, ratio, noise)
    made = [_valued(sample, "colour_drift", 100 * series.drift, 100 * series.drift_u)]
    count = settled(ratio, float(options.settled_within))
    if count is None:
        because = f"the ratio leaves {100 * float(options.settled_within):g} % of its end again in its last quarter"
        return [*made, _refused(sample, "colour_settling_frames", because)]
    reading = _valued(sample, "colour_settling_frames", float(count), 0.0)
    return [*made, replace(reading, count=True, components=())]


def _valued(sample: Sample, name: str, value: float, u: float) -> Reading:
    parts = (Component("scatter over time", u, "A", dof=float(len(sample.frames) - 2)),)
    return replace(_blank(sample, name), value=value, u=u, components=parts)


def _refused(sample: Sample, name: str, because: str) -> Reading:
    return replace(_blank(sample, name), refusal=Refusal("not defined", because))


def _blank(sample: Sample, name: str) -> Reading:
    unit = _QUANTITIES[name].unit
    return Reading(sample.found.region, name, unit, None, None, estimator=ESTIMATOR, method=REFERENCES[0])
