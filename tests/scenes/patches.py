"""Charts of even patches seen by a camera: grids in any view, tone curves, shot noise, patterns, mosaics, closed form.

Shares nothing with the program under test. Coordinates in px from the frame's outer corner, x to the right, y down.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Values = NDArray[np.float64]
WITHIN = (np.arange(4) + 0.5) / 4
"""Sub-pixel places along each axis over which a pixel's light is averaged."""


@dataclass(frozen=True)
class PatchChart:
    """A grid of patches on a ground, as it lies in the frame."""

    lights: tuple[tuple[float, ...], ...]
    """Light of every patch, row by row: one number for each colour channel."""
    columns: int
    """Patches along a row."""
    size: tuple[int, int] = (480, 120)
    """Columns and rows of the frame, px."""
    middle: tuple[float, float] | None = None
    """The grid's centre; None is the frame's."""
    pitch: tuple[float, float] = (36.0, 90.0)
    """Width and height of a patch with its share of the gap, px."""
    gap: float = 0.0
    """Share of the pitch between patches."""
    turned: float = 0.0
    """Degrees, clockwise on screen."""
    keystone: tuple[float, float] = (0.0, 0.0)
    """Change of scale over the grid's half width and half height, as a share."""
    ground: tuple[float, ...] = (0.5,)
    """Light around and between the patches, by channel."""
    slope: float = 0.0
    """Change of the illumination from left to right border of the frame, over its mean."""

    @property
    def rows(self) -> int:
        """Rows of patches."""
        return len(self.lights) // self.columns

    def at(self, patch: Values) -> Values:
        """Return px of the frame (n, 2) for places in patches from the grid's upper left corner, (n, 2)."""
        across = (patch - np.array([self.columns, self.rows]) / 2) * np.array(self.pitch)
        half = np.array(self.pitch) * np.array([self.columns, self.rows]) / 2
        across = across / (1 + (across / half) @ np.array(self.keystone))[:, None]
        turn = np.radians(self.turned)
        matrix = np.array([[np.cos(turn), -np.sin(turn)], [np.sin(turn), np.cos(turn)]])
        middle = np.array(self.middle or (self.size[0] / 2, self.size[1] / 2))
        return np.asarray(across @ matrix.T + middle)

    def _patch(self, x: Values, y: Values) -> tuple[Values, Values]:
        """Return places in patches of px of the frame, the inverse of `at`."""
        middle = self.middle or (self.size[0] / 2, self.size[1] / 2)
        turn = np.radians(self.turned)
        a, b = x - middle[0], y - middle[1]
        u, v = np.cos(turn) * a + np.sin(turn) * b, -np.sin(turn) * a + np.cos(turn) * b
        half = np.array(self.pitch) * np.array([self.columns, self.rows]) / 2
        k = np.array(self.keystone) / half
        # u = s / (1 + k.s) for the flat place s: s = u / (1 - k.u)
        whole = 1 - (k[0] * u + k[1] * v)
        return u / whole / self.pitch[0] + self.columns / 2, v / whole / self.pitch[1] + self.rows / 2

    def light(self) -> Values:
        """Return the light of every pixel, rows × columns × channels, by means of 4 × 4 places in each."""
        width, height = self.size
        values, ground = np.array(self.lights), np.array(self.ground)
        out = np.zeros((height, width, values.shape[1]))
        for dy in WITHIN:
            for dx in WITHIN:
                x, y = np.meshgrid(np.arange(width) + dx, np.arange(height) + dy)
                u, v = self._patch(x, y)
                i, j = np.floor(v).astype(int), np.floor(u).astype(int)
                clear = (np.abs(u - j - 0.5) <= (1 - self.gap) / 2) & (np.abs(v - i - 0.5) <= (1 - self.gap) / 2)
                there = (i >= 0) & (i < self.rows) & (j >= 0) & (j < self.columns) & clear
                number = np.clip(i, 0, self.rows - 1) * self.columns + np.clip(j, 0, self.columns - 1)
                out += np.where(there[..., None], values[number], ground)
        fall = 1 + self.slope * ((np.arange(width) + 0.5) / width - 0.5)
        return np.asarray(out / 16 * fall[None, :, None])

    def centres(self) -> Values:
        """Return the patches' centres (n, 2), px of the frame."""
        x, y = np.meshgrid(np.arange(self.columns) + 0.5, np.arange(self.rows) + 0.5)
        return self.at(np.column_stack([x.ravel(), y.ravel()]))


