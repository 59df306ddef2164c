"""Local level and noise of a frame, and the pixels that stand out of them: few passes over many pixels.

The frame is cut into blocks of some 32 × 32 px. In each, 10 × 10 pixels tell the median; between the medians of blocks
the level is bilinear, and the departures of the sampled pixels from it give 1.4826 times their median size, the
standard deviation of normal noise, smoothed by medians over 9 blocks along y and along x. Maximum and minimum of cells
of 16 × 16 px then tell the few cells in which any pixel can stand out; only those are looked at pixel by pixel, and
only what stands out is compared with the median of its own 13 × 13 neighbours.

Whole steps of the codes make a median coarse: with a noise of less than a step it may even be zero. So the sampled
pixels are spread evenly over one step before their noise is taken, which adds a uniform distribution's variance,
step²/12, once more than the codes have it already: k times that noise is never less than k × 0.37 steps.

References:
    P. J. Rousseeuw and C. Croux, J. Am. Stat. Assoc. 88 (1993) 1273 (median absolute deviation, factor 1.4826).
    EMVA Standard 1288 Release 4.0 Linear (2021), defect pixels of the mean frame.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

Real = NDArray[np.float64]
Places = NDArray[np.intp]

BLOCK = 32
"""Width of a block, px."""
SAMPLED = 10
"""Pixels sampled along each side of a block: 100 tell the median within 0.13 of the noise."""
SMOOTHED = 9
"""Blocks along each side whose noise is joined: from 8100 pixels it is known within 2 %."""
CELL = 16
"""Width of a cell, px."""
AT_ONCE = 512
"""Cells looked at pixel by pixel at a time: a few MB, however many of them there are."""
SIDE = 13
"""Width of a pixel's neighbourhood: its median is uncertain by 0.1 of the noise, clusters up to 9 × 9 leave it."""
COMMON = 0.001
"""Share of the sampled pixels that must have a value for it to be a code and not a defect."""
TAIL = 3.5
"""The tail counts what lies so many times the noise away; of normal noise 4.65e-4 do."""
NORMAL_TAIL = 4.653e-4
"""That."""


@dataclass(frozen=True)
class Ground:
    """Local level and noise of a frame by blocks."""

    y: Real
    """Middles of the blocks' rows, px."""
    x: Real
    """Middles of the blocks' columns, px."""
    level: Real
    """Medians, rows × columns of blocks."""
    noise: Real
    """Standard deviations by 1.4826 times the median absolute deviation."""
    tail: float
    """Share of sampled pixels farther than 3.5 times the noise, over that of normal noise: 1 if it is normal."""
    step: float
    """Smallest step between values; next to nothing for values that are not whole codes."""

    def at(self, rows: Places, columns: Places) -> tuple[Real, Real]:
        """Return level and noise at single pixels, bilinear between the blocks' middles."""
        return points(self.level, self.y, self.x, rows, columns), self.noise_at(rows, columns)

    def noise_at(self, rows: Places, columns: Places) -> Real:
        """Return the noise at single pixels; beyond the outer middles it stays as it is."""
        y, x = np.clip(rows + 0.5, self.y[0], self.y[-1]) - 0.5, np.clip(columns + 0.5, self.x[0], self.x[-1]) - 0.5
        return points(self.noise, self.y, self.x, y, x)


