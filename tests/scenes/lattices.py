"""Dot grids and chequered boards seen by a pinhole camera with a distorting lens, as integrals over pixels.

Shares nothing with the program under test. Positions are px of the frame from its outer upper left corner (pixel
centres at +0.5), x to the right, y down; places on the chart are counted in pitches from its first dot or corner.

A pattern is drawn on cells of a quarter of a pixel, each with the share of its area that is covered, blurred there by a
Gaussian, and averaged over each pixel. The centre of a drawn disc lies within 0.001 px of the truth.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import gaussian_filter

Values = NDArray[np.float64]

CELLS = 4
"""Cells along a pixel's side."""
MARGIN = 8
"""px drawn beyond the frame's border, so that blur finds something there."""


@dataclass(frozen=True)
class LatticeScene:
    """A flat chart under a camera: where each place lies, and what the frame shows."""

    size: tuple[int, int] = (320, 240)
    """Columns and rows of the frame."""
    places: tuple[int, int] = (13, 9)
    """Dots, or inner corners of a board, along rows and columns."""
    pitch: float = 22.0
    """px per pitch where the optical axis meets the chart, before distortion."""
    shift: tuple[float, float] | None = None
    """px from the optical centre to the middle of the chart; None centres the chart in the frame."""
    turn: float = 0.0
    """Degrees by which rows lean clockwise."""
    tilt: tuple[float, float] = (0.0, 0.0)
    """Degrees about the x and y axes."""
    focal: float = 400.0
    """Focal length, px; distance of the chart's middle is such that the pitch comes out."""
    centre: tuple[float, float] = (0.0, 0.0)
    """px from the frame's centre to the optical centre."""
    radial: tuple[float, ...] = ()
    """k1, k2 … of the ideal radius over half the frame's diagonal."""
    tangential: tuple[float, float] = (0.0, 0.0)
    """p1, p2 likewise (D. C. Brown, Photogrammetric Engineering 32 (1966) 444)."""
    scale: float = 1.0
    """Of the distorted picture about the optical centre: a colour's magnification."""
    moved: tuple[float, float] = (0.0, 0.0)
    """px that the distorted picture is moved by: a colour's shift."""
    radius: float = 0.25
    """Of a dot, in pitches."""
    missing: tuple[tuple[int, int], ...] = ()
    """Dots that are not there, or corners that a blot hides."""
    marks: tuple[tuple[int, int], ...] = ()
    """Dots that are larger, or squares that hold a disc of the other colour."""
    larger: float = 1.5
    """Diameter of a larger dot over that of the others."""
    blur: float = 0.8
    """Standard deviation of the Gaussian, px."""
    bright: float = 0.8
    """Light of the ground at the frame's centre."""
    dark: float = 0.1
    """Light of a dot, or a dark square, there."""
    shading: tuple[float, float] = (0.0, 0.0)
    """Relative change of all light from the centre to the right and to the lower border."""
    mirrored: bool = False
    """The chart is seen from behind."""

    @property
    def middle(self) -> Values:
        """Optical centre, px of the frame."""
        return np.asarray(np.array(self.size) / 2 + np.array(self.centre))

    @property
    def half(self) -> float:
        """Half the frame's diagonal, px."""
        return float(np.hypot(self.size[0], self.size[1])) / 2

    def turned(self) -> Values:
        """Return the rotation from the chart's axes to the camera's, 3 × 3."""
        a, b, c = np.radians([self.tilt[0], self.tilt[1], self.turn])
        about_x = np.array([[1, 0, 0], [0, np.cos(a), -np.sin(a)], [0, np.sin(a), np.cos(a)]])
        about_y = np.array([[np.cos(b), 0, np.sin(b)], [0, 1, 0], [-np.sin(b), 0, np.cos(b)]])
        about_z = np.array([[np.cos(c), -np.sin(c), 0], [np.sin(c), np.cos(c), 0], [0, 0, 1]])
        return np.asarray(about_y @ about_x @ about_z)

    def plane(self) -> Values:
        """Return the homography from places to ideal px about the optical centre, 3 × 3."""
        shift = -np.array(self.centre) if self.shift is None else np.array(self.shift)
        m = self.turned()
        middle = (np.array(self.places) - 1) / 2
        flip = -1.0 if self.mirrored else 1.0
        columns = np.stack([m[:, 0] * flip, m[:, 1]], axis=1) * self.pitch
        offset = np.array([*shift, self.focal]) - columns @ middle
        h = np.column_stack([columns, offset])
        h[2] /= self.focal
        return np.asarray(h)

    def ideal(self, places: Values) -> Values:
        """Return where a pinhole shows places (n, 2), px about the optical centre."""
        h = self.plane()
        out = np.column_stack([places, np.ones(len(places))]) @ h.T
        return np.asarray(out[:, :2] / out[:, 2:])

    def distorted(self, ideal: Values) -> Values:
        """Return where the lens shows ideal positions (n, 2), px about the optical centre."""
        n = ideal / self.half
        r2 = (n**2).sum(axis=1)
        factor = 1 + sum(k * r2 ** (i + 1) for i, k in enumerate(self.radial))
        p1, p2 = self.tangential
        x, y = n.T
        aside = np.column_stack([2 * p1 * x * y + p2 * (r2 + 2 * x**2), p1 * (r2 + 2 * y**2) + 2 * p2 * x * y])
        return np.asarray((n * np.reshape(factor, (-1, 1)) + aside) * self.half)

    def seen(self, places: Values) -> Values:
        """Return where places (n, 2) lie in the frame, px."""
        return np.asarray(self.distorted(self.ideal(places)) * self.scale + self.middle + np.array(self.moved))

    def places_at(self, points: Values) -> Values:
        """Return the places (n, 2) that points of the frame show: the lens undone, then the inverse plane."""
        wanted = (points - self.middle - np.array(self.moved)) / self.scale
        ideal = self._undone(wanted)
        if any(self.tangential):
            for _ in range(60):  # radial terms undone exactly, the small tangential ones step by step
                shown = self.distorted(ideal)
                ideal = ideal + self._undone(wanted) - self._undone(shown)
                if np.abs(shown - wanted).max() < 1e-9:
                    break
        out = np.column_stack([ideal, np.ones(len(ideal))]) @ np.linalg.inv(self.plane()).T
        return np.asarray(out[:, :2] / out[:, 2:])

    def _undone(self, seen: Values) -> Values:
        """Return ideal positions whose radial terms give these, px about the centre; far away where none do."""
        grid = np.linspace(0, 4, 4001)
        shown = grid * (1 + sum(k * grid ** (2 * i) for i, k in enumerate(self.radial, 1)))
        falls = np.flatnonzero(np.diff(shown) <= 0)
        last = falls[0] if len(falls) else len(grid) - 1
        wanted = np.maximum(np.hypot(*seen.T) / self.half, 1e-12)
        r = np.interp(wanted, shown[: last + 1], grid[: last + 1], right=4.0)
        for _ in range(3):
            value = r * (1 + sum(k * r ** (2 * i) for i, k in enumerate(self.radial, 1)))
            slope = 1 + sum((2 * i + 1) * k * r ** (2 * i) for i, k in enumerate(self.radial, 1))
            r = np.where(wanted < shown[last], r - (value - wanted) / np.maximum(slope, 0.05), r)
        return np.asarray(seen * (r / wanted)[:, None])

    def all_places(self) -> Values:
        """Return every place of the chart, row after row, (n, 2)."""
        columns, rows = self.places
        v, u = np.mgrid[0:rows, 0:columns]
        return np.column_stack([u.ravel(), v.ravel()]).astype(np.float64)

    def _cells(self) -> tuple[Values, Values, Values, Values]:
        """Return u and v of every cell, and the gradients of both by px (2 × rows × columns of px)."""
        w, h = self.size[0] + 2 * MARGIN, self.size[1] + 2 * MARGIN
        x, y = np.meshgrid(np.arange(w) + 0.5 - MARGIN, np.arange(h) + 0.5 - MARGIN)
        at = self.places_at(np.column_stack([x.ravel(), y.ravel()])).reshape(h, w, 2)
        down, across = (np.asarray(np.gradient(at, axis=axis)) for axis in (0, 1))
        offsets = (np.arange(CELLS) + 0.5) / CELLS - 0.5
        shape = (h * CELLS, w * CELLS)
        parts = []
        for k in (0, 1):
            cell = (
                at[:, None, :, None, k]
                + offsets[None, :, None, None] * down[:, None, :, None, k]
                + offsets[None, None, None, :] * across[:, None, :, None, k]
            )
            parts.append(cell.reshape(shape))
        grow = [np.stack([across[..., k], down[..., k]]).repeat(CELLS, 1).repeat(CELLS, 2) for k in (0, 1)]
        return parts[0], parts[1], grow[0], grow[1]

    def _finished(self, covered: Values) -> Values:
        """Blur cells that are covered by so much of dark, average them over pixels, and light the frame."""
        soft = gaussian_filter(covered, self.blur * CELLS) if self.blur else covered
        h, w = soft.shape[0] // CELLS, soft.shape[1] // CELLS
        share = soft.reshape(h, CELLS, w, CELLS).mean(axis=(1, 3))[MARGIN:-MARGIN, MARGIN:-MARGIN]
        x, y = np.arange(self.size[0]) + 0.5, np.arange(self.size[1]) + 0.5
        across = self.shading[0] * (2 * x / self.size[0] - 1)
        down = self.shading[1] * (2 * y / self.size[1] - 1)
        lamp = 1 + across[None, :] + down[:, None]
        light = np.asarray(lamp * (self.bright + (self.dark - self.bright) * share))
        light.flags.writeable = False
        return light

    @lru_cache(maxsize=32)  # noqa: B019 - scenes are few, and tests share them
    def dots(self) -> Values:
        """Return the light of a dot grid without noise, rows × columns; not to be written to."""
        u, v, grow_u, grow_v = self._cells()
        i, j = np.round(u), np.round(v)
        du, dv = u - i, v - j
        rho = np.maximum(np.hypot(du, dv), 1e-9)
        steep = np.hypot(du / rho * grow_u[0] + dv / rho * grow_v[0], du / rho * grow_u[1] + dv / rho * grow_v[1])
        inside = (i >= 0) & (i < self.places[0]) & (j >= 0) & (j < self.places[1])
        radius = np.full(u.shape, self.radius)
        for a, b in self.marks:
            radius[(i == a) & (j == b)] *= self.larger
        for a, b in self.missing:
            inside &= ~((i == a) & (j == b))
        covered = np.clip(0.5 + (radius - rho) / steep * CELLS, 0, 1) * inside
        return self._finished(covered)

    @lru_cache(maxsize=32)  # noqa: B019 - scenes are few, and tests share them
    def board(self) -> Values:
        """Return the light of a chequered board without noise, rows × columns; the square above the first is dark.

        Not to be written to.
        """
        u, v, grow_u, grow_v = self._cells()
        sign = np.ones(u.shape)
        for at, grow, count in ((u, grow_u, self.places[0]), (v, grow_v, self.places[1])):
            nearest = np.clip(np.round(at), 0, count - 1)  # the outer border is cut below
            away = (at - nearest) / np.hypot(*grow) * CELLS
            sign *= np.where(nearest % 2 == 0, 1.0, -1.0) * np.clip(2 * away, -1, 1)
        columns, rows = self.places
        inside = (u > -1) & (u < columns) & (v > -1) & (v < rows)
        dark = np.where(inside, (1 + sign) / 2, 0.0)
        for a, b in self.marks:
            disc = np.hypot(u - a - 0.5, v - b - 0.5) < self.radius
            dark[disc] = 1 - np.round(dark[disc])
        for a, b in self.missing:
            dark[np.hypot(u - a, v - b) < 0.4] = 0.5
        return self._finished(dark)


def noisy(light: Values, sigma: float, rng: np.random.Generator) -> Values:
    """Return light with white noise."""
    return np.asarray(light + rng.normal(0, sigma, light.shape))


def mosaic_of(colours: Sequence[Values], pattern: str) -> Values:
    """Return one picture that takes each pixel from red, green or blue as a mosaic has it.

    Args:
        colours: Light in red, green and blue, rows × columns.
        pattern: Four letters, row by row.
    """
    out = np.empty_like(colours[0])
    for n, letter in enumerate(pattern):
        out[n // 2 :: 2, n % 2 :: 2] = colours["RGB".index(letter)][n // 2 :: 2, n % 2 :: 2]
    return out


def colours(scene: LatticeScene, red: float, blue: float) -> tuple[LatticeScene, LatticeScene, LatticeScene]:
    """Return the scene in red, green and blue, with the magnifications of red and blue over green's less 1."""
    return replace(scene, scale=1 + red), scene, replace(scene, scale=1 + blue)
