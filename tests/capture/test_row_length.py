"""A wrong row length is told by how the picture goes on, not by its borders alone; honest pictures of any kind pass.

What is not told: even fields, stripes and boards (they repeat themselves after many lengths), pictures that show
nothing upright (an edge along the rows), a length that is a multiple of the true one, errors of one or two pixels.
"""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from runner.capture.row_length import row_length
from runner.spec.model import Camera
from tests.capture.raw_scenes import HEIGHT, WIDTH, Light, edge, scenes, stripes, take

CAMERA = Camera(WIDTH, HEIGHT, 12, 64, 4095)
SCENES = dict(scenes())
REAL = Path(__file__).parent.parent / "real" / "raw" / "DSC_1339_768x512_rggb.raw"


def _found(light: Light, width: int, seed: int = 7, mosaic: str = "none") -> int:
    """Return what is found in a picture of `WIDTH` px a row that is declared to have `width`."""
    camera = replace(CAMERA, mosaic=mosaic)
    stream = take(light, camera, seed, "tungsten").astype(np.float64).ravel()
    rows = stream.size // width
    return row_length(stream[: rows * width], width, replace(camera, width=width, height=rows), rows)


def _inside() -> Light:
    """Return a bright square, turned by 4 degrees, in the middle of a dark field: its borders are alike."""
    x, y = np.meshgrid(np.arange(WIDTH) + 0.5 - WIDTH / 2, np.arange(HEIGHT) + 0.5 - HEIGHT / 2)
    a, b = np.cos(np.radians(4)), np.sin(np.radians(4))
    inside = (np.abs(a * x + b * y) < 40) & (np.abs(a * y - b * x) < 40)
    return np.asarray(0.2 + 0.5 * inside, np.float64)


ALIKE = {
    "square": _inside(),
    "clouds": SCENES["clouds"],
    "star": SCENES["star"],
    "turned board": SCENES["turned board"],
}


@pytest.mark.parametrize("name", ALIKE)
@pytest.mark.parametrize("mosaic", ["none", "GRBG"])
@pytest.mark.parametrize("width", [184, 188, 196, 200, 216])
def test_a_picture_whose_borders_are_alike_is_told(name: str, mosaic: str, width: int) -> None:
    """Without any seam the true length comes out, in colour too, or at least that the declared one is wrong."""
    found = _found(ALIKE[name], width, mosaic=mosaic)

    if mosaic == "none" and name != "turned board" and abs(width - WIDTH) >= 8:
        assert abs(found - WIDTH) <= 1  # an edge that slopes by up to 45° shifts the best length by a pixel
    else:
        assert found in {0, WIDTH - 1, WIDTH, WIDTH + 1}


@pytest.mark.parametrize("width", [512, 640, 752, 764, 766, 772, 776, 832, 900, 1024])
def test_a_real_frame_is_told(width: int) -> None:
    """A frame of a real sensor has its 768 px under any other length that is not a multiple or part of it."""
    codes = np.fromfile(REAL, "<u2").astype(np.float64)
    camera = Camera(width, codes.size // width, 14, 600, 16383, mosaic="RGGB")
    rows = min(camera.height, max(16, (1 << 17) // width))
    start = (camera.height - rows) // 2 * width

    assert row_length(codes[start : start + rows * width], width, camera, rows) == 768


@pytest.mark.parametrize("part", range(4))
def test_honest_gratings_boards_and_edges_pass(part: int) -> None:
    """Stripes of any angle and period, sharp or not, crossed ones, boards, dots and edges near the rows are let be."""
    rng = np.random.default_rng(part)
    told = []
    for number in range(60):
        angle = (
            float(rng.uniform(0, 180)) if number % 3 else float(rng.choice([0, 45, 71.565, 90]) + rng.uniform(-3, 3))
        )
        period = float(rng.choice([2, 2.5, 3, 4, 6.3, 10, 16, 32, 64]) * rng.uniform(0.95, 1.05))
        one = stripes(angle, period, sharp=bool(number % 2))
        other = stripes(float(rng.uniform(0, 180)), float(rng.uniform(2, 40)), sharp=False)
        shown = {
            0: one,
            1: (one + other) / 2,
            2: 0.2 + 0.6 * ((one > 0.5) ^ (stripes(angle + 90, period, sharp=True) > 0.5)),
            3: edge(90 + float(rng.uniform(-6, 6)), 0.4) * edge(float(rng.uniform(0, 180))),
        }[part]
        if found := _found(np.asarray(shown, np.float64), WIDTH, number, ("none", "RGGB")[number % 2]):
            told.append((angle, period, found))

    assert told == []


def test_fields_do_not_tell() -> None:
    """Flats and darks are neither right nor wrong in any length, with hot pixels and without."""
    for name in ("dark", "flat", "shaded flat", "points"):
        for width in (WIDTH, 184, 256):
            assert _found(SCENES[name], width) in {0, WIDTH}, (name, width)
        assert _found(SCENES[name], WIDTH) == 0
