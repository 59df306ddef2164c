"""A level over time: its drift, the strongest wave on it, how steady it is, and when it has settled.

References:
    D. C. Rife and R. R. Boorstyn, IEEE Trans. Inf. Theory 20 (1974) 591: frequency and amplitude of one sine in noise.
    S. O. Rice, Bell Syst. Tech. J. 24 (1945) 46: noise makes an amplitude read too large; its mean square is taken off.
"""

from dataclasses import dataclass
from math import hypot, log, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize_scalar

Array = NDArray[np.float64]

LEAST_FRAMES = 6
"""Fewer frames have no drift and wave apart from their noise."""
CLEAR = 4.0
"""Excess variance over its own uncertainty from which its root has a normal spread; below, zero is as likely."""
FALSE_ALARM = 0.001
"""Probability that noise alone shows a wave."""


@dataclass(frozen=True)
class Wave:
    """The strongest sine on a series."""

    amplitude: float
    """In the series' unit, what noise adds taken off; 0 where no wave stands out."""
    amplitude_u: float
    """Its standard uncertainty."""
    frequency: float | None
    """Cycles per unit of time; None where no wave stands out."""
    frequency_u: float
    """Its standard uncertainty."""


@dataclass(frozen=True)
class Series:
    """What a series of levels says, relative to its mean."""

    mean: float
    """Mean level."""
    drift: float
    """Change of a straight line from the first to the last frame, as a share of the mean."""
    drift_u: float
    """Its standard uncertainty."""
    unsteady: float
    """Standard deviation about that line, the frames' own noise taken off, as a share of the mean."""
    unsteady_u: float
    """Its standard uncertainty."""
    wave: Wave
    """Strongest wave about that line, as a share of the mean."""


def describe(times: Array, levels: Array, noise: Array) -> Series:
    """Describe a series of levels.

    Args:
        times: Of each frame, rising, n ≥ LEAST_FRAMES.
        levels: Mean of each frame.
        noise: Standard uncertainty of each.
    """
    mean = float(levels.mean())
    relative, own = levels / mean, float(np.mean(noise**2)) / mean**2
    wave = _strongest(times, relative, own)
    design = _design(times, wave.frequency)
    terms, left, free = _solve(design, relative)
    variance = float(left @ left) / free if free > 0 else own
    covariance = np.linalg.inv(design.T @ design) * max(variance, own)
    span = float(times[-1] - times[0])
    # A wave's own power is as well known as its amplitude; only the rest scatters as noise does.
    excess = variance - own
    total = max(0.0, wave.amplitude**2 / 2 + excess)
    doubt = hypot(wave.amplitude * wave.amplitude_u if wave.frequency else 0.0, variance * sqrt(2 / max(1, free)))
    unsteady = sqrt(total)
    unsteady_u = doubt / (2 * unsteady) if total > CLEAR * doubt else sqrt(doubt)
    return Series(mean, float(terms[1]) * span, sqrt(float(covariance[1, 1])) * span, unsteady, unsteady_u, wave)


def settled(levels: Array, within: float) -> int | None:
    """Return how many frames come before the level stays within a share of its end, or None if it never does.

    The end is the mean of the last quarter; a series that leaves the share again in that quarter has not settled.

    Args:
        levels: Of each frame, in order.
        within: Share of the end.
    """
    tail = max(2, len(levels) // 4)
    end = float(np.mean(levels[-tail:]))
    outside = np.flatnonzero(np.abs(levels - end) > within * abs(end))
    count = int(outside[-1]) + 1 if outside.size else 0
    return count if count <= len(levels) - tail else None


def _design(times: Array, frequency: float | None) -> Array:
    t = times - times.mean()
    columns = [np.ones_like(t), t]
    if frequency is not None:
        columns += [np.cos(2 * np.pi * frequency * t), np.sin(2 * np.pi * frequency * t)]
    return np.stack(columns, axis=1)


def _rests(times: Array, values: Array, frequencies: Array) -> Array:
    """Return the sum of squares that a line and a wave leave, for each frequency."""
    t = times - times.mean()
    plain = np.broadcast_to(np.stack([np.ones_like(t), t / np.ptp(t)], axis=1), (len(frequencies), len(t), 2))
    turns = 2 * np.pi * frequencies[:, None] * t
    design = np.concatenate([plain, np.cos(turns)[..., None], np.sin(turns)[..., None]], axis=2)
    basis = np.linalg.qr(design)[0]
    parts = np.einsum("fnk,n->fk", basis, values)
    return np.asarray(values @ values - np.sum(parts**2, axis=1))


def _solve(design: Array, values: Array) -> tuple[Array, Array, int]:
    terms = np.linalg.lstsq(design, values, rcond=None)[0]
    left: Array = np.asarray(values - design @ terms, dtype=np.float64)
    return np.asarray(terms, dtype=np.float64), left, len(values) - int(design.shape[1])


def _strongest(times: Array, values: Array, own: float) -> Wave:
    """Return the wave that explains most, if it stands out of what is left and of the frames' own noise."""
    n, span = len(times), float(times[-1] - times[0])
    step = span / (n - 1)
    grid = np.arange(1.0 / span, 0.5 / step + 1e-12, 0.125 / span)

    def left(frequency: float) -> float:
        rest = _solve(_design(times, frequency), values)[1]
        return float(rest @ rest)

    rests = _rests(times, values, grid)
    best = int(np.argmin(rests))
    low, high = grid[max(0, best - 1)], grid[min(len(grid) - 1, best + 1)]
    found = minimize_scalar(left, bounds=(low, high), method="bounded", options={"xatol": 1e-6 / span})
    frequency = float(found.x) if found.fun < rests[best] else float(grid[best])
    design = _design(times, frequency)
    terms, rest, free = _solve(design, values)
    variance = max(float(rest @ rest) / free if free > 0 else own, own, 1e-30)
    inverse = np.linalg.inv(design.T @ design)
    power = float(terms[2:] @ np.linalg.solve(inverse[2:, 2:], terms[2:])) / variance  # chi² of two degrees, half of it
    trials = max(1.0, len(grid) / 4)
    size = float(np.hypot(terms[2], terms[3]))
    u = sqrt(variance * float(np.trace(inverse[2:, 2:])) / 2)
    if power / 2 < log(trials / FALSE_ALARM):
        return Wave(0.0, max(u, size / 2), None, 0.0)
    corrected = sqrt(max(0.0, size**2 - u**2))
    spread = float(np.sum((times - times.mean()) ** 2))
    return Wave(corrected, u, frequency, sqrt(2 * variance / spread) / (2 * np.pi * size))
