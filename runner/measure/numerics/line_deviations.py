"""How far points lie off their best straight line, in relative terms: mean or largest size, noise taken off.

References:
    EMVA Standard 1288 Release 4.0 Linear (2021), linearity: line of least relative deviations, mean of their sizes.
    JCGM 101:2008 (propagation of distributions).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.sizes import FACTORS, normal_draws, told

Real = NDArray[np.float64]

SEED = 1288
PLAIN = 0.08
"""Spread of the size over the size: below, only factors near 1 are of interest."""


@dataclass(frozen=True)
class Size:
    """Size of the deviations, as a share of the line."""

    value: float
    """With what noise adds taken off, down to zero."""
    noise: float
    """Its standard uncertainty from noise of y."""
    light: float
    """The same from the uncertainty of x."""


def deviations(x: Real, y: Real) -> Real:
    """Return relative deviations y / line - 1 from the line that makes the sum of their squares, over y², least.

    Args:
        x: Points (…, n), three or more, not all the same.
        y: Values above 0, (…, n).
    """
    w = 1 / y**2
    sw, sx, sy = w.sum(axis=-1), (w * x).sum(axis=-1), (w * y).sum(axis=-1)
    sxx, sxy = (w * x**2).sum(axis=-1), (w * x * y).sum(axis=-1)
    slope = (sw * sxy - sx * sy) / (sw * sxx - sx**2)
    start = (sy - slope * sx) / sw
    return np.asarray(y / (start[..., None] + slope[..., None] * x) - 1)


def deviation_sizes(x: Real, y: Real, y_u: Real, x_u: float) -> tuple[Size, Size]:
    """Return mean and largest size of the deviations.

    Args:
        x: Points, four or more.
        y: Values above 0.
        y_u: Their standard uncertainties.
        x_u: Standard uncertainty of each point, as a share of it.
    """
    found = deviations(x, y)
    both = normal_draws(SEED, 2, x.size)
    by_y, by_x = both[:, 0], both[:, 1]
    moved_y, moved_x = np.maximum(y + y_u * by_y, 0.2 * y), x * (1 + x_u * by_x)
    noise = deviations(np.broadcast_to(x, by_x.shape), moved_y) - found
    light = deviations(moved_x, np.broadcast_to(y, by_y.shape)) - found
    return _size(found, noise, light, largest=False), _size(found, noise, light, largest=True)


def _size(found: Real, noise: Real, light: Real, *, largest: bool) -> Size:
    def size(of: Real) -> Real:
        return np.asarray(np.abs(of).max(axis=-1) if largest else np.abs(of).mean(axis=-1))

    read = float(size(found))
    both = noise + light
    if read == 0 or not both.any():
        return Size(read, 0.0, 0.0)
    plain = float(size(found + both).std()) / read
    factors = 1 + np.linspace(-4, 4, 9) * plain if plain < PLAIN else FACTORS
    means, spreads = np.empty(factors.size), np.empty(factors.size)
    for n, factor in enumerate(factors):
        drawn = size(factor * found + both)
        means[n], spreads[n] = float(drawn.mean()), float(drawn.std())
    value, u = told(read, read, means, spreads, factors)
    share = float(noise.var() / (noise.var() + light.var()))
    return Size(value, float(u * np.sqrt(share)), float(u * np.sqrt(1 - share)))
