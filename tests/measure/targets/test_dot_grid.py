"""Dot grids are found as they are, and whatever else lies before the camera is refused with its figures."""

from collections.abc import Callable
from dataclasses import replace
from functools import partial
from typing import Any

import numpy as np
import pytest
import skimage.data

from runner.errors import UsageError
from runner.measure.contract import Found, NotFound
from runner.measure.targets import dot_grid as target
from runner.spec.model import Amount, Camera, Region
from tests.measure.lattice_samples import camera, frame, located
from tests.scenes.lattices import LatticeScene, noisy

PATTERN = ((6, 4), (8, 4), (6, 5))
PLAIN = LatticeScene()
MARKED = LatticeScene(marks=PATTERN)
KNOWN: dict[str, Any] = {"columns": 13, "rows": 9}
WHOLE: dict[str, Any] = {"columns": 13, "rows": 9, "marks": [list(one) for one in PATTERN]}


@pytest.mark.parametrize(
    "scene",
    [
        PLAIN,
        replace(PLAIN, turn=12, tilt=(10, -14), shading=(0.3, -0.2), pitch=20),
        replace(PLAIN, radial=(-0.25, 0.05), places=(17, 13), pitch=19),
        replace(PLAIN, blur=2.2),
        replace(PLAIN, bright=0.1, dark=0.8),
        LatticeScene(pitch=12, size=(200, 150), radius=0.3),
        LatticeScene(pitch=40, size=(400, 300), turn=-30, radius=0.15),
    ],
    ids=["plain", "tilted", "barrel", "blurred", "bright", "7 px dots", "thin dots"],
)
def test_good_frames_are_not_refused(scene: LatticeScene) -> None:
    """Every dot that lies wholly in the frame is found within 0.4 px of where its picture is, at its own place."""
    found = located(target, noisy(scene.dots(), 0.014, np.random.default_rng(1)))
    places = scene.all_places()
    truth = scene.seen(places)
    reach = 1.3 * scene.radius * scene.pitch + 2
    whole = ((truth > reach) & (truth < np.array(scene.size) - reach)).all(axis=1)

    assert isinstance(found, Found), found
    points, counted = np.array(found.points["dots"]), np.array(found.points["places"])
    away = np.hypot(*(points[:, None] - truth[None]).transpose(2, 0, 1))
    nearest = away.argmin(axis=1)
    assert away.min(axis=1).max() < 0.4
    assert set(np.flatnonzero(whole)) <= set(nearest.tolist())
    assert np.ptp(counted - places[nearest], axis=0).tolist() == [0, 0]


def test_marks_count_from_the_origin_however_it_lies() -> None:
    """With three larger dots, places are the chart's own at any quarter turn."""
    light = MARKED.dots()
    for turns in range(4):
        found = located(target, np.rot90(light, turns).copy(), **WHOLE)
        assert isinstance(found, Found), found
        assert set(found.points["larger"]) == set(PATTERN)
        assert {tuple(p) for p in found.points["places"]} == {tuple(p) for p in MARKED.all_places()}


def test_missing_dots_are_tolerated_and_told() -> None:
    """Four of 117 gone: found, and four missing; without the chart's numbers only those inside its outline are."""
    scene = replace(PLAIN, missing=((0, 0), (5, 4), (6, 4), (12, 3)))
    known, plain = (located(target, scene.dots(), **asked) for asked in (KNOWN, {}))

    assert isinstance(known, Found)
    assert isinstance(plain, Found)
    assert known.geometry["missing"] == 4
    assert plain.geometry["missing"] == 2
    assert len(known.points["dots"]) == 113


def test_a_region_holds_its_own_part() -> None:
    """In a region only its dots are found, in px of the frame; one over the border is off the frame."""
    box = Region("middle", (Amount(50, "%"), Amount(50, "%")), (Amount(180, "px"), Amount(150, "px")))
    beside = replace(box, name="beside", position=(Amount(97, "%"), Amount(50, "%")))
    taken = frame(PLAIN.dots())
    inner, outer = target.locate([taken], [box, beside], camera(taken.codes), target.Options())

    assert isinstance(inner, Found)
    assert len(inner.points["dots"]) == 7 * 7
    truth = PLAIN.seen(PLAIN.all_places())
    away = np.hypot(*(np.array(inner.points["dots"])[:, None] - truth[None]).transpose(2, 0, 1)).min(axis=1)
    assert away.max() < 0.3
    assert isinstance(outer, NotFound)
    assert outer.cause == "off the frame"


def _noise(sigma: float, mean: float) -> np.ndarray:
    return np.random.default_rng(3).normal(mean, sigma, (240, 320))


