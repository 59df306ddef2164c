"""A sequence offers its regions as they stand, dark first frames included."""

import numpy as np

from runner.capture.frame import Frame
from runner.measure.contract import Found, NotFound
from runner.measure.targets import frame_sequence
from runner.spec.model import Amount, Camera, Region

CAMERA = Camera(width=40, height=30, bit_depth=12, black_level=64, white_level=4095)


def test_the_whole_frame_is_its_region() -> None:
    """Without regions the whole frame is taken, also where the first frame is still dark."""
    dark = Frame("a.tif", "", "", np.full((30, 40), 64))
    (found,) = frame_sequence.locate([dark], (), CAMERA, frame_sequence.read_options({}))

    assert isinstance(found, Found)
    assert (found.region, found.box.x1, found.box.y1) == ("", 40, 30)
    assert found.offers == frozenset({"sequence"})


def test_a_region_off_the_frame_is_not_found() -> None:
    """What reaches over the border is said to."""
    region = Region("far", (Amount(39, "px"), Amount(15, "px")), (Amount(10, "px"), Amount(10, "px")))
    frame = Frame("a.tif", "", "", np.full((30, 40), 900))
    (found,) = frame_sequence.locate([frame], (region,), CAMERA, frame_sequence.read_options({}))

    assert isinstance(found, NotFound)
    assert found.cause == "off the frame"
