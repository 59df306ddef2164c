"""Frames of a light series fall into levels, and what names, sidecars and options say gives each its light."""

from collections.abc import Mapping

import numpy as np
import pytest

from runner.capture.frame import Box, Crop
from runner.errors import MeasurementRefused
from runner.measure.light_levels import LevelFrames, out_of_order, series
from runner.spec.model import Amount, Camera

CAMERA = Camera(width=8, height=6, bit_depth=8, black_level=0, white_level=255)


def _crop(taken: Mapping[str, Amount] | None = None, **axes: str) -> Crop:
    return Crop("f.tif", Box(0, 0, 8, 6), np.zeros((6, 8)), CAMERA, axes, taken or {})


def _pairs(axis: str, *said: str) -> list[Crop]:
    return [_crop(None, **{axis: one, "repeat": n}) for one in said for n in "12"]


@pytest.mark.parametrize(
    ("crops", "unit", "light", "times"),
    [
        (_pairs("level", "5", "10"), "1", [5, 10], [None, None]),
        (_pairs("exposure", "2ms", "0.5s"), "s", [0.002, 0.5], [0.002, 0.5]),
        (_pairs("level", "900photons", "1800photons"), "photons", [900, 1800], [None, None]),
        (_pairs("level", "low", "high"), "", [None, None], [None, None]),
        ([_crop({"level": Amount(v, "%")}, repeat=n) for v in (25, 50) for n in "12"], "%", [25, 50], [None, None]),
        (
            [_crop(level=a, exposure=b, page=n) for a in ("1", "2") for b in ("1ms", "3ms") for n in "01"],
            "1 s",
            [0.001, 0.003, 0.002, 0.006],
            [0.001, 0.003, 0.001, 0.003],
        ),
        (
            [_crop({"exposure": Amount(20, "ms")}, level=a, repeat=n) for a in ("3", "4") for n in "12"],
            "1",
            [3, 4],
            [0.02, 0.02],
        ),
        (
            [_crop({"exposure": Amount(t, "ms")}, level="7photons", repeat=n) for t in (1, 2) for n in "12"],
            "photons",
            [7, 7],
            [0.001, 0.002],
        ),
    ],
    ids=["numbers", "times", "photons", "words", "sidecars", "level and time", "steady time", "photons are counted"],
)
def test_what_says_the_light_of_each_level(
    crops: list[Crop], unit: str, light: list[float | None], times: list[float | None]
) -> None:
    """Pairs are levels; light is what changes from level to level, its unit one for all, or it is not known."""
    found = series(crops)

    assert [len(level.crops) for level in found.levels] == [2] * len(light)
    assert found.light_in == unit
    assert [level.light for level in found.levels] == pytest.approx(light)
    assert [level.exposure for level in found.levels] == pytest.approx(times)


def test_plain_numbers_may_be_mere_places_in_a_row() -> None:
    """With the option, numbers give an order and no light."""
    found = series(_pairs("level", "1", "2"), plain_is_light=False)

    assert (found.light_in, [level.place for level in found.levels]) == ("", [1.0, 2.0])


def test_pages_are_cut_into_levels_and_given_their_light() -> None:
    """Pages of one file carry no level: so many one after another make one, and the option says their light."""
    pages = [_crop(page=str(n)) for n in range(6)]
    found = series(pages, frames_per_level=2, light=[Amount(v, "ms") for v in (1, 2, 4)])

    assert [[int(c.axes["page"]) for c in level.crops] for level in found.levels] == [[0, 1], [2, 3], [4, 5]]
    assert [level.light for level in found.levels] == pytest.approx([0.001, 0.002, 0.004])
    assert len(series(pages).levels) == 1


@pytest.mark.parametrize(
    ("crops", "asked", "said"),
    [
        ([_crop(page=str(n)) for n in range(5)], {"frames_per_level": 2}, "5 frames do not make levels of 2 frames"),
        (_pairs("level", "1", "2"), {"light": [Amount(1, "ms")]}, "light gives 1 amounts, the frames have 2 levels"),
        (_pairs("level", "1ms", "900photons"), {}, "amounts of light do not belong together: photons per pixel"),
    ],
)
def test_what_cannot_be_told_apart_is_refused(crops: list[Crop], asked: dict[str, object], said: str) -> None:
    """Frames that do not divide, amounts that are too few or of different kinds are refused with figures."""
    with pytest.raises(MeasurementRefused, match=said):
        series(crops, **asked)  # type: ignore[arg-type]


def test_levels_against_their_order_are_named() -> None:
    """The first pair that goes against light or place is named; a row may fall, names without numbers have no order."""

    def row(*said: tuple[float | None, float | None]) -> list[LevelFrames]:
        return [LevelFrames(f"level {n}", (), light, place) for n, (light, place) in enumerate(said)]

    by_light = row((1, None), (2, None), (3, None))
    assert out_of_order(by_light, [10, 30, 20], 5) == ("level 1", "level 2")
    assert out_of_order(by_light, [10, 30, 26], 5) is None
    assert out_of_order(row((None, 1), (None, 2), (None, 3)), [30, 20, 10], 1) is None
    assert out_of_order(row((None, 1), (None, 2), (None, 3)), [30, 40, 10], 1) == ("level 1", "level 0")
    assert out_of_order(row((None, None), (None, 2)), [30, 20], 1) is None
