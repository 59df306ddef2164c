"""Where the pixels of a colour channel lie."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import ndimage

from runner.capture.frame import Box, Frame, crop
from runner.capture.mosaic import grey, plane, sites
from runner.spec.model import Camera

CAMERA = Camera(width=8, height=6, bit_depth=12, black_level=64, white_level=4095, mosaic="GRBG")


def test_sites_follow_the_frames_grid_not_the_boxs() -> None:
    """The letters of a mosaic name the cell at the frame's upper left corner, row by row."""
    red = sites("red", CAMERA, (0, 0), (2, 2))
    moved = sites("red", CAMERA, (1, 1), (2, 2))

    assert red is not None
    assert red.tolist() == [[False, True], [False, False]]
    assert moved is not None
    assert moved.tolist() == [[False, False], [True, False]]


@pytest.mark.parametrize("mosaic", ["RGGB", "GRBG", "GBRG", "BGGR"])
def test_every_pixel_belongs_to_one_channel(mosaic: str) -> None:
    """Red and blue hold a quarter of the pixels each, green half of them."""
    camera = replace(CAMERA, mosaic=mosaic)
    masks = [sites(channel, camera, (0, 0), (6, 8)) for channel in camera.channels]

    assert np.sum([m for m in masks if m is not None], axis=0).tolist() == np.ones((6, 8)).tolist()
    assert [int(m.sum()) for m in masks if m is not None] == [12, 24, 12]


def test_plain_frames_have_no_sites() -> None:
    """Mono frames and planes of RGB frames are whole."""
    assert sites("mono", replace(CAMERA, mosaic="none"), (0, 0), (2, 2)) is None
    rgb = replace(CAMERA, mosaic="none", colour="rgb")
    assert rgb.channels == ("red", "green", "blue")
    assert plane(np.arange(24).reshape(2, 4, 3), "blue", rgb)[0].tolist() == [2, 5, 8, 11]


def test_grey_is_the_same_wherever_a_pixel_lies_in_its_cell() -> None:
    """A field of constant colour gives one constant grey: a quarter red, half green; ramps stay ramps."""
    codes = np.zeros((6, 8), np.uint16)
    for channel, level in (("red", 400), ("green", 200), ("blue", 100)):
        mask = sites(channel, CAMERA, (0, 0), (6, 8))
        assert mask is not None
        codes[mask] = level

    assert grey(codes, CAMERA) == pytest.approx(np.full((6, 8), 225.0))
    assert grey(np.arange(48.0).reshape(6, 8), CAMERA)[2:4, 2].tolist() == [18, 26]


@pytest.mark.parametrize("dtype", [np.uint8, np.uint16, np.float32])
def test_grey_of_large_frames(dtype: type) -> None:
    """Worked out in pieces, the picture is that of the whole: [1 2 1]/4 both ways, mirrored about the outer pixels."""
    codes: np.ndarray = np.random.default_rng(1).integers(0, 256, (301, 402)).astype(dtype)
    kernel = np.outer([1, 2, 1], [1, 2, 1]) / 16

    assert np.array_equal(grey(codes, CAMERA), ndimage.convolve(codes.astype(float), kernel, mode="mirror"))
    planes: np.ndarray = np.random.default_rng(2).integers(0, 256, (301, 402, 3)).astype(dtype)
    assert np.array_equal(grey(planes, replace(CAMERA, mosaic="none", colour="rgb")), planes @ [0.25, 0.5, 0.25])


def test_a_crop_of_a_channel_carries_its_sites() -> None:
    """What a method gets are all codes of the box, its channel's name and the mask of its own pixels."""
    frame = Frame("a.tif", "", "", np.arange(48, dtype=np.uint16).reshape(6, 8))
    cut = crop(frame, Box(1, 1, 5, 3), CAMERA, "blue")

    assert cut.channel == "blue"
    assert cut.sites is not None
    assert cut.codes[cut.sites].tolist() == [10, 12]
