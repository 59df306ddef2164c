"""Defects larger than a pixel: columns and rows that depart as a whole, and blemishes, smooth spots on a flat.

Columns: the means of the columns against the median of pairs of neighbours, in units of 1.4826 times the median size of
these departures. A single hot pixel would lift its column's mean: what defective pixels have beyond k
times the noise is taken off the means first, which leaves a column that is defective as a whole with k times the noise
of a pixel, many times that of a mean.

Blemishes: the flat is reduced to means of cells of a quarter of the least size looked for, or of more cells where the
noise asks for it, and divided by its local background: a polynomial of order 4 through a coarse map, and on top the
median of that map over a window of a given share of the frame. Cells beyond the contrast (and beyond k times the noise
of a cell) that touch make a spot; its size is the side of the square of the same area, but no more than the short side
of its bounding box, so that a line is no blemish. Spots wider than some 0.7 of the window are taken for background.

References:
    EMVA Standard 1288 Release 4.0 Linear (2021), column and row means, defects of the mean frame.
    Thresholds (5 times the noise of column means; contrast and size of blemishes): common practice, no source.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import ceil, hypot, sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from runner.measure.numerics.defect_ground import Ground, ground, local_medians, surface_strips
from runner.measure.numerics.defects import Defect, K, touching
from runner.measure.numerics.two_way_layout import STRIP

Real = NDArray[np.float64]

NEIGHBOURS = 10
"""Pairs of columns left and right that a column is compared with; up to four bad ones nearby leave their median."""
WINDOW = 0.15
"""Width of the background's window over the frame's shorter side: spots up to a tenth of that side are seen whole."""
COARSE = 64
"""Blocks of the coarse map along the shorter side."""
ORDER = 4
"""Order of the background's polynomial; higher ones swing in the corners."""
TRUST = 0.5
"""Where the background departs from the polynomial, it is trusted to this share of that: near borders the median over
the window is one-sided."""
SPARSE = 0.01
"""Share of cells below which they are joined one by one, else in a walk over all cells; the result is the same."""
EXACT = 1e-6
"""Significance is at most one over this, where there is no noise at all."""


@dataclass(frozen=True)
class LineDefect:
    """A defective column or row."""

    direction: str
    """`column` or `row`."""
    at: int
    """Which one, from 0."""
    contrast: float
    """Its mean over that of its neighbours, in the frame's unit."""
    significance: float
    """That over the noise of such means."""


@dataclass(frozen=True)
class Blemish:
    """A smooth spot on a flat."""

    x: float
    """Its middle, px from the frame's left border."""
    y: float
    """Its middle, px from the frame's upper border."""
    contrast: float
    """Mean departure of its middle (half its width) from the background, as a share of that; negative is darker."""
    contrast_u: float
    """Its standard uncertainty from noise and from what the background leaves elsewhere."""
    size: float
    """Side of the square of the same area, at most the short side of its bounding box, px."""
    size_u: float
    """Its standard uncertainty from the cells' width."""
    significance: float
    """Contrast over its u."""


@dataclass(frozen=True)
class Blemishes:
    """What was found, and what could have been."""

    spots: tuple[Blemish, ...]
    """The strongest first."""
    least: float
    """Contrast from which on spots are told: what was asked, or k times the noise of a cell if that is more."""
    cell: int
    """Width of a cell, px."""


def line_defects(frame: NDArray[Any], pixels: Sequence[Defect] = (), k: float = K) -> tuple[LineDefect, ...]:
    """Find columns and rows that depart as a whole from their neighbours.

    Args:
        frame: Mean frame, rows × columns.
        pixels: Its hot, or dead, dim and bright pixels.
        k: Times the noise of a column's (row's) mean.

    Raises:
        ValueError: Values that are not finite.
    """
    column_means, row_means = _means(frame)
    if not np.all(np.isfinite(row_means)):
        raise ValueError("the frame holds values that are not finite numbers")
    rows, columns, beyond = _beyond(frame, pixels, k)
    found: list[LineDefect] = []
    for axis, direction, at, means in ((0, "column", columns, column_means), (1, "row", rows, row_means)):
        away = _from_neighbours(means)
        kept = _from_neighbours(means - np.bincount(at, beyond, means.size) / frame.shape[axis])
        noise = 1.4826 * float(np.median(np.abs(kept)))
        least = max(noise, 1e-9 * float(np.abs(means).max()), float(np.finfo(float).tiny))
        places = np.flatnonzero(np.abs(kept) > k * least)
        found += [LineDefect(direction, int(i), float(away[i]), float(kept[i] / least)) for i in places]
    return tuple(found)


