"""Whether the levels of patches follow the lights that a chart states, and if not, how the chart may lie instead."""

from collections.abc import Iterator, Sequence

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]

UNEVEN = 0.05
"""Of a level: by so much shading may bring the order of patches of nearly the same light out of step."""
SURE = 3.0
"""Standard uncertainties by which two levels must differ to be out of order."""


def out_of_order(levels: Real, u: Real, lights: Real) -> tuple[int, int] | None:
    """Return the two patches whose levels contradict their lights most, brighter first; None where all fit.

    Args:
        levels: Level of every patch over black.
        u: Their standard uncertainties.
        lights: Light that the chart states for them.
    """
    brighter = lights[:, None] > lights[None, :]
    room = SURE * np.hypot(u[:, None], u[None, :]) + UNEVEN * np.abs(levels)[None, :]
    wrong = np.where(brighter, levels[None, :] - levels[:, None] - room, -np.inf)
    if wrong.max() <= 0:
        return None
    a, b = np.unravel_index(int(wrong.argmax()), wrong.shape)
    return int(a), int(b)


def arrangements(columns: int, rows: int) -> Iterator[tuple[str, Sequence[int]]]:
    """Yield in words how a grid of patches may lie otherwise, with the patch that is seen at each place then.

    A single row looks the same turned by 180° as mirrored, for patches have no hands.
    """
    number = np.arange(columns * rows).reshape(rows, columns)
    if min(columns, rows) == 1:
        yield "turned by 180° or mirrored", number[::-1, ::-1].ravel().tolist()
        return
    yield "turned by 180°", number[::-1, ::-1].ravel().tolist()
    yield "mirrored left to right", number[:, ::-1].ravel().tolist()
    yield "mirrored top to bottom", number[::-1].ravel().tolist()
    if columns == rows:
        yield "turned by 90° clockwise", np.rot90(number, -1).ravel().tolist()
        yield "turned by 90° counter-clockwise", np.rot90(number).ravel().tolist()
        yield "mirrored about a diagonal", number.T.ravel().tolist()
        yield "mirrored about the other diagonal", number[::-1, ::-1].T.ravel().tolist()
