"""The rendered chart: its edges have the stated transfer function, its geometry the stated place."""

from functools import partial

import numpy as np
import pytest

from runner.rehearse.optics import Transfer
from runner.rehearse.scene import Chart, Square, View, picture

VIEW = View(400, 300, 0.5)
SQUARE = Square(4.0, -3.0, 60.0, 5.0)
CHART = Chart(0.6, {"only": SQUARE}, ())
SYSTEM = Transfer(2.8, 0.55, 6.0, 1.3, 3.0)


def _always(system: Transfer, _x: float, _y: float) -> Transfer:
    return system


def _profile(view: View, square: Square) -> tuple[np.ndarray, np.ndarray]:
    """Return sorted distances from the left side (px, towards bright) and light, near the side's middle."""
    light = picture(CHART, view, lambda _x, _y: SYSTEM)
    x, y = view.place(square)
    turn, half = np.deg2rad(view.angle(square)), square.side_mm / view.mm_per_px / 2
    rows, columns = np.mgrid[: view.rows, : view.columns]
    dx, dy = columns + 0.5 - view.columns / 2 - x, rows + 0.5 - view.rows / 2 - y
    across, down = dx * np.cos(turn) + dy * np.sin(turn), dy * np.cos(turn) - dx * np.sin(turn)
    near = (np.abs(down) < 23) & (np.abs(across + half) < 40)
    order = np.argsort(-(across + half)[near])
    return -(across + half)[near][order], light[near][order]


def test_rendered_edge_has_the_stated_transfer_function() -> None:
    """The transform of the supersampled profile of a rendered edge is the stated transfer function within 0.002.

    The profile ends 40 px from the edge, where diffraction still keeps 2/(π³ fc d) = 0.0008 of the step on each side.
    """
    distance, light = _profile(VIEW, SQUARE)
    spread = (light - CHART.dark) / (1 - CHART.dark)
    grid = np.arange(-39.5, 39.5, 0.05)
    line = np.diff(np.interp(grid, distance, spread))
    middle = (grid[1:] + grid[:-1]) / 2
    f = np.array([0.05, 0.1, 0.25, 0.4, 0.5])

    transfer = np.abs(np.exp(-2j * np.pi * f[:, None] * middle) @ line) / np.sinc(0.05 * f)

    assert transfer == pytest.approx(SYSTEM.along(f, 5.0), abs=2e-3)


def test_edge_stands_where_it_was_put() -> None:
    """The side crosses half of the step at its geometrical place, whole pixels' centres being at +0.5."""
    distance, light = _profile(VIEW, SQUARE)

    assert np.interp(0.5, (light - CHART.dark) / (1 - CHART.dark), distance) == pytest.approx(0.0, abs=2e-3)


def test_levels_are_those_of_the_modulation() -> None:
    """A square of modulation 0.6 is a quarter as bright, plus what diffraction brings from its four sides.

    Each side, 60 px away, brings 2/(π³ fc d) of the step (the tail of a clear circular pupil).
    """
    light = picture(CHART, VIEW, lambda _x, _y: SYSTEM)
    x, y = VIEW.place(SQUARE)
    middle = light[int(y + VIEW.rows / 2), int(x + VIEW.columns / 2)]

    assert light[299, 399] == pytest.approx(1.0, abs=1e-4)
    assert middle == pytest.approx(0.25 + 0.75 * 4 * 2 / (np.pi**3 * SYSTEM.cut_off * 60), abs=1e-4)


def test_blur_loses_no_light() -> None:
    """The light that a square takes is its area times its depth, whatever the blur (tails beyond 150 px: 0.5 %)."""
    view, square = View(700, 700, 0.5), Square(0.0, 0.0, 60.0, 5.0)
    for focus_um in (0.0, 300.0):
        system = Transfer(2.8, 0.55, focus_um, 1.3, 3.0)
        light = picture(Chart(0.6, {"only": square}, ()), view, partial(_always, system))

        assert (1 - light).sum() / 0.75 == pytest.approx(120.0**2, rel=5e-3)


def test_shift_and_turn_move_the_chart() -> None:
    """A shift by whole pixels gives the shifted picture, and a turn adds to the edge's angle."""
    moved = picture(CHART, View(400, 300, 0.5, shift_px=(7.0, -4.0)), lambda _x, _y: SYSTEM)

    assert moved[:-4, 7:] == pytest.approx(picture(CHART, VIEW, lambda _x, _y: SYSTEM)[4:, :-7], abs=1e-9)
    assert View(400, 300, 0.5, turn=2.0).angle(SQUARE) == 7.0
    assert View(400, 300, 0.5, turn=90.0).place(Square(10.0, 0.0, 5.0, 0.0)) == pytest.approx((0.0, 20.0))


def test_marks_are_drawn_and_squares_may_hang_over_the_border() -> None:
    """A mark darkens its place; what lies off the sensor is cut off there.

    Diffraction from four sides 4 px away brings 4 × 2/(π³ fc 4) = 3 % of the step into the mark.
    """
    marked = Chart(0.6, {"only": Square(-100.0, 0.0, 60.0, 5.0)}, (Square(50.0, 50.0, 4.0, 0.0),))

    light = picture(marked, VIEW, lambda _x, _y: SYSTEM)

    assert light[250, 300] == pytest.approx(0.25, abs=0.03)
    assert light[150, 0] == pytest.approx(0.25, abs=0.02)
