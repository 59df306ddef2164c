"""Photon transfer: what means and temporal variances of frames at several levels of light tell of a linear sensor.

Model: a pixel with μ_e electrons of light gives K (μ_d + μ_e) codes; electrons come one by one, so that their variance
is their mean:

    σ_y² = K² σ_d² + σ_q² + K (μ_y - μ_y.dark),    σ_q² = 1/12 DN²

The system gain K is the slope of σ_y² - σ_y.dark² over μ_y - μ_y.dark from 0 to 70 % of saturation, through the origin.

References:
    EMVA Standard 1288 Release 4.0 Linear (2021): mathematical model, photon transfer method, sensitivity, linearity.
    J. R. Janesick, Photon Transfer, SPIE Press (2007).
    R. T. Birge, Phys. Rev. 40 (1932) 207 (scatter beyond the stated uncertainties).
    F. C. Leone et al., Technometrics 3 (1961) 543 (folded normal distribution).
"""

from collections.abc import Callable
from dataclasses import dataclass
from math import exp, log2, log10, pi, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy import special

Real = NDArray[np.float64]

ROUNDING = 1 / 12
"""Variance of rounding to whole codes, DN²."""
LEAST_VARIANCE = 0.24
"""Temporal variance of darks below which rounding hides it, DN² (EMVA 1288)."""
TOP = 0.7
"""The gain is fitted from darkness to so much of saturation."""
LINEAR_FROM, LINEAR_TO = 0.05, 0.95
"""Linearity is looked at between these shares of saturation."""
FOLDED = 0.8
"""Mean size of normal noise over its standard deviation, √(2/π)."""


@dataclass(frozen=True)
class Slope:
    """A line through the origin."""

    value: float
    """Its slope."""
    noise: float
    """Standard uncertainty from the ordinates' own, or from their scatter where chance cannot explain that."""
    dof: float | None
    """Degrees of freedom behind `noise`; None is infinite."""
    offset: float
    """Change of the slope by a common change of all ordinates."""
    shift: float
    """Change of the slope by a common change of all abscissae."""
    scatter: float
    """Scatter about the line over what the uncertainties explain (Birge's ratio); 1 for a single point."""


@dataclass(frozen=True)
class Linearity:
    """How far a response departs from a straight line."""

    deviations: Real
    """Of each level from the line, %."""
    u: Real
    """Their standard uncertainties, %."""
    error: float
    """Mean of their sizes, %."""
    noise: float
    """Standard uncertainty of that mean, %."""
    folding: float
    """What noise adds to that mean, at most, %: sizes of noise do not average out."""

    @property
    def told(self) -> bool:
        """It is more than noise alone would give."""
        alone = FOLDED * float(np.mean(self.u))
        return self.error > 2 * alone


def slope(x: Real, y: Real, y_u: Real) -> Slope:
    """Fit a line through the origin, each point weighted by its inverse variance.

    Args:
        x: Abscissae.
        y: Ordinates.
        y_u: Standard uncertainty that each ordinate has for itself.

    Raises:
        ValueError: There is no point, or all lie at 0.
    """
    weight = y_u**-2.0
    power = float(weight @ x**2)
    if not power > 0:
        raise ValueError("a line through the origin needs a point away from it")
    value = float(weight @ (x * y)) / power
    freedom = x.size - 1
    birge = sqrt(float(weight @ (y - value * x) ** 2) / freedom) if freedom else 1.0
    larger = _beyond_chance(birge, freedom)
    noise = (birge if larger else 1.0) / sqrt(power)
    offset = float(weight @ x) / power
    pull = float(weight @ (y - 2 * value * x)) / power
    return Slope(value, noise, float(freedom) if larger else None, offset, pull, birge)


def _beyond_chance(birge: float, freedom: int) -> bool:
    """Tell whether a scatter is more than chance alone gives in 19 of 20 cases."""
    return birge > 1 and bool(special.chdtrc(freedom, freedom * birge**2) < 0.05)


