"""Frames along axes fall into steps; an axis is read from sidecars first, then from names."""

import numpy as np
import pytest

from runner.capture.frame import Box, Crop
from runner.measure.steps import Group, groups, position
from runner.spec.model import Amount, Camera

CAMERA = Camera(width=8, height=6, bit_depth=8, black_level=0, white_level=255)


def _crop(said: str, taken: dict[str, Amount]) -> Crop:
    return Crop("f.tif", Box(0, 0, 8, 6), np.zeros((6, 8)), CAMERA, {"z": said}, taken)


def test_repeats_share_a_step() -> None:
    """Frames that differ only in axes that were not asked for belong together, in the order of the first of each."""
    said = [{"z": "2", "repeat": "1"}, {"z": "1", "repeat": "1"}, {"z": "2", "repeat": "2"}]

    assert groups(said, ("z",)) == (Group({"z": "2"}, (0, 2)), Group({"z": "1"}, (1,)))
    assert groups(said, ()) == (Group({}, (0, 1, 2)),)


@pytest.mark.parametrize(
    ("said", "taken", "meant"),
    [
        ("-0.25mm", {}, Amount(-0.25, "mm")),
        ("07", {}, Amount(7.0, "1")),
        ("07", {"position": Amount(1.5, "mm")}, Amount(1.5, "mm")),
        ("near", {}, None),
    ],
)
def test_where_a_frame_lies_along_an_axis(said: str, taken: dict[str, Amount], meant: Amount | None) -> None:
    """The sidecar's position counts before the name's; a word that is no number says nothing."""
    assert position(_crop(said, taken), "z") == meant
