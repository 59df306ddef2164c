"""Regions of frames without structure."""

import numpy as np

from runner.capture.frame import Box, Frame
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.uniform import locate_uniform
from runner.spec.model import Amount, Camera, Region

CAMERA = Camera(width=40, height=30, bit_depth=12, black_level=64, white_level=4095)


def _frame(level: float) -> Frame:
    return Frame("a.tif", "", "", np.full((30, 40), level, dtype=np.uint16))


def _region(x: float, y: float, w: float, h: float) -> Region:
    return Region("r", (Amount(x, "px"), Amount(y, "px")), (Amount(w, "px"), Amount(h, "px")))


def test_without_regions_the_whole_frame_is_offered() -> None:
    """A dark or flat frame needs no regions."""
    (found,) = locate_uniform(_frame(2000), (), CAMERA, lit=True)

    assert isinstance(found, Found)
    assert found.box == Box(0, 0, 40, 30)


def test_a_region_is_offered_where_it_was_asked() -> None:
    """Position is the centre; borders lie at whole pixels."""
    (found,) = locate_uniform(_frame(2000), (_region(20, 10, 8, 4),), CAMERA, lit=True)

    assert found.box == Box(16, 8, 24, 12)


def test_a_region_off_the_frame_is_refused_with_its_border() -> None:
    """A region that leaves the frame is not moved back quietly."""
    (found,) = locate_uniform(_frame(2000), (_region(38, 10, 8, 4),), CAMERA, lit=True)

    assert isinstance(found, NotFound)
    assert (found.cause, "column 42" in found.because) == ("off the frame", True)


def test_a_flat_without_light_is_too_dark() -> None:
    """A flat field at the black level cannot correct anything; a dark frame there is right."""
    (flat,) = locate_uniform(_frame(66), (), CAMERA, lit=True)
    (dark,) = locate_uniform(_frame(66), (), CAMERA, lit=False)

    assert isinstance(flat, NotFound)
    assert flat.cause == "too dark"
    assert isinstance(dark, Found)


def test_methods_are_told_whether_the_field_is_lit() -> None:
    """What drifts in a flat is a factor on its light, in a dark an offset: the target says which it is."""
    for lit in (True, False):
        (found,) = locate_uniform(_frame(2000), (), CAMERA, lit=lit)
        assert isinstance(found, Found)
        assert found.geometry == {"lit": float(lit)}