def off_lines(pixels: Sequence[Defect], lines: Sequence[LineDefect]) -> tuple[Defect, ...]:
    """Return the pixels that lie on none of the defective columns and rows, so that none is counted twice."""
    columns = {line.at for line in lines if line.direction == "column"}
    rows = {line.at for line in lines if line.direction == "row"}
    return tuple(p for p in pixels if p.x not in columns and p.y not in rows)


def blemishes(flat: NDArray[Any], contrast: float, size: float, *, k: float = K, window: float = WINDOW) -> Blemishes:
    """Find smooth spots of a flat that are of more than a given contrast over more than a given size.

    Args:
        flat: Mean of flat frames, rows × columns, light over black.
        contrast: Share of the background's light, above 0.
        size: Width of the spot over which it must depart by the contrast, px, 2 or more.
        k: Times the noise of a cell that a spot must pass too.
        window: Width of the background's window over the frame's shorter side.

    Raises:
        ValueError: Contrast or size out of range, a size of no less than the window, no light.
    """
    short = min(flat.shape)
    if contrast <= 0 or not 2 <= size < window * short:
        raise ValueError(
            f"contrast {contrast:g} and size {size:g} px; above 0, and 2 px to the window of the background, "
            f"{window * short:.0f} px of this frame, are allowed"
        )
    cell = max(2, int(size / 4))
    block, wide = max(1, round(short / COARSE / cell)), window * short / cell
    away, doubt, noise = _against_background(_cell_means(flat, cell), block, wide)
    joined = min(ceil(k * noise / contrast), int(size / cell))
    away = _joined(away, joined)
    of = ground(away)
    doubt = replace(doubt, noise=np.hypot(doubt.noise, 1.4826 * np.median(np.abs(of.level - np.median(of.level)))))
    spots = [one for sign in (1, -1) for one in _spots(away, sign, contrast, k, of, doubt) if cell * one.width >= size]
    found = [_blemish(one, wide, cell, max(1, joined)) for one in spots]
    found.sort(key=lambda one: -abs(one.contrast))
    return Blemishes(tuple(found), max(contrast, k * float(np.median(of.noise))), cell)


def _beyond(frame: NDArray[Any], pixels: Sequence[Defect], k: float) -> tuple[NDArray[np.intp], NDArray[np.intp], Real]:
    """Return rows and columns of the pixels and what each has beyond k times the noise."""
    rows = np.array([p.y for p in pixels], dtype=np.intp)
    columns = np.array([p.x for p in pixels], dtype=np.intp)
    share = 1 - k / np.array([max(k, abs(p.significance)) for p in pixels], dtype=np.float64)
    return rows, columns, np.asarray(share * (frame[rows, columns] - local_medians(frame, rows, columns)))


def _means(frame: NDArray[Any]) -> tuple[Real, Real]:
    """Return the means of columns and of rows; a few rows at a time keep float32 exact enough."""
    columns, rows = np.zeros(frame.shape[1]), np.empty(frame.shape[0])
    for y in range(0, frame.shape[0], 8):
        strip = frame[y : y + 8]
        columns += strip.sum(axis=0)
        rows[y : y + 8] = strip.mean(axis=1)
    return columns / frame.shape[0], rows


