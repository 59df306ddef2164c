"""Corners of boards are found with the colour of their squares; edges, dots and texture have none."""

import numpy as np
import pytest

from runner.measure.numerics.corner_search import find_corners
from tests.scenes.lattices import LatticeScene, noisy


@pytest.mark.parametrize("binning", [1, 2])
def test_every_corner_and_its_parity(binning: int) -> None:
    """117 of 117 within half a pixel of the small picture; all neighbours differ in parity."""
    scene = LatticeScene(turn=25, tilt=(8, -10), shading=(0.2, 0.2), pitch=20)
    light = noisy(scene.board(), 0.014, np.random.default_rng(1))
    corners = find_corners(np.round(1000 * light).astype(np.uint16), binning)
    places = scene.all_places()
    truth = scene.seen(places)
    inside = ((truth > 14) & (truth < np.array(scene.size) - 14)).all(axis=1)
    away = np.hypot(*(corners.centres[:, None] - truth[None]).transpose(2, 0, 1))
    nearest = away.argmin(axis=0)

    assert away.min(axis=0)[inside].max() < 0.5 * binning
    colour = places.sum(axis=1).astype(int) % 2
    same = corners.parity[nearest[inside]] == colour[inside]
    assert same.all() or not same.any()


def test_where_there_is_no_board() -> None:
    """One edge and a dot grid have no corners: an edge bends one way only, dots have no borders that cross."""
    edge = np.where(np.arange(200)[None, :] + 0.1 * np.arange(150)[:, None] > 100, 800.0, 100.0)

    assert len(find_corners(edge, 1).centres) == 0
    assert len(find_corners(1000 * LatticeScene().dots(), 1).centres) == 0


def test_a_small_picture_has_none() -> None:
    """A picture smaller than the circles about a corner is no error."""
    assert len(find_corners(np.zeros((8, 8)), 1).centres) == 0
