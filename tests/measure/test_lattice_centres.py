"""Points of one crop: own pixels of a mosaic, strange points left out, and what cannot be measured refused."""

from dataclasses import replace

import numpy as np
import pytest

from runner.capture.frame import crop
from runner.errors import MeasurementRefused
from runner.measure.contract import Found
from runner.measure.lattice_centres import Centres, centres_of
from runner.measure.numerics.plane_view import View, shifts_of_marks
from runner.measure.targets import dot_grid
from tests.measure.lattice_samples import BOTH, camera, drawn, frame, located
from tests.scenes.lattices import LatticeScene, Values, mosaic_of, noisy

SCENE = LatticeScene(turn=5, tilt=(5, -8), radial=(-0.1,), pitch=21, marks=((6, 4), (8, 4), (6, 5)))


def _centres(target: object, light: Values, channel: str = "mono", mosaic: str = "none", **asked: object) -> Centres:
    device = camera(light, mosaic=mosaic)
    taken = frame(light)
    found = located(target, taken, device, **asked)  # type: ignore[arg-type]
    assert isinstance(found, Found), found
    return centres_of(found, crop(taken, found.box, device, channel))


def _off(made: Centres, scene: LatticeScene) -> Values:
    """Return how far points lie from the pictures of their places, marks' own shifts taken off by the true view."""
    view = View(scene.plane(), scene.middle, np.array(scene.radial), np.zeros(2), scene.half)
    return made.points - shifts_of_marks(view, made.places, made.marks) - scene.seen(made.places)


@pytest.mark.parametrize("target", BOTH, ids=["dots", "board"])
@pytest.mark.parametrize(
    ("mosaic", "channel", "most"),
    [("none", "mono", 0.012), ("GRBG", "red", 0.028), ("GRBG", "green", 0.017), ("GRBG", "blue", 0.028)],
)
def test_each_colour_on_its_own_pixels(target: object, mosaic: str, channel: str, most: float) -> None:
    """Step/noise 50, tilted, larger dots among them: rms as the pixels allow, told by u, and no common shift.

    A mosaic's green has half the pixels, red and blue a quarter: √2 and 2 times the mono figure. Other colours have
    another light here, so that a pixel of theirs would show.
    """
    plain = {"size": (320, 240), "marks": SCENE.marks if target is dot_grid else ()}
    scene = replace(SCENE, **plain)  # type: ignore[arg-type]
    clean = drawn(scene, target)  # type: ignore[arg-type]
    light = mosaic_of([clean, 0.8 * clean, 0.6 * clean], mosaic) if mosaic != "none" else clean
    step = {"mono": 0.7, "red": 0.7, "green": 0.56, "blue": 0.42}[channel]
    made = _centres(target, noisy(light, step / 50, np.random.default_rng(1)), channel, mosaic)
    off = _off(made, scene)
    most *= 1.0 if target is dot_grid else 1.35  # corners have less border in their windows

    assert len(made.points) >= 110
    assert np.sqrt(np.mean(off**2)) <= most
    assert np.abs(off).max() <= 3.5 * most
    assert 0.8 < np.std(off / made.u[:, None]) < 1.25
    assert np.abs(off.mean(axis=0)).max() < 4 * most / np.sqrt(len(off))


def test_dirt_on_a_dot_is_left_out() -> None:
    """A bright scratch across one dot: that dot is not among the points, all others are."""
    light = np.array(LatticeScene().dots())
    x, y = LatticeScene().seen(np.array([[5.0, 3.0]]))[0]
    light[int(y) - 1 : int(y) + 4, int(x) - 4 : int(x) + 2] = 0.8
    made = _centres(dot_grid, noisy(light, 0.005, np.random.default_rng(2)))

    assert len(made.points) == 116
    assert (5.0, 3.0) not in {tuple(place) for place in made.places.tolist()}


def test_clipped_light_is_refused() -> None:
    """A ground at the white level: where a border is cut off, nobody knows its middle."""
    with pytest.raises(MeasurementRefused, match=r"% of the lattice's pixels lie at the white level") as refused:
        _centres(dot_grid, 1.4 * LatticeScene().dots())
    assert refused.value.cause == "clipped"


def test_dark_light_cut_at_code_zero_is_refused() -> None:
    """Dots at code 0 likewise."""
    light = LatticeScene().dots() - 0.13
    with pytest.raises(MeasurementRefused, match=r"lie at code 0; at most 5 % may; raise the camera's black level"):
        _centres(dot_grid, light)


def test_dots_too_small_for_a_colour_of_a_mosaic() -> None:
    """7 px dots have 10 red pixels: too few for eight parameters."""
    scene = LatticeScene(pitch=12, size=(200, 150), radius=0.28)
    light = mosaic_of([scene.dots()] * 3, "RGGB")
    with pytest.raises(MeasurementRefused, match=r"each of the dots has \d\d pixels of this colour; 32 are needed"):
        _centres(dot_grid, light, "red", "RGGB")
