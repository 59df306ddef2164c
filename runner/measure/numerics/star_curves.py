"""Reads the curves of a fitted star: values at frequencies, crossings, the worst segment, the modulation at zero.

The lowest of several noisy values lies too low: as many draws as there are noisy values tell by how much on average,
and that is taken off (bootstrap correction of bias).

References:
    B. Efron and R. J. Tibshirani, An Introduction to the Bootstrap (1993), ch. 10.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.star_fit import SEGMENTS, StarFit

Real = NDArray[np.float64]

ALL = tuple(range(SEGMENTS))
MEANS = {"": ALL, "sagittal_": (0, 4), "tangential_": (2, 6)}
"""Segments that a name means; the first lies along the line from the frame's centre to the star's."""
WORST = "worst_"
STEP = 0.0025
"""cy/px; a parabola between neighbours is good to 1e-5."""
DRAWS = 2000
REACH = 0.06
"""cy/px above the lowest frequency that tell the modulation at zero."""
POINTS = 12


@dataclass(frozen=True)
class Curves:
    """Modulation over the star's own, on a grid."""

    f: Real
    """cy/px."""
    size: Real
    """Segments × frequencies."""
    u: Real
    """Their standard uncertainties from noise."""

    def value(self, family: str, f: float) -> tuple[float, float]:
        """Return a family's value at a frequency within the grid, and its standard uncertainty from noise."""
        size, u = (np.array([np.interp(f, self.f, row) for row in each]) for each in (self.size, self.u))
        if family == WORST:
            return lowest(size, u)
        some = list(MEANS[family])
        return float(size[some].mean()), float(np.sqrt((u[some] ** 2).sum())) / len(some)

    def mean(self, family: str) -> tuple[Real, Real]:
        """Return the mean curve of a family's segments and its standard uncertainty from noise."""
        some = list(MEANS[family])
        return self.size[some].mean(axis=0), np.sqrt((self.u[some] ** 2).sum(axis=0)) / len(some)

    def crossing(self, family: str, level: float) -> tuple[float, float, float] | None:
        """Return where a family falls to a level first: frequency, its u from noise, slope; None if it does not."""
        if family != WORST:
            return crossing(self.f, *self.mean(family), level)
        found = [crossing(self.f, size, u, level) for size, u in zip(self.size, self.u, strict=True)]
        seen = [one for one in found if one is not None]
        if not seen:
            return None
        value, u = lowest(np.array([one[0] for one in seen]), np.array([one[1] for one in seen]))
        return value, u, min(seen)[2]


def crossing(f: Real, size: Real, u: Real, level: float) -> tuple[float, float, float] | None:
    """Return where a curve falls to a level first, its standard uncertainty, and the slope there; None if nowhere."""
    below = np.flatnonzero(size < level)
    if not below.size or below[0] == 0:
        return None
    k = int(below[0])
    part = (size[k - 1] - level) / (size[k - 1] - size[k])
    at = float(f[k - 1] + part * (f[k] - f[k - 1]))
    low, high = max(0, k - 3), min(f.size - 1, k + 2)
    slope = float((size[high] - size[low]) / (f[high] - f[low]))
    if slope >= 0:
        slope = float((size[k] - size[k - 1]) / (f[k] - f[k - 1]))
    return at, float(np.interp(at, f, u)) / abs(slope), slope


def lowest(values: Real, u: Real) -> tuple[float, float]:
    """Return the lowest of noisy values, what noise makes of it taken off, and its standard uncertainty.

    Draws start from values that scatter as much as the true ones do: the noise's part of their scatter is taken out.
    """
    spread, noise = float(values.var()), float((u**2).mean())
    true = values.mean() + (values - values.mean()) * np.sqrt(max(0.0, 1 - noise / spread) if spread > 0 else 0.0)
    least = (np.random.default_rng(12233).standard_normal((DRAWS, values.size)) * u + true).min(axis=1)
    lift = float(true.min() - least.mean())
    return float(values.min() + lift), max(float(np.hypot(least.std(), 0.85 * lift)), float(u[int(np.argmin(values))]))


def low_frequency(fit: StarFit) -> tuple[float, float, float]:
    """Return the modulation at frequency 0, its u from noise, and its u from how it is continued there.

    The logarithm of each segment's modulation is continued by a parabola over the lowest frequencies; how far a cubic
    goes elsewhere, beyond what noise makes of it, is the second uncertainty. All segments must meet at 0.
    """
    f = np.linspace(fit.band[0], min(fit.band[0] + REACH, fit.band[1]), POINTS)
    parabola, cubic = (np.linalg.pinv(f[:, None] ** np.arange(order + 1))[0] for order in (2, 3))
    logs, noise = fit.logs(f, parabola)
    apart, apart_noise = fit.logs(f, cubic - parabola)
    value = float(np.exp(logs.mean()))
    bias2 = float(np.mean(apart)) ** 2 - float((apart_noise**2).sum()) / apart.size**2
    u = float(np.sqrt((noise**2).sum())) / noise.size
    return value, value * u, value * float(np.sqrt(max(0.0, bias2)))