def ground(frame: NDArray[Any], less: NDArray[Any] | None = None, *, block: int = BLOCK, step: float = 0.0) -> Ground:
    """Return the local level and noise of a frame.

    Args:
        frame: Rows × columns.
        less: Another frame, subtracted; None is nothing.
        block: Width of the blocks, px.
        step: Step of the codes in the frame's unit, where known; whole numbers have at least 1.
    """
    edges = [_edges(size, block) for size in frame.shape]
    rows, columns = (_sampled(e) for e in edges)
    narrow = frame.dtype == np.float32 or (frame.dtype.kind in "iu" and frame.dtype.itemsize <= 2)
    kind: Any = np.float32 if narrow and (less is None or less.dtype == frame.dtype) else np.float64  # both are exact
    sample = frame.take(rows.ravel(), axis=0).take(columns.ravel(), axis=1).astype(kind)
    if less is not None:
        sample -= less.take(rows.ravel(), axis=0).take(columns.ravel(), axis=1)
    blocks = _by_blocks(sample, rows.shape, columns.shape)
    level = _median(blocks)
    y, x = (e[:-1] / 2 + e[1:] / 2 for e in edges)
    under = surface(level, y, x, rows.ravel(), columns.ravel())
    away = _by_blocks(np.subtract(sample, under, out=under).astype(np.float32), rows.shape, columns.shape)
    known = max(step, 1.0) if frame.dtype.kind in "iu" else step
    step = smallest_step(blocks, float(np.median(np.abs(away[:: max(1, len(away) // 8)]))), known)
    away += (step * _spread_evenly(away.shape[2])).astype(np.float32)
    np.abs(away, out=away)
    noise = 1.4826 * _smoothed(_median(away))
    beyond = np.count_nonzero(away > TAIL * noise[:, :, None].astype(np.float32)) / away.size
    return Ground(y, x, level, noise, beyond / NORMAL_TAIL, step)


def surface(level: Real, y: Real, x: Real, rows: Places | Real, columns: Places | Real) -> Real:
    """Return the bilinear surface through blocks on a grid of pixels, rows × columns.

    Args:
        level: Values of the blocks, rows × columns.
        y: Middles of the blocks' rows, px.
        x: Middles of the blocks' columns, px.
        rows: Rows of pixels.
        columns: Columns of pixels.
    """
    ((_, out),) = surface_strips(level, y, x, rows, columns, max(1, rows.size))
    return out


def surface_strips(
    level: Real, y: Real, x: Real, rows: Places | Real, columns: Places | Real, height: int
) -> Iterator[tuple[int, Real]]:
    """Yield the surface in strips of so many rows, each with the number of its first; arguments as of `surface`.

    Columns come first, on the few rows of the map; then whole rows are copied, the cheapest way to spread them.
    """
    (i, f), (j, g) = _between(y, rows), _between(x, columns)
    wide = level.take(j, axis=1)
    wide += g * np.diff(level, axis=1, append=level[:, -1:]).take(j, axis=1)
    steps = np.diff(wide, axis=0, append=wide[-1:])
    for first in range(0, rows.size, height):
        part = slice(first, first + height)
        out: Real = steps.take(i[part], axis=0)
        out *= f[part, None]
        out += wide.take(i[part], axis=0)
        yield first, out


def points(level: Real, y: Real, x: Real, rows: Places | Real, columns: Places | Real) -> Real:
    """Return the bilinear surface through blocks at single pixels; arguments as of `surface`, rows with columns."""
    (i, f), (j, g) = _between(y, rows), _between(x, columns)
    i1, j1 = np.minimum(i + 1, y.size - 1), np.minimum(j + 1, x.size - 1)
    upper = (1 - g) * level[i, j] + g * level[i, j1]
    return np.asarray((1 - f) * upper + f * ((1 - g) * level[i1, j] + g * level[i1, j1]))


def outstanding(frame: Any, of: Ground, low: float | None, high: float | None) -> tuple[Places, Places]:
    """Return rows and columns of the pixels beyond so many times the noise from the level between blocks.

    Args:
        frame: Rows × columns: an array, or what gives rows as `[a:b]` and single pixels as `[rows, columns]`.
        of: Its ground.
        low: Times the noise below the level; None looks for no low ones.
        high: Times the noise above the level; None looks for no high ones.
    """
    (m, n), down, right = frame.shape, _edges(frame.shape[0], CELL), _edges(frame.shape[1], CELL)
    level, noise = (surface(v, of.y, of.x, down.clip(0, m - 1), right.clip(0, n - 1)) for v in (of.level, of.noise))
    least_noise = _least(noise)
    found = np.zeros((down.size - 1, right.size - 1), dtype=bool)
    tops, bottoms = [], []
    for strip in (frame[a:b] for a, b in pairwise(down)):  # both at once, while the strip is in the cache
        if high is not None:
            tops.append(strip.max(axis=0))
        if low is not None:
            bottoms.append(strip.min(axis=0))
    if high is not None:
        found |= np.maximum.reduceat(tops, right[:-1], axis=1) > _least(level) + high * least_noise
    if low is not None:
        found |= np.minimum.reduceat(bottoms, right[:-1], axis=1) < -_least(-level) - low * least_noise
    return _look_closer(frame, of, found, (down, right), (low, high))


def _look_closer(
    frame: Any,
    of: Ground,
    found: NDArray[np.bool_],
    edges: tuple[Places, Places],
    limits: tuple[float | None, float | None],
) -> tuple[Places, Places]:
    down, right = edges
    cells, (low, high) = np.argwhere(found), limits
    rows_found, columns_found = [np.empty(0, dtype=np.intp)], [np.empty(0, dtype=np.intp)]
    for start in range(0, len(cells), AT_ONCE):
        i, j = cells[start : start + AT_ONCE].T
        rows = down[i, None, None] + np.arange(np.diff(down).max())[None, :, None]
        columns = right[j, None, None] + np.arange(np.diff(right).max())[None, None, :]
        keep = (rows < down[i + 1, None, None]) & (columns < right[j + 1, None, None])  # the cell's own pixels
        rows, columns = rows.clip(0, down[-1] - 1), columns.clip(0, right[-1] - 1)
        level, noise = of.at(rows, columns)
        away = frame[rows, columns] - level
        beyond = np.zeros(away.shape, dtype=bool)
        if high is not None:
            beyond |= away > high * noise
        if low is not None:
            beyond |= away < -low * noise
        cell, y, x = np.nonzero(beyond & keep)
        rows_found.append(rows[cell, y, 0])
        columns_found.append(columns[cell, 0, x])
    return np.concatenate(rows_found), np.concatenate(columns_found)


def local_medians(frame: NDArray[Any], rows: Places, columns: Places) -> Real:
    """Return the median of each pixel's neighbourhood; at the border of the frame it is moved inside.

    Args:
        frame: Rows × columns.
        rows: Rows of the pixels.
        columns: Their columns.
    """
    m, n = frame.shape
    high, wide = min(SIDE, m), min(SIDE, n)
    out = np.empty(rows.size)
    for start in range(0, rows.size, 20_000):
        part = slice(start, start + 20_000)
        y = np.clip(rows[part] - high // 2, 0, m - high)[:, None, None] + np.arange(high)[None, :, None]
        x = np.clip(columns[part] - wide // 2, 0, n - wide)[:, None, None] + np.arange(wide)[None, None, :]
        out[part] = _median(frame[y, x].reshape(y.shape[0], -1))
    return out


def smallest_step(values: NDArray[Any], noise: float, known: float = 0.0) -> float:
    """Return the smallest distance between two values that is more than rounding.

    Values that few pixels have may be defects: they only count where there are no others and nothing is known.

    Args:
        values: Sampled values.
        noise: Median size of their noise; a hundred-thousandth of it, and of a value 1e-9, is rounding.
        known: The least that it can be; 0 if not known, and also what is returned if all values are the same.
    """
    few = values.ravel()[:: max(1, values.size // 20_000)].astype(np.float64)
    rounding = max(1e-5 * noise, 1e-9 * float(np.abs(few).max()))
    distinct, counts = np.unique(few, return_counts=True)
    gaps = np.diff(distinct[counts >= COMMON * few.size])
    if not np.any(gaps > rounding) and known == 0:
        gaps = np.diff(distinct if distinct.size > 1 else np.unique(values))
    gaps = gaps[gaps > rounding]
    return max(known, float(gaps.min())) if gaps.size else known


def _edges(size: int, width: int) -> Places:
    return np.round(np.linspace(0, size, max(1, round(size / width)) + 1)).astype(np.intp)


def _sampled(edges: Places) -> Places:
    """Return the sampled rows or columns, blocks × samples."""
    widths = np.diff(edges)
    count = min(SAMPLED, int(widths.min()))
    return edges[:-1, None] + ((np.arange(count) + 0.5) / count * widths[:, None]).astype(np.intp)


def _by_blocks(sample: NDArray[Any], rows: tuple[int, ...], columns: tuple[int, ...]) -> NDArray[Any]:
    (a, p), (b, q) = rows, columns
    return sample.reshape(a, p, b, q).transpose(0, 2, 1, 3).reshape(a, b, p * q)


def _median(values: NDArray[Any]) -> Real:
    """Return the median along the last axis; sorting short rows is several times as fast as the library's median."""
    size = values.shape[-1]
    ordered = np.sort(values, axis=-1)
    lower, upper = (ordered[..., n].astype(np.float64) for n in ((size - 1) // 2, size // 2))
    return np.asarray(lower / 2 + upper / 2)


def _smoothed(values: Real) -> Real:
    along_y = ndimage.median_filter(values, (SMOOTHED, 1), mode="reflect")
    return np.asarray(ndimage.median_filter(along_y, (1, SMOOTHED), mode="reflect"))


def _spread_evenly(count: int) -> Real:
    """Return numbers spread evenly over -1/2 … 1/2 in an order of no pattern."""
    return np.random.default_rng(count).permutation((np.arange(count) + 0.5) / count - 0.5)


def _between(middles: Real, places: Places | Real) -> tuple[Places, Real]:
    """Return the block before each pixel (centre at +0.5) and how far it is to the next; beyond the ends go on."""
    if middles.size == 1:
        return np.zeros(places.shape, dtype=np.intp), np.zeros(places.shape)
    at = places + 0.5
    before = np.clip(np.searchsorted(middles, at) - 1, 0, middles.size - 2)
    return before, (at - middles[before]) / (middles[before + 1] - middles[before])


def _least(corners: Real) -> Real:
    """Return the least of the four corners of each cell."""
    rows = np.minimum(corners[:-1], corners[1:])
    return np.minimum(rows[:, :-1], rows[:, 1:])
