"""Contrast of a square wave of bars from its harmonics, fitted by least squares.

Light of many equal bars and spaces is a Fourier series of the bars' frequency f; blur and pixels take each harmonic
down by their transfer at k f. All harmonics up to 1.9 cy/px are fitted, beyond the pixels' sampling too: there they
fold to frequencies of their own. In the middles of bars and spaces the odd harmonics give the contrast,

    C(f) = (4/π) [M(f) - M(3f)/3 + M(5f)/5 - …].

References:
    J. W. Coltman, J. Opt. Soc. Am. 44 (1954) 468.
    N. B. Nill, MITRE MTR 01B0000021 (2001) 3.2.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import hypot, pi, sqrt

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.grating_fit import PROBES, GratingFit, Lattice, fit_grating

Real = NDArray[np.float64]

FINEST = 1.9
"""cy/px; a pixel's area and any blur leave less than a per cent of harmonics beyond, less of the contrast."""
ALTERNATES = 0.7
"""cy/px; up to here harmonics alternate in sign whatever the bars' direction."""
REST = 0.3
"""Of the last harmonic: what the rest of the series may be misjudged by (bars under blurs of 0.2 to 1 px)."""
CHANCE = 1 + 2 / sqrt(PROBES)
"""Power about the fundamental over white noise's that a mean of so many ordinates reaches by chance."""
LEAST_ORDER, MOST_ORDER = 7, 17
"""Harmonics fitted."""


@dataclass(frozen=True)
class BarFit:
    """What the harmonics say."""

    grating: GratingFit
    """The fit; amplitudes of all harmonics."""
    contrast: float
    """(bar - space) / (bar + space) in the middles."""
    contrast_u: float
    """Its standard uncertainty from noise."""
    folded: float
    """Standard uncertainty from harmonics that fold onto another, and from those beyond the last."""
    fundamental: float
    """Amplitude of the fundamental over the level: 4/π of the target's contrast × transfer."""
    fundamental_u: float
    """Its standard uncertainty from noise."""
    signs: Real
    """Weight of each harmonic's amplitude in the contrast, before the level divides."""

    @property
    def frequency(self) -> float:
        """Frequency along the bars' normal, cy/px."""
        return hypot(*self.grating.frequency)


def fit_bars(lattices: Sequence[Lattice], start: tuple[float, float], *, background: int = 1) -> BarFit:
    """Fit bars.

    Args:
        lattices: The pixels.
        start: Frequency along x and y, cy/px, within half a period over the patch.
        background: Order of the mean light's polynomial.

    Raises:
        GratingLost: The frequency does not settle.
    """
    f = hypot(*start)
    orders = min(MOST_ORDER, max(LEAST_ORDER, int(FINEST / f)))
    fit = _without_chance(fit_grating(lattices, start, harmonics=orders, background=background))
    c = fit.amplitudes
    phase = float(np.angle(c[0]))
    order = np.arange(1, orders + 1)
    along = np.real(c * np.exp(-1j * order * phase))  # as seen from the middle of a bright bar
    told = np.isfinite(along)
    seen = np.where(told, along, 0.0)
    # the odd ones alternate in sign, below a pixel's first zero: the last of them counts half for what follows it
    weight = np.where(order % 2 == 1, 1.0, 0.0)
    last = int(np.flatnonzero(told & (order % 2 == 1))[-1])
    if order[last] > 1 and order[last] * f < ALTERNATES:
        weight[last] = 0.5
    odd, even = float(weight @ seen), float(seen[order % 2 == 0].sum())
    bar, space = fit.level + odd + even, fit.level - odd + even
    contrast = (bar - space) / (bar + space)
    u = np.where(told, fit.amplitude_u, 0.0)
    rise_u, mean_u = np.linalg.norm(weight * u), sqrt(fit.level_u**2 + float((u[1::2] ** 2).sum()))
    # what is not told: the bars' own 1/k at most, and the pixel's area leaves 1/(π k f) of it
    lost = [abs(c[0]) / k * min(1.0, 1 / (pi * k * f)) for k in order[~told & (order % 2 == 1)]]
    lost.append(REST * float(np.abs(weight * seen)[-2:].max()))
    first, first_u = abs(c[0]), float(fit.amplitude_u[0])
    return BarFit(
        fit,
        contrast,
        hypot(float(rise_u), contrast * mean_u) / (fit.level + even),
        sqrt(sum(each**2 for each in lost) / 3) / fit.level,
        first / fit.level,
        hypot(first_u, first / fit.level * fit.level_u) / fit.level,
        weight * told,
    )


def _without_chance(fit: GratingFit) -> GratingFit:
    """Return a fit whose uncertainties are not raised by what is only chance in the residual's power."""
    if fit.excess > CHANCE:
        return fit
    root = sqrt(fit.excess)
    return replace(
        fit,
        frequency_cov=fit.frequency_cov / fit.excess,
        amplitude_u=fit.amplitude_u / root,
        phase_u=fit.phase_u / root,
        excess=1.0,
    )
