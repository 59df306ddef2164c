"""Even fields with planted noise, shading, banding and defects; every truth in closed form or as planted.

Shares nothing with the program under test. Coordinates in px from the frame's outer corner, x to the right, y down: the
centre of the first pixel is (0.5, 0.5).
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Values = NDArray[np.float64]


@dataclass(frozen=True)
class Shading:
    """Light of a lens over the field, 1 on its axis: cos⁴ law, a rim that cuts the pupil, a polynomial."""

    size: tuple[int, int] = (160, 120)
    """Width and height of the frame, px."""
    angle: float = 0.0
    """Field angle at half the diagonal from the axis, degrees, for cos⁴."""
    vignette: float = 0.0
    """Shift of a round rim against the round pupil at half the diagonal, in pupil radii."""
    pupil: float = 1.2
    """Radius of that rim in pupil radii, at least 1: it cuts the pupil from a shift of radius - 1 on."""
    axis: tuple[float, float] = (0.0, 0.0)
    """The axis from the frame's centre, px."""
    powers: tuple[tuple[int, int, float], ...] = ()
    """Terms (a, b, c): c x^a y^b, x and y from the axis in half diagonals."""

    @property
    def half_diagonal(self) -> float:
        """Half the frame's diagonal, px."""
        return float(np.hypot(*self.size) / 2)

    def at(self, x: Values, y: Values) -> Values:
        """Return the light at points, broadcast."""
        w, h = self.size
        u = (x - w / 2 - self.axis[0]) / self.half_diagonal
        v = (y - h / 2 - self.axis[1]) / self.half_diagonal
        r2 = u**2 + v**2
        light = (1 + r2 * np.tan(np.radians(self.angle)) ** 2) ** -2.0  # cos⁴ of atan(r tan angle)
        light = light * _overlap(np.sqrt(r2) * self.vignette, self.pupil)
        for a, b, c in self.powers:
            light = light + c * u**a * v**b
        return np.asarray(light, dtype=np.float64)

    def frame(self) -> Values:
        """Return the light at pixel centres, rows × columns."""
        w, h = self.size
        x: Values = np.arange(w, dtype=np.float64) + 0.5
        y: Values = np.arange(h, dtype=np.float64) + 0.5
        return self.at(x[None, :], y[:, None])

    def mean(self, x0: float, x1: float, y0: float, y1: float) -> float:
        """Return the mean over a rectangle by Gauss-Legendre quadrature of the closed form, 16 × 16 points."""
        nodes, weights = np.polynomial.legendre.leggauss(16)
        x: Values = (x0 + x1) / 2 + (x1 - x0) / 2 * nodes.astype(np.float64)
        y: Values = (y0 + y1) / 2 + (y1 - y0) / 2 * nodes.astype(np.float64)
        return float(weights @ self.at(x[None, :], y[:, None]) @ weights / 4)


def _overlap(shift: Values, rim: float) -> Values:
    """Return the share of the unit circle that a circle of radius rim ≥ 1, shifted, leaves open."""
    d = np.clip(shift, max(rim - 1, 1e-12), rim + 1)
    a = np.arccos(np.clip((d**2 + 1 - rim**2) / (2 * d), -1, 1))
    b = np.arccos(np.clip((d**2 + rim**2 - 1) / (2 * d * rim), -1, 1))
    kite = np.sqrt(np.maximum(0.0, (rim + 1 - d) * (d + 1 - rim) * (d - 1 + rim) * (d + 1 + rim))) / 2
    return np.asarray((a + rim**2 * b - kite) / np.pi, dtype=np.float64)


@dataclass(frozen=True)
class Pattern:
    """Random parts of one frame: white from pixel to pixel, common to rows, common to columns."""

    pixel: float = 0.0
    """Standard deviation of the pixel part."""
    row: float = 0.0
    """Standard deviation of the row part."""
    column: float = 0.0
    """Standard deviation of the column part."""

    def draw(self, size: tuple[int, int], rng: np.random.Generator) -> tuple[Values, Values, Values]:
        """Return pixel part (rows × columns), row part (rows × 1) and column part (1 × columns)."""
        w, h = size
        return (
            self.pixel * rng.standard_normal((h, w)),
            self.row * rng.standard_normal((h, 1)),
            self.column * rng.standard_normal((1, w)),
        )

    def sum(self, size: tuple[int, int], rng: np.random.Generator) -> Values:
        """Return one draw, parts added up."""
        pixel, row, column = self.draw(size, rng)
        pixel += row
        pixel += column
        return pixel


def stack(
    light: Values, count: int, noise: Pattern, rng: np.random.Generator, *, levels: Sequence[float] = ()
) -> list[Values]:
    """Return frames of the same light, each with its own noise.

    Args:
        light: Rows × columns, fixed pattern and all.
        count: Frames.
        noise: Temporal noise of one frame.
        rng: Where it comes from.
        levels: Factor on the light of each frame; empty is 1.
    """
    h, w = light.shape
    factors = levels or [1.0] * count
    return [light * factor + noise.sum((w, h), rng) for factor in factors]


def wave(count: int, frequency: float, amplitude: float, phase: float = 0.0) -> Values:
    """Return a sine along one axis at pixel centres, of given frequency in cy/px."""
    return np.asarray(amplitude * np.cos(2 * np.pi * frequency * (np.arange(count) + 0.5) + phase), dtype=np.float64)


def spot(size: tuple[int, int], centre: tuple[float, float], radius: float, contrast: float) -> Values:
    """Return a factor on the light: a round spot with a border that falls as a Gaussian of a tenth of its radius.

    Args:
        size: Width and height, px.
        centre: x and y, px.
        radius: Where half the contrast is left, px.
        contrast: Of the spot's middle against its surroundings; negative is darker.
    """
    from scipy.special import ndtr

    w, h = size
    r = np.hypot(np.arange(w)[None, :] + 0.5 - centre[0], np.arange(h)[:, None] + 0.5 - centre[1])
    return np.asarray(1 + contrast * ndtr((radius - r) / (radius / 10)), dtype=np.float64)


def plant(light: Values, places: Sequence[tuple[int, int]], values: Sequence[float] | float) -> Values:
    """Return a copy with values added at pixels (column, row)."""
    out = light.copy()
    columns, rows = np.array(places).T
    np.add.at(out, (rows, columns), values)
    return out


def scattered(
    size: tuple[int, int], count: int, rng: np.random.Generator, *, apart: int = 16, border: int = 0
) -> list[tuple[int, int]]:
    """Return pixels (column, row), one in each of as many cells of a grid drawn at random, so that none touch.

    Args:
        size: Width and height, px.
        count: Number of pixels; at most as many as cells.
        rng: Where they come from.
        apart: Width of a cell, px; pixels stay 2 px from its border.
        border: Pixels at the frame's border that stay free.
    """
    across, down = ((s - 2 * border) // apart for s in size)
    cells = rng.permutation(across * down)[:count]
    return [
        (
            border + int(c % across) * apart + int(rng.integers(2, apart - 2)),
            border + int(c // across) * apart + int(rng.integers(2, apart - 2)),
        )
        for c in cells
    ]
