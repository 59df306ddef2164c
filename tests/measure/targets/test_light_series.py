"""An even field at several levels of light is offered as it stands, in the dark too."""

import numpy as np
import pytest

from runner.capture.frame import Box, Frame
from runner.errors import UsageError
from runner.measure.contract import Found, NotFound
from runner.measure.targets import light_series
from runner.spec.model import Amount, Camera, Region

CAMERA = Camera(width=80, height=60, bit_depth=12, black_level=64, white_level=4095)


def _locate(level: float, *regions: Region) -> list[Found | NotFound]:
    frame = Frame("f.tif", "", "", np.full((60, 80), level))
    return list(light_series.locate([frame], regions, CAMERA, light_series.read_options({})))


@pytest.mark.parametrize("level", [64, 70, 4095])
def test_any_level_is_offered(level: float) -> None:
    """Dark, dim and saturated frames: the whole frame, told to be of a lit field."""
    (found,) = _locate(level)

    assert isinstance(found, Found)
    assert (found.box, dict(found.geometry)) == (Box(0, 0, 80, 60), {"lit": 1.0})
    assert found.offers == light_series.OFFERS


def test_a_region_outside_the_frame_is_not() -> None:
    """A region that leaves the frame is told with its place."""
    outside = Region("corner", (Amount(78, "px"), Amount(30, "px")), (Amount(10, "px"), Amount(10, "px")))
    (found,) = _locate(500, outside)

    assert isinstance(found, NotFound)
    assert (found.cause, found.because) == (
        "off the frame",
        "it reaches from column 73, row 25 to column 83, row 35 of a frame of 80 × 60 px",
    )


def test_there_is_nothing_to_choose() -> None:
    """An option is refused by its name."""
    with pytest.raises(UsageError, match="unknown option 'order'"):
        light_series.read_options({"order": 2})
