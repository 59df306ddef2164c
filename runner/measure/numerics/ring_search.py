"""Finds round marks, discs with a round hole, in a whole frame: rough centres and sizes.

The frame is averaged over squares of pixels until it is small. Each place is held against the middle between the
lightest and the darkest of its surroundings, so that uneven light does no harm; kept are pieces with one hole in their
middle whose rims are ellipses. Dots, letters and stripes have no such hole.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from runner.capture.frame import Codes

Real = NDArray[np.float64]
Picture = NDArray[np.float32]

TILE = 12
"""Side of the tiles whose lightest and darkest count, px of the small picture; three each way are surroundings."""
LEAST_STEP, STEEPEST = 0.2, 20
"""Surroundings that differ by less than that share of the 20th steepest tile's are plain: a single hot pixel makes nine
tiles steep, three marks make more than 20."""
SMALLEST, LARGEST = 7, 200
"""px across in the small picture: a hole of three px, and what tiles within reach still surround."""
NOISE = 13.0
"""Steps over the median difference of neighbours: white noise alone makes 7 in three tiles each way (6.6 standard
deviations, the median being 0.95 of one), marks make more."""
REACH = 5
"""Tiles from a steep one whose middle a plain one takes over: the inside of a large dark piece is dark."""
LONGEST = 3.0
"""Longer over shorter side of the box around a mark: views steeper than 70° are none."""
ROUND = (0.88, 1.12)
"""Area over that of the ellipse with the same second moments: pixels and blur leave 0.93 to 1.07."""
HOLE = (0.3, 2.0)
"""Area of the hole over that of a sharp picture: blur makes holes smaller or larger."""
OFF_CENTRE = 0.12
"""Between the centres of hole and rim, in radii, besides half a px."""
MOST = 30
"""More of a kind are not kept: the roundest are."""


@dataclass(frozen=True)
class Rings:
    """What was found, in px of the full frame."""

    centres: Real
    """(n, 2), pixel centres at +0.5."""
    radii: Real
    """Of circles of the same area, (n,)."""
    holes: NDArray[np.bool_]
    """Whether the hole is seen, (n,); it is not where the blur is as large, nor in dots that are no marks."""


def averaged(codes: Codes, longest: int) -> tuple[Picture, int]:
    """Return a picture averaged over squares, at most so many px long, and the squares' side."""
    side = max(1, -(-int(max(codes.shape)) // longest))
    rows, columns = codes.shape[0] // side, codes.shape[1] // side
    whole = codes[: rows * side, : columns * side]
    small = np.zeros((rows, columns), dtype=np.float32)
    for i in range(side):
        for j in range(side):
            small += whole[i::side, j::side]
    return np.asarray(small / np.float32(side * side), dtype=np.float32), side


def find_rings(codes: Codes, hole: float, *, dark: bool, longest: int) -> Rings:
    """Find round marks.

    Args:
        codes: Rows × columns, any tone that rises with light.
        hole: Diameter of the hole over that of the disc.
        dark: The marks are darker than their ground.
        longest: Longer side of the picture that is searched, px.
    """
    small, side = averaged(codes, longest)
    labels, count = ndimage.label(_below_middle(small if dark else -small))
    found: list[tuple[float, float, float, float, bool]] = []
    boxes = ndimage.find_objects(labels)
    areas = np.bincount(labels.ravel(), minlength=count + 1)
    for number, box in enumerate(boxes, 1):
        height, width = (part.stop - part.start for part in box)
        if not SMALLEST <= min(height, width) <= max(height, width) <= min(LARGEST, LONGEST * min(height, width)):
            continue
        if not 0.25 <= areas[number] / (height * width) <= 0.85:  # a thin slanting ring … a disc of few pixels
            continue
        ring = _ring(labels[box] == number, hole)
        if ring is not None:
            x, y, radius, misfit, holed = ring
            found.append((misfit, x + box[1].start, y + box[0].start, radius, holed))
    kept = [row for holed in (True, False) for row in sorted(r for r in found if r[4] == holed)[:MOST]]
    table = np.array([row[1:4] for row in kept], dtype=np.float64).reshape(-1, 3) * side
    return Rings(table[:, :2], table[:, 2], np.array([row[4] for row in kept], dtype=np.bool_))


def _below_middle(small: Picture) -> NDArray[np.bool_]:
    """Tell which pixels lie below the middle of their surroundings."""
    rows, columns = small.shape
    padded = np.pad(small, ((0, -rows % TILE), (0, -columns % TILE)), mode="edge")
    tiles = padded.reshape(padded.shape[0] // TILE, TILE, padded.shape[1] // TILE, TILE)
    low = ndimage.minimum_filter(tiles.min(axis=(1, 3)), 3, mode="nearest")
    high = ndimage.maximum_filter(tiles.max(axis=(1, 3)), 3, mode="nearest")
    steps = high - low
    largest = np.partition(steps.ravel(), -min(STEEPEST, steps.size))[-min(STEEPEST, steps.size)]
    if largest <= NOISE * float(np.median(np.abs(np.diff(small[:: max(1, rows // 200)], axis=1)))):
        return np.zeros(small.shape, dtype=np.bool_)
    plain = steps <= LEAST_STEP * largest
    gap, (i, j) = ndimage.distance_transform_edt(plain, return_indices=True)
    middle = np.where(gap <= REACH, ((low + high) / 2)[i, j], -np.inf).astype(np.float32)
    smooth = np.repeat(np.repeat(middle, TILE, axis=0), TILE, axis=1)[:rows, :columns]
    return np.asarray(small < smooth, dtype=np.bool_)


def _ring(piece: NDArray[np.bool_], hole: float) -> tuple[float, float, float, float, bool] | None:
    """Return centre, radius, how far a piece is from an ellipse, and its hole; None where it is no mark."""
    filled = ndimage.binary_fill_holes(piece)
    inside = filled & ~piece
    whole, empty = int(filled.sum()), int(inside.sum())
    share = empty / (whole * hole**2)
    x, y, roundness = _ellipse(filled)
    if share > HOLE[1] or not ROUND[0] <= roundness <= ROUND[1]:
        return None
    radius = float(np.sqrt(whole / np.pi))
    if share < HOLE[0]:
        return x, y, radius, abs(roundness - 1), False
    hx, hy, hole_roundness = _ellipse(inside)
    if np.hypot(x - hx, y - hy) > OFF_CENTRE * radius + 0.5 or (empty >= 40 and not 0.8 <= hole_roundness <= 1.2):
        return None
    return x, y, radius, abs(roundness - 1), True


def _ellipse(mask: NDArray[np.bool_]) -> tuple[float, float, float]:
    """Return the centre of a piece, its first pixel's centre at 0.5, and its area over its ellipse's."""
    ys, xs = np.nonzero(mask)
    x, y = float(xs.mean()), float(ys.mean())
    second = np.cov(np.stack([xs, ys]), bias=True) + np.eye(2) / 12  # of pixels with their own extent
    return x + 0.5, y + 0.5, len(xs) / (4 * np.pi * float(np.sqrt(max(np.linalg.det(second), 1e-12))))
