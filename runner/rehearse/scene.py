"""A chart of dark squares on a bright board, in millimetres of the object, and its picture on the sensor.

The picture is never made by resampling: each side of a square is the edge spread of the system at that place, as a
function of the pixel's distance from the side. A square is the product of its two bars, which is exact along its sides
and an approximation near its corners only (it stands for an optical blur that separates along the sides).
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from runner.rehearse.optics import Transfer

Picture = NDArray[np.float64]
"""Light relative to the bright board, rows × columns."""
TransferAt = Callable[[float, float], Transfer]
"""The system at a place of the sensor: (x, y) from its centre, px."""

TAIL = 150.0
"""How far beyond a side a square is drawn, px: what diffraction still spreads beyond that is below 3e-4 of the step."""


@dataclass(frozen=True)
class Square:
    """One dark square of the chart."""

    x_mm: float
    """Centre from the chart's middle, to the right."""
    y_mm: float
    """Centre from the chart's middle, down."""
    side_mm: float
    """Side."""
    slant: float
    """Turned clockwise as seen, degrees."""


@dataclass(frozen=True)
class Chart:
    """The chart as it was made."""

    modulation: float
    """(bright - dark) / (bright + dark), in (0, 1)."""
    squares: Mapping[str, Square]
    """Squares by name; their sides are what is measured."""
    marks: tuple[Square, ...]
    """Small squares between them that show the geometry; nothing is measured on them."""

    @property
    def dark(self) -> float:
        """Light of the dark squares relative to the bright board."""
        return (1 - self.modulation) / (1 + self.modulation)


@dataclass(frozen=True)
class View:
    """How the chart is seen by the sensor."""

    columns: int
    """Columns of a frame."""
    rows: int
    """Rows of a frame."""
    mm_per_px: float
    """Length in the object that one pixel sees."""
    shift_px: tuple[float, float] = (0.0, 0.0)
    """Where the chart's middle lies from the sensor's, to the right and down."""
    turn: float = 0.0
    """Turn of the chart about its middle, clockwise as seen, degrees."""

    def place(self, square: Square) -> tuple[float, float]:
        """Return a square's centre on the sensor, (x, y) px from the sensor's middle."""
        c, s = np.cos(np.deg2rad(self.turn)), np.sin(np.deg2rad(self.turn))
        x, y = square.x_mm / self.mm_per_px, square.y_mm / self.mm_per_px
        return float(c * x - s * y + self.shift_px[0]), float(s * x + c * y + self.shift_px[1])

    def angle(self, square: Square) -> float:
        """Return the direction of the normal of a square's upright sides against the rows, degrees."""
        return square.slant + self.turn


def picture(chart: Chart, view: View, transfer_at: TransferAt) -> Picture:
    """Return the noiseless picture of the chart.

    The blur of a square is that at its centre. A mark takes the blur of the nearest square: nobody measures it.

    Args:
        chart: The chart.
        view: How it is seen.
        transfer_at: The system at a place of the sensor.

    Returns:
        Light averaged over each pixel, relative to the bright board; rows × columns.
    """
    light = np.ones((view.rows, view.columns))
    spreads = {}
    for name, square in chart.squares.items():
        system = transfer_at(*view.place(square))
        reach = TAIL + 1.2 * system.disc_radius
        spreads[name] = system.edge_spread(view.angle(square), reach)
        _darken(light, square, view, 1 - chart.dark, spreads[name])
    for mark in chart.marks:
        nearest = min(chart.squares, key=lambda n: np.hypot(*np.subtract(_at(chart.squares[n]), _at(mark))))
        _darken(light, mark, view, 1 - chart.dark, spreads[nearest])
    return light


def _at(square: Square) -> tuple[float, float]:
    return square.x_mm, square.y_mm


def _darken(light: Picture, square: Square, view: View, depth: float, spread: tuple[Picture, Picture]) -> None:
    """Take one square's light away, in place."""
    half = square.side_mm / view.mm_per_px / 2
    rows, columns = within(square, view, float(spread[0][-1]))
    across, down = place_on(square, view, rows, columns)
    light[rows, columns] -= depth * _bar(across, half, spread) * _bar(down, half, spread)


def within(square: Square, view: View, margin: float) -> tuple[slice, slice]:
    """Return the rows and columns of the frame that a square with a margin around it reaches into, px."""
    x, y = view.place(square)
    half, turn = square.side_mm / view.mm_per_px / 2, np.deg2rad(view.angle(square))
    reach = half * (abs(np.cos(turn)) + abs(np.sin(turn))) + margin
    return _part(y + view.rows / 2, reach, view.rows), _part(x + view.columns / 2, reach, view.columns)


def place_on(square: Square, view: View, rows: slice, columns: slice) -> tuple[Picture, Picture]:
    """Return where pixels lie on a square: px from its centre along its own two axes, each rows × columns."""
    x, y = view.place(square)
    turn = np.deg2rad(view.angle(square))
    dx = np.arange(columns.start, columns.stop) + 0.5 - view.columns / 2 - x
    dy = (np.arange(rows.start, rows.stop) + 0.5 - view.rows / 2 - y)[:, None]
    return dx * np.cos(turn) + dy * np.sin(turn), dy * np.cos(turn) - dx * np.sin(turn)


def _part(centre: float, reach: float, size: int) -> slice:
    first, last = int(np.floor(centre - reach)), int(np.ceil(centre + reach))
    return slice(min(max(first, 0), size), min(max(last, 0), size))


def _bar(distance: Picture, half: float, spread: tuple[Picture, Picture]) -> Picture:
    return np.asarray(np.interp(distance + half, *spread) - np.interp(distance - half, *spread))
