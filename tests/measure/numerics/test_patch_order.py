"""Levels out of the order of their lights are told; the ways in which a chart may lie are all of a rectangle's."""

import numpy as np
import pytest

from runner.measure.numerics.patch_order import arrangements, out_of_order


def test_levels_in_order_pass_and_others_do_not() -> None:
    """Noise and 5 % of shading change nothing; two steps that were exchanged are named, the brighter first."""
    lights = np.array([0.8, 0.4, 0.2, 0.1])
    u = np.full(4, 2.0)

    assert out_of_order(1000 * lights, u, lights) is None
    assert out_of_order(np.array([800.0, 400, 200, 204]), u, np.array([0.8, 0.4, 0.2, 0.199])) is None
    assert out_of_order(1000 * lights[[0, 2, 1, 3]], u, lights) == (1, 2)


@pytest.mark.parametrize(("columns", "rows", "count"), [(5, 1, 1), (4, 3, 3), (3, 3, 7)])
def test_arrangements_are_the_symmetries_of_a_rectangle(columns: int, rows: int, count: int) -> None:
    """A row has 1 other way to lie, a rectangle 3, a square 7 (dihedral groups of order 2, 4 and 8, one as it is)."""
    ways = dict(arrangements(columns, rows))

    assert len(ways) == count
    assert len({tuple(order) for order in ways.values()}) == count
    for order in ways.values():
        assert sorted(order) == list(range(columns * rows))
    half = next(order for words, order in ways.items() if words.startswith("turned by 180"))
    assert list(half) == list(range(columns * rows))[::-1]


def test_a_turn_clockwise_is_one() -> None:
    """Of a square turned clockwise the lower left patch is seen at the upper left."""
    assert list(dict(arrangements(2, 2))["turned by 90° clockwise"]) == [2, 0, 3, 1]
