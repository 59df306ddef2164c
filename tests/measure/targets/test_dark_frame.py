"""The target `dark frame`."""

import numpy as np
import pytest

from runner.capture.frame import Frame
from runner.errors import UsageError
from runner.measure import shelf
from runner.measure.contract import Found
from runner.measure.targets import dark_frame
from runner.spec.model import Camera

CAMERA = Camera(width=40, height=30, bit_depth=12, black_level=64, white_level=4095)


def test_the_level_decides_as_the_target_demands() -> None:
    """A frame at the black level is a dark frame and no flat field; a lit one may be either's region."""
    dark = Frame("a.tif", "", "", np.full((30, 40), 64, dtype=np.uint16))
    lit = Frame("b.tif", "", "", np.full((30, 40), 2000, dtype=np.uint16))
    needs_light = False

    assert isinstance(dark_frame.locate([dark], (), CAMERA, dark_frame.Options())[0], Found) is not needs_light
    assert isinstance(dark_frame.locate([lit], (), CAMERA, dark_frame.Options())[0], Found)


def test_there_is_nothing_to_choose() -> None:
    """Any option is refused with its name."""
    with pytest.raises(UsageError, match="unknown option 'search'"):
        dark_frame.read_options({"search": "10 px"})


def test_a_companion_costs_nothing_more() -> None:
    """Without `measure` nothing runs on it; what may be named takes an even field, and is told whether it is lit."""
    named = {"frame noise", "banding", "defects"}
    found = dark_frame.locate(
        [Frame("a.tif", "", "", np.full((30, 40), 2000, dtype=np.uint16))], (), CAMERA, dark_frame.Options()
    )[0]

    assert dark_frame.METHODS == ()
    assert all(shelf.methods()[name].NEEDS <= dark_frame.OFFERS for name in named)
    assert isinstance(found, Found)
    assert found.geometry["lit"] == 0
