"""Even patches, each with a light of its own for every colour: black areas, grey steps, colour patches."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from runner.rehearse.optics import Values
from runner.rehearse.scene import Picture

Colour = tuple[float, float, float]
"""Light in red, green and blue, each relative to a white board's."""


@dataclass(frozen=True)
class Area:
    """One upright rectangle."""

    place_mm: tuple[float, float]
    """Its centre from the chart's middle, to the right and down."""
    size_mm: tuple[float, float]
    """Width and height."""
    light: Colour
    """What it sends out."""


@dataclass(frozen=True)
class PatchChart:
    """Patches on an even ground."""

    ground: Colour
    """Light between the patches."""
    areas: Mapping[str, Area]
    """Patches by name; they do not overlap."""

    def paint(self, x: Values, y: Values, side: float, colour: int) -> Picture:
        """Return the mean light of cells in one colour (0 red, 1 green, 2 blue)."""
        light = np.full(np.broadcast_shapes(x.shape, y.shape), self.ground[colour])
        for area in self.areas.values():
            across, down = (
                np.clip(0.5 + (size / 2 - np.abs(at - middle)) / side, 0, 1)
                for at, middle, size in zip((x, y), area.place_mm, area.size_mm, strict=True)
            )
            light += (area.light[colour] - self.ground[colour]) * across * down
        return light
