"""Maps as pictures: the same bytes for the same map, marks where they belong, words inside the picture."""

import io
from typing import Any

import numpy as np
import pytest
from PIL import Image
from scipy.ndimage import find_objects, label

from runner.report.map_picture import LEFT, TOP, _number, map_picture
from runner.report.pictures import OUTLINE


def _map(values: np.ndarray, **more: Any) -> dict[str, Any]:
    rows, columns = values.shape
    known = {
        "x": list(np.linspace(-0.5, 0.5, columns)),
        "y": list(np.linspace(-0.5, 0.5, rows)),
        "values": values.tolist(),
        "axes_in": "cy/px",
        "values_in": "dB",
        "marks": [],
    }
    return known | more


def _pixels(area: dict[str, Any]) -> np.ndarray:
    return np.asarray(Image.open(io.BytesIO(map_picture(area))).convert("RGB")).astype(int)


def test_the_same_map_gives_the_same_bytes() -> None:
    """Nothing but the map decides the picture."""
    area = _map(np.random.default_rng(1).normal(size=(40, 50)), marks=[[0.1, 0.2, "+f"]])

    assert map_picture(area) == map_picture(area)


def test_larger_values_are_lighter_and_rows_run_down() -> None:
    """The first row of a map is drawn at the top, the largest value lightest."""
    pixels = _pixels(_map(np.array([[0.0, 1.0], [2.0, 3.0]])))
    up_left, down_right = pixels[TOP + 20, LEFT + 20], pixels[TOP + 400, LEFT + 400]

    assert up_left.sum() < pixels[TOP + 20, LEFT + 400].sum() < pixels[TOP + 400, LEFT + 20].sum() < down_right.sum()


def test_a_mark_lies_at_its_place() -> None:
    """The ring of a mark is centred on its coordinates within a pixel."""
    area = _map(np.zeros((51, 51)), marks=[[0.25, -0.25, ""]])
    near = np.abs(_pixels(area) - np.array(OUTLINE)).sum(axis=2) < 60
    y, x = np.nonzero(near)
    cell = 1.0 / 50
    place = (0.25 + 0.5 + cell / 2) / (1 + cell) * 460 + LEFT, (-0.25 + 0.5 + cell / 2) / (1 + cell) * 460 + TOP

    assert abs(x.mean() - place[0]) < 1.5
    assert abs(y.mean() - place[1]) < 1.5


def _labels(marks: list[list[Any]]) -> list[tuple[int, int, int, int]]:
    """Return top, left, bottom, right of each dark label on a white map with marks."""
    white = np.ones((51, 51))
    white[:, 25] = 0.8  # else the map is one value, drawn grey
    white[50, 25] = 0.0
    dark = _pixels(_map(white, marks=marks)).max(axis=2) < 24
    groups, _ = label(dark)
    boxes = [(y.start, x.start, y.stop, x.stop) for y, x in find_objects(groups)]
    return [box for box in boxes if 18 <= box[2] - box[0] < 60 and 18 <= box[3] - box[1] < 300]


@pytest.mark.parametrize("along", [0, 1])
def test_words_of_near_marks_do_not_cover_one_another(along: int) -> None:
    """Three marks 0.05 cy/px apart keep three labels, none over another and none over a ring's middle."""
    places = [(0.05 * n, 0.0)[:: 1 - 2 * along] for n in (-1, 0, 1)]
    middles = [(TOP + (y + 0.51) / 1.02 * 460, LEFT + (x + 0.51) / 1.02 * 460) for x, y in places]

    found = _labels([[*place, words] for place, words in zip(places, ("-f", "DC", "+f"), strict=True)])

    assert len(found) == 3
    for top, left, bottom, right in found:
        assert not any(top - 9 < y < bottom + 9 and left - 9 < x < right + 9 for y, x in middles)


def test_words_at_a_border_stay_on_the_map() -> None:
    """A long label of a mark in any corner lies inside the map."""
    for x, y in ((-0.5, -0.5), (0.5, -0.5), (-0.5, 0.5), (0.5, 0.5)):
        ((top, left, bottom, right),) = _labels([[x, y, "brightest 108.8 %"]])

        assert right - left > 100
        assert TOP <= top < bottom <= TOP + 461
        assert LEFT <= left < right <= LEFT + 461


def test_an_even_field_looks_even() -> None:
    """A map of 0.1 % is not stretched from black to white: its greys differ by 0.1 of 5 % at most, two steps of 48."""
    values = 100 + 0.1 * np.random.default_rng(2).random((9, 11))

    shown = _pixels(_map(values, values_in="%"))[TOP + 5 : TOP + 440, LEFT + 5 : LEFT + 440]
    stretched = _pixels(_map(values))[TOP + 5 : TOP + 440, LEFT + 5 : LEFT + 440]

    assert np.ptp(shown) <= 2 * 225 / 47 + 1
    assert np.ptp(stretched) == 225


@pytest.mark.parametrize(
    ("value", "span", "text"), [(100.0, 0.1, "100.00"), (97.56, 5.0, "97.56"), (-81.7, 81.7, "\N{MINUS SIGN}81.7")]
)
def test_ends_of_a_scale_have_the_digits_that_tell_them_apart(value: float, span: float, text: str) -> None:
    """Two ends that lie near each other are not both printed as 100."""
    assert _number(value, span) == text


def test_no_word_is_cut_off() -> None:
    """Long numbers and units leave the picture's own border white."""
    area = _map(np.linspace(-12345.6, -0.000123, 90).reshape(6, 15), axes_in="cy/px", values_in="% of centre")
    area |= {"x": list(np.linspace(-0.00123, 4000, 15)), "y": list(np.linspace(-3000, 0.5, 6))}
    pixels = _pixels(area)
    border = np.concatenate([pixels[0], pixels[-1], pixels[:, 0], pixels[:, -1]])

    assert border.min() > 240


def test_a_map_of_one_value_is_drawn() -> None:
    """A constant map, or one of a single cell, is grey and no division by zero."""
    assert _pixels(_map(np.full((1, 1), 3.0), x=[2.0], y=[5.0])).shape[2] == 3
