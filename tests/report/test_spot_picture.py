"""A plan of defects: the same bytes for the same spots, signs at their places, kinds told apart without colour."""

import io
from typing import Any

import numpy as np
import pytest
from PIL import Image

from runner.report.map_picture import LEFT, SIDE, TOP
from runner.report.spot_picture import SIGNS, spot_picture


def _spot(kind: str, x: float, y: float) -> dict[str, Any]:
    return {"kind": kind, "x": x, "y": y}


def _ink(*spots: dict[str, Any], size: tuple[int, int] = (600, 800)) -> np.ndarray:
    """Return which pixels of the plan itself are dark; rows × columns, from its corner."""
    picture = np.asarray(Image.open(io.BytesIO(spot_picture(size, spots))).convert("L"))
    rows, columns = (round(SIDE * side / max(size)) for side in size)
    return picture[TOP + 1 : TOP + rows - 1, LEFT + 1 : LEFT + columns - 1] < 128


@pytest.mark.parametrize(("x", "y"), [(400.0, 300.0), (50.0, 40.0), (730.0, 561.5)])
@pytest.mark.parametrize("kind", [kind for kind in SIGNS if "defective" not in kind])
def test_a_sign_lies_at_its_defect(kind: str, x: float, y: float) -> None:
    """Signs are centred within a pixel of the plan; pixel 0 has its middle half a pixel from the border."""
    rows, columns = np.nonzero(_ink(_spot(kind, x, y)))
    scale = SIDE / 800

    assert abs(columns.mean() + 1 - (x + 0.5) * scale) < 1
    assert abs(rows.mean() + 1 - (y + 0.5) * scale) < 1


def test_a_column_runs_down_the_whole_frame_and_a_row_across() -> None:
    """A defective line is drawn as one, at its place."""
    down, across = _ink(_spot("defective column", 200, 299.5)), _ink(_spot("defective row", 399.5, 150))
    scale = SIDE / 800

    assert np.flatnonzero(down.all(axis=0)).mean() + 1 == pytest.approx(200.5 * scale, abs=1)
    assert np.flatnonzero(across.all(axis=1)).mean() + 1 == pytest.approx(150.5 * scale, abs=1)


def test_kinds_of_one_capture_differ_in_their_signs() -> None:
    """Whatever a dark or a flat may show, no two kinds look alike (hot and bright pixels never meet in one)."""
    pictures = {kind: _ink(_spot(kind, 400, 300)).tobytes() for kind in SIGNS}

    assert pictures["hot pixel"] == pictures["bright pixel"]
    assert len(set(pictures.values())) == len(SIGNS) - 1


def test_the_same_spots_give_the_same_bytes() -> None:
    """Nothing but frame size and spots decides the picture; a legend line is added for each kind."""
    spots = [_spot("hot pixel", 3, 4), _spot("blinking pixel", 30, 40)]
    small, large = spot_picture((600, 800), spots[:1]), spot_picture((600, 800), spots)

    assert large == spot_picture((600, 800), spots)
    heights = [Image.open(io.BytesIO(data)).height for data in (small, large)]
    assert heights[0] < heights[1]
    assert Image.open(io.BytesIO(large)).mode == "P"
