"""Where the light of an even field is highest: the top of a quadratic surface through a map of blocks.

The surface is fitted within a round window about its own top that reaches to the nearest border of the frame and whose
weight falls to zero there. Light that falls off alike to both sides of its top then gives that top whatever its law
(cos⁴, vignetting), for odd terms cancel. Where it does not, a window of half the area gives another top: the
difference beyond noise is counted in u.

References:
    ISO 21073:2019, 4.2 (centring accuracy).
    JCGM 100:2008, 5.1.2 (law of propagation).
"""

from dataclasses import dataclass
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]

MOST_STEPS = 50
"""Moves of the window; five to ten are usual."""
SETTLED = 1e-4
"""Move, in block widths, at which the window stands."""
LEAST_RADIUS = 2.5
"""Radius of the window in block widths: it then holds some twenty blocks for the six terms."""
CURVED = 3.0
"""The surface must be curved by so many of its standard uncertainties in every direction."""
SKEWED = 1.5
"""A cubic term moves the top by twice what halving the window's area shows; as a u it is covered by 2 × 1.5 of it."""
SAMPLED = 0.01
"""Block widths by which few blocks in the smallest windows move the top of an even law at most (half in larger ones);
found over 600 closed-form fields, the worst a cone."""


@dataclass(frozen=True)
class Peak:
    """The top of the light."""

    x: float
    """Px from the frame's left border."""
    y: float
    """Px from the frame's upper border."""
    covariance: Real
    """Of x and y, 2 × 2, px²."""
    size: tuple[int, int]
    """Width and height of the frame, px."""

    @property
    def offset(self) -> tuple[float, float]:
        """Distance from the frame's centre and its u, px.

        Noise in both directions makes a distance too long: its mean square excess, the trace of the covariance, is
        taken off, and what that changes is counted in u.
        """
        dx, dy = self.x - self.size[0] / 2, self.y - self.size[1] / 2
        seen = hypot(dx, dy)
        value = sqrt(max(0.0, seen**2 - float(np.trace(self.covariance))))
        along = np.array([dx, dy]) / seen if seen > 0 else np.array([1.0, 0.0])
        return value, hypot(sqrt(float(along @ self.covariance @ along)), seen - value)

    @property
    def half_diagonal(self) -> float:
        """Half the diagonal of the frame, px."""
        return hypot(*self.size) / 2

    @property
    def centring(self) -> tuple[float, float]:
        """Centring accuracy, 1 - offset over half the diagonal, and its u (form used with ISO 21073 4.2)."""
        value, u = self.offset
        return 1 - value / self.half_diagonal, u / self.half_diagonal


def find_peak(x: Real, y: Real, light: Real, u: Real, size: tuple[int, int]) -> Peak | None:
    """Return the top of the light, or None where it lies too near the border or the surface has no top.

    Args:
        x: Middles of the blocks along x, px.
        y: Middles of the blocks along y, px.
        light: Rows × columns of blocks.
        u: Standard uncertainty of each, independent.
        size: Width and height of the frame, px.
    """
    block = max(size[0] / len(x), size[1] / len(y))
    points = np.column_stack([a.ravel() for a in np.meshgrid(x, y)])
    values, spreads = light.ravel(), u.ravel()
    wide = _fit_top(points, values, spreads, np.array(size) / 2, np.inf, np.array(size) / 2)
    if wide is None:
        return None
    top = _settle(points, values, spreads, wide[0], np.array(size, float), block)
    if top is None:
        return None
    at, turn, radius = top
    covariance = (turn * spreads**2) @ turn.T
    bound = SAMPLED * block
    narrow = _fit_top(points, values, spreads, at, radius / sqrt(2), np.full(2, block))
    if radius / sqrt(2) >= LEAST_RADIUS * block and narrow is not None:
        apart = narrow[0] - at
        chance = ((turn - narrow[1]) * spreads) ** 2
        covariance = covariance + SKEWED**2 * np.diag(np.maximum(0.0, apart**2 - chance.sum(axis=1)))
        bound /= 2
    covariance = covariance + bound**2 / 3 * np.eye(2)
    return Peak(float(at[0]), float(at[1]), covariance, size)


def _settle(
    points: Real, values: Real, spreads: Real, start: Real, size: Real, block: float
) -> tuple[Real, Real, float] | None:
    at = np.clip(start, LEAST_RADIUS * block, size - LEAST_RADIUS * block)
    for _ in range(MOST_STEPS):
        radius = float(np.minimum(at, size - at).min())
        if radius < LEAST_RADIUS * block:
            return None
        found = _fit_top(points, values, spreads, at, radius, np.full(2, block))
        if found is None:
            return None
        move = found[0] - at
        reach = radius / 2
        at = at + move * min(1.0, reach / max(reach, float(np.hypot(*move))))
        if np.hypot(*move) < SETTLED * block:
            return at, found[1], radius
    return None


def _fit_top(
    points: Real, values: Real, spreads: Real, about: Real, radius: float, scale: Real
) -> tuple[Real, Real] | None:
    """Fit c + g·r + r·H r/2 in a window; return the top and its derivative by the values (2 × blocks), px."""
    away = points - about
    weights = np.clip(1 - (away**2).sum(axis=1) / radius**2, 0.0, 1.0) ** 2
    r = away / scale
    terms = np.column_stack([np.ones(len(r)), r, r[:, 0] ** 2 / 2, r[:, 0] * r[:, 1], r[:, 1] ** 2 / 2])
    if np.count_nonzero(weights) < terms.shape[1]:
        return None
    solve = np.linalg.pinv(terms * np.sqrt(weights)[:, None]) * np.sqrt(weights)
    fitted = solve @ values
    curve = np.array([[fitted[3], fitted[4]], [fitted[4], fitted[5]]])
    bends, ways = np.linalg.eigh(curve)
    for bend, way in zip(bends, ways.T, strict=True):
        along = way[0] ** 2 * solve[3] + 2 * way[0] * way[1] * solve[4] + way[1] ** 2 * solve[5]
        if bend >= 0 or -bend <= CURVED * sqrt(float(np.sum((along * spreads) ** 2))):
            return None
    top = -np.linalg.solve(curve, fitted[1:3])
    tilt = solve[1:3] + np.array([solve[3] * top[0] + solve[4] * top[1], solve[4] * top[0] + solve[5] * top[1]])
    return about + top * scale, -np.linalg.solve(curve, tilt) * scale[:, None]