def _from_neighbours(means: Real) -> Real:
    """Return each mean less what its neighbours say: the median over pairs left and right, whose slope cancels.

    Near the ends there are fewer pairs; the first and last three are taken from pairs on one side, continued straight.
    What many neighbours in a row have in common is a bend of the light: their median is taken off.
    """
    count, reach = means.size, min(NEIGHBOURS, (means.size - 1) // 2)
    out = np.zeros(count)
    if count < 8:
        return out
    inner = np.arange(reach, count - reach)
    steps = np.arange(1, reach + 1)[:, None]
    out[inner] = means[inner] - np.median((means[inner - steps] + means[inner + steps]) / 2, axis=0)
    for i in range(reach):
        for at, way in ((i, 1), (count - 1 - i, -1)):
            near = np.arange(1, (i if i >= 3 else reach) + 1)
            pairs = means[at - near] + means[at + near] if i >= 3 else 4 * means[at + way * near]
            if i < 3:
                pairs = pairs - 2 * means[at + 2 * way * near]
            out[at] = means[at] - float(np.median(pairs)) / 2
    return np.asarray(out - ndimage.median_filter(out, 2 * reach + 1, mode="mirror"))


def _cell_means(frame: NDArray[Any], width: int) -> NDArray[np.float32]:
    """Return the means of square cells; a rest narrower than a cell at the right and lower border is left out."""
    down, across = frame.shape[0] // width, frame.shape[1] // width
    out = np.empty((down, across), dtype=np.float32)
    high = max(1, STRIP // frame.shape[1] // width)
    for y in range(0, down, high):
        strip = frame[y * width : min(y + high, down) * width, : across * width]
        rows = strip.reshape(-1, width, across * width).sum(axis=1)
        sums = rows[:, ::width].copy()
        for i in range(1, width):
            sums += rows[:, i::width]
        np.multiply(sums, 1 / width**2, out=out[y : y + high], casting="same_kind")
    return out


def _against_background(
    cells: NDArray[np.float32], block: int, window: float
) -> tuple[NDArray[np.float32], Ground, float]:
    """Return cells over their background, less 1, as the noise of a ground how far that may be off, and their noise."""
    coarse = ground(cells, block=block)
    y, x = (2 * v / n - 1 for v, n in zip((coarse.y, coarse.x), cells.shape, strict=True))
    powers = [(a, b) for a in range(ORDER + 1) for b in range(ORDER + 1 - a)]
    terms = np.column_stack([np.outer(y**b, x**a).ravel() for a, b in powers])
    smooth = (terms @ np.linalg.lstsq(terms, coarse.level.ravel(), rcond=None)[0]).reshape(coarse.level.shape)
    width = max(3, 2 * int(window / block / 2) + 1)
    # past the border the map goes on as its mirror image turned over, so that a slope goes on too
    aside = [min(width // 2, n - 1) for n in smooth.shape]
    rest = np.pad(coarse.level - smooth, [(a, a) for a in aside], mode="reflect", reflect_type="odd")
    inside = tuple(slice(a, a + n) for a, n in zip(aside, smooth.shape, strict=True))
    local = ndimage.median_filter(rest, width, mode="nearest")[inside]
    level = smooth + local
    if level.min() <= 0:
        raise ValueError(f"the flat's light falls to {level.min():g}; light over black is needed everywhere")
    away = np.empty_like(cells)
    (down, across), height = (np.arange(n) for n in cells.shape), max(1, STRIP // cells.shape[1])
    for first, under in surface_strips(level, coarse.y, coarse.x, down, across, height):
        strip = slice(first, first + height)
        np.subtract(np.divide(cells[strip], under, out=under), 1, out=away[strip], casting="same_kind")
    doubt = replace(coarse, level=level, noise=TRUST * np.abs(local) / level)
    return away, doubt, float(np.median(coarse.noise / level))


def _joined(cells: NDArray[np.float32], count: int) -> NDArray[np.float32]:
    """Return the means of so many cells each way about each cell; past the border cells count as mirrored."""
    if count <= 1:
        return cells
    down, across = cells.shape
    around = np.pad(cells, (count // 2, count - 1 - count // 2), mode="symmetric")
    rows = around[:down].copy()
    for i in range(1, count):
        rows += around[i : i + down]
    out = rows[:, :across].copy()
    for i in range(1, count):
        out += rows[:, i : i + across]
    out *= 1 / count**2
    return out


@dataclass(frozen=True)
class _Spot:
    """Cells beyond the contrast of one spot, dark ones with their sign turned."""

    first: tuple[int, int]
    """Least row and column."""
    rows: NDArray[np.intp]
    """Rows from the least."""
    columns: NDArray[np.intp]
    """Columns from the least."""
    depth: Real
    """Departure from the background."""
    noise: Real
    """Standard deviation of that."""
    doubt: Real
    """How far the background may be off."""
    area: int
    """Cells beyond half the contrast."""
    sign: int
    """-1 for a dark one."""

    @property
    def width(self) -> float:
        """Side of the square of the same area, at most the short side of its bounding box, cells."""
        return min(sqrt(self.rows.size), float(np.ptp(self.rows) + 1), float(np.ptp(self.columns) + 1))


def _spots(cells: NDArray[np.float32], sign: int, contrast: float, k: float, of: Ground, doubt: Ground) -> list[_Spot]:
    """Return the groups of cells above the contrast.

    Cells that are joined by others above half the contrast are one group: noise tears a spot at its border.
    """
    width = cells.shape[1]
    rows, columns = np.divmod(np.flatnonzero(_beyond_contrast(cells, sign, contrast)), width)
    noise, off = of.noise_at(rows, columns), doubt.noise_at(rows, columns)
    depth = np.asarray(sign * cells[rows, columns], dtype=np.float64)
    keep = depth > np.maximum(k * noise, off)
    rows, columns, noise, off, depth = rows[keep], columns[keep], noise[keep], off[keep], depth[keep]
    if rows.size == 0:
        return []
    joined = _beyond_contrast(cells, sign, max(contrast, k * float(np.median(of.noise))) / 2)
    places, labels = _groups(joined)
    areas = np.bincount(labels)
    own = labels[np.searchsorted(places, rows * width + columns)]
    order = np.argsort(own, kind="stable")
    numbers, starts = np.unique(own[order], return_index=True)
    spots: list[_Spot] = []
    for number, mine in zip(numbers.tolist(), np.split(order, starts[1:]), strict=True):
        y, x = rows[mine], columns[mine]
        first = int(y.min()), int(x.min())
        size = int(areas[number])
        spots.append(_Spot(first, y - first[0], x - first[1], depth[mine], noise[mine], off[mine], size, sign))
    return spots


def _beyond_contrast(cells: NDArray[np.float32], sign: int, contrast: float) -> NDArray[np.bool_]:
    return np.asarray(cells > contrast if sign > 0 else cells < -contrast)


def _groups(joined: NDArray[np.bool_]) -> tuple[NDArray[np.intp], NDArray[Any]]:
    """Return the cells that hold, counted row by row, and the number of the group of touching ones that each is in."""
    places = np.flatnonzero(joined)
    if places.size < SPARSE * joined.size:
        return places, touching(*np.divmod(places, joined.shape[1]))
    return places, ndimage.label(joined, np.ones((3, 3)))[0].ravel()[places]


def _blemish(spot: _Spot, window: float, cell: int, joined: int) -> Blemish:
    y = float(np.average(spot.rows, weights=spot.depth))
    x = float(np.average(spot.columns, weights=spot.depth))
    size = spot.width
    middle = np.hypot(spot.rows - y, spot.columns - x) <= max(size / 4, 0.75)
    if not np.any(middle):  # bent round its own middle
        middle[:] = True
    contrast, count = float(spot.depth[middle].mean()), int(middle.sum())
    pull = contrast * (spot.area / window**2) ** 2  # so much of the window pulls its median
    noise = float(spot.noise[middle].mean()) / max(1.0, sqrt(count) / joined)  # joined cells share their noise
    u = hypot(noise, float(spot.doubt[middle].mean()), pull)
    corner = 0.5 if joined % 2 else 0.0  # an even number of cells joined has its middle at a cell's corner
    return Blemish(
        x=cell * (spot.first[1] + x + corner),
        y=cell * (spot.first[0] + y + corner),
        contrast=spot.sign * contrast,
        contrast_u=u,
        size=cell * size,
        size_u=cell / sqrt(6),
        significance=spot.sign * contrast / max(u, EXACT * contrast),
    )
