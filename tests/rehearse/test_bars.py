"""Painted bars against their Fourier series."""

import numpy as np

from runner.rehearse.bars import BarChart, Group
from runner.rehearse.optics import Transfer
from runner.rehearse.painting import Seen, picture
from tests.scenes.bars import SquareScene


def test_bars_are_seen_as_their_fourier_series_says() -> None:
    """Inside a group, a square wave by its series through blur and pixel, to 0.4 % of the ground's light."""
    turn, period = np.deg2rad(4.0), 11.0
    scene = SquareScene(
        size=(80, 80),
        frequency=(np.cos(turn) / period, np.sin(turn) / period),
        level=0.45,
        contrast=0.8 / 0.9,
        sigma=0.6,
        phase=np.pi,  # a dark bar runs through the middle
    )
    chart = BarChart(0.85, 0.05, {"one": Group((0.0, 0.0), 60.0, period, 4.0)})

    found = picture(chart.paint, Seen(80, 80, 1.0, Transfer(0.2, 0.05, 0.0, 0.6, 1.0)), cells=5)

    middle = slice(16, 64)
    assert np.abs(found - scene.light())[middle, middle].max() < 0.004
    assert np.isclose(chart.contrast, scene.contrast)


def test_outside_a_group_lies_the_ground() -> None:
    """Groups end at their own border, and half of the area inside is bars."""
    chart = BarChart(
        0.9, 0.1, {"left": Group((-30.0, 0.0), 20.0, 4.0, 0.0), "right": Group((30.0, 5.0), 20.0, 5.0, 90)}
    )
    x, y = np.meshgrid(np.arange(-50, 50, 0.1) + 0.05, np.arange(-30, 30, 0.1) + 0.05)

    light = chart.paint(x, y, 0.1)

    assert np.all(light[np.abs(x) < 19] == 0.9)
    for middle, down in ((-30, 0), (30, 5)):
        inside = (np.abs(x - middle) < 10) & (np.abs(y - down) < 10)
        assert np.isclose(light[inside].mean(), 0.5, atol=0.002)
