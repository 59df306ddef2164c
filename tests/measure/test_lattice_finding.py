"""What both targets share: levels, numbers, marks, gaps; the targets' own tests hold the captures."""

from typing import Any

import numpy as np
import pytest

from runner.capture.frame import Box
from runner.errors import MeasurementRefused
from runner.measure.lattice_finding import Lattice, LatticeOptions, counted, missing_of, offered, refuse_levels
from tests.measure.lattice_samples import camera


def _lattice(columns: int = 8, rows: int = 5, without: tuple[tuple[int, int], ...] = ()) -> Lattice:
    places = np.array([(a, b) for b in range(rows) for a in range(columns) if (a, b) not in without])
    return Lattice(10.0 * places + 5, places, np.tile(10.0 * np.eye(2), (len(places), 1, 1)), "dots")


NONE = np.zeros((0, 2), dtype=np.intp)


def test_a_chart_on_its_side_is_counted_along_its_own_rows() -> None:
    """5 × 8 where the chart has 8 × 5: turned by a quarter, with the steps turned along."""
    made = counted(_lattice(5, 8), NONE, LatticeOptions(columns=8, rows=5))

    assert tuple(np.ptp(made.places, axis=0) + 1) == (8, 5)
    moved = made.points[1:] - made.points[:-1]
    by_steps = np.einsum("nij,nj->ni", made.steps[:-1], np.diff(made.places, axis=0))
    assert by_steps == pytest.approx(moved)


def test_marks_in_squares_turn_about_their_middles() -> None:
    """A board turned by half a turn: the mark in square (2, 1) is found in square (4, 2) of 8 × 5 corners."""
    made = counted(
        _lattice(), np.array([[4, 2], [2, 2], [4, 1]]), LatticeOptions(marks=[[2, 1], [4, 1], [2, 2]]), squares=True
    )
    last = made.places[(made.points == made.points.max(axis=0)).all(axis=1)][0]

    assert made.places[0].tolist() == [7, 4]
    assert last.tolist() == [0, 0]


@pytest.mark.parametrize(
    ("lattice", "asked", "cause", "words"),
    [
        (_lattice(7, 5), {"columns": 8, "rows": 5}, "off the frame", "7 columns and 5 rows of dots were found"),
        (_lattice(9, 5), {"columns": 8, "rows": 5}, "another scene", "the chart has 8 and 5"),
        (_lattice(without=((3, 2), (4, 2), (3, 3), (4, 3))), {"most_missing": "5 %"}, "another scene", "4 of 40 dots"),
    ],
)
def test_what_does_not_fit_the_chart(lattice: Lattice, asked: dict[str, Any], cause: str, words: str) -> None:
    """A column short, one too many, and too many holes are told with their figures."""
    with pytest.raises(MeasurementRefused, match=words) as refused:
        counted(lattice, NONE, LatticeOptions(**asked))
    assert refused.value.cause == cause


def test_what_is_offered_lies_in_the_frame() -> None:
    """Points move with their box; the outline is that of the outermost points, clockwise from the upper left."""
    found = offered("grid", Box(100, 50, 200, 120), _lattice(), {"radius": 0.3}, {}, 2)

    assert found.points["dots"][0] == (105.0, 55.0)
    assert found.outline == ((105.0, 55.0), (175.0, 55.0), (175.0, 95.0), (105.0, 95.0))
    assert found.geometry == {"radius": 0.3, "missing": 2.0}


def test_missing_points_are_counted_of_what_is_known() -> None:
    """With the chart's numbers a missing corner counts, without them only a hole inside."""
    lattice = _lattice(without=((0, 0), (3, 2)))

    assert missing_of(lattice, LatticeOptions(columns=8, rows=5)) == 2
    assert missing_of(lattice, LatticeOptions()) == 1


def test_a_picture_with_two_levels_passes() -> None:
    """Half dark, half bright by 30 % of the range is not refused."""
    codes = np.full((60, 80), 600, dtype=np.uint16)
    codes[:, 40:] = 1800
    refuse_levels(codes, camera(codes))
