"""Targets of a few lines, painted on cells: elements of three bars, and a wedge of lines that converge.

References:
    MIL-STD-150A (1959) 5.1.1.7: bars five times as long as wide, spaces as wide as bars.
    ISO 12233:2014: hyperbolic wedges, whose lines' frequency rises evenly along the wedge.
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from runner.rehearse.optics import Values
from runner.rehearse.scene import Picture


@dataclass(frozen=True)
class Element:
    """Three dark bars."""

    place_mm: tuple[float, float]
    """Centre of the middle bar from the chart's middle, to the right and down."""
    frequency: float
    """Line pairs per mm."""
    direction: float
    """Direction of the bars' normal from the right, clockwise as seen, degrees."""

    def covered(self, x: Values, y: Values, side: float) -> Picture:
        """Return the share of each cell that its bars cover."""
        u, v, turn = x - self.place_mm[0], y - self.place_mm[1], np.deg2rad(self.direction)
        across, along = u * np.cos(turn) + v * np.sin(turn), v * np.cos(turn) - u * np.sin(turn)
        soft, width = side * (abs(np.cos(turn)) + abs(np.sin(turn))), 1 / (2 * self.frequency)
        nearest = np.clip(np.rint(across / (2 * width)), -1, 1) * 2 * width
        bars = np.clip(0.5 + (width / 2 - np.abs(across - nearest)) / soft, 0, 1)
        return np.asarray(bars * np.clip(0.5 + (2.5 * width - np.abs(along)) / soft, 0, 1))


@dataclass(frozen=True)
class ElementChart:
    """Elements on a bright ground."""

    bright: float
    """Light of the ground relative to a white board."""
    dark: float
    """Light of the bars."""
    elements: Mapping[str, Element]
    """By name; they do not overlap."""

    def paint(self, x: Values, y: Values, side: float) -> Picture:
        """Return the mean light of cells."""
        covered = sum(element.covered(x, y, side) for element in self.elements.values())
        return np.asarray(self.bright - (self.bright - self.dark) * covered)


@dataclass(frozen=True)
class Wedge:
    """Dark lines on a bright ground, coarse on the left."""

    bright: float
    """Light of the ground relative to a white board."""
    dark: float
    """Light of the lines."""
    lines: int
    """Dark lines, an odd number."""
    length_mm: float
    """From the coarse end to the fine one, about the chart's middle."""
    coarse: float
    """Line pairs per mm at the left end."""
    fine: float
    """Line pairs per mm at the right end."""

    def paint(self, x: Values, y: Values, side: float) -> Picture:
        """Return the mean light of cells; lines are nearly level."""
        share = np.clip(x / self.length_mm + 0.5, 0, 1)
        f = self.coarse + (self.fine - self.coarse) * share
        half = (self.lines - 1) / 2
        away = np.abs(y * f - np.clip(np.rint(y * f), -half, half)) / f
        covered = np.clip(0.5 + (0.25 / f - away) / side, 0, 1)
        inside = np.clip(0.5 + (self.length_mm / 2 - np.abs(x)) / side, 0, 1)
        return np.asarray(self.bright - (self.bright - self.dark) * covered * inside)
