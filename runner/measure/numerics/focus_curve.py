"""The peak of a through-focus curve: where it lies, how high it is, and how far the curve stays near it.

Around its maximum a through-focus curve is smooth, so a polynomial of fourth order is fitted by weighted least squares
to the points above a share of the largest one.
"""

from dataclasses import dataclass, replace
from math import sqrt

import numpy as np
from numpy.polynomial import Polynomial
from numpy.typing import NDArray

Array = NDArray[np.float64]

ABOVE = 0.45
"""Points below this share of the largest are left out: there the curve leaves what a polynomial can follow."""
LEAST_POINTS = 5
ORDER = 4
BIAS = 0.005
"""Bound on what the polynomial is off, in depths of focus: a defocused pupil at a quarter of its cut-off, five to
twenty positions around the peak, stays below 0.001; a quarter wave of spherical aberration below 0.004."""
REAL = 1e-9
"""Imaginary part of a root that is real but for rounding, over half the range."""


class FocusLost(Exception):
    """Raised when points have no peak that can be located; the sentence says why."""


@dataclass(frozen=True)
class FocusPeak:
    """The peak of one through-focus curve, positions in the unit of the points'."""

    position: float
    """Where the curve is highest."""
    position_u: float
    """Standard uncertainty from the points' noise."""
    position_bias: float
    """Standard uncertainty from what the polynomial cannot follow."""
    height: float
    """Value there."""
    low: float
    """Where the curve falls to the asked share of the peak, below it; not a number outside the points."""
    high: float
    """The same above it."""
    depth_u: float
    """Standard uncertainty of high - low."""
    ends_u: tuple[float, float]
    """Standard uncertainties of low and of high."""


def fit_peak(z: Array, values: Array, u: Array, share: float) -> FocusPeak:
    """Locate the peak of a through-focus curve.

    Args:
        z: Positions along the axis, rising, (n,).
        values: Transfer at one frequency, (n,).
        u: Standard uncertainty of each, > 0.
        share: Of the peak, where the depth of focus ends.

    Raises:
        FocusLost: Too few points, or the peak lies at or beyond an end.
    """
    top = int(np.argmax(values))
    near = _around(values, top)
    if top in {0, len(z) - 1}:
        raise FocusLost(f"the largest value lies at the end of the range, at {z[top]:.6g}")
    if near.size < LEAST_POINTS:
        raise FocusLost(f"{near.size} positions lie around the peak, at least {LEAST_POINTS} are needed")
    found = _fit(z[near], values[near], u[near], share)
    if found is None:
        raise FocusLost("no peak was found between the first and the last position")
    depth = found.high - found.low if np.isfinite(found.high - found.low) else float(np.ptp(z[near]))
    return replace(found, position_bias=BIAS * depth / sqrt(3))


def _around(values: Array, top: int) -> NDArray[np.intp]:
    """Return the points next to one another around the largest that lie above the share."""
    good = values >= ABOVE * values[top]
    first = top - int(np.argmin(good[top::-1])) + 1 if not good[: top + 1].all() else 0
    last = top + int(np.argmin(good[top:])) if not good[top:].all() else len(values)
    return np.arange(first, last)


def _fit(z: Array, values: Array, u: Array, share: float) -> FocusPeak | None:
    """Return the peak of the polynomial with linearised uncertainties, or None without a peak inside."""
    middle, half = (z[0] + z[-1]) / 2, (z[-1] - z[0]) / 2
    t = (z - middle) / half
    powers = np.vander(t, ORDER + 1, increasing=True)
    to_terms = np.linalg.pinv(powers / u[:, None]) / u  # terms = to_terms @ values
    curve = Polynomial(to_terms @ values)
    tops = [r for r in _real_roots(curve.deriv()) if -1 < r < 1 and curve.deriv(2)(r) < 0]
    if not tops:
        return None
    place = max(tops, key=lambda r: float(curve(r)))
    height = float(curve(place))
    ends = [r for r in _real_roots(curve - share * height) if -1 <= r <= 1]
    low = max((r for r in ends if r < place), default=float("nan"))
    high = min((r for r in ends if r > place), default=float("nan"))
    left = values - curve(t)
    chi2 = float(np.sum((left / u) ** 2)) / max(1, z.size - ORDER - 1)
    spread = u * sqrt(max(1.0, chi2))

    def row(at: float) -> Array:
        return np.asarray(at ** np.arange(ORDER + 1) @ to_terms)

    slopes = np.arange(1, ORDER + 1) * place ** np.arange(ORDER) @ to_terms[1:]
    by_place = -slopes / float(curve.deriv(2)(place))
    by_low, by_high = (-(row(end) - share * row(place)) / float(curve.deriv()(end)) for end in (low, high))
    u_place, u_low, u_high, u_depth = (
        half * float(np.sqrt(np.sum((by * spread) ** 2))) for by in (by_place, by_low, by_high, by_high - by_low)
    )
    low, high = middle + half * low, middle + half * high
    return FocusPeak(middle + half * place, u_place, 0.0, height, low, high, u_depth, (u_low, u_high))


def _real_roots(curve: Polynomial) -> list[float]:
    return [float(root.real) for root in curve.roots() if abs(root.imag) < REAL]
