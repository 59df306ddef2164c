"""Sinusoidal gratings in closed form: the mean of each square pixel's area, through a cubic tone, on any lattice.

Shares nothing with the program under test. Coordinates in px from the patch's centre, x to the right, y down.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Values = NDArray[np.float64]


@dataclass(frozen=True)
class GratingScene:
    """Light = level · (1 + shading) · (1 + modulation · cos(2π u·r + phase)), then tone, then noise."""

    size: tuple[int, int] = (80, 90)
    """Width and height, px."""
    frequency: tuple[float, float] = (0.05, 0.01)
    """Components along x and y, cy/px."""
    level: float = 0.5
    """Mean light."""
    modulation: float = 0.6
    """Of the light, before the pixel's aperture."""
    phase: float = 0.0
    """At the patch's centre, rad."""
    shading: tuple[float, float] = (0.0, 0.0)
    """Relative change of the light from the centre to the right and to the lower border."""
    fill: float = 0.0
    """Side of the square pixel's sensitive area, px; 0 samples points."""
    cubic: float = 0.0
    """Tone: x → x + cubic · (x - level)³."""
    noise: float = 0.0
    """Standard deviation of white noise."""

    @property
    def seen_modulation(self) -> float:
        """Modulation after the pixel's aperture: times sinc(fill u_x) sinc(fill u_y)."""
        ux, uy = self.frequency
        return float(self.modulation * np.sinc(self.fill * ux) * np.sinc(self.fill * uy))

    @property
    def harmonics(self) -> tuple[float, float]:
        """Amplitudes of fundamental and third harmonic after the cubic tone: cos³ = (3 cos + cos 3)/4."""
        a = self.level * self.seen_modulation
        return a + 3 * self.cubic * a**3 / 4, self.cubic * a**3 / 4

    def axes(self) -> tuple[Values, Values]:
        """Return the positions of columns and rows."""
        w, h = self.size
        return np.arange(w, dtype=np.float64) - (w - 1) / 2, np.arange(h, dtype=np.float64) - (h - 1) / 2

    def light(self, rng: np.random.Generator | None = None) -> Values:
        """Return the patch, rows × columns."""
        x, y = self.axes()
        turn = 2 * np.pi * (self.frequency[0] * x[None, :] + self.frequency[1] * y[:, None]) + self.phase
        ac = self.level * self.seen_modulation * np.cos(turn)
        ac = ac + self.cubic * ac**3
        w, h = self.size
        shade = 1 + self.shading[0] * x[None, :] / (w / 2) + self.shading[1] * y[:, None] / (h / 2)
        signal = (self.level + ac) * shade
        return signal if rng is None else signal + rng.normal(0, self.noise, signal.shape)
