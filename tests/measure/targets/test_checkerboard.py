"""Chequered boards are found as they are, and whatever else lies before the camera is refused with its figures."""

from collections.abc import Callable
from dataclasses import replace
from functools import partial
from typing import Any

import numpy as np
import pytest
import skimage.data

from runner.errors import UsageError
from runner.measure.contract import Found, NotFound
from runner.measure.targets import checkerboard as target
from runner.spec.model import Camera
from tests.measure.lattice_samples import frame, located
from tests.scenes.lattices import LatticeScene, noisy

PATTERN = ((6, 4), (8, 4), (6, 5))
PLAIN = LatticeScene()
MARKED = LatticeScene(marks=PATTERN)
WHOLE: dict[str, Any] = {"columns": 13, "rows": 9, "marks": [list(one) for one in PATTERN]}


@pytest.mark.parametrize(
    "scene",
    [
        PLAIN,
        replace(PLAIN, turn=12, tilt=(10, -14), shading=(0.3, -0.2), pitch=20),
        replace(PLAIN, radial=(-0.25, 0.05), places=(17, 13), pitch=19),
        replace(PLAIN, blur=2.2),
        LatticeScene(pitch=10, size=(170, 130)),
        LatticeScene(pitch=40, size=(400, 300), turn=-30),
    ],
    ids=["plain", "tilted", "barrel", "blurred", "10 px squares", "large squares"],
)
def test_good_frames_are_not_refused(scene: LatticeScene) -> None:
    """Every corner well inside the frame is found within 0.15 px, at its own place."""
    found = located(target, noisy(scene.board(), 0.014, np.random.default_rng(1)))
    places = scene.all_places()
    truth = scene.seen(places)
    whole = np.all((truth > 0.5 * scene.pitch) & (truth < np.array(scene.size) - 0.5 * scene.pitch), axis=1)

    assert isinstance(found, Found), found
    points, counted = np.array(found.points["corners"]), np.array(found.points["places"])
    away = np.hypot(*(points[:, None] - truth[None]).transpose(2, 0, 1))
    nearest = away.argmin(axis=1)
    assert away.min(axis=1)[whole[nearest]].max() < 0.15
    assert set(np.flatnonzero(whole)) <= set(nearest.tolist())
    assert np.ptp(counted - places[nearest], axis=0).tolist() == [0, 0]


def test_marks_count_from_the_origin_however_it_lies() -> None:
    """With discs in three squares, places are the chart's own at any quarter turn."""
    light = MARKED.board()
    for turns in range(4):
        found = located(target, np.rot90(light, turns).copy(), **WHOLE)
        assert isinstance(found, Found), found
        at = {tuple(place): point for place, point in zip(found.points["places"], found.points["corners"], strict=True)}
        assert set(at) == {tuple(p) for p in MARKED.all_places()}
        x, y = MARKED.seen(np.array([[0.0, 0.0]]))[0]
        expected = {0: (x, y), 1: (y, 320 - x), 2: (320 - x, 240 - y), 3: (240 - y, x)}[turns]
        assert at[0.0, 0.0] == pytest.approx(expected, abs=0.1)


def test_missing_corners_are_tolerated_and_told() -> None:
    """Blots on three of 117 corners: found, and three missing."""
    scene = replace(PLAIN, missing=((0, 0), (5, 4), (12, 3)))
    found = located(target, scene.board(), columns=13, rows=9)

    assert isinstance(found, Found)
    assert found.geometry["missing"] == 3


def test_a_board_seen_on_its_side_keeps_its_columns() -> None:
    """9 columns and 6 rows turned by 80 degrees: rows are still those of nine."""
    scene = LatticeScene(places=(9, 6), turn=80, pitch=24)
    found = located(target, scene.board(), columns=9, rows=6)

    assert isinstance(found, Found)
    columns, rows = np.ptp(np.array(found.points["places"]), axis=0) + 1
    assert (columns, rows) == (9, 6)


def _noise(sigma: float, mean: float) -> np.ndarray:
    return np.random.default_rng(3).normal(mean, sigma, (240, 320))