def _mirrored() -> np.ndarray:
    return MARKED.dots()[:, ::-1].copy()


def _moved() -> np.ndarray:
    return MARKED.dots()[:, 40:].copy()


CHALLENGES: dict[str, tuple[Callable[[], np.ndarray], dict[str, Any], str, str]] = {
    "lamp off": (
        partial(_noise, 0.002, 0.0),
        {},
        "too dark",
        r"reaches 0\.\d+ % of the range over black; 1 % is needed",
    ),
    "blank sheet": (partial(_noise, 0.005, 0.6), {}, "no modulation", r"a modulation of 1\.\d %; 5 % is needed"),
    "stuck at one code": (lambda: np.full((240, 320), 0.5), {}, "no picture", "has the code 2080"),
    "blown out": (partial(_noise, 0.001, 1.0), {}, "too bright", "the darkest part lies at 99"),
    "chequered board": (
        PLAIN.board,
        {},
        "another scene",
        r"fill 95\.5 % of ellipses",
    ),
    "edge": (
        lambda: np.where(np.add.outer(np.arange(240), np.arange(320)) > 280, 0.8, 0.1),
        {},
        "another scene",
        "0 of them on a square lattice; this is not a dot grid",
    ),
    "mirrored": (_mirrored, WHOLE, "another scene", "marks lie mirrored"),
    "other marks": (
        replace(PLAIN, marks=((6, 4), (7, 4), (6, 5))).dots,
        WHOLE,
        "another scene",
        "the chart has 3, which lie otherwise",
    ),
    "no marks": (PLAIN.dots, WHOLE, "another scene", "0 marks were found; the chart has 3"),
    "moved out": (
        _moved,
        WHOLE,
        "off the frame",
        "12 columns and 9 rows of dots were found; the chart has 13 and 9",
    ),
    "a larger chart": (
        LatticeScene(places=(14, 9)).dots,
        {"columns": 13, "rows": 9},
        "another scene",
        "14 columns and 9 rows",
    ),
    "covered": (
        replace(PLAIN, missing=tuple((i, j) for i in range(3, 9) for j in range(3, 7))).dots,
        {},
        "another scene",
        r"24 of 117 dots are missing \(21 %\)",
    ),
    "too far": (
        LatticeScene(pitch=8, size=(130, 90), radius=0.3).dots,
        {},
        "undersampled",
        r"the dots are 4\.\d px wide; 6 px are needed",
    ),
    "a few dots": (
        LatticeScene(places=(5, 4)).dots,
        {},
        "another scene",
        "25 on 4 columns and rows are needed",
    ),
}


@pytest.mark.parametrize("name", CHALLENGES)
def test_bad_captures_are_refused_with_their_reason(name: str) -> None:
    """Fourteen staged captures: each ends not measured, with the cause and a sentence that has the figures."""
    light, asked, cause, words = CHALLENGES[name]
    found = located(target, light(), **asked)

    assert isinstance(found, NotFound), name
    assert found.cause == cause
    with pytest.raises(AssertionError, match=words):
        raise AssertionError(found.because)


@pytest.mark.parametrize("name", ["camera", "coins", "brick", "grass", "page", "text", "moon", "cell", "clock"])
def test_photographs_are_no_dot_grids(name: str) -> None:
    """Photographs of scikit-image, textures and rows of coins among them, are another scene."""
    codes = np.asarray(getattr(skimage.data, name)())
    device = Camera(width=codes.shape[1], height=codes.shape[0], bit_depth=8, black_level=0, white_level=255)
    found = located(target, replace(frame(np.zeros((2, 2))), codes=codes), device)

    assert isinstance(found, NotFound)
    assert found.cause == "another scene"


@pytest.mark.parametrize(
    ("asked", "words"),
    [
        ({"columns": 13}, "columns and rows go together"),
        ({"columns": 2, "rows": 9}, "columns is 2; allowed are whole numbers from 4"),
        ({"marks": [[1, 2], [1, 2]]}, "marks holds a place twice"),
        ({"marks": [[1.5, 2]]}, r"marks holds \[1.5, 2\]"),
        ({"most_missing": "80 %"}, "allowed is 0 % to 50 %"),
        ({"dots": "grey"}, "allowed are auto, dark and bright"),
        ({"diameter": "5 px"}, "diameter is '5 px'"),
        ({"collumns": 13}, "did you mean 'columns'"),
    ],
)
def test_options_are_held_to_their_meaning(asked: dict[str, Any], words: str) -> None:
    """Half a size, too small a one, doubled or broken places, another unit and an unknown key are told."""
    with pytest.raises(UsageError, match=words):
        target.read_options(asked)
