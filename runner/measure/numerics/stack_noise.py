"""Noise of a stack of frames of one even field: temporal, fixed-pattern and total, in row, column and pixel parts.

A pixel of frame k of n, M rows × N columns, is

    v_k(y, x) = level_k + shading(y, x) + pattern(y, x) + noise_k(y, x)

where pattern and noise each are a pixel part, a part common to a row and a part common to a column. ISO 15739 takes the
temporal noise from the departures of the frames from their mean, σ_temp² = n/(n-1) σ_diff², and the fixed pattern from
the mean frame less the noise that is left in it, σ_fp² = σ_ave² - σ_diff²/(n-1). Here both are done on the three mean
squares of a two-way layout (rows, columns, rest), which turn into the parts as in EMVA 1288: the variance of row means
is that of the row part plus 1/N of the pixel part's.

Degrees of freedom: each frame's level is taken out (one for each frame), and so is a polynomial shading of stated
order; its terms in y alone come off the rows, those in x alone off the columns, the mixed ones off the rest.

What the uncertainties mean: temporal noise is a property of the process, so a sample of it varies as chi-square; the
fixed pattern is this unit's own, so its u holds the temporal noise left in the mean frame, and the part of the pattern
that went with the shading. Both are for normal noise that is independent from pixel to pixel but for the row and
column parts.

References:
    ISO 15739:2023, 6.2 (noise), 6.3 (signal-to-noise ratios).
    EMVA Standard 1288 Release 4.0 Linear (2021), split of the spatial variances.
    H. Scheffé, The Analysis of Variance (1959), 4.1 (two-way layout, mean squares and their expectations).
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import log10, sqrt

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.two_way_layout import (
    STRIP,
    Frames,
    Layout,
    Stratum,
    Sums,
    add_up,
    layout,
    level_of,
    pooled,
    short_codes,
    split_variances,
)

Real = NDArray[np.float64]
TOLD = 2.0
"""A variance below so many of its standard uncertainties at zero is not told from zero (2.3 % of empty ones pass)."""
BEYOND = 2
"""Orders above the removed shading in which shading that is left is looked for."""


@dataclass(frozen=True)
class Spread:
    """A standard deviation in the frames' unit: value and uncertainty, or a bound where it is not told from 0."""

    value: float | None
    """The standard deviation; None where only the bound is known."""
    u: float | None
    """Its standard uncertainty: a quarter of the 95 % interval, through the square root; None with the value."""
    bound: float | None = None
    """It lies below this at 97.7 %; None where there is a value."""


@dataclass(frozen=True)
class Parts:
    """One kind of noise, whole and in its parts; variances of the parts add up to the total's."""

    total: Spread
    """All of it."""
    pixel: Spread
    """Independent from pixel to pixel."""
    row: Spread
    """Common to the pixels of a row."""
    column: Spread
    """Common to the pixels of a column."""


@dataclass(frozen=True)
class Ratio:
    """A signal-to-noise ratio; without noise at all it has neither value nor bound."""

    value: float | None
    """Signal over standard deviation."""
    u: float | None
    """Its standard uncertainty."""
    bound: float | None = None
    """It lies above this at 97.7 %, where the noise is only bounded."""

    @property
    def decibels(self) -> tuple[float, float] | None:
        """Value and u in dB, 20 log10 of the ratio; None without a positive value."""
        if self.value is None or self.u is None or self.value <= 0:
            return None
        return 20 * log10(self.value), 20 / np.log(10) * self.u / self.value


