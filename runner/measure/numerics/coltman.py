"""Coltman's conversion of a square-wave response, measured at some frequencies, into a modulation transfer.

    M(f) = (π/4) Σ B_k C(kf) / k,   k odd,

with B_k = (-1)^m (-1)^((k-1)/2) for k of m different primes, and 0 where a prime comes twice. Between its points, and
from 1 at frequency 0, C follows a cubic spline; beyond the last one it is known to lie between
0 and that, and is taken to fall to 0 at twice its frequency.

References:
    J. W. Coltman, J. Opt. Soc. Am. 44 (1954) 468.
    C. de Boor, A Practical Guide to Splines (1978).
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

Real = NDArray[np.float64]

NEAREST, FARTHEST, STEPS = 1.05, (2.5, 10.0), 11
"""Where the response may end, over the last group's frequency: the nearest; least and greatest of the farthest; how
many between are tried. A Gaussian that has the last group's contrast there is down to 2 % at the farthest."""
MOST_TERM = 801
"""Greatest k: at a frequency of 1/400 of the last one the series has come to its end."""
TRUST, NEAR = 0.35, 1.4
"""Of what the spline adds to straight lines, at its most within this factor in frequency: the standard uncertainty of
what lies between the groups (blurs of 0.3 to 1 px and diffraction, groups in steps of √2)."""


def factors(most: int = MOST_TERM) -> tuple[tuple[int, int], ...]:
    """Return (k, B_k) for odd k up to a greatest one, those of 0 left out."""
    found = []
    for k in range(1, most + 1, 2):
        rest, primes, p = k, [], 3
        while rest > 1:
            while rest % p == 0:
                primes.append(p)
                rest //= p
            p = p + 2 if p * p <= rest else max(rest, p + 2)
        if len(set(primes)) == len(primes):
            found.append((k, (-1) ** len(primes) * (-1) ** ((k - 1) // 2)))
    return tuple(found)


_FACTORS = factors()


@dataclass(frozen=True)
class ContrastCurve:
    """A square-wave response at some frequencies."""

    f: Real
    """cy/px, rising; 0 is not among them."""
    contrast: Real
    """Contrast over the target's own."""
    own: Real
    """Standard uncertainty that belongs to each point alone."""
    shared: Mapping[str, Real]
    """Standard uncertainties that points have in common, by the shared word."""

    def u(self) -> Real:
        """Return the combined standard uncertainty of each point."""
        return np.sqrt(self.own**2 + sum((part**2 for part in self.shared.values()), np.zeros_like(self.own)))

    def converted(self, f: Real) -> tuple[Real, Mapping[str, Real]]:
        """Return the modulation transfer at frequencies above 0, with named parts of its standard uncertainty.

        Args:
            f: cy/px, up to the last point's.
        """
        value = _converted(self.f, self.contrast, f)
        parts = {"points": np.zeros_like(value)}
        for k in range(self.f.size):
            moved = self.contrast.copy()
            moved[k] += self.own[k]
            parts["points"] += (_converted(self.f, moved, f) - value) ** 2
        parts["points"] = np.sqrt(parts["points"])
        for word, each in self.shared.items():
            parts[word] = np.abs(_converted(self.f, self.contrast + each, f) - value)
        parts["interpolation"] = self._between(f)
        ends = [_converted(self.f, self.contrast, f, ends=(end,)) for end in _ends(float(self.contrast[-1]))]
        parts["beyond the last group"] = np.std(ends, axis=0)
        return value, parts

    def _between(self, f: Real) -> Real:
        last = float(self.f[-1])
        grid = np.geomspace(min(float(f.min()), float(self.f[0])) / NEAR, last, 120)
        apart = np.abs(_converted(self.f, self.contrast, grid, straight=True) - _converted(self.f, self.contrast, grid))
        near = np.abs(np.log(f[:, None] / grid[None, :])) <= np.log(NEAR)
        return np.asarray(TRUST * np.max(np.where(near, apart[None, :], 0.0), axis=1))


def _ends(last: float) -> tuple[float, ...]:
    """Return where the response may end, over the last group's frequency, by the contrast that it still has there."""
    farthest = float(np.clip(np.sqrt(-4 / np.log(np.clip(last, 0.01, 0.99))), *FARTHEST))
    return tuple(np.linspace(NEAREST, farthest, STEPS).tolist())


def _converted(points: Real, contrast: Real, f: Real, *, straight: bool = False, ends: tuple[float, ...] = ()) -> Real:
    ends = ends or _ends(float(contrast[-1]))
    x, y = np.insert(points, 0, 0.0), np.insert(contrast, 0, 1.0)
    curve = None if straight or x.size < 3 else CubicSpline(x, y)
    out, last = np.zeros_like(f), float(points[-1])
    for k, sign in _FACTORS:
        at = k * f
        if at.min() >= max(ends) * last:
            break
        inside = np.interp(at, x, y) if curve is None else curve(np.minimum(at, last))
        falls = [np.clip((end - at / last) / (end - 1), 0, 1) for end in ends]
        beyond = contrast[-1] * np.mean(falls, axis=0)
        out += sign / k * np.where(at <= last * (1 + 1e-9), inside, beyond)
    return np.asarray(np.pi / 4 * out)