def _mirrored() -> np.ndarray:
    return MARKED.board()[:, ::-1].copy()


def _moved() -> np.ndarray:
    return MARKED.board()[:, 60:].copy()


CHALLENGES: dict[str, tuple[Callable[[], np.ndarray], dict[str, Any], str, str]] = {
    "lamp off": (
        partial(_noise, 0.002, 0.0),
        {},
        "too dark",
        r"reaches 0\.\d+ % of the range over black; 1 % is needed",
    ),
    "blank sheet": (partial(_noise, 0.005, 0.6), {}, "no modulation", r"a modulation of 1\.\d %; 5 % is needed"),
    "noise": (partial(_noise, 0.05, 0.5), {}, "another scene", "this is not a chequered board"),
    "stuck at one code": (lambda: np.full((240, 320), 0.5), {}, "no picture", "has the code 2080"),
    "blown out": (partial(_noise, 0.001, 1.0), {}, "too bright", "the darkest part lies at 99"),
    "dot grid": (PLAIN.dots, {}, "another scene", "this is not a chequered board"),
    "large dots": (LatticeScene(radius=0.4).dots, {}, "another scene", "their borders are not straight"),
    "mirrored": (_mirrored, WHOLE, "another scene", "marks lie mirrored"),
    "other marks": (
        replace(PLAIN, marks=((6, 4), (7, 4), (6, 5))).board,
        WHOLE,
        "another scene",
        "the chart has 3, which lie otherwise",
    ),
    "no marks": (PLAIN.board, WHOLE, "another scene", "0 marks were found; the chart has 3"),
    "moved out": (
        _moved,
        WHOLE,
        "off the frame",
        "columns and 9 rows of corners were found; the chart has 13 and 9",
    ),
    "a larger chart": (
        LatticeScene(places=(9, 7)).board,
        {"columns": 9, "rows": 6},
        "another scene",
        "9 columns and 7 rows",
    ),
    "covered": (
        replace(PLAIN, missing=tuple((i, j) for i in range(3, 9) for j in range(3, 7))).board,
        {},
        "another scene",
        r"24 of 117 corners are missing \(21 %\)",
    ),
    "too far": (
        LatticeScene(pitch=8.5, size=(135, 95)).board,
        {},
        "undersampled",
        r"squares are 8\.5 px wide",
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
def test_photographs_are_no_boards(name: str) -> None:
    """Photographs of scikit-image, a brick wall and printed text among them, are another scene."""
    codes = np.asarray(getattr(skimage.data, name)())
    device = Camera(width=codes.shape[1], height=codes.shape[0], bit_depth=8, black_level=0, white_level=255)
    found = located(target, replace(frame(np.zeros((2, 2))), codes=codes), device)

    assert isinstance(found, NotFound)
    assert found.cause == "another scene"


def test_a_drawn_board_of_another_library_is_one() -> None:
    """scikit-image's checkerboard (8 × 8 squares of 25 px): 7 × 7 corners at multiples of 25 px."""
    codes = np.asarray(getattr(skimage.data, "checkerboard")())  # noqa: B009 - it has no types
    device = Camera(width=200, height=200, bit_depth=8, black_level=0, white_level=255)
    found = located(target, replace(frame(np.zeros((2, 2))), codes=codes), device, columns=7, rows=7)

    assert isinstance(found, Found)
    points = np.array(found.points["corners"])
    assert points == pytest.approx(25 * (np.array(found.points["places"]) + 1), abs=0.02)


@pytest.mark.parametrize(
    ("asked", "words"),
    [
        ({"rows": 6}, "columns and rows go together"),
        ({"columns": True, "rows": 6}, "columns is True"),
        ({"marks": "L"}, "marks is 'L'"),
        ({"square": "-3 mm"}, "square is '-3 mm'"),
    ],
)
def test_options_are_held_to_their_meaning(asked: dict[str, Any], words: str) -> None:
    """Half a size, a truth value, a word for a list and a negative length are told."""
    with pytest.raises(UsageError, match=words):
        target.read_options(asked)
