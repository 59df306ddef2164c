"""Sizes of deviations (means of moduli, largest ones), with what noise adds to them taken off, and their uncertainty.

A size is never negative, so noise alone makes it positive. The deviations as found are therefore made smaller (or
larger) by one factor until, with the noise put on again, they read on average what was read; the interval of factors
that do not contradict the reading at 95 % gives the uncertainty (Neyman's construction along that one direction).

References:
    J. Neyman, Phil. Trans. R. Soc. A 236 (1937) 333 (confidence intervals).
    JCGM 101:2008 (propagation of distributions by draws).
"""

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]

DRAWS = 1000
"""Draws of the noise: a mean is then known within 3 % of its spread."""
FACTORS: Real = np.concatenate([np.linspace(0, 2, 11), np.geomspace(2.4, 12, 8)])
"""Of the deviations as found: from none at all to many times as large."""


@lru_cache(maxsize=8)
def normal_draws(seed: int, *shape: int) -> Real:
    """Return standard normal draws (DRAWS, …) whose mean is zero: the second half is the first with the other sign.

    Args:
        seed: Same seed, same draws: results must not differ from run to run.
        shape: Of one draw.
    """
    half = np.random.default_rng(seed).standard_normal((DRAWS // 2, *shape))
    draws = np.concatenate([half, -half])
    draws.flags.writeable = False  # the same draws serve again
    return np.asarray(draws)


def shrunk(found: Real, noise: Real) -> Real:
    """Return by what each deviation is made smaller at first: those that noise alone explains do not count.

    Without that, parts that have no deviation would be taken for as large as their noise.

    Args:
        found: Sizes of the parts as found, (n,).
        noise: Sizes that noise alone gives, (draws, n).
    """
    explained = np.mean(noise**2, axis=0) / np.maximum(found**2, 1e-300)
    return np.asarray(np.sqrt(np.maximum(1 - explained, 0)))


def told(read: float, size: float, means: Real, spreads: Real, factors: Real = FACTORS) -> tuple[float, float]:
    """Return the size without what noise adds, and its standard uncertainty.

    Args:
        read: Size of the deviations as found, noise and all.
        size: Size of the deviations that the factors multiply: those found, or made smaller one by one before.
        means: Mean size over draws where the deviations are so many times these, and the noise is put on.
        spreads: Standard deviations over these draws.
        factors: How many times, rising; they hold 1.
    """
    value, high, low = (
        _crossing(factors, np.maximum.accumulate(curve), read) * size
        for curve in (means, means - 2 * spreads, means + 2 * spreads)
    )
    # a reading that lies below what noise alone gives is chance, and no knowledge of the size
    return value, max(high - value, value - low, float(spreads.min())) / 2


def _crossing(factors: Real, curve: Real, at: float) -> float:
    """Return the factor from which on a rising curve lies above a value: the first where it does from the start."""
    above = np.flatnonzero(curve >= at)
    if not above.size:
        return float(factors[-1])
    n = int(above[0])
    if n == 0:
        return float(factors[0])
    part = (at - curve[n - 1]) / (curve[n] - curve[n - 1])
    return float(factors[n - 1] + part * (factors[n] - factors[n - 1]))
