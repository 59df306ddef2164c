"""Points get their places on a lattice that is turned, tilted, bent and full of holes, and nothing else does."""

import numpy as np
import pytest

from runner.measure.numerics.lattice_index import by_marks, gaps, index_lattice
from tests.scenes.lattices import LatticeScene


def _same(found: np.ndarray, truth: np.ndarray) -> bool:
    """Tell whether places are the truth's but for where counting begins."""
    return bool(np.array_equal(found - found[0], truth - truth[0]))


@pytest.mark.parametrize(
    "scene",
    [
        LatticeScene(turn=31.0),
        LatticeScene(turn=-44.0, tilt=(20, -25)),
        LatticeScene(places=(25, 19), radial=(-0.3, 0.08), pitch=12),
        LatticeScene(radial=(0.35,), tilt=(-15, 10)),
    ],
    ids=["turned", "tilted", "barrel of 18 %", "pincushion"],
)
def test_bent_lattices_are_followed(scene: LatticeScene) -> None:
    """Every point in any order gets its place, with 5 % of them gone and places shaken by 1 % of the pitch."""
    rng = np.random.default_rng(1)
    places = scene.all_places()
    kept = rng.permutation(len(places))[: int(0.95 * len(places))]
    points = scene.seen(places[kept]) + rng.normal(0, 0.01 * scene.pitch, (len(kept), 2))
    index = index_lattice(points)

    assert len(index.members) >= len(kept) - 2  # one on the rim may have lost its neighbours
    assert _same(index.places, places[kept][index.members].astype(int))


def test_strange_points_stay_out() -> None:
    """Of 60 points strewn between 117 of a lattice at most 3 come in, and none changes another's place."""
    scene, rng = LatticeScene(turn=10), np.random.default_rng(3)
    points = np.vstack([scene.seen(scene.all_places()), rng.uniform(0, 300, (60, 2))])
    index = index_lattice(points)
    mine = index.members < 117

    assert mine.sum() >= 114
    assert (~mine).sum() <= 3
    truth = scene.all_places().astype(int)[index.members[mine]]
    assert _same(index.places[mine], truth)


def test_noise_is_no_lattice() -> None:
    """Among 500 points strewn at random no lattice has more than 24 points (25 are needed for a chart)."""
    index = index_lattice(np.random.default_rng(5).uniform(0, 1000, (500, 2)))

    assert len(index.members) < 25


def test_parity_tells_the_diagonal_from_the_row() -> None:
    """Corners of a board squeezed to a third across are still counted in rows and columns."""
    v, u = np.mgrid[0:7, 0:9]
    points = np.column_stack([u.ravel() * 10.0, v.ravel() * 30.0])
    index = index_lattice(points, (u + v).ravel() % 2)

    assert index.size == (9, 7)


def test_gaps_are_inside() -> None:
    """A hole inside counts, a missing corner of the outline does not."""
    v, u = np.mgrid[0:5, 0:6]
    places = np.column_stack([u.ravel(), v.ravel()])
    kept = [n for n, (a, b) in enumerate(places.tolist()) if (a, b) not in {(2, 3), (0, 0)}]

    assert gaps(places[kept]).tolist() == [[2, 3]]


@pytest.mark.parametrize("turns", [0, 1, 2, 3])
@pytest.mark.parametrize("mirrored", [False, True])
def test_marks_tell_which_way_up(turns: int, *, mirrored: bool) -> None:
    """Three marks in an L give origin, quarter turns and handedness; every place then has the chart's own number."""
    pattern = [(4, 2), (6, 2), (4, 3)]
    chart = np.array([(a, b) for b in range(5) for a in range(8)])
    turn = np.linalg.matrix_power(np.array([[0, -1], [1, 0]]), turns)
    seen = chart @ turn.T * ([-1, 1] if mirrored else [1, 1])
    seen = seen - seen.min(axis=0)
    marked = seen[[chart.tolist().index(list(one)) for one in pattern]]
    found = by_marks(seen, marked, pattern)

    assert found is not None
    assert found.mirrored == mirrored
    if not mirrored:
        assert (found.places + pattern[0]).tolist() == chart.tolist()
        assert found.quarter_turns == turns
    assert by_marks(seen, marked[:2], pattern) is None
