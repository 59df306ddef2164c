"""How a lens lights its frame, and the correction that a camera's firmware holds against it.

References:
    The cosine-fourth law of image illumination: W. J. Smith, Modern Optical Engineering, "cosine fourth" (from memory).
"""

from dataclasses import dataclass
from typing import Literal

import numpy as np

from runner.rehearse.scene import Picture

Correction = Literal["none", "right", "mirrored"]
"""What the firmware does about shading."""


@dataclass(frozen=True)
class Illumination:
    """Fall of light of one lens."""

    image_distance_px: float
    """Distance of the exit pupil from the sensor."""
    shift_px: tuple[float, float] = (0.0, 0.0)
    """Where the lens's axis meets the sensor, from its middle, to the right and down."""

    def picture(self, rows: int, columns: int) -> Picture:
        """Return the light of an even field relative to that on the axis, rows × columns."""
        x = np.arange(columns) + 0.5 - columns / 2 - self.shift_px[0]
        y = (np.arange(rows) + 0.5 - rows / 2 - self.shift_px[1])[:, None]
        return np.asarray((1 + (x**2 + y**2) / self.image_distance_px**2) ** -2)


def gains(light: Picture, correction: Correction) -> Picture | None:
    """Return what the firmware multiplies each pixel by, or None for nothing.

    The right table undoes the lens's fall of light against its brightest place. A mirrored one is the same table,
    written with left and right exchanged.

    Args:
        light: Light of an even field, rows × columns.
        correction: What the firmware does.
    """
    if correction == "none":
        return None
    table = np.asarray(light.max() / light)
    return table[:, ::-1] if correction == "mirrored" else table
