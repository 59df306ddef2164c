"""Finds round blobs that are darker, or brighter, than the ground about them, under shading, in a large frame.

The frame is averaged over squares of pixels until it is small, thresholded midway between the light and the dark that
tiles of it show, and the pieces are kept that are as round as an ellipse.
"""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]
Picture = NDArray[np.float32]

SMALL = 800_000
"""Pixels that a frame is averaged down to."""
TILES = 12
"""Tiles along the frame's longer side; levels are taken over three of them each way."""
LOW, HIGH = 3.0, 97.0
"""Percentiles of a tile that are its dark and its light."""
LEAST_CONTRAST = 0.3
"""Tiles whose dark and light differ by less than that share of the frame's largest difference hold nothing."""
LEAST_AREA = 12
"""px of the small picture: less is noise."""
ROUND = (0.85, 1.12)
"""Area over that of the ellipse with the same second moments, of what is taken: pixels and blur leave 0.9 to 1.1."""
LONGEST = 3.5
"""Longer over shorter axis at most."""


@dataclass(frozen=True)
class Blobs:
    """What was found, in px of the full frame."""

    centres: Real
    """(n, 2), pixel centres at +0.5."""
    areas: Real
    """px², (n,)."""
    roundness: Real
    """Area over that of the ellipse with the same second moments, (n,)."""
    binning: int
    """Side of the squares that were averaged, px."""
    pieces: int
    """All pieces above the least area, round or not, wholly in the frame."""


@dataclass(frozen=True)
class Levels:
    """A small picture and the dark and light about each of its pixels."""

    picture: Picture
    """Rows × columns."""
    dark: Picture
    """Likewise."""
    light: Picture
    """Likewise."""
    binning: int
    """Side of the squares that were averaged, px."""
    contrast: float
    """Largest difference of dark and light."""
    noise: float
    """Standard deviation of the small picture's noise."""


def first_binning(shape: tuple[int, int]) -> int:
    """Return the side of squares that makes a frame small.

    Args:
        shape: Rows, columns.
    """
    return max(1, int(np.ceil(np.sqrt(shape[0] * shape[1] / SMALL))))


def binned(codes: NDArray[np.generic], binning: int) -> Picture:
    """Return the means of squares of pixels.

    Args:
        codes: Rows × columns; what does not fill a square at the right and lower border is left out.
        binning: Side of the squares.
    """
    if binning == 1:
        return codes.astype(np.float32)
    rows, columns = (n // binning for n in codes.shape)
    out = np.empty((rows, columns), dtype=np.float32)
    height = max(1, 40_000 // codes.shape[1] // binning)  # pieces stay in a processor's cache
    for y in range(0, rows, height):
        strip = codes[y * binning : min(rows, y + height) * binning, : columns * binning]
        down = np.add.reduce(strip.reshape(-1, binning, columns * binning), axis=1, dtype=np.float32)
        out[y : y + height] = sum(down[:, n::binning] for n in range(binning))
    out /= binning**2
    return out


def levels(codes: NDArray[np.generic], binning: int) -> Levels:
    """Return the small picture and the levels about each pixel.

    Args:
        codes: Rows × columns.
        binning: Side of the squares that are averaged.
    """
    from scipy.ndimage import maximum_filter, minimum_filter  # noqa: PLC0415 - heavy

    picture = binned(codes, binning)
    rows, columns = picture.shape
    tile = max(4, -(-max(rows, columns) // TILES))
    some = max(1, tile // 24)
    edges = [np.linspace(0, n, max(1, round(n / tile)) + 1).astype(int) for n in (rows, columns)]
    ends = np.array(
        [
            [np.percentile(picture[a:b:some, c:d:some], (LOW, HIGH)) for c, d in pairwise(edges[1])]
            for a, b in pairwise(edges[0])
        ]
    )
    dark, light = minimum_filter(ends[..., 0], 3, mode="nearest"), maximum_filter(ends[..., 1], 3, mode="nearest")
    middles = [(e[1:] + e[:-1]) / 2 for e in edges]
    spread = [_upsampled(one, middles, (rows, columns)) for one in (dark, light)]
    bend = picture[:, 2:] - 2 * picture[:, 1:-1] + picture[:, :-2]
    noise = float(np.median(np.abs(bend[:: max(1, rows // 200)]))) / (0.6745 * np.sqrt(6)) if bend.size else 0.0
    return Levels(picture, spread[0], spread[1], binning, float((light - dark).max()), noise)


def _upsampled(values: Real, middles: list[Real], shape: tuple[int, int]) -> Picture:
    """Return tile values as a picture, linear between the tiles' middles."""
    at = [np.interp(np.arange(n), m, np.arange(len(m))) for n, m in zip(shape, middles, strict=True)]
    first = [np.minimum(a.astype(int), max(0, len(m) - 2)) for a, m in zip(at, middles, strict=True)]
    share = [a - f for a, f in zip(at, first, strict=True)]
    second = [np.minimum(f + 1, len(m) - 1) for f, m in zip(first, middles, strict=True)]
    down = values[first[0]] * (1 - share[0][:, None]) + values[second[0]] * share[0][:, None]
    return np.asarray(down[:, first[1]] * (1 - share[1]) + down[:, second[1]] * share[1], dtype=np.float32)


def find_blobs(at: Levels, *, dark: bool) -> Blobs:
    """Find the round blobs of a picture.

    Args:
        at: The picture and its levels.
        dark: They are darker than the ground, else brighter.
    """
    from scipy.ndimage import label  # noqa: PLC0415 - heavy

    span = at.light - at.dark
    inside = (at.light - at.picture if dark else at.picture - at.dark) - span / 2
    mask = (inside > 0) & (span > LEAST_CONTRAST * at.contrast)
    names, count = label(mask)
    y, x = np.nonzero(mask)
    which = names[y, x]
    weight = inside[y, x].astype(np.float64) + span[y, x] * 0.05
    total = np.bincount(which, weight, count + 1)
    area = np.bincount(which, minlength=count + 1).astype(np.float64)
    sums = [np.bincount(which, weight * v, count + 1) for v in (x, y)]
    with np.errstate(invalid="ignore", divide="ignore"):
        cx, cy = (s / total for s in sums)
        mx, my = (np.bincount(which, v, count + 1) / area for v in (x, y))
        dx, dy = x - mx[which], y - my[which]
        xx, yy, xy = (np.bincount(which, v, count + 1) / area for v in (dx * dx, dy * dy, dx * dy))
        det = np.maximum((xx + 1 / 12) * (yy + 1 / 12) - xy**2, 1e-12)
        roundness = area / (4 * np.pi * np.sqrt(det))
        mean, apart = (xx + yy) / 2, np.hypot((xx - yy) / 2, xy)
        long = np.sqrt((mean + apart + 1 / 12) / np.maximum(mean - apart + 1 / 12, 1e-9))
    border = np.unique(np.concatenate([names[0], names[-1], names[:, 0], names[:, -1]]))
    whole = area >= LEAST_AREA
    whole[border] = False
    whole[0] = False
    good = whole & (roundness > ROUND[0]) & (roundness < ROUND[1]) & (long < LONGEST)
    centres = (np.column_stack([cx, cy])[good] + 0.5) * at.binning
    return Blobs(centres, area[good] * at.binning**2, roundness[good], at.binning, int(whole.sum()))
