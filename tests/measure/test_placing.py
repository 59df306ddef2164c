"""Regions become whole pixels."""

import numpy as np

from runner.capture.frame import Box, Frame
from runner.measure.contract import NotFound
from runner.measure.placing import outline, place
from runner.spec.model import Amount, Region

FRAME = Frame("a.tif", "", "", np.zeros((60, 80), np.uint16))


def _region(x: float, y: float, unit: str = "%") -> Region:
    return Region("r", (Amount(x, unit), Amount(y, unit)), (Amount(20, "px"), Amount(10, "px")))


def test_a_position_is_the_regions_centre() -> None:
    """0 % and 100 % are the outer borders: 50 % of 80 px is the line between columns 39 and 40."""
    assert place(_region(50, 50), FRAME) == Box(30, 25, 50, 35)


def test_a_region_may_touch_the_border_and_no_more() -> None:
    """At 10 px from the left a region of 20 px fits; a pixel further out it does not, and says where it reaches."""
    assert place(_region(10, 30, "px"), FRAME) == Box(0, 25, 20, 35)
    lost = place(_region(9, 30, "px"), FRAME)

    assert isinstance(lost, NotFound)
    assert lost.because.startswith("it reaches from column -1, row 25 to column 19")
    assert lost.box == Box(0, 25, 19, 35)


def test_a_region_wholly_outside_has_no_box() -> None:
    """Nothing is left of it to draw."""
    lost = place(_region(200, 30, "px"), FRAME)

    assert isinstance(lost, NotFound)
    assert lost.box is None


def test_an_outline_runs_around_the_box() -> None:
    """Four corners, clockwise from the upper left, in px of the outer borders."""
    assert outline(Box(1, 2, 5, 6)) == ((1, 2), (5, 2), (5, 6), (1, 6))