@dataclass(frozen=True)
class StackNoise:
    """What a stack of frames of one even field tells of its noise; levels and noise in the frames' unit."""

    count: int
    """Frames, n."""
    level: float
    """Mean over frames and pixels, less black."""
    level_u: float
    """Its standard uncertainty from temporal noise, drift apart."""
    levels: tuple[float, ...]
    """Mean of each frame, less black."""
    drift: float
    """Standard deviation of the frames' levels, n-1 degrees of freedom; taken out of all noise here."""
    drift_noise: float
    """What the temporal noise of the pixels alone would give the levels to scatter."""
    temporal: Parts
    """Temporal noise of one frame."""
    fixed: Parts
    """Fixed pattern after removal of the shading."""
    total: Spread
    """Temporal and fixed together."""
    snr_temporal: Ratio
    """Level over temporal noise."""
    snr_fixed: Ratio
    """Level over fixed pattern."""
    snr_total: Ratio
    """Level over total noise."""
    shading_order: int
    """Order of the polynomial that was removed from the mean frame."""
    shading_rms: float
    """Rms of what it removed."""
    shading_left: float
    """Rms of shading in the next two orders beyond chance; it still counts in the fixed pattern."""
    row_means: Real
    """Means of the rows of each frame, frames × rows, drift taken out, less black."""
    column_means: Real
    """Means of the columns of each frame, frames × columns, drift taken out, less black; one kind after the other."""
    mean: NDArray[np.float32] | None = None
    """Mean frame, rows × columns, drift taken out, less black; None if not asked for."""


def stack_noise(
    frames: Frames,
    *,
    black: float = 0.0,
    shading_order: int = 2,
    gain_drift: bool = False,
    kinds: int = 1,
    keep_mean: bool = False,
) -> StackNoise:
    """Measure the noise of a stack; every pixel counts, defective ones too.

    Of several kinds of rows each is an array of its own, with its own level, shading and columns; mean squares are
    means over the kinds.

    Args:
        frames: n ≥ 2 frames × rows × columns of the same even field, light or DN.
        black: Level of no light in the same unit; only levels and ratios depend on it (and drift as a gain).
        shading_order: Order of the polynomial taken from the mean frame, 0 or more; ISO 15739 practice is 2.
        gain_drift: A frame's level departs as a factor on its light (a lamp), else as an offset (a dark level).
        kinds: Kinds of rows that take turns, 1 or more: 2 for the green of a mosaic.
        keep_mean: Return the mean frame too, which saves a walk over the pixels.

    Raises:
        ValueError: Fewer than two frames, frames of different size, too few rows or columns for the order, values
            that are not finite, or drift as a gain without light.
    """
    parts = [frames] if kinds == 1 else [[frame[kind::kinds] for frame in frames] for kind in range(kinds)]
    for part in parts:
        _check(part, shading_order)
    raw = np.array([[level_of(frame) for frame in part] for part in parts]) - black
    if not np.all(np.isfinite(raw)):
        raise ValueError("the frames hold values that are not finite numbers")
    levels = raw.mean(axis=0)
    level = float(levels.mean())
    if gain_drift and np.any(raw <= 0):
        raise ValueError(f"the level of a frame is {raw.min():g} over black; drift as a gain needs light in each")
    mean = np.empty(frames[0].shape, dtype=np.float32) if keep_mean else None
    sums = []
    for kind, (part, own) in enumerate(zip(parts, raw, strict=True)):
        factors = own.mean() / own if gain_drift else np.ones(len(part))
        keep = None if mean is None else mean[kind::kinds]
        sums.append(add_up(part, factors, factors * (own + black), shading_order + BEYOND, keep=keep))
        if keep is not None:
            keep += np.float32(own.mean())
    strata = pooled([layout(of, shading_order) for of in sums])
    temporal, fixed, total = _temporal(strata), _fixed(strata), _total(strata)
    m, n = frames[0].shape
    mean_variance = max(strata.rows.t + strata.columns.t - strata.rest.t, strata.rest.t) / (m * n)
    level_u = sqrt(mean_variance / len(frames))
    removed, left = _shading(sums, strata, shading_order)
    rows = np.empty((len(frames), m))
    for kind, (of, own) in enumerate(zip(sums, raw, strict=True)):
        rows[:, kind::kinds] = of.rows + own.mean()
    return StackNoise(
        count=len(frames),
        level=level,
        level_u=level_u,
        levels=tuple(float(x) for x in levels),
        drift=float(levels.std(ddof=1)),
        drift_noise=sqrt(mean_variance),
        temporal=temporal,
        fixed=fixed,
        total=total,
        snr_temporal=signal_to_noise(level, level_u, temporal.total),
        snr_fixed=signal_to_noise(level, level_u, fixed.total),
        snr_total=signal_to_noise(level, level_u, total),
        shading_order=shading_order,
        shading_rms=removed,
        shading_left=left,
        row_means=rows,
        column_means=np.concatenate([of.columns + own.mean() for of, own in zip(sums, raw, strict=True)], axis=1),
        mean=mean,
    )


