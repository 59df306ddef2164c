"""Levels of a light series as points of photon transfer, dark level and noise taken off at the same exposure time.

Every level is measured as a set of frames of one even field: what a pixel does from frame to frame is temporal, what
stays is pattern; a lamp that drifts is taken out as a factor. What tells nothing of photon transfer is refused here.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import hypot, sqrt
from statistics import NormalDist
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure import planes
from runner.measure.light_levels import LevelFrames, out_of_order
from runner.measure.numerics.stack_noise import Parts, stack_noise

Real = NDArray[np.float64]

LEAST_FRAMES = 2
"""One frame does not tell what changes from what stays."""
LEAST_SIDE = 8
"""Rows and columns below which they are not told apart."""
MOST_DARK = 0.02
"""Darks of the shortest exposure may lie so far over the black level, as a share of the range."""
MOST_DRIFT = 0.05
"""Frames of one level that differ by more are not of one level."""
BLOCK, BLOCKS = 1000, 8
"""Pixels of a block of which the light is held against others, at least; blocks along a side, at most."""
SOME = 250_000
"""Pixels that tell a correlation within 0.2 %."""
UNSURE = 6.0
"""Standard uncertainties beyond which a difference is no chance, of some hundred comparisons."""


@dataclass(frozen=True)
class Dark:
    """Frames without light at one exposure time."""

    exposure: float | None
    """Exposure time, s; None where nothing says it."""
    mark: str
    """What names say of it."""
    level: float
    """Mean, DN."""
    level_u: float
    """Its standard uncertainty: noise, and drift from frame to frame."""
    variance: float
    """Temporal variance, DN², what rounding adds included."""
    variance_u: float
    """Its standard uncertainty."""
    fixed: Parts | None
    """What stays from frame to frame; None in regions of few rows or columns."""


@dataclass(frozen=True)
class Point:
    """One level of light, over dark."""

    label: str
    """What it is called."""
    light: float | None
    """Amount of light, in the series' unit."""
    signal: float
    """Mean over dark, DN."""
    signal_u: float
    """Its standard uncertainty from noise; dark and lamp apart."""
    drift: float
    """Standard deviation of its frames' levels beyond noise, as a share."""
    count: int
    """Frames."""
    variance: float
    """Temporal variance, DN²."""
    variance_u: float
    """Its standard uncertainty."""
    fixed: Parts | None
    """What stays from frame to frame; None in regions of few rows or columns."""
    dark: Dark
    """What was taken off."""
    frames: LevelFrames
    """Its frames."""

    @property
    def pattern(self) -> float:
        """Standard deviation of its pattern, DN; what is not told from zero counts as zero."""
        return 0.0 if self.fixed is None else self.fixed.total.value or 0.0


def darks(levels: Sequence[LevelFrames], order: int) -> tuple[Dark, ...]:
    """Measure frames without light, by exposure time, the shortest first.

    Args:
        levels: Frames by exposure time.
        order: Order of the polynomial shading that is no pattern.

    Raises:
        MeasurementRefused: Single frames, frames cut off at code 0, without any noise, or with light.
    """
    found = sorted((_dark(level, order) for level in levels), key=lambda one: (one.exposure or 0.0, one.level))
    camera = levels[0].crops[0].camera
    share = (found[0].level - camera.black_level) / (camera.white_level - camera.black_level)
    if share > MOST_DARK:
        raise MeasurementRefused(
            "too bright",
            f"the darks lie {100 * share:.1f} % of the range over the black level of {camera.black_level:g} DN",
            allowed=f"{100 * MOST_DARK:g} % at the shortest exposure",
            next_step="switch the lamp off and cover the sensor, or correct camera: black_level in the spec",
        )
    return tuple(found)


def _dark(level: LevelFrames, order: int) -> Dark:
    _enough(level, "dark frame")
    frames = planes.stack(level.crops)
    planes.refuse_clipped(frames, most_low=planes.MOST_CLIPPED)
    found = _measured(frames, 0.0, order, lamp=False)
    count = len(found.levels)
    if found.variance == 0:
        raise MeasurementRefused("no picture", f"all {count} dark frames are the same: there is no noise at all")
    u = max(found.level_u, float(found.levels.std(ddof=1)) / sqrt(count))
    return Dark(
        level.exposure, level.mark, float(found.levels.mean()), u, found.variance, found.variance_u, found.fixed
    )


def points(levels: Sequence[LevelFrames], without: Sequence[Dark], order: int) -> tuple[Point, ...]:
    """Measure every level over the dark of its exposure time, sorted by light.

    Args:
        levels: The lit frames.
        without: Frames without light; one set serves all exposure times, of several the times between are filled in.
        order: Order of the polynomial shading that is no pattern.

    Raises:
        MeasurementRefused: Single frames; frames of one level that differ; levels out of order; no light at all; an
            exposure time that the darks do not reach.
    """
    found = [_point(level, _dark_at(level, without), order) for level in levels]
    lights = [one.light for one in found]
    keys = [one.signal if light is None else light for one, light in zip(found, lights, strict=True)]
    in_order = [found[n] for n in np.argsort(keys, kind="stable")]
    _refuse_mixed(in_order)
    return tuple(in_order)