def line(x: Real, y: Real, y_u: Real) -> tuple[float, float, float]:
    """Return slope, its standard uncertainty (of the scatter, where that is no chance) and ordinate at 0 of a line.

    Args:
        x: Abscissae, two at least that differ.
        y: Ordinates.
        y_u: Standard uncertainty of each.

    Raises:
        ValueError: All abscissae are the same.
    """
    weight = y_u**-2.0
    weight = weight / weight.sum()
    middle = float(weight @ x)
    power = float(weight @ (x - middle) ** 2)
    if not power > 0:
        raise ValueError("a line needs two abscissae that differ")
    value = float(weight @ ((x - middle) * y)) / power
    start = float(weight @ y) - value * middle
    own = 1 / sqrt(float(y_u**-2.0 @ (x - middle) ** 2))
    freedom = x.size - 2
    left = float(y_u**-2.0 @ (y - start - value * x) ** 2)
    birge = sqrt(left / freedom) if freedom > 0 else 1.0
    return value, own * (birge if _beyond_chance(birge, freedom) else 1.0), start


def dark_noise(variance: float, gain: float, rounding: float = ROUNDING) -> float:
    """Return the temporal dark noise σ_d in electrons.

    Args:
        variance: Temporal variance of darks, DN², `LEAST_VARIANCE` at least.
        gain: K in DN/e-.
        rounding: Variance of rounding, DN²; 0 for values that are no whole codes.
    """
    return sqrt(max(0.0, variance - rounding)) / gain


def threshold(dark: float, gain: float, rounding: float = ROUNDING) -> float:
    """Return the absolute sensitivity threshold in electrons: where the signal is as large as its noise.

    Args:
        dark: Temporal dark noise σ_d, electrons.
        gain: K in DN/e-.
        rounding: Variance of rounding, DN².
    """
    return sqrt(dark**2 + rounding / gain**2 + 0.25) + 0.5


def signal_to_noise(electrons: Real, dark: float, gain: float, *, pattern: float = 0.0, response: float = 0.0) -> Real:
    """Return the ratio of signal to noise that the model gives.

    Args:
        electrons: Electrons of light.
        dark: Temporal dark noise σ_d, electrons.
        gain: K in DN/e-.
        pattern: DSNU in electrons; with `response`, it makes the total ratio.
        response: PRNU as a share.
    """
    noise = dark**2 + ROUNDING / gain**2 + electrons + pattern**2 + (response * electrons) ** 2
    return np.asarray(electrons / np.sqrt(noise), dtype=np.float64)


def decibels(ratio: float) -> float:
    """Return 20 log10 of a ratio."""
    return 20 * log10(ratio)


def bits(ratio: float) -> float:
    """Return log2 of a ratio."""
    return log2(ratio)


def linearity(light: Real, signal: Real, signal_u: Real) -> Linearity:
    """Return how far a response departs from a straight line, relative to the line.

    The line has the least sum of relative squares: weights 1/signal². What noise does to the mean size is told apart.

    Args:
        light: Amounts of light.
        signal: Mean levels over dark, all above 0.
        signal_u: Their standard uncertainties, lamp included.

    Raises:
        ValueError: Fewer than three levels.
    """
    if signal.size < 3:
        raise ValueError(f"{signal.size} levels; a line and departures from it need 3")
    design = np.stack([np.ones_like(light), light], axis=1) / signal[:, None]
    start, rise = np.linalg.lstsq(design, np.ones_like(signal), rcond=None)[0]
    on_line = start + rise * light
    away = 100 * (signal - on_line) / on_line
    hat = design @ np.linalg.pinv(design)
    own = np.diag(100 * signal_u / signal)
    residual = (np.eye(signal.size) - hat) @ own
    u = np.sqrt(np.sum(residual**2, axis=1))
    signs = np.sign(away) @ residual / signal.size
    folding = float(np.mean([_folded(abs(a), s) - abs(a) for a, s in zip(away, u, strict=True)]))
    return Linearity(away, u, float(np.mean(np.abs(away))), float(np.sqrt(signs @ signs)), folding)


def _folded(mean: float, spread: float) -> float:
    """Return the mean size of a normal variable."""
    if spread <= 0:
        return mean
    z = mean / spread
    return spread * sqrt(2 / pi) * exp(-z * z / 2) + mean * float(special.erf(z / sqrt(2)))


def spread_by(model: Callable[..., float], values: tuple[float, ...], us: tuple[float, ...]) -> tuple[float, ...]:
    """Return what each input's uncertainty makes of a result: by differences of one u to either side.

    Args:
        model: Takes the inputs.
        values: Their estimates.
        us: Their standard uncertainties.
    """
    parts = []
    for place, u in enumerate(us):
        ends = [model(*values[:place], values[place] + side * u, *values[place + 1 :]) for side in (-1.0, 1.0)]
        parts.append(abs(ends[1] - ends[0]) / 2)
    return tuple(parts)