def srgb_code(light: Values) -> Values:
    """Return the code share of a light share by IEC 61966-2-1, formula for encoding."""
    small = np.clip(light, 0, None)
    return np.where(small <= 0.0031308, 12.92 * small, 1.055 * np.maximum(small, 0.0031308) ** (1 / 2.4) - 0.055)


@dataclass(frozen=True)
class Recorder:
    """What turns light into codes."""

    bits: int = 12
    """Bits of a code."""
    black: float = 64.0
    """Code without light."""
    white: float = 4095.0
    """Code at which it clips."""
    tone: str = "linear"
    """`linear`, `srgb` or the exponent g of code = light ** (1 / g)."""
    electrons: float = 10_000.0
    """Electrons at a light of 1, for shot noise; 0 is none."""
    read: float = 0.0
    """Read noise, share of the range."""
    pattern: float = 0.0
    """Standard deviation of each pixel's own gain."""
    mosaic: str = "none"
    """Colour filter order; the light needs three channels."""

    def curve(self, light: Values) -> Values:
        """Return the code share of a light share."""
        if self.tone == "linear":
            return light
        if self.tone == "srgb":
            return srgb_code(light)
        return np.asarray(np.clip(light, 0, None) ** (1 / float(self.tone)))

    def expected(self, light: Values) -> Values:
        """Return the mean code share of a light share: a bent curve and noise move it off the curve.

        Gauss-Hermite quadrature with 40 places.
        """
        places, weights = np.polynomial.hermite_e.hermegauss(40)
        sigma = np.sqrt((np.clip(light, 0, None) / self.electrons if self.electrons else 0.0) + self.read**2)
        seen = np.asarray(light)[..., None] + np.asarray(sigma)[..., None] * places
        share = self.curve(seen) if self.tone == "linear" else np.sign(seen) * self.curve(np.abs(seen))
        return np.asarray(share @ weights / np.sqrt(2 * np.pi))

    def codes(self, light: Values, rng: np.random.Generator, count: int = 1) -> list[NDArray[np.uint16]]:
        """Return frames of the same light (rows × columns × channels), each with its own noise."""
        if self.mosaic != "none":
            light = self._cells(light)
        light = light * (1 + self.pattern * rng.standard_normal(light.shape))
        return [self._one(light, rng) for _ in range(count)]

    def _cells(self, light: Values) -> Values:
        out = np.empty((*light.shape[:2], 1))
        for n, letter in enumerate(self.mosaic):
            out[n // 2 :: 2, n % 2 :: 2, 0] = light[n // 2 :: 2, n % 2 :: 2, "RGB".index(letter)]
        return out

    def _one(self, light: Values, rng: np.random.Generator) -> NDArray[np.uint16]:
        seen = light
        if self.electrons:
            seen = light + np.sqrt(np.clip(light, 0, None) / self.electrons) * rng.standard_normal(light.shape)
        seen = seen + self.read * rng.standard_normal(light.shape)
        share = self.curve(seen) if self.tone == "linear" else np.sign(seen) * self.curve(np.abs(seen))
        codes = np.clip(np.round(self.black + (self.white - self.black) * share), 0, self.white)
        out = codes.astype(np.uint16)
        return out[..., 0] if out.shape[2] == 1 else out


def grey(lights: Sequence[float]) -> tuple[tuple[float, ...], ...]:
    """Return lights of a chart without colour."""
    return tuple((float(light),) for light in lights)


def wedge(count: int = 20, step: float = 0.1, brightest: float = 0.9) -> tuple[float, ...]:
    """Return reflectances of a wedge of equal steps of density, bright to dark."""
    return tuple(float(brightest * 10 ** (-step * n)) for n in range(count))


def blocks(lights: Values, columns: int, side: int) -> Values:
    """Return the light of square patches of whole pixels, side by side, without ground: rows × columns × channels.

    Args:
        lights: Patches × channels.
        columns: Patches along a row.
        side: px.
    """
    grid = lights.reshape(-1, columns, lights.shape[1])
    return np.asarray(grid.repeat(side, axis=0).repeat(side, axis=1))
