"""Nothing is counted twice: a blemish's border is no pixel defect, and a column counts for what it is itself."""

import numpy as np
import pytest

from runner.measure.defect_overlaps import area_of, outside, whole
from runner.measure.numerics.defects import Defect
from runner.measure.numerics.large_defects import Blemish, LineDefect
from runner.measure.planes import Grid

SPOT = Blemish(40.5, 30.5, -0.06, 0.001, 10.0, 1.0, -60.0)
AREA = area_of(SPOT, Grid(0, 0))


@pytest.mark.parametrize(
    ("pixel", "stays"),
    [
        (Defect(45, 35, "dim", -0.05, -9.0), False),
        (Defect(45, 35, "dim", -0.10, -20.0), True),  # deeper than the spot explains
        (Defect(45, 35, "bright", 0.05, 9.0), True),  # the other way
        (Defect(51, 35, "dim", -0.05, -9.0), True),  # beside it
        (Defect(45, 41, "dim", -0.05, -9.0), True),
    ],
)
def test_pixels_of_a_blemish(pixel: Defect, stays: bool) -> None:
    """A pixel is part of the blemish it lies in unless it departs farther, the other way, or lies outside."""
    assert list(outside([pixel], [AREA])) == ([pixel] if stays else [])


def test_a_blemish_of_green_is_twice_as_many_rows() -> None:
    """A blemish found in pairs of rows covers twice as many rows of green's array as columns."""
    area = area_of(SPOT, Grid(0, 0, 2, 1, 1))

    assert (area.row, area.column, area.high, area.wide) == (60.5, 40.0, 20.0, 10.0)


def _line(mean: np.ndarray, at: int, direction: str) -> LineDefect:
    """Return a line as a search would find it: noise 1 of a pixel, neighbours at 0."""
    means = mean.mean(axis=0 if direction == "column" else 1)
    noise = 1 / np.sqrt(mean.shape[0 if direction == "column" else 1])
    return LineDefect(direction, at, float(means[at]), float(means[at] / noise))


@pytest.mark.parametrize("direction", ["column", "row"])
@pytest.mark.parametrize(
    ("first", "last", "contrast", "counts"),
    [(0, 400, 1.0, True), (0, 200, 2.0, True), (0, 130, 3.0, False), (180, 200, 20.0, False)],
    ids=["whole", "half", "a third", "a cluster"],
)
def test_a_line_departs_over_half_of_its_length(
    direction: str, first: int, last: int, contrast: float, counts: bool
) -> None:
    """What departs over half of a column or row or more is a defect of it; over a third, or in one place, is none.

    Each has the same mean departure, some twenty times the noise of such means.
    """
    mean = np.random.default_rng(1).normal(0, 1, (400, 60))
    mean[first:last, 25] += contrast
    if direction == "row":
        mean = mean.T

    assert whole(mean, _line(mean, 25, direction), [], 5.6) is counts


@pytest.mark.parametrize("direction", ["column", "row"])
@pytest.mark.parametrize("own", [0.0, 0.6])
def test_a_line_that_meets_a_blemish(direction: str, own: float) -> None:
    """A column is held against its neighbours beside the blemish: defective only if it departs there by itself.

    The blemish alone, over half of the rows, has the departure of a defective half column.
    """
    mean = np.random.default_rng(2).normal(0, 1, (400, 60))
    mean[:, 25] += own
    mean[60:340, 25] += 1.5
    spot = Blemish(25.5, 200.5, 0.06, 0.001, 100.0, 1.0, 60.0)
    if direction == "row":
        mean, spot = mean.T, Blemish(200.5, 25.5, 0.06, 0.001, 100.0, 1.0, 60.0)
    found = _line(mean, 25, direction)

    assert whole(mean, found, [], 5.6)
    assert whole(mean, found, [area_of(spot, Grid(0, 0))], 5.6) is (own > 0)


def test_lines_at_the_border() -> None:
    """The first and the last column have neighbours on one side only."""
    mean = np.random.default_rng(3).normal(0, 1, (400, 60))
    mean[:, [0, 59]] += 1

    assert all(whole(mean, _line(mean, at, "column"), [], 5.6) for at in (0, 59))
