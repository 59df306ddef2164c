"""The target `flat field`."""

import numpy as np
import pytest

from runner.capture.frame import Frame
from runner.errors import UsageError
from runner.measure import shelf
from runner.measure.contract import Found
from runner.measure.targets import flat_field
from runner.spec.model import Camera

CAMERA = Camera(width=40, height=30, bit_depth=12, black_level=64, white_level=4095)


def test_the_level_decides_as_the_target_demands() -> None:
    """A frame at the black level is a dark frame and no flat field; a lit one may be either's region."""
    dark = Frame("a.tif", "", "", np.full((30, 40), 64, dtype=np.uint16))
    lit = Frame("b.tif", "", "", np.full((30, 40), 2000, dtype=np.uint16))
    needs_light = True

    assert isinstance(flat_field.locate([dark], (), CAMERA, flat_field.Options())[0], Found) is not needs_light
    assert isinstance(flat_field.locate([lit], (), CAMERA, flat_field.Options())[0], Found)


def test_there_is_nothing_to_choose() -> None:
    """Any option is refused with its name."""
    with pytest.raises(UsageError, match="unknown option 'search'"):
        flat_field.read_options({"search": "10 px"})


def test_a_companion_costs_nothing_more() -> None:
    """Without `measure` nothing runs on it; what may be named takes an even field, and is told whether it is lit."""
    named = {"shading", "frame noise", "banding", "defects"}
    found = flat_field.locate(
        [Frame("a.tif", "", "", np.full((30, 40), 2000, dtype=np.uint16))], (), CAMERA, flat_field.Options()
    )[0]

    assert flat_field.METHODS == ()
    assert all(shelf.methods()[name].NEEDS <= flat_field.OFFERS for name in named)
    assert isinstance(found, Found)
    assert found.geometry["lit"] == 1
