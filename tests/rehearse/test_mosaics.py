"""A mosaic takes each pixel's own colour."""

import numpy as np
import pytest

from runner.rehearse.mosaics import Mosaic


@pytest.mark.parametrize(
    ("order", "corner"), [("RGGB", [[0, 1], [1, 2]]), ("GRBG", [[1, 0], [2, 1]]), ("BGGR", [[2, 1], [1, 0]])]
)
def test_the_order_is_that_of_the_upper_left_four_pixels(order: str, corner: list[list[int]]) -> None:
    """Row by row, repeated over frames of odd size too."""
    colours = Mosaic(order).colours((5, 7))

    assert colours.shape == (5, 7)
    assert np.array_equal(colours[:2, :2], corner)
    assert np.array_equal(colours[2:4, 4:6], corner)


def test_pixels_get_their_colours_light_by_its_sensitivity() -> None:
    """Half of the pixels are green, a quarter red and blue each."""
    taken = Mosaic("RGGB", (0.5, 1.0, 0.25)).taken([np.full((4, 6), v) for v in (1.0, 2.0, 4.0)])

    assert np.array_equal(taken[:2, :2], [[0.5, 2.0], [2.0, 1.0]])
    assert np.count_nonzero(taken == 2.0) == 12
