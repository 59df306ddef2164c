"""A pattern's region is offered as it stands; dark, dead, small and outlying ones are refused with their cause."""

import numpy as np
import pytest

from runner.capture.frame import Frame
from runner.measure.contract import Found, NotFound
from runner.measure.targets import random_pattern
from runner.spec.model import Amount, Camera, Region

CAMERA = Camera(width=300, height=200, bit_depth=12, black_level=64, white_level=4095)


def _region(width: float, height: float, x: float = 150) -> Region:
    return Region("patch", (Amount(x, "px"), Amount(100, "px")), (Amount(width, "px"), Amount(height, "px")))


def _locate(codes: np.ndarray, region: Region) -> Found | NotFound:
    frame = Frame("a.tif", "", "", codes)
    return random_pattern.locate([frame], (region,), CAMERA, random_pattern.read_options({}))[0]


def test_a_lit_region_is_offered() -> None:
    """It stays where the spec has it."""
    found = _locate(np.random.default_rng(0).integers(500, 3000, (200, 300)), _region(200, 150))

    assert isinstance(found, Found)
    assert (found.box.x0, found.box.y1) == (50, 175)
    assert found.offers == frozenset({"texture"})


@pytest.mark.parametrize(
    ("codes", "region", "cause"),
    [
        (np.full((200, 300), 700), _region(200, 150), "no picture"),
        (np.random.default_rng(1).integers(60, 70, (200, 300)), _region(200, 150), "too dark"),
        (np.random.default_rng(1).integers(500, 3000, (200, 300)), _region(80, 80), "outside the estimator's limits"),
        (np.random.default_rng(1).integers(500, 3000, (200, 300)), _region(200, 150, 250), "off the frame"),
    ],
)
def test_what_cannot_be_a_pattern(codes: np.ndarray, region: Region, cause: str) -> None:
    """A dead frame, a dark one, a small region and one off the frame each have their cause."""
    found = _locate(codes, region)

    assert isinstance(found, NotFound)
    assert found.cause == cause
