"""Noise of a known spectrum as a camera sees it, in closed form: each of its waves through the transfer function.

Shares nothing with the program: the pattern's numbers are drawn here by its published recipe (amplitudes |k|^(-slope/2)
with the phases of white noise from numpy's frozen `RandomState`, standard deviation 0.09 of its range).
"""

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import RectBivariateSpline

Values = NDArray[np.float64]


def gaussian(sigma: float) -> Callable[[Values], Values]:
    """Return the transfer function of a Gaussian blur of so many px, frequencies in cy/px."""
    return lambda f: np.exp(-2 * (np.pi * sigma * f) ** 2)


@dataclass(frozen=True)
class NoiseScene:
    """A square of noise in the middle of a picture."""

    size: tuple[int, int] = (320, 300)
    """Width and height of the picture, px."""
    cells: int = 256
    """Side of the pattern, cells."""
    seed: int = 5
    slope: float = 1.8
    low: float = 0.1
    high: float = 0.9
    cells_per_px: float = 0.8
    """Scale."""
    turn: float = 1.0
    """Angle of the pattern against the pixels, degrees, clockwise on screen."""
    shift: tuple[float, float] = (0.0, 0.0)
    """Place of its centre from the picture's, px."""
    keystone: float = 0.0
    """Change of the scale from left to right, over its mean."""
    transfer: Callable[[Values], Values] = field(default_factory=lambda: gaussian(0.6))
    """Radial transfer function in front of the pixel, cy/px; the pixel is a full square."""
    light: float = 0.6
    """Light of a white ground, as a share of the range."""
    shading: float = 0.0
    """Change of the light from top to bottom, over its mean."""
    noise: float = 0.0
    """Standard deviation of a pixel, as a share of the range."""

    def truth(self, f: Values) -> Values:
        """Return the system's transfer function averaged over all directions, cy/px."""
        turn = np.linspace(0, np.pi / 2, 91)
        pixel = np.sinc(f[..., None] * np.cos(turn)) * np.sinc(f[..., None] * np.sin(turn))
        return np.asarray(self.transfer(f) * pixel.mean(axis=-1))

    def picture(self) -> Values:
        """Return the light as a share of the range, rows × columns, without noise."""
        wide = 8
        k = np.fft.fftfreq(self.cells) * self.cells
        kx, ky = k[None, :], k[:, None]
        size = np.hypot(kx, ky)
        phases = np.fft.fft2(np.random.RandomState(self.seed).standard_normal((self.cells, self.cells)))
        phases /= np.abs(phases)
        inside = (size > 0) & (size < self.cells / 2)
        terms = np.where(inside, np.where(inside, size, 1.0) ** (-self.slope / 2) * phases, 0)
        plain = np.fft.ifft2(terms).real
        terms *= 0.09 * (self.high - self.low) / plain.std()
        turn = np.radians(self.turn)
        # Waves of the pattern in the picture: cells are turned and scaled; the pixel integrates along its own axes.
        fx = (np.cos(turn) * kx - np.sin(turn) * ky) * self.cells_per_px / self.cells
        fy = (np.sin(turn) * kx + np.cos(turn) * ky) * self.cells_per_px / self.cells
        seen = terms * self.transfer(np.hypot(fx, fy)) * np.sinc(fx) * np.sinc(fy)
        fine = np.zeros((wide * self.cells, wide * self.cells), dtype=np.complex128)
        h = self.cells // 2
        for rows in (slice(None, h), slice(-h, None)):
            for columns in (slice(None, h), slice(-h, None)):
                fine[rows, columns] = seen[rows, columns]
        values = np.fft.ifft2(fine).real * wide**2
        width, height = self.size
        x = np.arange(width) + 0.5 - width / 2 - self.shift[0]
        y = (np.arange(height) + 0.5 - height / 2 - self.shift[1])[:, None]
        bent = x * (1 + self.keystone * x / width)
        u = (np.cos(turn) * bent + np.sin(turn) * y) * self.cells_per_px + self.cells / 2
        v = (-np.sin(turn) * bent + np.cos(turn) * y) * self.cells_per_px + self.cells / 2
        pad = 8
        around = np.pad(values, pad, mode="wrap")
        places = (np.arange(-pad, wide * self.cells + pad)) / wide + 0.5
        spline = RectBivariateSpline(places, places, around, kx=3, ky=3)
        texture = spline.ev(np.mod(v - 0.5, self.cells) + 0.5, np.mod(u - 0.5, self.cells) + 0.5)
        shade = 1 + self.shading * ((np.arange(height) + 0.5) / height - 0.5)[:, None]
        return np.asarray(self.light * shade * ((self.low + self.high) / 2 + texture))

    def frame(self, rng: np.random.Generator, picture: Values | None = None) -> Values:
        """Return a noisy frame."""
        clean = self.picture() if picture is None else picture
        return clean + self.noise * rng.standard_normal(clean.shape)
