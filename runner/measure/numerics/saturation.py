"""Where a sensor saturates: the light at which the temporal variance is greatest.

Beyond it more and more pixels reach an end that clips them, of the well or of the codes, and clipping takes noise away.
Levels of a series lie percents apart. Where some of them are clipped wholly, the end is known far better: a pixel with
the mean s and the variance v(s) = σ_dark² + K s, clipped at c, has

    mean        s + √v m(z),   m(z) = z Φ(-z) - φ(z),   z = (c - s)/√v
    variance    v (Φ(z) - z φ(z) + z² Φ(-z) - m(z)²)

averaged over a normal spread of c - s from pixel to pixel, which the pattern of lit and of clipped frames tells. The
place of the greatest variance follows from K, c and that spread. Levels that are partly clipped must agree; if they do
not, the end is no sharp one, and the highest level of the series stands, as the standard takes it.

References:
    EMVA Standard 1288 Release 4.0 Linear (2021): saturation at the maximum of the photon transfer curve.
    J. Tobin, Econometrica 26 (1958) 24 (normal variables cut off at a limit).
    E. A. Cornish and R. A. Fisher, Rev. Inst. Int. Stat. 5 (1938) 307 (skewness moves a quantile by (z²-1)/6 of it).
"""

from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray
from scipy import special
from scipy.optimize import brentq, minimize_scalar

Real = NDArray[np.float64]

CLIPPED = 0.02
"""A level with less than this share of its photon noise left is clipped wholly."""
SAME = 0.005
"""Wholly clipped levels that differ by more of their mean have no common end."""
AGREES = 0.05
"""Partly clipped levels agree if their variance does, within this share of the greatest …"""
NEAR = 0.002
"""… at a mean within this share of the end."""
SHAPE = 0.1
"""Standard uncertainty of the distance from the greatest variance to the end, as a share of it: its normal shape."""
NODES, WEIGHTS = np.polynomial.hermite_e.hermegauss(41)
WEIGHTS = WEIGHTS / WEIGHTS.sum()


@dataclass(frozen=True)
class Saturation:
    """The signal at which the variance is greatest, DN over dark."""

    value: float | None
    """The signal that the light would give without clipping; None where it was not reached."""
    parts: tuple[tuple[str, float], ...]
    """Names and standard uncertainties of its components."""
    at_least: float
    """Highest signal before the variance falls: it saturates there or above."""
    sharp: bool = False
    """It was found from a sharp end, else from the highest level alone."""


@dataclass(frozen=True)
class End:
    """A sharp end of the range as pixels meet it."""

    at: float
    """Signal at which they are clipped, DN over dark."""
    spread: float
    """Standard deviation over pixels of the end less their signal, as a share of the signal."""
    own: float
    """The same for the end alone, DN."""
    gain: float
    """K, DN/e-."""
    dark: float
    """Temporal variance of darks, DN²."""

    def moments(self, signal: float) -> tuple[float, float]:
        """Return mean and temporal variance of clipped pixels for a mean signal without clipping."""
        variance = self.dark + self.gain * signal
        noise = sqrt(variance)
        apart = np.hypot(self.spread * signal, self.own)
        z = (self.at - signal + apart * NODES) / noise
        below, above, density = special.ndtr(z), special.ndtr(-z), np.exp(-z * z / 2) / sqrt(2 * np.pi)
        mean = z * above - density
        left = below - z * density + z * z * above - mean**2
        return signal + noise * float(WEIGHTS @ mean), variance * float(WEIGHTS @ left)

    def greatest(self) -> float:
        """Return the signal without clipping at which the variance is greatest."""
        found = minimize_scalar(
            lambda s: -self.moments(s)[1], bounds=(0.3 * self.at, 1.2 * self.at), options={"xatol": 1e-6 * self.at}
        )
        return float(found.x)

    def variance_at_mean(self, mean: float) -> float:
        """Return the variance of pixels whose clipped mean is known; that of the end itself beyond it."""
        if mean >= self.moments(2 * self.at)[0]:
            return 0.0
        signal = brentq(lambda s: self.moments(s)[0] - mean, 0.0, 2 * self.at)
        return self.moments(float(signal))[1]


def saturation(
    signal: Real, linear: Real, variance: Real, variance_u: Real, pattern: Real, *, gain: float, dark: float
) -> Saturation:
    """Find where the variance is greatest.

    Args:
        signal: Mean of each level over dark, DN, rising.
        linear: Signal that its light would give without saturation, if the light is known, else the same.
        variance: Temporal variance of each level, DN².
        variance_u: Its standard uncertainty.
        pattern: Standard deviation over the field of each level's mean frame, DN.
        gain: K, DN/e-.
        dark: Temporal variance of darks, DN².
    """
    highest = int(np.argmax(variance))
    clipped = variance < CLIPPED * gain * signal + 1.2 * dark
    clipped[: highest + 1] = False
    if highest == signal.size - 1:
        return Saturation(None, (), float(linear[-1]))
    if np.any(clipped):
        end = float(signal[clipped].mean())
        if np.ptp(signal[clipped]) <= SAME * end:
            own = float(np.sqrt(np.mean(pattern[clipped] ** 2)))
            lit = int(np.argmin(np.abs(signal - end / 2)))
            sharp = End(end, float(pattern[lit] / signal[lit]), own, gain, dark)
            if _agrees(sharp, signal, variance, variance_u, clipped):
                return _sharp(sharp, float(np.ptp(signal[clipped])))
    return _as_it_stands(linear, variance, variance_u, highest)


def _agrees(end: End, signal: Real, variance: Real, variance_u: Real, clipped: NDArray[np.bool_]) -> bool:
    greatest = variance.max()
    for mean, found, u in zip(signal, variance, variance_u, strict=True):
        if mean < 0.7 * end.at or np.any(mean >= signal[clipped].min()):
            continue
        near = NEAR * end.at
        model = [end.variance_at_mean(mean + side * near) for side in (-1.0, 0.0, 1.0)]
        allowed = AGREES * greatest + 5 * u
        if not min(model) - allowed <= found <= max(model) + allowed:
            return False
    return True


def _sharp(end: End, apart: float) -> Saturation:
    at = end.greatest()
    distance = end.at - at
    z = distance / sqrt(end.dark + end.gain * at)
    parts = (
        ("clipped level", max(apart / sqrt(12), 1e-5 * end.at)),
        ("shape of saturation", SHAPE * abs(distance)),
        ("skewness of few electrons", end.gain * abs(z * z - 1) / 6),
    )
    return Saturation(at, parts, at, sharp=True)


def _as_it_stands(linear: Real, variance: Real, variance_u: Real, highest: int) -> Saturation:
    """Return the highest level, half way between the neighbours of all that chance may have made it."""
    rivals = np.flatnonzero(variance + 2 * variance_u >= variance[highest] - 2 * variance_u[highest])
    low, high = linear[max(0, int(rivals.min()) - 1)], linear[min(linear.size - 1, int(rivals.max()) + 1)]
    return Saturation(
        float(linear[highest]), (("distance of levels", float(high - low) / sqrt(12)),), float(linear[highest])
    )
