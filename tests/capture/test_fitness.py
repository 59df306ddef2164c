"""Dark frames must be dark, flats lit and even; honest ones of any lens and sensor pass."""

from dataclasses import replace

import numpy as np
import pytest

from runner.capture.fitness import DARK, FLAT, UNDECIDED, Field, field_of, unfit
from runner.capture.frame import Box, Frame
from runner.spec.model import Camera, Spec
from tests.capture.raw_scenes import HEIGHT, WIDTH, Light, edge, scenes, stripes, take
from tests.scenes.flats import Pattern, Shading, spot

CAMERA = Camera(WIDTH, HEIGHT, 12, 64, 4095)
WHOLE = (Box(0, 0, WIDTH, HEIGHT),)
SCENES = dict(scenes())


def _told(light: Light, target: str = FLAT, camera: Camera = CAMERA, boxes: tuple[Box, ...] = WHOLE) -> str:
    return unfit(Field("any", target, boxes), Frame("a.tif", "", "", take(light, camera, 3, "tungsten")), camera)


HONEST = {
    "even": np.full((HEIGHT, WIDTH), 0.5),
    "dim": np.full((HEIGHT, WIDTH), 0.015),
    "cos⁴ at 60°": 0.8 * Shading((WIDTH, HEIGHT), angle=60).frame(),
    "cut by a rim": 0.8 * Shading((WIDTH, HEIGHT), angle=20, vignette=1.2).frame(),
    "off its axis": 0.6 * Shading((WIDTH, HEIGHT), angle=45, axis=(60, 30)).frame(),
    "sloping": SCENES["sloping flat"],
    "a blemish": 0.5 * spot((WIDTH, HEIGHT), (90, 70), 12, -0.5),
    "a large faint blemish": 0.5 * spot((WIDTH, HEIGHT), (90, 70), 50, -0.05),
    "banding": 0.5 + 0.03 * np.sin(np.arange(HEIGHT)[:, None] / 3) + np.zeros((HEIGHT, WIDTH)),
    "fixed pattern": 0.5 + Pattern(0.02, 0.01, 0.01).sum((WIDTH, HEIGHT), np.random.default_rng(4)),
    "dead columns": np.where(np.isin(np.arange(WIDTH), (40, 41, 90)), 0.0, 0.5) + np.zeros((HEIGHT, WIDTH)),
}


@pytest.mark.parametrize("name", HONEST)
@pytest.mark.parametrize("mosaic", ["none", "RGGB"])
def test_honest_flats_pass(name: str, mosaic: str) -> None:
    """Shading of any steepness, noise, banding, defects and blemishes are the unit's own, to be measured."""
    assert _told(HONEST[name], camera=replace(CAMERA, mosaic=mosaic)) == ""


@pytest.mark.parametrize("angle", [5, 17, 30, 45, 73, 85, 95, 175])
@pytest.mark.parametrize("contrast", [0.2, 0.5, 0.9])
def test_a_slanted_edge_is_a_charts(angle: float, contrast: float) -> None:
    """A straight slanted edge blames the capture, whatever its contrast, angle and the shading over it."""
    light = 0.6 * Shading((WIDTH, HEIGHT), angle=25).frame() * (1 - contrast * (edge(angle) - 0.2) / 0.6)
    words = _told(light)

    assert "an edge crosses it" in words
    assert "straight and slanted as a chart's" in words
    assert UNDECIDED not in words


@pytest.mark.parametrize("name", ["edge 0", "edge 90", "chequered board", "star", "two steps", "sine stripes 30 by 10"])
def test_structure_that_a_unit_could_make_blames_nobody(name: str) -> None:
    """Steps along rows and columns, patterns and stripes are told, and so is the frame that would settle it."""
    words = _told(stripes(30, 10, sharp=False) if name.startswith("sine") else SCENES[name])

    assert "the field is not even" in words
    assert f"{UNDECIDED}: a flat of a unit known to be good" in words


def test_only_its_regions_need_be_even() -> None:
    """A chart beside the region, and a round stop outside the middle of a frame without regions, do no harm."""
    y, x = np.mgrid[0.5:HEIGHT, 0.5:WIDTH]
    round_field = np.where(np.hypot(x - WIDTH / 2, y - HEIGHT / 2) < HEIGHT / 2, 0.6, 0.0)
    middle = Box(58, 44, 134, 100)
    left = Box(0, 20, 64, 84)

    assert _told(round_field, boxes=(middle,)) == ""
    assert _told(edge(5), boxes=(left,)) == ""
    assert "an edge crosses it" in _told(edge(5), boxes=(left, middle))


@pytest.mark.parametrize("level", [0.0, 0.01, 0.045])
def test_dark_signal_passes(level: float) -> None:
    """A dark level as long exposures have it is dark, whatever its structure; so is glow from the borders at 9 %."""
    y, x = np.mgrid[:HEIGHT, :WIDTH]
    assert _told(np.full((HEIGHT, WIDTH), level), DARK) == ""
    assert _told(level * SCENES["shaded flat"] / 0.7, DARK) == ""
    assert _told(0.09 + 0.1 * np.exp(-(x + y) / 20) - level / 10, DARK) == ""


@pytest.mark.parametrize("level", [0.08, 0.3, 0.9])
def test_light_through_a_lens_blames_the_capture(level: float) -> None:
    """A fall-off to all corners, or a scene, is light; the same level without either leaves it open from 10 % on."""
    shaded = SCENES["shaded flat"] / SCENES["shaded flat"].mean()
    even = _told(np.full((HEIGHT, WIDTH), level), DARK)

    assert "falls off to all corners" in _told(level * shaded, DARK)
    assert "a scene shows in it" in _told(2 * level * edge(30), DARK)
    assert (UNDECIDED in even) == (level > 0.1)
    assert bool(even) == (level > 0.1)


def test_a_series_of_exposures_may_have_any_dark_signal() -> None:
    """Where dark signal is what is measured, its level alone is no fault; a scene in it still is."""
    series = Field("any", DARK, WHOLE, series=True)
    even, lit = (take(light, CAMERA, 3) for light in (np.full((HEIGHT, WIDTH), 0.4), edge(30)))

    assert unfit(series, Frame("a.tif", "", "", even), CAMERA) == ""
    assert "a scene shows in it" in unfit(series, Frame("a.tif", "", "", lit), CAMERA)


def test_what_a_captures_frames_must_be(spec: Spec) -> None:
    """Only flats and darks are fields; without regions the middle of the frame must be even."""
    captures = {capture.target: capture for capture in spec.captures}

    assert field_of(captures["slanted edge"]) is None
    found = field_of(captures["dark frame"])
    assert found is not None
    assert (found.target, found.boxes) == (DARK, (Box(48, 36, 112, 84),))
