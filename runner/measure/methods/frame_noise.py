"""Noise of a set of frames of one even field: temporal, fixed-pattern and total, row and column parts, level, ratios.

All frames of the capture are taken together: temporal noise is what changes from frame to frame, the fixed pattern what
stays. Every pixel counts, defective ones too. A shading of low order is taken off the mean frame first. What drifts
from frame to frame as a whole is taken out and told apart as `level_drift`. A part that is not told from zero has a
bound in place of a value.

Two frames are enough; ISO 15739 asks for eight or more. Of a mosaic's green, rows beside red and rows beside blue are
two arrays, for their columns are not the same; where their levels differ, that is no noise, but it is said.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from math import hypot, log10, sqrt

import numpy as np

from runner.errors import MeasurementRefused
from runner.measure import planes
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.evenness import refuse_uneven
from runner.measure.numerics.stack_noise import Spread, StackNoise, signal_to_noise, stack_noise
from runner.measure.options import lookups, reader
from runner.measure.reading import Component, Reading, Refusal

NAME = "frame noise"
TITLE = "Noise of a set of frames"
GROUP = "uniformity and noise"
TOGETHER = True
NEEDS = frozenset({"uniform"})
REFERENCES = (
    "ISO 15739:2023, 6.2 (noise), 6.3 (signal-to-noise ratios)",
    "EMVA Standard 1288 Release 4.0 Linear (2021), row, column and pixel parts; quantisation limit",
    "JCGM 100:2008 (uncertainty)",
)
ESTIMATOR = "mean squares"

LEAST_FRAMES = 2
"""One frame does not tell what changes from what stays."""
MOST_ORDER = 6
"""Highest order of the shading taken off."""
QUANTISED = sqrt(0.24)
"""Temporal noise below so many codes is mostly that of rounding, and only bounded (EMVA 1288: 0.24 DN²)."""
TOLD = 0.3
"""Shading left, over the fixed pattern, from which on it is said."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "temporal_noise": QuantityInfo("DN", "Standard deviation of a pixel from frame to frame, over the field."),
    "temporal_row_noise": QuantityInfo("DN", "The part of it that is common to the pixels of a row."),
    "temporal_column_noise": QuantityInfo("DN", "The part of it that is common to the pixels of a column."),
    "fixed_pattern_noise": QuantityInfo(
        "DN", "Standard deviation over the field of what stays, shading of low order taken off."
    ),
    "row_noise": QuantityInfo("DN", "The part of the fixed pattern that is common to the pixels of a row."),
    "column_noise": QuantityInfo("DN", "The part of the fixed pattern that is common to the pixels of a column."),
    "total_noise": QuantityInfo("DN", "Temporal noise and fixed pattern together, root of the sum of squares."),
    "mean_level": QuantityInfo("DN", "Mean of all pixels of all frames, less the black level."),
    "level_drift": QuantityInfo(
        "DN", "Standard deviation of the frames' mean levels; what the pixels' noise adds to it is taken off."
    ),
    "snr_temporal": QuantityInfo("dB", "Mean level over temporal noise, 20 log10 of the ratio."),
    "snr_fixed_pattern": QuantityInfo("dB", "Mean level over fixed-pattern noise, 20 log10 of the ratio."),
    "snr_total": QuantityInfo("dB", "Mean level over total noise, 20 log10 of the ratio."),
}


