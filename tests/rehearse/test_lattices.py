"""Painted dots and boards against independent pictures of the same charts."""

from dataclasses import replace

import numpy as np

from runner.rehearse.lattices import Board, DotGrid
from runner.rehearse.optics import Transfer
from runner.rehearse.painting import Lens, Seen, picture
from tests.scenes.lattices import LatticeScene

MARKS = ((3, 2), (5, 2), (3, 3))
SCENE = LatticeScene(
    size=(200, 160), places=(9, 7), pitch=20.0, radial=(-0.03,), radius=0.3, marks=MARKS, blur=0.7, larger=1.5
)
SEEN = Seen(200, 160, 0.5, Transfer(0.2, 0.05, 0.0, 0.7, 1.0), Lens(-0.03, SCENE.half))


def test_dots_are_seen_where_lens_and_chart_put_them() -> None:
    """Under barrel distortion, against a picture drawn on other cells: each pixel within 1.5 % of the step."""
    grid = DotGrid(9, 7, 10.0, 6.0, 0.8, 0.1, MARKS)

    found = picture(grid.paint, SEEN)

    assert np.abs(found - SCENE.dots()).max() < 0.015 * 0.7
    assert np.abs(found - replace(SCENE, marks=()).dots()).max() > 0.3


def test_dots_lie_where_the_other_picture_has_them() -> None:
    """The centre of light that each dot takes away agrees to 0.005 px, its bent shape included."""
    plain = replace(SCENE, marks=())
    pictures = [0.8 - picture(DotGrid(9, 7, 10.0, 6.0, 0.8, 0.1).paint, SEEN), 0.8 - plain.dots()]
    x, y = np.meshgrid(np.arange(200) + 0.5, np.arange(160) + 0.5)

    for u, v in plain.seen(plain.all_places()):
        near = (np.abs(x - u) < 9.5) & (np.abs(y - v) < 9.5)
        centres = [np.array([(near * one * at).sum() for at in (x, y)]) / (near * one).sum() for one in pictures]
        assert np.hypot(*(centres[0] - centres[1])) < 0.005


def test_a_board_is_seen_where_lens_and_chart_put_it() -> None:
    """Squares against a picture drawn on other cells, to 2 % of the step; that one cuts its outer border on cells."""
    away = picture(Board(9, 7, 10.0, 0.8, 0.1).paint, SEEN, cells=5) - replace(SCENE, marks=()).board()

    assert np.abs(away[16:-16, 16:-16]).max() < 0.02 * 0.7


def test_a_boards_marks_are_discs_of_the_other_colour() -> None:
    """In the middle of the squares named; discs of the other picture have no soft border on their cells."""
    board, scene = Board(9, 7, 10.0, 0.8, 0.1, MARKS), replace(SCENE, radius=0.25)

    away = picture(board.paint, SEEN, cells=5) - scene.board()

    assert np.abs(away).max() < 0.1 * 0.7
    assert np.abs(picture(board.paint, SEEN) - replace(scene, marks=()).board()).max() > 0.5 * 0.7
