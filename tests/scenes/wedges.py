"""A hyperbolic wedge in closed form: lines that converge so that their frequency rises evenly along the wedge.

Shares nothing with the program under test. At each place along the wedge the lines are those of a Gaussian blur and a
pixel's side across them; their slopes are small, and blur along them is left out.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

Values = NDArray[np.float64]


@dataclass(frozen=True)
class WedgeScene:
    """Lines along the rows, coarse on the left."""

    size: tuple[int, int] = (700, 110)
    """Width and height, px."""
    lines: int = 5
    """Dark lines."""
    ends: tuple[float, float] = (0.07, 0.55)
    """Frequencies at the wedge's ends, cy/px."""
    reach: tuple[float, float] = (30.0, 670.0)
    """Where it begins and ends, px from the left border."""
    middle: tuple[float, float] = (54.6, 0.004)
    """Row of the middle line at the left border, and its slope."""
    sigma: float = 0.7
    """Blur, px."""
    levels: tuple[float, float] = (0.2, 0.7)
    """Light of lines and ground."""
    noise: float = 0.0
    """Standard deviation of white noise."""
    reversed_from: float = 1.0
    """cy/px from which dark and bright are exchanged, as a defocused unit does."""

    def frequency(self, z: Values) -> Values:
        """Return the frequency across at places along the wedge."""
        (a, b), (low, high) = self.reach, self.ends
        return np.asarray(low + (high - low) * (z - a) / (b - a))

    def transfer(self, f: float) -> float:
        """Return the transfer function of blur and pixel across the lines."""
        return float(np.exp(-2 * (np.pi * self.sigma * f) ** 2) * np.sinc(f))

    def crossing(self, level: float) -> float:
        """Return the frequency at which it falls to a level."""
        f = np.arange(0, 1.5, 1e-4)
        return float(f[np.argmax(np.exp(-2 * (np.pi * self.sigma * f) ** 2) * np.sinc(f) < level)])

    def light(self, rng: np.random.Generator | None = None) -> Values:
        """Return the region, rows × columns."""
        w, h = self.size
        z, y = np.arange(float(w))[None, :] + 0.5, np.arange(float(h))[:, None] + 0.5
        f = np.clip(self.frequency(z), 1e-3, None)
        away = y - self.middle[0] - self.middle[1] * z
        dark = np.zeros((h, w))
        for k in range(self.lines):
            place = (k - (self.lines - 1) / 2) / f
            dark += self._step(away - place + 0.25 / f) - self._step(away - place - 0.25 / f)
        inside = ndtr((z - self.reach[0]) / 0.8) - ndtr((z - self.reach[1]) / 0.8)
        low, high = self.levels
        share = np.clip(dark, 0, 1)
        share = np.where(f > self.reversed_from, _smooth(share, self.lines, away * f) - share, share)
        out = high - (high - low) * share * inside
        return np.asarray(out if rng is None else out + rng.normal(0, self.noise, out.shape))

    def _step(self, distance: Values) -> Values:
        """Return a step over a Gaussian and a pixel's side: its integral's difference."""
        ends = [(distance + side / 2) / self.sigma for side in (1, -1)]
        whole = [self.sigma * (e * ndtr(e) + np.exp(-(e**2) / 2) / np.sqrt(2 * np.pi)) for e in ends]
        return np.asarray(whole[0] - whole[1])


def _smooth(share: Values, lines: int, turns: Values) -> Values:
    """Return twice the mean of dark and bright where the lines are, so that what is taken from it is reversed."""
    return np.where(np.abs(turns) < lines / 2, 1.0, 2 * share)
