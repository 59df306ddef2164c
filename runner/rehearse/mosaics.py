"""Colour of a sensor's pixels: which of red, green and blue each sees, and how well."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from runner.rehearse.scene import Picture

LETTERS = "RGB"


@dataclass(frozen=True)
class Mosaic:
    """The upper left four pixels, row by row, repeated over the sensor."""

    order: str = "RGGB"
    """Four letters of R, G and B."""
    sensitivity: tuple[float, float, float] = (1.0, 1.0, 1.0)
    """Electrons that white light gives in red, green and blue pixels, over those stated for the sensor."""

    def colours(self, shape: tuple[int, int]) -> NDArray[np.intp]:
        """Return 0, 1 or 2 for red, green and blue of every pixel; the shape begins at the mosaic's own corner."""
        four = np.array([LETTERS.index(letter) for letter in self.order]).reshape(2, 2)
        rows, columns = shape
        return np.asarray(np.tile(four, ((rows + 1) // 2, (columns + 1) // 2))[:rows, :columns])

    def taken(self, pictures: Sequence[Picture]) -> Picture:
        """Return what pixels get of the light in red, green and blue, each rows × columns."""
        stack = np.stack([light * part for light, part in zip(pictures, self.sensitivity, strict=True)])
        return np.asarray(np.take_along_axis(stack, self.colours(stack.shape[1:])[None], axis=0)[0])
