"""Photographs are no targets: nothing asked of them may end as a confident figure.

The photographs travel in scikit-image's wheel (public domain and CC0, see its data/README.txt); nothing is fetched.
"""

from collections.abc import Sequence
from contextlib import suppress
from pathlib import Path

import numpy as np
import pytest
import skimage
from skimage.io import imread

from runner.capture.frame import Box, Codes, Frame, crop
from runner.errors import MeasurementRefused
from runner.measure.contract import Found, Sample
from runner.measure.methods import banding, defects, edge_response, frame_noise, grating_response, shading
from runner.measure.reading import Reading
from runner.measure.targets import sinusoidal_grating, slanted_edge
from runner.spec.model import Amount, Camera, Chart, Optics, Region
from tests.measure.edge_samples import wishes
from tests.measure.flat_samples import sample

DATA = Path(skimage.__file__).parent / "data"
PHOTOGRAPHS = (
    "astronaut.png", "brick.png", "camera.png", "cell.png", "chelsea.png", "clock_motion.png", "coffee.png",
    "coins.png", "grass.png", "gravel.png", "hubble_deep_field.jpg", "ihc.png", "moon.png", "motorcycle_left.png",
    "page.png", "retina.jpg", "rocket.jpg", "text.png",
)  # fmt: skip
TILES = 8
"""Regions of each photograph."""


def _photograph(name: str) -> tuple[Codes, Camera]:
    codes = imread(DATA / name)
    codes = np.ascontiguousarray(codes[..., 1] if codes.ndim == 3 else codes)
    return codes, Camera(width=codes.shape[1], height=codes.shape[0], bit_depth=8, black_level=0, white_level=255)


def _tiles(codes: Codes, width: int, height: int) -> Sequence[Region]:
    """Return regions spread over the photograph."""
    rows, columns = codes.shape
    places = [(x, y) for y in range(0, rows - height + 1, height) for x in range(0, columns - width + 1, width)]
    size = Amount(width, "px"), Amount(height, "px")
    return [
        Region(f"{x} {y}", (Amount(x + width / 2, "px"), Amount(y + height / 2, "px")), size)
        for x, y in places[:: max(1, len(places) // TILES)]
    ]


def _sample(frame: Frame, found: Found, camera: Camera) -> Sample:
    return Sample(found, crop(frame, found.box, camera), camera, Optics(), Chart(), wishes())


@pytest.mark.parametrize("name", PHOTOGRAPHS)
def test_no_photograph_holds_a_grating(name: str) -> None:
    """Brick, grass and lines of print too: no region of 96 × 72 px gives a modulation.

    Of all their 3000 regions of 64 × 64 to 160 × 120 px none did when this was written.
    """
    codes, camera = _photograph(name)
    frame = Frame(name, "", "", codes)
    told: list[Reading] = []
    for found in sinusoidal_grating.locate([frame], _tiles(codes, 96, 72), camera, sinusoidal_grating.Options()):
        if isinstance(found, Found):
            with suppress(MeasurementRefused):  # which of five causes differs from region to region
                told += grating_response.measure(_sample(frame, found, camera), grating_response.Options()).readings

    assert told == []


@pytest.mark.parametrize("name", PHOTOGRAPHS)
def test_no_photograph_holds_a_straight_edge(name: str) -> None:
    """No region of 80 × 120 px gives an MTF50, by whatever line runs through it."""
    codes, camera = _photograph(name)
    frame = Frame(name, "", "", codes)
    told: list[Reading] = []
    for found in slanted_edge.locate([frame], _tiles(codes, 80, 120), camera, slanted_edge.read_options({})):
        if isinstance(found, Found):
            with suppress(MeasurementRefused):
                told += edge_response.measure(_sample(frame, found, camera), edge_response.read_options({})).readings

    assert told == []


def _readings(codes: Codes, camera: Camera, *, lit: bool) -> list[Reading]:
    """Return what the methods for even fields make of a photograph, taken twice with a pixel's shake between."""
    found: list[Reading] = []
    for method in (shading, frame_noise, banding, defects):
        frames = [codes, np.roll(codes, 1, axis=1)]
        with suppress(MeasurementRefused):
            found += method.measure(sample(frames, camera, lit=lit), method.read_options({})).readings
    return found


@pytest.mark.parametrize("lit", [True, False], ids=["flat", "dark"])
@pytest.mark.parametrize("name", PHOTOGRAPHS)
def test_no_photograph_is_an_even_field(name: str, lit: bool) -> None:
    """As a flat and as a dark a photograph gives no shading, no noise, no bands and no count of defects."""
    codes, camera = _photograph(name)

    assert _readings(codes, camera, lit=lit) == []


def test_parts_of_photographs_are_no_even_fields_either() -> None:
    """Of regions of 192 × 192 px of all photographs at most one in five passes as a flat: sky, cloth, lawn.

    A lawn's blades are as fine as noise that a filter has gone over; no field tells them apart.
    """
    told = every = 0
    for name in PHOTOGRAPHS:
        codes, camera = _photograph(name)
        rows, columns = codes.shape
        for y in range(0, rows - 191, 192):
            for x in range(0, columns - 191, 192):
                part = Box(x, y, x + 192, y + 192)
                if codes[y : y + 192, x : x + 192].mean() < 0.02 * 255:
                    continue
                try:
                    found = banding.measure(sample([codes], camera, box=part), banding.Options()).readings
                except (MeasurementRefused, AssertionError):
                    found = ()
                every += 1
                told += bool(found)
    assert every > 80
    assert told <= every / 5
