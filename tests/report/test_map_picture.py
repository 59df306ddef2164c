"""Maps as pictures: the same bytes for the same map, marks where they belong, words inside the picture."""

import io
from typing import Any

import numpy as np
from PIL import Image

from runner.report.map_picture import LEFT, TOP, map_picture
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