@dataclass(frozen=True)
class Options:
    """How noise is measured."""

    shading_order: int = field(
        default=4,
        metadata={
            "sentence": f"Order of the polynomial shading that is no fixed pattern, 0 to {MOST_ORDER}; ISO 15739 "
            "practice is 2, of which a lens's fall of light may leave more than the pattern."
        },
    )

    def __post_init__(self) -> None:
        """Keep the order inside its meaning."""
        order = self.shading_order
        if isinstance(order, bool) or not isinstance(order, int) or not 0 <= order <= MOST_ORDER:
            raise ValueError(f"shading_order is {order!r}; allowed are whole numbers from 0 to {MOST_ORDER}")


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure the noise of all frames of a capture in one region and channel.

    Raises:
        MeasurementRefused: Too few frames, clipped or dark ones, frames without noise, a region too small.
    """
    if len(sample.frames) < LEAST_FRAMES:
        raise MeasurementRefused(
            "too few frames",
            f"{len(sample.frames)} frame does not tell what changes from what stays",
            allowed=f"{LEAST_FRAMES} frames of the same scene at least",
            next_step="capture more, one after another",
        )
    lit = bool(sample.found.geometry.get("lit", 0.0))
    frames = planes.stack(sample.frames)
    most = {"most_high": planes.MOST_CLIPPED} if lit else {"most_low": planes.MOST_CLIPPED}
    planes.refuse_clipped(frames, **most)
    refuse_uneven(frames, lit=lit)
    rows, columns = frames.shape
    if min(rows // _kinds(frames), columns) < options.shading_order + 4:
        raise MeasurementRefused(
            "outside the estimator's limits",
            f"the region has {rows} rows and {columns} columns of its own",
            allowed=f"shading of order {options.shading_order} needs {options.shading_order + 4} of each"
            + (", twice as many rows of green" if _kinds(frames) > 1 else ""),
        )
    found = _noise(frames, options, lit=lit)
    return Measurement(tuple(_readings(sample, frames, found, lit=lit)))


def _kinds(frames: planes.Stack) -> int:
    """Return how many kinds of rows take turns: the two of green, whose columns are not the same."""
    return 2 if frames.grid.shift else 1


def _noise(frames: planes.Stack, options: Options, *, lit: bool) -> StackNoise:
    camera = frames.camera
    if lit:
        planes.refuse_dark(frames)
    found = stack_noise(
        frames.frames,
        black=camera.black_level,
        shading_order=options.shading_order,
        gain_drift=lit,
        kinds=_kinds(frames),
    )
    if found.temporal.total.value == 0:
        raise MeasurementRefused("no picture", f"all {found.count} frames are the same: there is no noise at all")
    return found


def _readings(sample: Sample, frames: planes.Stack, found: StackNoise, *, lit: bool) -> Iterator[Reading]:
    code = planes.step(frames)
    whole = found.temporal.total.value
    rounded = QUANTISED * code if whole is not None and whole < QUANTISED * code else 0.0
    temporal = {
        "temporal_noise": found.temporal.total,
        "temporal_row_noise": found.temporal.row,
        "temporal_column_noise": found.temporal.column,
    }
    if rounded:
        temporal = dict.fromkeys(temporal, Spread(None, None, rounded))
    fixed = {
        "fixed_pattern_noise": found.fixed.total,
        "row_noise": found.fixed.row,
        "column_noise": found.fixed.column,
        "total_noise": found.total,
    }
    rounding = (Component("rounding", code / sqrt(12), "B"),) if rounded else ()
    left = {name: (*rounding, *_shading_left(spread, found)) for name, spread in fixed.items()}
    flags = {"fixed_pattern_noise": _about_shading(found), "row_noise": _about_green(frames)}
    for name, spread in temporal.items():
        yield _spread(sample, name, spread, chi_square=True)
    for name, spread in fixed.items():
        yield replace(_spread(sample, name, spread, left[name]), flags=flags.get(name, ()))
    yield _reading(sample, "mean_level", found.level, found.level_u, None, rounding)
    yield _spread(sample, "level_drift", _drift(found))
    for name, of in (
        ("snr_temporal", temporal["temporal_noise"]),
        ("snr_fixed_pattern", _with(fixed["fixed_pattern_noise"], left["fixed_pattern_noise"])),
        ("snr_total", _with(fixed["total_noise"], left["total_noise"])),
    ):
        yield _ratio(sample, name, found, of, lit=lit)


def _drift(found: StackNoise) -> Spread:
    """Return the scatter of the levels of these frames less what the pixels' noise adds to it."""
    noise, freedom = found.drift_noise**2, found.count - 1
    variance = found.drift**2 - noise

    def u(v: float) -> float:
        return sqrt((4 * v * noise + 2 * noise**2) / freedom)

    if variance < 2 * u(0.0):
        upper = max(0.0, variance)
        for _ in range(50):  # the variance whose estimate lies so low in 2.3 % of cases
            upper = max(0.0, variance + 2 * u(upper))
        return Spread(None, None, sqrt(upper))
    return Spread(sqrt(variance), u(variance) / (2 * sqrt(variance)))


