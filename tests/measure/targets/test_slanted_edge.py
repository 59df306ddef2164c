"""The slanted-edge target: regions move onto their edges or say with figures why not."""

import time
from dataclasses import replace

import numpy as np
import pytest

from runner.capture.frame import Box, Frame
from runner.capture.mosaic import grey, sites
from runner.errors import UsageError
from runner.measure.contract import Found, NotFound
from runner.measure.reading import CAUSES
from runner.measure.targets import slanted_edge
from runner.spec.model import Amount, Camera, Region, Tone
from tests.scenes.edges import EdgeScene, bar_scene
from tests.scenes.line_spreads import Gaussian, box

WIDTH, HEIGHT = 200, 260
CAMERA = Camera(WIDTH, HEIGHT, 16, 0, 65535)


def _region(x: float = 100, y: float = 130, w: int = 80, h: int = 120, name: str = "centre") -> Region:
    return Region(name, (Amount(x, "px"), Amount(y, "px")), (Amount(w, "px"), Amount(h, "px")))


def _frame(codes: np.ndarray) -> Frame:
    return Frame("a.tif", "0" * 64, "1" * 64, codes)


def _locate(codes: np.ndarray, region: Region | None = None, search: float = 10) -> Found | NotFound:
    (one,) = slanted_edge.locate(
        [_frame(codes)], [region or _region()], CAMERA, slanted_edge.read_options({"search": search})
    )
    return one


def _refused(codes: np.ndarray, region: Region | None = None) -> NotFound:
    one = _locate(codes, region)
    assert isinstance(one, NotFound)
    assert one.cause in CAUSES
    return one


def _scene(**changes: object) -> EdgeScene:
    return EdgeScene(**{"size": (WIDTH, HEIGHT), "read_noise": 300.0, **changes})  # type: ignore[arg-type]


@pytest.mark.parametrize("direction", [2, 7, 26.57, 45, 88, 95, 140, 178, 200, 265, 301, 355])
@pytest.mark.parametrize("offset", [-8.3, 0.4, 9.6])
def test_region_follows_its_edge(direction: float, offset: float) -> None:
    """The box moves by whole pixels, by no more than the search, until the edge is within 0.75 px of its centre."""
    found = _locate(_scene(direction=direction, offset=offset).render(np.random.default_rng(1)))
    assert isinstance(found, Found)
    dx, dy = (found.box.x0 + found.box.x1) / 2 - 100, (found.box.y0 + found.box.y1) / 2 - 130
    assert (found.box.x1 - found.box.x0, found.box.y1 - found.box.y0) == (80, 120)
    assert max(abs(dx), abs(dy)) <= 10
    # rounding both coordinates leaves up to half a pixel of each on the normal
    phi = np.radians(direction)
    rest = offset - dx * np.cos(phi) - dy * np.sin(phi)
    assert abs(rest) < 0.75
    assert found.geometry["edge_offset"] == pytest.approx(rest, abs=0.1)
    assert found.offers == {"edge"}
    for x, y in found.outline:
        assert (x - 100) * np.cos(phi) + (y - 130) * np.sin(phi) == pytest.approx(offset, abs=0.15)


def test_every_direction_blur_noise_and_defect() -> None:
    """Random directions, blurs, levels, shadings, noise to a fifth of the step and dead pixels: every edge is found."""
    rng = np.random.default_rng(7)
    for _ in range(60):
        low = rng.uniform(800, 8000)
        step = low * rng.uniform(0.3, 4)
        angle = rng.uniform(2.5, 45) * rng.choice([-1, 1]) + 90 * rng.integers(4)
        shading = tuple(rng.uniform(-0.12, 0.12, 3))
        optics = (Gaussian(rng.uniform(0.35, 5)), box(rng.uniform(1, 4)))[rng.integers(2)]
        scene = _scene(
            optics=optics, direction=angle, offset=rng.uniform(-9, 9), low=low, high=low + step,
            read_noise=step / rng.choice([5, 20, 100]), shading=shading,
        )  # fmt: skip
        codes = scene.render(rng)
        codes[rng.integers(0, HEIGHT, 40), rng.integers(0, WIDTH, 40)] = rng.choice([0, 65535], 40)
        found = _locate(codes, _region(w=int(rng.integers(50, 110)), h=int(rng.integers(60, 120))))
        assert isinstance(found, Found), (scene, found)
        assert found.geometry["edge_angle"] == pytest.approx(scene.edge_angle, abs=1.5)


def test_tone_is_undone_first() -> None:
    """A gamma-coded frame is searched in linear light: the same place as the linear frame, within 0.02 px."""
    linear = _locate(_scene(offset=3.3).render())
    camera = Camera(WIDTH, HEIGHT, 16, 0, 65535, tone=Tone("gamma", gamma=2.2))
    codes = _scene(offset=3.3, tone=2.2).render()
    (toned,) = slanted_edge.locate([_frame(codes)], [_region()], camera, slanted_edge.Options())
    assert isinstance(linear, Found)
    assert isinstance(toned, Found)
    assert toned.geometry["edge_offset"] == pytest.approx(linear.geometry["edge_offset"], abs=0.02)


@pytest.mark.parametrize("mosaic", ["RGGB", "GBRG"])
def test_colour_is_searched_in_grey(mosaic: str) -> None:
    """In the grey picture of a mosaic whose colours differ threefold the edge lies where it is, within 0.1 px."""
    scene = _scene(direction=7, offset=3.3)
    codes = scene.render(np.random.default_rng(1))
    camera = Camera(WIDTH, HEIGHT, 16, 0, 65535, mosaic=mosaic)
    for channel, gain in (("red", 0.4), ("blue", 0.3)):
        own = sites(channel, camera, (0, 0), codes.shape)
        codes[own] = codes[own] * gain
    seen = replace(_frame(codes), codes=grey(codes, camera))
    (found,) = slanted_edge.locate([seen], [_region()], camera, slanted_edge.Options())
    assert isinstance(found, Found)
    dx, dy = (found.box.x0 + found.box.x1) / 2 - 100, (found.box.y0 + found.box.y1) / 2 - 130
    rest = 3.3 - dx * np.cos(np.radians(7)) - dy * np.sin(np.radians(7))
    assert found.geometry["edge_offset"] == pytest.approx(rest, abs=0.1)


