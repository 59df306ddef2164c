"""What a larger defect explains of smaller ones, so that nothing is counted twice.

The steep border of a blemish departs from its own neighbours, and a blemish or a cluster lifts the means of the columns
and rows that it meets. Pixels that are no more than their blemish are part of it, and a column or row counts only if it
departs by itself over half of its length: where halves of a sensor are read out apart, half a column may be defective.

References:
    EMVA Standard 1288 Release 4.0 Linear (2021), defect pixels: what counts is left to the application.
    The shares of a length and of a contrast: common practice, no source.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.defects import Defect
from runner.measure.numerics.large_defects import Blemish, LineDefect
from runner.measure.planes import Grid

PART = 1.5
"""Times a blemish's contrast up to which a pixel in it is part of it: the contrast is a mean over its middle."""
NEAR = 4
"""Neighbours to each side that a column or row is compared with once more."""
PARTS = 8
"""Parts of its length."""
BESIDE = 1.5
"""Widths of a blemish from its middle within which a column or row is not looked at."""


@dataclass(frozen=True)
class Area:
    """Where a blemish lies, in pixels of the array."""

    row: float
    """Its middle."""
    column: float
    """Its middle."""
    high: float
    """Its width, in rows."""
    wide: float
    """Its width, in columns."""
    contrast: float
    """Its departure from its surroundings."""


def area_of(blemish: Blemish, grid: Grid) -> Area:
    """Return where a blemish lies in the array, if it was found in `planes.square` of it."""
    rows = 2 if grid.shift else 1
    return Area(rows * blemish.y - 0.5, blemish.x - 0.5, rows * blemish.size, blemish.size, blemish.contrast)


def outside(pixels: Sequence[Defect], areas: Sequence[Area]) -> Sequence[Defect]:
    """Return the pixels that are not merely part of a blemish: of its sign, about its contrast, and within it.

    Args:
        pixels: Dim and bright pixels.
        areas: Of the blemishes.
    """
    kept = list(pixels)
    for area in areas:
        kept = [
            p
            for p in kept
            if p.contrast * area.contrast < 0
            or abs(p.contrast) > PART * abs(area.contrast)
            or abs(p.x - area.column) > area.wide
            or abs(p.y - area.row) > area.high
        ]
    return kept


def whole(mean: NDArray[Any], line: LineDefect, areas: Sequence[Area], k: float) -> bool:
    """Tell whether a column or row departs over half of its length, and not for a blemish or a cluster that it meets.

    Of eight parts of it, the median departure from its neighbours must reach half of the whole's; where it meets a
    blemish, what lies beside that must depart by k times the noise alone.

    Args:
        mean: Mean frame, rows × columns.
        line: As found in it.
        areas: Of the blemishes.
        k: Times the noise of such a mean.
    """
    column = line.direction == "column"
    across = mean if column else mean.T
    near = slice(max(0, line.at - NEAR), line.at + NEAR + 1)
    own, sign = line.at - near.start, np.sign(line.contrast)
    away = [_departure(part, own) for part in np.array_split(across[:, near], PARTS)]
    if sign * np.median(away) < abs(line.contrast) / 2:
        return False
    along, beside = np.arange(len(across)), np.ones(len(across), dtype=bool)
    for area in areas:
        at, reach, middle, length = area.column, area.wide, area.row, area.high
        if not column:
            at, reach, middle, length = middle, length, at, reach
        if abs(line.at - at) <= BESIDE * reach + NEAR:
            beside &= np.abs(along - middle) > BESIDE * length
    if beside.all():
        return True
    noise = abs(line.contrast / line.significance)
    return bool(beside.any() and sign * _departure(across[beside, near], own) > k * noise)


def _departure(part: NDArray[Any], own: int) -> float:
    """Return the mean of one column of a few over the median of the others' means."""
    means = part.mean(axis=0, dtype=np.float64)
    return float(means[own] - np.median(np.delete(means, own)))
