"""Whether a frame is an even field at all, and not a picture of something.

An even field is light that changes slowly, noise from pixel to pixel, rows and columns of their own, and a few spots.
Means of blocks of pixels then scatter about a slow surface by what the pixels' noise leaves in them; in a picture of
anything else they scatter as much as the pixels do. Two figures tell it, both in units of the scatter within a block
over the block's width, which white noise makes 1:

- mixed second differences of four blocks, in which rows, columns and slopes cancel;
- what a polynomial of order 6 and the medians of rows and columns leave of the means.

A steep or kinked fall of light raises either of them, but not both. Medians all along: spots and hot pixels do not
count. Noise that a filter has gone over raises both by the width of the filter.

References:
    F. Mosteller and J. W. Tukey, Data Analysis and Regression (1977), ch. 9 (medians of rows and columns).
    Limits: common practice, no source; see the test, which measures photographs and fields.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]

WIDTH = 16
"""Width of a block, px; an eighth of the shorter side in small frames, 4 at least."""
LEAST_WIDTH = 4
"""Narrowest blocks."""
MOST_BLOCKS = 24
"""Blocks along each side; in larger frames they lie apart."""
FAR = 6.0
"""Times a block's own spread to which its pixels are cut: hot ones do not move its mean."""
LEAST_REACH = 2.0
"""Whole codes that are never cut: of a noise below one code the spread about the median may be zero."""
ORDER = 6
"""Order of the slow surface."""
MOST_MIXED = 3.6
"""Mixed differences of a picture lie above; noise through a 3 × 3 mean makes 3, steep light in a small frame 4."""
MOST_LEFT = 4.6
"""What is left of a picture lies above; the kink where a rim begins to cut reaches 12."""


@dataclass(frozen=True)
class Structure:
    """Scatter of block means over what white noise of the blocks' pixels would make."""

    mixed: float
    """Of mixed second differences of four blocks."""
    left: float
    """Of means, slow surface, rows and columns taken off."""

    def of_a_picture(self, width: float = 1.0) -> bool:
        """Tell whether there is more than an even field has.

        Args:
            width: Times as much is allowed, for noise that a filter has gone over.
        """
        return self.mixed > width * MOST_MIXED and self.left > width * MOST_LEFT


def structure(codes: NDArray[Any]) -> Structure:
    """Measure the structure of a frame.

    Args:
        codes: Stored codes, rows × columns; of less than 32 a side, too few to tell, nothing is found.
    """
    if min(codes.shape) < 8 * LEAST_WIDTH:
        return Structure(0.0, 0.0)
    width = int(np.clip(min(codes.shape) // 8, LEAST_WIDTH, WIDTH))
    means, within = _blocks(codes, width, 1)
    fours, _ = _blocks(codes, width, 2)
    mixed = fours[::2, ::2] - fours[::2, 1::2] - fours[1::2, ::2] + fours[1::2, 1::2]
    unit = max(within, 12**-0.5) / width
    return Structure(_scatter(mixed) / 2 / unit, _left(means) / unit)


def _scatter(values: Real) -> float:
    return 1.4826 * float(np.median(np.abs(values)))


def _blocks(codes: NDArray[Any], width: int, together: int) -> tuple[Real, float]:
    """Return the means of blocks spread over the frame, so many each way side by side, and the scatter within them."""
    side = together * width
    taken = codes
    for axis, size in enumerate(codes.shape):
        first = np.round(np.linspace(0, size - side, min(MOST_BLOCKS // together, size // side))).astype(np.intp)
        taken = taken.take((first[:, None] + np.arange(side)).ravel(), axis=axis)
    rows, columns = (size // width for size in taken.shape)
    parts = taken.astype(np.float64).reshape(rows, width, columns, width).transpose(0, 2, 1, 3)
    blocks: Real = parts.reshape(rows, columns, width**2)
    middle = np.median(blocks, axis=2, keepdims=True)
    least = LEAST_REACH if codes.dtype.kind in "ui" else 0.0
    reach = np.maximum(least, FAR * 1.4826 * np.median(np.abs(blocks - middle), axis=2, keepdims=True))
    blocks = np.clip(blocks, middle - reach, middle + reach)
    return np.asarray(blocks.mean(axis=2)), float(np.median(blocks.std(axis=2)))


def _left(means: Real) -> float:
    """Return the scatter of means about a slow surface and the medians of rows and columns."""
    down, across = means.shape
    order = min(ORDER, min(means.shape) - 2)
    y, x = np.linspace(-1, 1, down), np.linspace(-1, 1, across)
    powers = [(a, b) for a in range(order + 1) for b in range(order + 1 - a)]
    terms = np.column_stack([np.outer(y**b, x**a).ravel() for a, b in powers])
    left = (means.ravel() - terms @ np.linalg.lstsq(terms, means.ravel(), rcond=None)[0]).reshape(means.shape)
    for _ in range(3):
        left = left - np.median(left, axis=1, keepdims=True)
        left = left - np.median(left, axis=0, keepdims=True)
    free = max(0.3, 1 - (len(powers) + down + across) / means.size)
    return _scatter(left) / float(np.sqrt(free))