def test_angle_from_the_axis() -> None:
    """Below 2° the region is refused with its angle, at 2° it is offered, near either axis."""
    rng = np.random.default_rng(4)
    for base in (0, 90, 180, 270):
        refused = _refused(_scene(direction=base + 1.5).render(rng))
        assert refused.cause == "edge too near an axis"
        assert "1.5" in refused.because
        assert isinstance(_locate(_scene(direction=base + 2).render(rng)), Found)


def test_search_has_an_end() -> None:
    """Beyond the search the box stays at its end; an edge far off the centre is refused with the distance."""
    near = _locate(_scene(offset=16).render(np.random.default_rng(1)))
    assert isinstance(near, Found)
    assert near.geometry["edge_offset"] > 6
    far = _refused(_scene(offset=34).render(np.random.default_rng(1)))
    assert far.cause == "no edge"
    assert "search of 10 px" in far.because
    wider = _locate(_scene(offset=16).render(np.random.default_rng(1)), search=20)
    assert isinstance(wider, Found)
    assert abs(wider.geometry["edge_offset"]) < 0.75


def test_box_stays_in_the_frame() -> None:
    """A region at the border moves no further than the frame reaches."""
    found = _locate(_scene(offset=-64).render(), _region(x=44, w=80))
    assert isinstance(found, Found)
    assert found.box.x0 == 0


@pytest.mark.parametrize(
    ("name", "codes", "cause", "words"),
    [
        ("constant", np.full((HEIGHT, WIDTH), 3000, np.uint16), "no picture", "3000"),
        ("lamp off", np.random.default_rng(1).poisson(150, (HEIGHT, WIDTH)).astype(np.uint16), "too dark", "1 %"),
        ("white", np.full((HEIGHT, WIDTH), 65535, np.uint16), "too bright", "100.0 %"),
        ("faint", _scene(low=20000, high=20500, read_noise=20).render(), "no modulation", "2 %"),
        ("blank", np.random.default_rng(1).normal(20000, 200, (HEIGHT, WIDTH)).astype(np.uint16), "no modulation", "%"),
        ("ramp", (8000 + 100 * np.mgrid[0:HEIGHT, 0:WIDTH][1]).astype(np.uint16), "no edge", "lines of pixels"),
        ("bar", np.rint(bar_scene(_scene(), 20)).astype(np.uint16), "two edges", "%"),
    ],
)  # fmt: skip
def test_refusals_tell_cause_and_figures(name: str, codes: np.ndarray, cause: str, words: str) -> None:
    """Each kind of unusable region ends in its own cause, with the figure found and the figure allowed."""
    refused = _refused(codes)
    assert (name, refused.cause) == (name, cause)
    assert words in refused.because
    assert refused.box == Box(60, 70, 140, 190)


def test_a_constant_patch_of_a_live_frame() -> None:
    """A region of one level in a frame that has others is no dead frame: no modulation."""
    codes = np.full((HEIGHT, WIDTH), 9000, np.uint16)
    codes[0, 0] = 1
    assert _refused(codes).cause == "no modulation"


def test_off_the_frame_and_too_small() -> None:
    """A region that leaves the frame, or is too small for an edge, is refused before anything is searched."""
    codes = _scene().render()
    off = _refused(codes, _region(x=180))
    assert off.cause == "off the frame"
    assert off.box == Box(140, 70, 200, 190)
    assert "column 220" in off.because
    assert _refused(codes, _region(x=400)).box is None
    small = _refused(codes, _region(w=10, h=12))
    assert "16 px each way" in small.because


def test_regions_keep_their_order() -> None:
    """One answer per region, in the order asked, found or not."""
    codes = _scene().render()
    regions = [_region(name="a"), _region(x=190, name="b"), _region(y=120, name="c")]
    answers = slanted_edge.locate([_frame(codes)], regions, CAMERA, slanted_edge.Options())
    assert [a.region for a in answers] == ["a", "b", "c"]
    assert [isinstance(a, Found) for a in answers] == [True, False, True]


def test_options_are_checked() -> None:
    """The search distance is a length from 0 to 200 px; unknown keys are refused with the known ones."""
    assert slanted_edge.read_options({}).search == 10
    assert slanted_edge.read_options({"search": "12 px"}).search == 12
    for wrong in (-1, True, "3 mm", "far", 201):
        with pytest.raises(UsageError, match=r"search is .*(allowed is 0 px to 200 px|no number with a unit)"):
            slanted_edge.read_options({"search": wrong})
    with pytest.raises(UsageError, match=r"unknown option 'serach'; known are: search; did you mean 'search'"):
        slanted_edge.read_options({"serach": 3})


def test_frame_is_not_changed_and_search_is_quick() -> None:
    """The codes stay as they were; a 100 × 160 region takes less than 20 ms even on a busy machine (4 ms idle)."""
    codes = _scene().render(np.random.default_rng(0))
    before = codes.copy()
    _locate(codes, _region(w=100, h=160))
    times = []
    for _ in range(10):
        start = time.perf_counter()
        _locate(codes, _region(w=100, h=160))
        times.append(time.perf_counter() - start)
    assert np.array_equal(codes, before)
    assert min(times) < 0.02
