"""The black area is found to a pixel, and everything that is none is told."""

import numpy as np
import pytest

from runner.measure.numerics.black_area import AreaLost, find_black_area, surround_at
from tests.scenes.black_areas import BlackScene


def test_the_area_is_found_and_its_border_kept_clear() -> None:
    """The box fits the rectangle to a pixel; inner part and surround keep the margin from it."""
    light = BlackScene().light()
    area = find_black_area(light, 0.15)

    assert np.abs(np.subtract(area.box, (40.3, 30.7, 80.1, 69.2))).max() <= 1.0
    rows, columns = np.nonzero(area.inner)
    assert columns.min() >= 40.3 + 0.15 * 38 - 1
    assert rows.max() <= 69.2 - 0.15 * 38 + 1
    assert float(light[area.around].min()) > 0.999 * 0.6


def test_a_sloping_surround_is_taken_where_the_area_lies() -> None:
    """An area off the middle of a slope: the plane gives the field's light at its own place."""
    scene = BlackScene(area=(20.0, 30.0, 50.0, 70.0), slope=0.08, glare=0.0)
    area = find_black_area(scene.light(), 0.15)
    at, bend = surround_at(scene.light(), area.around, area.inner)

    assert at == pytest.approx(0.6 * (1 + 0.08 * (35 / 120 - 0.5)), rel=1e-3)
    assert bend > 0


@pytest.mark.parametrize(
    ("light", "words"),
    [
        (np.full((50, 60), 0.5), "one level only"),
        (BlackScene(glare=0.9).light(), "no black area"),
        (
            np.minimum(BlackScene(area=(10, 30, 40, 70)).light(), BlackScene(area=(70, 30, 100, 70)).light()),
            "2 dark areas",
        ),
        (BlackScene(area=(-10, 30, 40, 70)).light(), "reaches the region's border"),
        (BlackScene(area=(50, 40, 60, 50)).light(), "inner part has"),
    ],
)
def test_what_is_no_single_black_area(light: np.ndarray, words: str) -> None:
    """An even field, grey in grey, two areas, one cut by the border and one too small are refused."""
    with pytest.raises(AreaLost, match=words):
        find_black_area(light, 0.15)
