"""Places and words of defects: where they lie in the frame, in which order, with which figures."""

import numpy as np
import pytest

from runner.capture.frame import Box, Frame, crop
from runner.measure import planes
from runner.measure.defect_spots import Listed
from runner.measure.numerics.defects import Cluster, Defect
from runner.measure.numerics.large_defects import Blemish, LineDefect
from runner.spec.model import Camera

BOX = Box(10, 21, 50, 51)


def _listed(mosaic: str = "none", channel: str = "mono", codes: np.ndarray | None = None) -> Listed:
    values = np.zeros((60, 80), dtype=np.uint16) if codes is None else codes
    camera = Camera(width=80, height=60, bit_depth=12, black_level=0, white_level=4095, mosaic=mosaic)
    frames = planes.stack([crop(Frame("a.tif", "", "", values), BOX, camera, channel)] * 3)
    return Listed("part", BOX, frames, frames.frames[0].astype(np.float32))


def _pixel(kind: str, contrast: float, significance: float = 9.0) -> Defect:
    return Defect(4, 3, kind, contrast, significance)


@pytest.mark.parametrize(
    ("defect", "words"),
    [
        (_pixel("hot", 312.4), "312 DN above its neighbours, 9 times the noise"),
        (_pixel("hot", 2512.4, 626.3), "2512 DN above its neighbours, 626 times the noise"),
        (_pixel("dead", -0.97), "97 % below its neighbours, 9 times the noise"),
        (_pixel("dim", -0.123, -6.25), "12.3 % below its neighbours, 6.25 times the noise"),
        (_pixel("bright", 0.08), "8 % above its neighbours, 9 times the noise"),
        (_pixel("stuck", 0.0), "the same code in all 3 frames"),
        (_pixel("blinking", 4.2), "4.2 times its neighbours' scatter from frame to frame"),
    ],
)
def test_words_carry_figures(defect: Defect, words: str) -> None:
    """A spot says how far it departs and from what, in words that fit its kind; its place is a pixel of the frame."""
    (spot,) = _listed().strongest(9, [defect])

    assert (spot.region, spot.kind, spot.x, spot.y) == ("part", f"{defect.kind} pixel", 14.0, 24.0)
    assert spot.words == words


@pytest.mark.parametrize(
    ("mosaic", "channel", "place"),
    [("RGGB", "red", (18, 28)), ("RGGB", "green", (19, 24)), ("GRBG", "green", (18, 24)), ("RGGB", "blue", (19, 27))],
)
def test_places_in_a_mosaic(mosaic: str, channel: str, place: tuple[int, int]) -> None:
    """Column 4 and row 3 of a channel's own pixels, in a box whose first row and column are 21 and 10."""
    (spot,) = _listed(mosaic, channel).strongest(9, [_pixel("dim", -0.1)])

    assert (spot.x, spot.y) == place


def test_extended_things_lie_at_their_middle() -> None:
    """Columns and rows lie at the region's middle, clusters and blemishes at their own, pixels counted from 0."""
    spots = _listed().strongest(
        9,
        (),
        [LineDefect("column", 5, -12.3, -40.0), LineDefect("row", 0, 7.0, 9.0)],
        [Cluster(((3, 3), (4, 3), (4, 4)))],
        [Blemish(20.5, 10.0, 0.031, 0.001, 8.2, 0.8, 30.0)],
    )
    told = {spot.kind: (spot.x, spot.y, spot.words) for spot in spots}

    assert told == {
        "defective column": (15.0, 35.5, "12.3 DN below its neighbours, 40 times their noise"),
        "defective row": (29.5, 21.0, "7 DN above its neighbours, 9 times their noise"),
        "cluster": (10 + 11 / 3, 21 + 10 / 3, "3 defective pixels that touch"),
        "blemish": (30.0, 30.5, "3.1 % brighter than around it, 8 px wide"),
    }


def test_a_blemish_in_green_is_of_pairs_of_rows() -> None:
    """The middle of a green map of pairs of rows lies between the two rows and the two columns of its cell."""
    (spot,) = _listed("RGGB", "green").strongest(9, (), (), (), [Blemish(0.5, 0.5, -0.1, 0.01, 3.0, 0.4, -20.0)])

    assert (spot.x, spot.y) == (10.5, 21.5)
    assert spot.words == "10 % darker than around it, 6 px wide"


@pytest.mark.parametrize("odd", [False, True])
def test_a_green_column_is_the_one_that_departs(odd: bool) -> None:
    """Of the two columns of the frame that a column of green's array holds, the place is that which departs."""
    codes = np.full((60, 80), 1000, dtype=np.uint16)
    codes[:, 30 + odd] += 50
    (spot,) = _listed("RGGB", "green", codes).strongest(9, (), [LineDefect("column", 10, 25.0, 9.0)])

    assert spot.x == 30 + odd


def test_large_things_come_first_and_the_strongest_of_each() -> None:
    """With room for three, a column and a cluster stay, and of three pixels the one that departs farthest."""
    pixels = [Defect(n, 1, "dim", -0.1, s) for n, s in enumerate((6.0, -11.0, 9.0))]
    line, group = LineDefect("column", 5, 1.0, 7.0), Cluster(((3, 3), (4, 3)))
    spots = _listed().strongest(3, pixels, [line], [group])

    assert [spot.kind for spot in spots] == ["defective column", "cluster", "dim pixel"]
    assert spots[-1].x == 11
    assert len(_listed().strongest(1, pixels, [line], [group])) == 1