def _enough(level: LevelFrames, what: str) -> None:
    if len(level.crops) < LEAST_FRAMES:
        raise MeasurementRefused(
            "too few frames",
            f"{level.label} has {len(level.crops)} {what}",
            allowed=f"{LEAST_FRAMES} frames of the same light at least",
            next_step="capture pairs, one after another",
        )


def _dark_at(level: LevelFrames, without: Sequence[Dark]) -> Dark:
    """Return the dark of a level's exposure time: that of the same time, or between its neighbours."""
    if len(without) == 1:
        return without[0]
    alike = [one for one in without if one.mark and one.mark == level.mark]
    if len(alike) == 1:
        return alike[0]
    timed = sorted((d for d in without if d.exposure is not None), key=lambda d: d.exposure or 0.0)
    if level.exposure is None or len(timed) < len(without):
        unknown = f"{level.label} does not" if level.exposure is None else "not every dark frame does"
        raise MeasurementRefused(
            "missing companion",
            f"there are darks of {len(without)} exposure times, and {unknown} say its own",
            next_step="name exposure times with their unit, e.g. dark-2ms-1.tif for dark-{exposure}-{repeat}.tif",
        )
    times = [float(d.exposure or 0.0) for d in timed]
    if not times[0] * 0.999 <= level.exposure <= times[-1] * 1.001:
        raise MeasurementRefused(
            "missing companion",
            f"{level.label} was exposed {level.exposure:g} s, the darks {times[0]:g} to {times[-1]:g} s",
            next_step="capture darks over all exposure times",
        )
    near = int(np.argmin(np.abs(np.array(times) - level.exposure)))
    if abs(times[near] - level.exposure) <= 1e-3 * level.exposure:
        return timed[near]
    at = float(level.exposure)
    mean, mean_u, variance, variance_u = (
        float(np.interp(at, times, [float(getattr(d, name)) for d in timed]))
        for name in ("level", "level_u", "variance", "variance_u")
    )
    return Dark(at, level.mark, mean, mean_u, variance, variance_u, timed[near].fixed)


def _point(level: LevelFrames, dark: Dark, order: int) -> Point:
    _enough(level, "frame")
    found = _measured(planes.stack(level.crops), dark.level, order, lamp=True)
    signal, count = float(found.levels.mean()) - dark.level, len(found.levels)
    apart = float(np.ptp(found.levels))
    if apart > MOST_DRIFT * max(signal, 0.0) + 3 * UNSURE * max(sqrt(count) * found.level_u, dark.level_u):
        raise MeasurementRefused(
            "another scene",
            f"the frames of {level.label} differ by {100 * apart / max(signal, dark.level_u):.0f} % in their level",
            allowed=f"{100 * MOST_DRIFT:g} %",
            next_step="let the lamp settle, and capture the frames of a level one after another",
        )
    drift = sqrt(max(0.0, float(found.levels.var(ddof=1)) - count * found.level_u**2))
    return Point(
        level.label,
        level.light,
        signal,
        found.level_u,
        drift / signal if signal > 0 else 0.0,
        count,
        found.variance,
        found.variance_u,
        found.fixed,
        dark,
        level,
    )


@dataclass(frozen=True)
class _Set:
    """What frames of one level tell."""

    levels: Real
    """Mean of each, DN."""
    level_u: float
    """Standard uncertainty of their mean from noise."""
    variance: float
    """Temporal variance."""
    variance_u: float
    """Its standard uncertainty."""
    fixed: Parts | None = None
    """Patterns; None where rows or columns are too few to be told apart."""


