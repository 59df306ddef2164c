"""Black areas in a bright field in closed form: a blurred rectangle, glare, noise; shares nothing with the program.

Coordinates in px from the region's outer corner; pixel centres at +0.5.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import erf

Values = NDArray[np.float64]


@dataclass(frozen=True)
class BlackScene:
    """A black rectangle of a light of its own in a bright field, seen through a Gaussian blur and uniform glare."""

    size: tuple[int, int] = (120, 100)
    """Width and height, px."""
    area: tuple[float, float, float, float] = (40.3, 30.7, 80.1, 69.2)
    """Left, top, right and bottom border of the rectangle, px."""
    white: float = 0.6
    """Light of the field, as a share of the range."""
    own: float = 0.0
    """Luminance of the rectangle over that of the field."""
    glare: float = 0.02
    """Light that is added to the rectangle, over that of the field as it is seen around it."""
    sigma: float = 1.0
    """Blur, px."""
    slope: float = 0.0
    """Change of the field from left to right border, over its mean."""
    noise: float = 0.0
    """Standard deviation of a pixel, as a share of the range."""

    def light(self, rng: np.random.Generator | None = None) -> Values:
        """Return the light as a share of the range, rows × columns; pixels by their exact mean along both axes."""
        width, height = self.size
        x0, y0, x1, y1 = self.area
        hole = np.outer(self._profile(height, y0, y1), self._profile(width, x0, x1))
        field = self.white * (1 + self.slope * ((np.arange(width) + 0.5) / width - 0.5))[None, :]
        level = self.own + self.glare * (1 - self.own)  # so that glare is what the flare reads
        light = field * (1 - hole * (1 - level))
        return light if rng is None else light + self.noise * rng.standard_normal(light.shape)

    def _profile(self, count: int, start: float, end: float) -> Values:
        """Return the mean of a blurred box over each pixel, by the integral of the error function."""
        edges = np.arange(count + 1, dtype=np.float64)

        def integral(at: Values) -> Values:
            z = at / (np.sqrt(2) * self.sigma)
            return np.asarray(at * erf(z) / 2 + self.sigma / np.sqrt(2 * np.pi) * np.exp(-(z**2)))

        whole = integral(edges - start) - integral(edges - end)
        return np.diff(whole)
