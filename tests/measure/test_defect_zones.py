"""Defects belong to the centre or to what lies around it, by where they lie, touch or run."""

import pytest

from runner.measure.defect_zones import Zone, split
from runner.measure.numerics.defects import Cluster, Defect
from runner.measure.numerics.large_defects import Blemish, LineDefect

SHAPE = (60, 80)
"""The centre of half the sides: rows 15 to 44, columns 20 to 59."""
CENTRE, OUTER = Zone(SHAPE, 0.5, inner=True), Zone(SHAPE, 0.5, inner=False)


def test_zones_share_out_all_pixels_and_lines() -> None:
    """Both together are the array; half of each side is a quarter of the pixels."""
    assert (CENTRE.size, OUTER.size) == (1200, 3600)
    assert (CENTRE.lines, OUTER.lines) == ((30, 40), (30, 40))
    assert Zone((61, 80), 0.3, inner=True).size + Zone((61, 80), 0.3, inner=False).size == 61 * 80


@pytest.mark.parametrize(
    ("x", "y", "inside"),
    [(20, 15, True), (59, 44, True), (19, 30, False), (60, 30, False), (40, 14, False), (40, 45, False), (0, 0, False)],
)
def test_a_pixel_belongs_where_it_lies(x: int, y: int, inside: bool) -> None:
    """The centre's first and last rows and columns belong to it, the next ones do not."""
    pixel = [Defect(x, y, "hot", 1.0, 9.0)]

    assert bool(CENTRE.pixels(pixel)) is inside
    assert bool(OUTER.pixels(pixel)) is not inside


def test_what_is_extended_belongs_to_the_centre_if_it_reaches_it() -> None:
    """A cluster by one of its pixels, a column or row by its place, a blemish by its middle; each in one zone only."""
    across = Cluster(((19, 30), (20, 30)))
    away = Cluster(((1, 1), (2, 2)))
    assert (CENTRE.clusters([across, away]), OUTER.clusters([across, away])) == ((across,), (away,))

    column, row = LineDefect("column", 30, 5.0, 9.0), LineDefect("row", 50, 5.0, 9.0)
    assert (CENTRE.through([column, row]), OUTER.through([column, row])) == ((column,), (row,))

    spots = [Blemish(40.5, y, 0.1, 0.01, 6.0, 0.5, 10.0) for y in (15.6, 7.6)]
    assert CENTRE.blemishes(spots, 1) == (spots[0],)
    assert CENTRE.blemishes(spots, 2) == (spots[0],)  # rows of pairs: at 30.7 and 14.7 of the array
    assert OUTER.blemishes(spots, 2) == (spots[1],)


def test_names_tell_their_zone() -> None:
    """The last word is a zone only if it is one."""
    assert split("hot_pixels_centre") == ("hot_pixels", "centre")
    assert split("largest_cluster_outer") == ("largest_cluster", "outer")
    assert split("hot_pixels") == ("hot_pixels", "")
    assert split("clusters") == ("clusters", "")
