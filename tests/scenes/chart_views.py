"""Frames of flat charts of ring marks in closed form: perspective, a lens, blur, shading, noise, 12-bit codes.

The lens is given from the frame to the ideal picture, so that no model that goes the other way fits it exactly:

    d = (px - frame centre) / half diagonal;   ideal = d (1 + a |d|² + b |d|⁴);   chart mm = V (ideal)

V is a perspective view. Where a place on the chart is seen is found by bisection along its radius.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

Real = NDArray[np.float64]
BLACK, WHITE = 64, 4095
FINE = 6
"""Samples of a pixel each way."""


@dataclass(frozen=True)
class View:
    """How a chart is seen."""

    size: tuple[int, int] = (1600, 1200)
    """Columns, rows."""
    scale: float = 6.0
    """px to a mm in the middle."""
    turn: float = 0.0
    """Degrees clockwise."""
    shift: tuple[float, float] = (0.0, 0.0)
    """px of the chart's centre from the frame's."""
    keystone: tuple[float, float] = (0.0, 0.0)
    """Change of scale over a half diagonal, across and down."""
    lens: tuple[float, float] = (0.0, 0.0)
    """a and b."""
    mirrored: bool = False
    """Left and right exchanged."""

    @property
    def _matrix(self) -> Real:
        c, s = np.cos(np.radians(self.turn)), np.sin(np.radians(self.turn))
        half = np.hypot(*self.size) / 2
        plain = self.scale / half * np.array([[c, -s], [s, c]]) @ np.diag([-1.0 if self.mirrored else 1.0, 1.0])
        move = np.array(self.shift)[:, None] / half
        tilt = np.array([self.keystone]) @ plain
        return np.block([[plain + move @ tilt, move], [tilt, np.ones((1, 1))]])

    def to_chart(self, px: Real) -> Real:
        """Turn px (n, 2), pixel centres at +0.5, into mm."""
        d = (px - np.array(self.size) / 2) / (np.hypot(*self.size) / 2)
        r2 = np.sum(d * d, axis=1, keepdims=True)
        ideal = d * (1 + r2 * (self.lens[0] + r2 * self.lens[1]))
        mapped = np.column_stack([ideal, np.ones(len(ideal))]) @ np.linalg.inv(self._matrix).T
        return np.asarray(mapped[:, :2] / mapped[:, 2:])

    def to_frame(self, mm: Real) -> Real:
        """Turn mm (n, 2) into px."""
        mapped = np.column_stack([mm, np.ones(len(mm))]) @ self._matrix.T
        ideal = mapped[:, :2] / mapped[:, 2:]
        r = np.hypot(ideal[:, 0], ideal[:, 1])
        low, high = np.zeros_like(r), np.full_like(r, 3.0)
        for _ in range(60):
            middle = (low + high) / 2
            m2 = middle * middle
            below = middle * (1 + m2 * (self.lens[0] + m2 * self.lens[1])) < r
            low, high = np.where(below, middle, low), np.where(below, high, middle)
        d = ideal * np.divide(low, r, out=np.ones_like(r), where=r > 0)[:, None]
        return np.asarray(d * np.hypot(*self.size) / 2 + np.array(self.size) / 2)


@dataclass(frozen=True)
class Patch:
    """A part of the chart with a picture of its own."""

    centre: tuple[float, float]
    """mm."""
    half: tuple[float, float]
    """Half its width and height, mm."""
    light: Callable[[Real, Real], Real]
    """Reflectance at x, y in mm from its centre."""


def ring(at: tuple[float, float], diameter: float, hole: float, ink: float, ground: float) -> Patch:
    """Return a disc with a hole, on its ground."""

    def light(x: Real, y: Real) -> Real:
        r = np.hypot(x, y)
        return np.where((r < diameter / 2) & (r > hole / 2), ink, ground)

    return Patch(at, (0.75 * diameter, 0.75 * diameter), light)


def edge(at: tuple[float, float], half: tuple[float, float], angle: float, dark: float, bright: float) -> Patch:
    """Return a straight edge through the centre; the angle is the direction from dark to bright, clockwise."""
    c, s = np.cos(np.radians(angle)), np.sin(np.radians(angle))
    return Patch(at, half, lambda x, y: np.where(c * x + s * y > 0, bright, dark))


@dataclass(frozen=True)
class Scene:
    """A chart in front of a camera."""

    patches: Sequence[Patch]
    """What it carries."""
    ground: float = 0.8
    """Reflectance elsewhere."""
    view: View = field(default_factory=View)
    """How it is seen."""
    blur: float = 0.8
    """Standard deviation of the lens' Gaussian, px."""
    exposure: float = 0.9
    """Light of a perfect white, of the range."""
    noise: float = 0.0
    """DN."""
    shading: float = 0.0
    """Fall of the light from left to right, a fraction."""

    def codes(self, seed: int = 0) -> NDArray[np.uint16]:
        """Return the frame."""
        columns, rows = self.view.size
        light = np.full((rows, columns), self.ground)
        for patch in self.patches:
            self._paint(light, patch)
        light *= self.exposure * (1 - self.shading * (np.arange(columns) / columns)[None])
        codes = BLACK + (WHITE - BLACK) * light
        codes += np.random.default_rng(seed).normal(0, self.noise, codes.shape) if self.noise else 0
        return np.asarray(np.clip(np.rint(codes), 0, WHITE), dtype=np.uint16)

    def _paint(self, light: Real, patch: Patch) -> None:
        ends = np.linspace(-1, 1, 9)
        ones = np.ones(9)
        rim = np.concatenate(
            [np.column_stack(side) for side in ((ends, ones), (ends, -ones), (ones, ends), (-ones, ends))]
        )
        seen = self.view.to_frame(np.array(patch.centre) + rim * np.array(patch.half))
        more = int(np.ceil(4 * self.blur)) + 2
        x0, y0 = np.floor(seen.min(axis=0)).astype(int) - more
        x1, y1 = np.ceil(seen.max(axis=0)).astype(int) + more
        if x1 <= 0 or y1 <= 0 or x0 >= light.shape[1] or y0 >= light.shape[0]:
            return
        y, x = ((np.arange(a * FINE, b * FINE) + 0.5) / FINE for a, b in ((y0, y1), (x0, x1)))
        grid = np.stack(np.meshgrid(x, y), axis=-1).reshape(-1, 2)
        place = self.view.to_chart(grid) - np.array(patch.centre)
        inside = np.all(np.abs(place) <= np.array(patch.half), axis=1)
        fine = np.where(inside, patch.light(place[:, 0], place[:, 1]), self.ground).reshape(len(y), len(x))
        fine = ndimage.gaussian_filter(fine, self.blur * FINE, mode="nearest") if self.blur else fine
        pixels = fine.reshape(y1 - y0, FINE, x1 - x0, FINE).mean(axis=(1, 3))
        top, left = max(y0, 0), max(x0, 0)
        bottom, right = min(y1, light.shape[0]), min(x1, light.shape[1])
        light[top:bottom, left:right] += pixels[top - y0 : bottom - y0, left - x0 : right - x0] - self.ground