def _shading_left(spread: Spread, found: StackNoise) -> tuple[Component, ...]:
    """Return what a part may be too large by: all of the shading that is left may vary along one axis alone."""
    if spread.value is None or found.shading_left == 0:
        return ()
    without = sqrt(max(0.0, spread.value**2 - found.shading_left**2))
    return (Component("shading left", spread.value - without, "B"),)


def _with(spread: Spread, more: tuple[Component, ...]) -> Spread:
    """Return a spread with components added; a bound where they leave it no longer told from zero."""
    if spread.value is None or spread.u is None or not more:
        return spread
    u = hypot(spread.u, *(part.u for part in more))
    if spread.value >= 2 * u:
        return Spread(spread.value, u)
    higher = hypot(spread.u, *(part.u for part in more if part.name != "shading left"))  # shading only adds to it
    return Spread(None, None, spread.value + 2 * higher)


def _spread(
    sample: Sample, name: str, spread: Spread, more: tuple[Component, ...] = (), *, chi_square: bool = False
) -> Reading:
    known = _with(spread, more)
    if known.value is None or spread.u is None:
        return replace(_blank(sample, name), bound=("below", known.bound or 0.0))
    # a standard deviation of f degrees of freedom has the relative uncertainty 1/√(2f)
    dof = (known.value / spread.u) ** 2 / 2 if chi_square and spread.u > 0 else None
    return _reading(sample, name, known.value, spread.u, dof, more)


def _ratio(sample: Sample, name: str, found: StackNoise, noise: Spread, *, lit: bool) -> Reading:
    if not lit or found.level <= 0:
        because = f"the field has no light: its mean lies {found.level:.3g} DN over black"
        return replace(_blank(sample, name), refusal=Refusal("not defined", because))
    ratio = signal_to_noise(found.level, found.level_u, noise)
    if ratio.bound is not None:
        return replace(_blank(sample, name), bound=("above", 20 * log10(ratio.bound)))
    decibels = ratio.decibels
    if decibels is None:
        because = "the noise is zero to the last digit"
        return replace(_blank(sample, name), refusal=Refusal("not defined", because))
    return _reading(sample, name, *decibels)


def _about_shading(found: StackNoise) -> tuple[str, ...]:
    pattern = found.fixed.total.value or 0.0
    if found.shading_left <= TOLD * pattern:
        return ()
    return (f"shading beyond order {found.shading_order}, {found.shading_left:.3g} DN rms, counts in it",)


def _about_green(frames: planes.Stack) -> tuple[str, ...]:
    """Say how far the two kinds of green differ, if by more than three times what the scatter of rows explains."""
    if not frames.grid.shift:
        return ()
    some = frames.frames[0][: 2 * (frames.shape[0] // 2)]
    apart = planes.green_balance(some, frames.grid)
    steps = np.diff(some.mean(axis=1, dtype=np.float64).reshape(-1, 2), axis=1)
    u = float(steps.std()) / sqrt(len(steps))
    if abs(apart) < 3 * u:
        return ()
    return (f"green beside red and green beside blue differ by {abs(apart):.3g} DN, which is left out",)


def _blank(sample: Sample, name: str) -> Reading:
    unit = _QUANTITIES[name].unit
    return Reading(sample.found.region, name, unit, None, None, estimator=ESTIMATOR, method=REFERENCES[0])


def _reading(
    sample: Sample, name: str, value: float, noise: float, dof: float | None = None, more: tuple[Component, ...] = ()
) -> Reading:
    parts = (Component("noise", noise, "A", dof), *more)
    return replace(_blank(sample, name), value=value, u=hypot(*(part.u for part in parts)), components=parts)
