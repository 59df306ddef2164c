"""Finds the corners of a chequered board: saddles of the light whose surroundings change four times around.

References:
    The determinant of the Hessian tells saddles from edges and blobs: P. R. Beaudet, Proc. 4th Int. Joint Conf. Pattern
    Recognition (1978) 579.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.blob_search import Picture, binned

Real = NDArray[np.float64]
Whole = NDArray[np.intp]

SCALE = 1.6
"""px of the small picture: standard deviation of the Gaussian under the derivatives."""
RINGS = (3.0, 4.5)
"""px of the small picture: circles about a corner on which light is looked at."""
AROUND = 24
"""Places on a circle."""
WEAKEST = 0.01
"""Share of the strongest saddle's response that is looked at: its contrast is then a tenth."""
MOST = 20_000
"""Saddles that are looked at."""
LEAST_SWING = 0.12
"""Amplitude on the circle over the picture's largest contrast."""
SYMMETRY = 0.65
"""Power of the part that is the same on opposite sides, of all power on the circle but the mean's."""


@dataclass(frozen=True)
class Corners:
    """What was found, in px of the full frame."""

    centres: Real
    """(n, 2), pixel centres at +0.5, within about half a pixel of the small picture."""
    parity: Whole
    """0 or 1: which of two crossed directions is bright; neighbours on a board differ, (n,)."""
    binning: int
    """Side of the squares that were averaged, px."""


def find_corners(codes: NDArray[np.generic], binning: int) -> Corners:
    """Find the corners of boards in a picture.

    Args:
        codes: Rows × columns.
        binning: Side of the squares of pixels that are averaged first.
    """
    from scipy.ndimage import gaussian_filter, maximum_filter  # noqa: PLC0415 - heavy

    picture = binned(codes, binning)
    soft = gaussian_filter(picture, SCALE, mode="nearest")
    down, across = np.gradient(soft, axis=0), np.gradient(soft, axis=1)
    xy, xx = np.gradient(across, axis=0), np.gradient(across, axis=1)
    yy = np.gradient(down, axis=0)
    saddle = xy * xy - xx * yy
    edge = int(max(RINGS)) + 2
    inner = saddle[edge:-edge, edge:-edge]
    if inner.size == 0 or float(inner.max()) <= 0:
        return Corners(np.zeros((0, 2)), np.zeros(0, np.intp), binning)
    peak = (inner == maximum_filter(inner, 3)) & (inner > WEAKEST * inner.max())
    y, x = (np.asarray(at) + edge for at in np.nonzero(peak))
    if len(y) > MOST:
        strongest = np.argsort(-saddle[y, x], kind="stable")[:MOST]
        y, x = y[strongest], x[strongest]
    hessian = np.stack([np.stack([xx[y, x], xy[y, x]], 1), np.stack([xy[y, x], yy[y, x]], 1)], 1).astype(np.float64)
    slope = np.stack([across[y, x], down[y, x]], 1).astype(np.float64)
    move = np.clip(-np.linalg.solve(hessian, slope[..., None])[..., 0], -1.5, 1.5)
    at = np.column_stack([x, y]) + move
    low, high = np.percentile(soft[::4, ::4], (1, 99))
    contrast = float(high - low)
    at = _single(at)
    good, bright = _checked(soft, at, contrast)
    return Corners((at[good] + 0.5) * binning, _parity(bright[good]), binning)


def _single(at: Real) -> Real:
    """Return places without those that others already stand for: neighbouring pixels may tie for one saddle."""
    from scipy.spatial import cKDTree  # noqa: PLC0415 - heavy

    pairs = np.array(sorted(cKDTree(at).query_pairs(1.0)), dtype=np.intp).reshape(-1, 2)
    return np.asarray(np.delete(at, np.unique(pairs[:, 1]), axis=0))


def _checked(soft: Picture, at: Real, contrast: float) -> tuple[NDArray[np.bool_], Real]:
    """Return which saddles have a board's surroundings, and the direction of their bright squares, rad."""
    from scipy.ndimage import map_coordinates  # noqa: PLC0415 - heavy

    turn = 2 * np.pi * np.arange(AROUND) / AROUND
    good = np.ones(len(at), dtype=bool)
    second = np.zeros(len(at), dtype=complex)
    for radius in RINGS:
        ring = np.stack([at[:, 1:] + radius * np.sin(turn), at[:, :1] + radius * np.cos(turn)])
        light = map_coordinates(soft, ring, order=1, mode="nearest").astype(np.float64)
        light -= light.mean(axis=1, keepdims=True)
        opposite = (light + np.roll(light, AROUND // 2, axis=1)) / 2
        power = np.maximum((light**2).mean(axis=1), 1e-30)
        wave = light @ np.exp(-2j * turn) / AROUND
        changes = (np.sign(opposite) != np.sign(np.roll(opposite, 1, axis=1))).sum(axis=1)
        good &= (changes == 4) & ((opposite**2).mean(axis=1) > SYMMETRY * power)
        good &= np.sqrt(2 * power) > LEAST_SWING * contrast
        second += wave
    return good, np.angle(np.conj(second)) / 2


def _parity(bright: Real) -> Whole:
    """Return to which of two crossed directions each bright direction is nearer."""
    axis = np.angle(np.exp(4j * bright).sum()) / 2 if len(bright) else 0.0
    return np.asarray(np.cos(2 * bright - axis) > 0, dtype=np.intp)
