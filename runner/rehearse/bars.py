"""Bars and spaces of equal width: groups of many bars, painted on cells."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from runner.rehearse.optics import Values
from runner.rehearse.scene import Picture


@dataclass(frozen=True)
class Group:
    """A square full of bars."""

    place_mm: tuple[float, float]
    """Its centre from the chart's middle, to the right and down."""
    side_mm: float
    """Side of the square."""
    period_mm: float
    """A bar and a space."""
    direction: float
    """Direction of the bars' normal from the right, clockwise as seen, degrees."""

    def covered(self, x: Values, y: Values, side: float) -> Picture:
        """Return the share of each cell that dark bars cover."""
        u, v, turn = x - self.place_mm[0], y - self.place_mm[1], np.deg2rad(self.direction)
        along = (u * np.cos(turn) + v * np.sin(turn)) / self.period_mm
        soft = side * (abs(np.cos(turn)) + abs(np.sin(turn))) / self.period_mm  # what a cell spans of a period
        away = 0.25 - np.abs((along + 0.5) % 1 - 0.5)  # from the nearest bar's border, inwards
        inside = np.minimum(self.side_mm / 2 - np.abs(u), self.side_mm / 2 - np.abs(v))
        return np.asarray(np.clip(0.5 + away / soft, 0, 1) * np.clip(0.5 + inside / side, 0, 1))


@dataclass(frozen=True)
class BarChart:
    """Dark bars on a bright ground."""

    bright: float
    """Light of the ground relative to a white board."""
    dark: float
    """Light of the bars."""
    groups: Mapping[str, Group]
    """Groups by name; they do not overlap."""

    @property
    def contrast(self) -> float:
        """(bright - dark) / (bright + dark)."""
        return (self.bright - self.dark) / (self.bright + self.dark)

    def paint(self, x: Values, y: Values, side: float) -> Picture:
        """Return the mean light of cells."""
        covered = sum(group.covered(x, y, side) for group in self.groups.values())
        return np.asarray(self.bright - (self.bright - self.dark) * covered)
