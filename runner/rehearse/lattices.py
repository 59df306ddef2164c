"""Dots on a square lattice and chequered boards with marks, painted on cells."""

from dataclasses import dataclass

import numpy as np

from runner.rehearse.optics import Values
from runner.rehearse.scene import Picture

Marks = tuple[tuple[int, int], ...]
"""Columns and rows of what is marked."""


@dataclass(frozen=True)
class DotGrid:
    """Dark dots on a bright ground; marks are larger dots."""

    columns: int
    """Dots along rows."""
    rows: int
    """Dots along columns."""
    pitch_mm: float
    """From dot to dot."""
    diameter_mm: float
    """Of a dot; marks have half as much again."""
    bright: float
    """Light of the ground relative to a white board."""
    dark: float
    """Light of the dots."""
    marks: Marks = ()
    """Columns and rows of larger dots, from 0."""

    def paint(self, x: Values, y: Values, side: float) -> Picture:
        """Return the mean light of cells, a dot's border taken for straight inside a cell."""
        u, v = x / self.pitch_mm + (self.columns - 1) / 2, y / self.pitch_mm + (self.rows - 1) / 2
        i = np.clip(np.rint(u), 0, self.columns - 1).astype(np.intp)
        j = np.clip(np.rint(v), 0, self.rows - 1).astype(np.intp)
        radius = np.full((self.rows, self.columns), self.diameter_mm / 2)
        for column, row in self.marks:
            radius[row, column] *= 1.5
        away = radius[j, i] - np.hypot(u - i, v - j) * self.pitch_mm
        return np.asarray(self.bright - (self.bright - self.dark) * np.clip(0.5 + away / side, 0, 1))


@dataclass(frozen=True)
class Board:
    """A chequered board on a bright ground; marks are discs of the other colour in the middle of squares."""

    columns: int
    """Inner corners along rows: one square fewer than there are."""
    rows: int
    """Inner corners along columns."""
    square_mm: float
    """Side of a square."""
    bright: float
    """Light of bright squares and of the ground."""
    dark: float
    """Light of dark squares."""
    marks: Marks = ()
    """Squares with a disc, named by the corner at their upper left."""

    def paint(self, x: Values, y: Values, side: float) -> Picture:
        """Return the mean light of cells, exact where one border crosses them."""
        u, v = x / self.square_mm + (self.columns - 1) / 2, y / self.square_mm + (self.rows - 1) / 2
        fine = side / self.square_mm
        sign = _flips(u, self.columns, fine) * _flips(v, self.rows, fine)
        inside = np.ones(sign.shape)
        for at, count in ((u, self.columns), (v, self.rows)):
            inside = inside * np.clip(0.5 + np.minimum(at + 1, count - at) / fine, 0, 1)
        covered = (1 + sign) / 2 * inside
        for column, row in self.marks:
            disc = np.clip(0.5 + (0.25 - np.hypot(u - column - 0.5, v - row - 0.5)) / fine, 0, 1)
            covered = covered + disc * (1 - 2 * covered)
        return np.asarray(self.bright - (self.bright - self.dark) * covered)


def _flips(at: Values, count: int, fine: float) -> Values:
    """Return +1 and -1 from square to square along one axis, corners at whole numbers."""
    nearest = np.clip(np.rint(at), 0, count - 1)
    return np.asarray(np.where(nearest % 2 == 0, 1.0, -1.0) * np.clip(2 * (at - nearest) / fine, -1, 1))
