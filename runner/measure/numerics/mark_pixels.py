"""Pixels about many places at once: a colour channel's own ones, as light, with their offsets from each place.

A mosaic's channel has its pixels on one or two lattices of every second row and column. Places are rounded to one of
them, so that the same list of offsets meets own pixels about every place.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]
Whole = NDArray[np.intp]
Short = NDArray[Any]
"""float32, or what becomes it."""


@dataclass(frozen=True)
class Pixels:
    """One channel of one picture."""

    codes: NDArray[np.generic]
    """Stored codes, rows × columns."""
    light: Callable[[NDArray[np.generic]], Real]
    """Turns codes into light."""
    step: int = 1
    """Rows and columns from one own pixel to the next."""
    origins: tuple[tuple[int, int], ...] = ((0, 0),)
    """First row and column of each lattice of own pixels."""

    @property
    def share(self) -> float:
        """Own pixels over all pixels."""
        return len(self.origins) / self.step**2

    def offsets(self, reach: tuple[float, float]) -> Whole:
        """Return own pixels' rows and columns from a base of `bases`, (k, 2), within so many px down and across."""
        down, across = (int(np.ceil(r / self.step)) + 1 for r in reach)
        y, x = np.mgrid[-down : down + 1, -across : across + 1] * self.step
        first = self.origins[0]
        every = [np.column_stack([(y + r - first[0]).ravel(), (x + c - first[1]).ravel()]) for r, c in self.origins]
        return np.concatenate(every).astype(np.intp)

    def bases(self, centres: Real) -> Whole:
        """Return the own pixel nearest to each centre (x, y), (n, 2) as row and column, on the first lattice."""
        origin = np.array(self.origins[0])
        return np.asarray(np.round((centres[:, ::-1] - 0.5 - origin) / self.step).astype(np.intp) * self.step + origin)

    def around(self, bases: Whole, offsets: Whole) -> tuple[Real, Real, Real, NDArray[np.bool_]]:
        """Return light, x and y (px, pixel centres at +0.5) about bases, each (n, k), and which of them exist."""
        rows = bases[:, :1] + offsets[None, :, 0]
        columns = bases[:, 1:] + offsets[None, :, 1]
        high, wide = self.codes.shape
        there = (rows >= 0) & (rows < high) & (columns >= 0) & (columns < wide)
        at = np.where(there, rows * wide + columns, 0)
        return self.light(self.codes.reshape(-1)[at]), np.asarray(columns + 0.5), np.asarray(rows + 0.5), there

    def between(self, points: Real) -> Real:
        """Return the light at points (x, y), (n, 2), linear between all pixels; at the border its pixels' own."""
        rows, columns = self.codes.shape
        x, y = (np.clip(points[:, i] - 0.5, 0, n - 1) for i, n in ((0, columns), (1, rows)))
        left, up = (np.minimum(v.astype(np.intp), n - 2) for v, n in ((x, columns), (y, rows)))
        across, down = x - left, y - up
        upper, lower = (
            self.light(self.codes[r, left]) * (1 - across) + self.light(self.codes[r, left + 1]) * across
            for r in (up, up + 1)
        )
        return np.asarray(upper * (1 - down) + lower * down)


def solved(normal: Real, right: Real) -> Real:
    """Solve n small systems, scaled to unit diagonals; a singular one gives zeros.

    Args:
        normal: (n, p, p), symmetric.
        right: (n, p).
    """
    size = np.sqrt(np.maximum(np.einsum("nii->ni", normal), 1e-30))
    scaled = normal / (size[:, :, None] * size[:, None, :]) + 1e-12 * np.eye(normal.shape[1])
    try:
        out = np.linalg.solve(scaled, (right / size)[..., None])[..., 0]
    except np.linalg.LinAlgError:
        out = np.zeros_like(right)
    return np.asarray(out / size)


def inverses(normal: Real) -> Real:
    """Return the inverses of n small symmetric matrices, as covariances of unit noise; a singular one gives large ones.

    Args:
        normal: (n, p, p).
    """
    size = np.sqrt(np.maximum(np.einsum("nii->ni", normal), 1e-30))
    scaled = normal / (size[:, :, None] * size[:, None, :]) + 1e-12 * np.eye(normal.shape[1])
    return np.asarray(np.linalg.pinv(scaled, hermitian=True) / (size[:, :, None] * size[:, None, :]))


def covered(t: Short, bell: Short) -> Short:
    """Return Φ(-t), given exp(-t²/2), within 1e-7 (Abramowitz and Stegun 1964, equation 26.2.17).

    Args:
        t: Any shape.
        bell: Likewise.
    """
    k = 1 / (1 + np.float32(0.2316419) * np.abs(t))
    sum_of: Short = np.full_like(k, 1.330274429)
    for b in (-1.821255978, 1.781477937, -0.356563782, 0.319381530):
        sum_of = sum_of * k + np.float32(b)
    tail = bell * k * sum_of * np.float32(0.3989422804)
    return np.where(t > 0, tail, 1 - tail)