def _measured(frames: planes.Stack, dark: float, order: int, *, lamp: bool) -> _Set:
    kinds = 2 if frames.grid.shift else 1
    rows, columns = frames.shape
    if min(rows // kinds, columns) < max(LEAST_SIDE, order + 4):
        return _few(frames.frames, dark, lamp=lamp)
    gain = lamp and all(_is_lit(one[kind::kinds], dark) for one in frames.frames for kind in range(kinds))
    found = stack_noise(frames.frames, black=dark, shading_order=order, gain_drift=gain, kinds=kinds)
    total = found.temporal.total
    value, u = total.value or 0.0, total.u or 0.0
    return _Set(np.array(found.levels) + dark, found.level_u, value**2, 2 * value * u, found.fixed)


def _is_lit(values: Any, dark: float) -> bool:
    """Tell whether some rows plainly lie over dark, so that a lamp's drift is a factor on their light."""
    some = np.asarray(values[:: max(1, values.size // SOME)])
    over = float(some.mean(dtype=np.float64)) - dark
    return over > UNSURE * float(some.std(dtype=np.float64)) / sqrt(some.size)


def _few(frames: Sequence[Any], dark: float, *, lamp: bool) -> _Set:
    """Measure a region of few rows or columns: a plain variance must do."""
    values = np.stack([np.asarray(one[:], dtype=np.float64) for one in frames]) - dark
    levels = values.mean(axis=(1, 2))
    if lamp and np.all(levels > 0):
        values *= (levels.mean() / levels)[:, None, None]
    else:
        values -= levels[:, None, None]
    away = values - values.mean(axis=0)
    freedom = (len(frames) - 1) * (away[0].size - 1)
    variance = float(np.sum(away**2)) / freedom
    return _Set(levels + dark, sqrt(variance / values.size), variance, variance * sqrt(2 / freedom))


def _refuse_mixed(found: Sequence[Point]) -> None:
    """Refuse levels of which one is not of this series: without light, or out of order."""
    camera = found[0].frames.crops[0].camera
    brightest = max(one.signal for one in found)
    share = brightest / (camera.white_level - camera.black_level)
    if share < planes.DARKEST:
        raise MeasurementRefused(
            "too dark",
            f"the brightest level lies {100 * share:.2f} % of the range over the darks",
            allowed=f"{100 * planes.DARKEST:g} % is needed",
            next_step="switch the lamp on",
        )
    highest = max(range(len(found)), key=lambda n: found[n].variance)
    rising = [one for one in found if one.signal <= found[highest].signal]
    known = [(one.light, one.signal) for one in rising if one.light]
    if len(known) > 2:  # a lamp that was off for one level
        typical = float(np.median([signal / light for light, signal in known]))
        for one in found:
            if one.light and one.signal < min(0.2 * typical * one.light, 0.2 * brightest):
                raise MeasurementRefused(
                    "too dark",
                    f"{one.label} lies {one.signal:.3g} DN over dark, its light should give "
                    f"{typical * one.light:.3g} DN",
                    next_step="capture it again, with the lamp on",
                )
    lower = [one for one in found if one.signal < 0.95 * found[highest].signal]
    tolerance = UNSURE * max((hypot(one.signal_u, one.drift * one.signal) for one in lower), default=0.0)
    swapped = out_of_order([one.frames for one in lower], [one.signal for one in lower], tolerance)
    if swapped is not None:
        raise MeasurementRefused(
            "another scene",
            f"{swapped[1]} is darker than {swapped[0]}, against their order",
            next_step="find out which folder or name is wrong; plain_numbers: order, if numbers tell no amounts",
        )


@dataclass(frozen=True)
class Unevenness:
    """How far light varies over a field."""

    span: float
    """Greatest less least block mean, over the mean."""
    noise: float
    """Standard deviation of a block's mean from temporal noise, over the mean."""
    blocks: int
    """Number of blocks."""

    @property
    def by_noise(self) -> float:
        """What noise alone gives on average: the span of so many normal values (G. Blom, 1958)."""
        return 2 * self.noise * NormalDist().inv_cdf((self.blocks - 0.375) / (self.blocks + 0.25))


def unevenness(point: Point) -> Unevenness:
    """Return how far the light of a level varies over the field.

    Blocks hold a thousand pixels at least, so that noise counts little; there are 8 × 8 at most.
    """
    values = planes.stack(point.frames.crops[:1]).frames[0]
    rows, columns = values.shape
    across = int(np.clip(np.sqrt(values.size / BLOCK), 1, BLOCKS))
    y, x = (np.linspace(0, size, across + 1).astype(int) for size in (rows, columns))
    means = []
    for top, bottom in pairwise(y):
        strip = values[top:bottom]
        means.append([float(strip[:, left:right].mean(dtype=np.float64)) for left, right in pairwise(x)])
    noise = sqrt(point.variance * across**2 / values.size)
    return Unevenness(float(np.ptp(means)) / point.signal, noise / point.signal, across**2)


def correlation(point: Point) -> tuple[float, float]:
    """Return how far the noise of neighbours in a row and in a column is alike, of some rows; raw noise is not."""
    one, two = (np.asarray(v[_middle(v)], dtype=np.float64) for v in planes.stack(point.frames.crops[:2]).frames)
    dark = point.dark.level
    away = (one - dark) - (two - dark) * (one.mean() - dark) / (two.mean() - dark)
    away -= away.mean()
    power = float(np.mean(away**2))
    if power == 0 or min(away.shape) < 2:
        return 0.0, 0.0
    return float(np.mean(away[:, 1:] * away[:, :-1])) / power, float(np.mean(away[1:] * away[:-1])) / power


def _middle(values: Any) -> slice:
    height = max(2, min(values.shape[0], SOME // values.shape[1]))
    first = (values.shape[0] - height) // 2
    return slice(first, first + height)
