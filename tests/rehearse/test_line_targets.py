"""Painted elements and wedges against closed forms."""

import numpy as np

from runner.rehearse.line_targets import Element, ElementChart, Wedge
from runner.rehearse.optics import Transfer
from runner.rehearse.painting import Seen, picture
from tests.scenes.bars import ThreeBars
from tests.scenes.wedges import WedgeScene

SYSTEM = Transfer(0.2, 0.05, 0.0, 0.6, 1.0)


def test_three_bars_are_seen_as_their_closed_form_says() -> None:
    """Bars of the Gaussian's integral over square pixels, to 1 % of the step in their middle third."""
    scene = ThreeBars(size=(70, 70), centre=(0.0, 0.0), period=10.0, turn=0.1, background=0.8, bars=0.1, sigma=0.6)
    chart = ElementChart(0.8, 0.1, {"one": Element((0.0, 0.0), 0.1, float(np.degrees(0.1)))})

    found = picture(chart.paint, Seen(70, 70, 1.0, SYSTEM), cells=5)

    assert np.abs(found - scene.light())[29:41].max() < 0.007
    assert np.abs(found - scene.light()).max() < 0.03  # ends of bars: the closed form parts the two directions


def test_bars_are_five_times_as_long_as_wide() -> None:
    """MIL-STD-150A 5.1.1.7: three bars of width 1/2R and length 5/2R take 3.75/R² of the ground."""
    x, y = np.meshgrid(np.arange(-10, 10, 0.02) + 0.01, np.arange(-10, 10, 0.02) + 0.01)

    covered = Element((1.0, -2.0), 0.5, 30.0).covered(x, y, 0.02)

    assert np.isclose(covered.sum() * 0.02**2, 3 * 1.0 * 5.0, rtol=1e-3)


def test_a_wedge_is_seen_as_its_closed_form_says() -> None:
    """Lines over Gaussian and pixel across them, to 1.5 % of the step away from the ends."""
    scene = WedgeScene(
        size=(300, 90), lines=5, ends=(0.08, 0.4), reach=(20.0, 280.0), middle=(45.0, 0.0), sigma=0.6, levels=(0.1, 0.8)
    )
    wedge = Wedge(bright=0.8, dark=0.1, lines=5, length_mm=130.0, coarse=0.16, fine=0.8)

    found = picture(wedge.paint, Seen(300, 90, 0.5, SYSTEM), cells=5)

    away = np.abs(found - scene.light())[:, 30:270]
    assert away.max() < 0.015 * 0.7
