"""Patches have their own light in each colour, exactly between their borders."""

import numpy as np

from runner.rehearse.optics import Transfer
from runner.rehearse.painting import Seen, picture
from runner.rehearse.patches import Area, PatchChart
from tests.scenes.black_areas import BlackScene

CHART = PatchChart((0.9, 0.8, 0.7), {"one": Area((3.3, -1.7), (12.0, 9.0), (0.2, 0.1, 0.05))})


def test_a_black_patch_is_seen_as_its_closed_form_says() -> None:
    """A black area of error functions, to a thousandth of the ground."""
    scene = BlackScene(size=(60, 50), area=(27.3, 18.8, 39.3, 27.8), white=0.8, own=0.125, glare=0.0, sigma=0.7)
    seen = Seen(60, 50, 1.0, Transfer(0.2, 0.05, 0.0, 0.7, 1.0))

    found = picture(lambda x, y, side: CHART.paint(x, y, side, 1), seen, cells=5)

    assert np.abs(found - scene.light()).max() < 2e-3


def test_each_colour_has_its_own_light() -> None:
    """Inside and outside, red, green and blue are what the chart says."""
    at = np.array([[3.3, 20.0]])
    for colour in range(3):
        inside, outside = CHART.paint(at, np.array([[-1.7]]), 0.1, colour)[0]
        assert np.isclose(inside, CHART.areas["one"].light[colour])
        assert np.isclose(outside, CHART.ground[colour])