def mean_frame(frames: Frames) -> NDArray[np.float32]:
    """Return the mean of a stack, rows × columns; float32 rounds by 6e-8 of the value, far below any camera's noise.

    Args:
        frames: Frames × rows × columns.
    """
    m, n = frames[0].shape
    mean = np.empty((m, n), dtype=np.float32)
    height = max(1, STRIP // n)
    exact = len(frames) <= 256 and all(short_codes(frame) for frame in frames)
    whole = np.empty((height, n), dtype=np.float32 if exact else np.float64)
    for y in range(0, m, height):
        piece = whole[: min(height, m - y)]
        np.copyto(piece, frames[0][y : y + height])
        for frame in frames[1:]:
            piece += frame[y : y + height]
        np.multiply(piece, 1 / len(frames), out=mean[y : y + height], casting="same_kind")
    return mean


def signal_to_noise(signal: float, signal_u: float, noise: Spread) -> Ratio:
    """Return signal over noise (ISO 15739:2023 6.3; on linear light the incremental gain of its formula is 1).

    Args:
        signal: Level over black.
        signal_u: Its standard uncertainty.
        noise: Standard deviation in the same unit.
    """
    if noise.value is None or noise.u is None:
        return Ratio(None, None, signal / noise.bound if noise.bound else None)
    if noise.value == 0:
        return Ratio(None, None)
    ratio = signal / noise.value
    return Ratio(ratio, sqrt((signal_u / noise.value) ** 2 + (ratio * noise.u / noise.value) ** 2))


def _check(frames: Frames, order: int) -> None:
    shapes = {tuple(frame.shape) for frame in frames}
    if len(frames) < 2:
        raise ValueError(f"{len(frames)} frame tells nothing of temporal noise; at least 2 are needed")
    if len(shapes) > 1 or len(next(iter(shapes))) != 2:
        raise ValueError(f"the frames have sizes {sorted(shapes)}; one size of rows × columns is needed")
    if order < 0:
        raise ValueError(f"the order of the shading is {order}; 0 or more is allowed")
    least = order + BEYOND + 2
    if min(next(iter(shapes))) < least:
        raise ValueError(f"{min(next(iter(shapes)))} rows or columns; shading of order {order} needs {least}")


def _variances(s: Layout, squares: tuple[float, float, float]) -> tuple[float, float, float, float]:
    """Return the variances total, pixel, row, column of mean squares of rows, columns and rest."""
    m, n = s.shape
    rows, columns = squares[0] / n, squares[1] / m
    total = rows + columns + squares[2] * (1 - 1 / m - 1 / n)
    return total, *split_variances(total, rows, columns, s.shape)


def _temporal(s: Layout) -> Parts:
    """Chi-square sampling: a mean square q of f degrees of freedom has the variance 2 q²/f."""
    total, pixel, row, column = _variances(s, (s.rows.t, s.columns.t, s.rest.t))
    relative = sqrt(sum(w**2 * 2 * x.t**2 / x.t_dof for x, w in s.weighted)) / total if total > 0 else 0.0

    def common(stratum: Stratum, averaged: int) -> Callable[[float], float]:
        rest = 2 * s.rest.t**2 / s.rest.t_dof
        return lambda v: sqrt(2 * (averaged * v + s.rest.t) ** 2 / stratum.t_dof + rest) / averaged

    return Parts(
        total=_spread(total, lambda v: v * relative),
        pixel=_spread(pixel, lambda v: v * sqrt(2 / s.rest.t_dof)),
        row=_spread(row, common(s.rows, s.shape[1])),
        column=_spread(column, common(s.columns, s.shape[0])),
    )


def _fixed(s: Layout) -> Parts:
    """This unit's own pattern: see the module's text."""
    total, pixel, row, column = _variances(s, (s.rows.s, s.columns.s, s.rest.s))

    def whole(v: float) -> float:
        size = v / total if total > 0 else 0.0  # the pattern found, made larger or smaller
        return sqrt(sum(w**2 * x.scatter(size * x.s) for x, w in s.weighted))

    def alone(v: float) -> float:
        # the pixel part's own row and column means went with the other strata
        return sqrt(s.rest.scatter(v, lost=s.rest.lost + sum(s.shape) - 2))

    def common(stratum: Stratum, averaged: int) -> Callable[[float], float]:
        # the means of the pixel part vary from row to row like noise
        noise = max(0.0, s.rest.s) + stratum.noise
        rest = 2 * s.rest.a**2 / s.rest.dof
        return lambda v: sqrt(stratum.scatter(averaged * v, noise) + rest) / averaged

    return Parts(
        total=_spread(total, whole),
        pixel=_spread(pixel, alone),
        row=_spread(row, common(s.rows, s.shape[1])),
        column=_spread(column, common(s.columns, s.shape[0])),
    )


def _total(s: Layout) -> Spread:
    """Temporal and fixed together, of the two independent mean squares a and t of each stratum."""
    rest = 1 - 1 / s.n
    variance = sum(w * (x.a + rest * x.t) for x, w in s.weighted)
    mean = sum(w**2 * (x.scatter(x.s) - 2 * x.noise**2 / x.t_dof) for x, w in s.weighted)
    frames = sum(w**2 * rest**2 * 2 * x.t**2 / x.t_dof for x, w in s.weighted)
    relative = sqrt(mean + frames) / variance if variance > 0 else 0.0
    return _spread(variance, lambda v: v * relative)


def _spread(variance: float, u: Callable[[float], float]) -> Spread:
    """Turn a variance into a standard deviation.

    Args:
        variance: Its estimate; may lie below zero.
        u: Standard uncertainty of the estimate where the true variance has a given value.
    """
    if variance < TOLD * u(0.0):
        upper = max(0.0, variance)
        for _ in range(50):  # the variance whose estimate lies so low in 2.3 % of cases
            upper = max(0.0, variance + TOLD * u(upper))
        return Spread(None, None, sqrt(upper))
    value = sqrt(max(0.0, variance))
    away = 2 * u(variance)
    return Spread(value, (sqrt(variance + away) - sqrt(max(0.0, variance - away))) / 4)


def _shading(sums: Sequence[Sums], s: Layout, order: int) -> tuple[float, float]:
    """Return the rms of the shading removed and of what the next orders hold beyond chance."""
    b, a = np.indices(sums[0].shading.shape)
    squares = np.asarray(sum(of.shading**2 for of in sums))
    chance = len(sums) * np.where(a == 0, s.rows.a, np.where(b == 0, s.columns.a, s.rest.a))
    beyond = (a + b > order) & (a + b <= order + BEYOND)
    left = max(0.0, float((squares - chance)[beyond].sum()))
    pixels = sum(of.shape[1] * of.shape[2] for of in sums)
    removed = float(squares[(a + b > 0) & (a + b <= order)].sum())
    return sqrt(removed / pixels), sqrt(left / pixels)
