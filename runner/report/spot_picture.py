"""A plan of a frame with its defects marked, each kind by a sign of its own, as PNG; drawn from the results alone."""

from collections.abc import Callable, Mapping, Sequence
from typing import TYPE_CHECKING, Any

from runner.report.map_picture import INK, LEFT, RIGHT, SIDE, TOP, axes, text
from runner.report.pictures import png

if TYPE_CHECKING:
    from PIL import ImageDraw

PLATE, GROUND = (243, 245, 247), (255, 255, 255)
HALF = 6.0
"""px: half of a sign; a defect of one pixel would not be seen."""
ROW = 26
"""px: height of a line of the legend."""
BELOW = 66
"""px: from the plan to the legend, for the axis."""

Sign = Callable[["ImageDraw.ImageDraw", float, float, tuple[float, float]], None]
"""Draws a sign at a place; given also width and height of the plan, px."""


def _ring(half: float) -> Sign:
    def draw(on: "ImageDraw.ImageDraw", x: float, y: float, _size: tuple[float, float]) -> None:
        on.ellipse((x - half, y - half, x + half, y + half), outline=INK, width=2)

    return draw


def _square(on: "ImageDraw.ImageDraw", x: float, y: float, _size: tuple[float, float]) -> None:
    on.rectangle((x - HALF, y - HALF, x + HALF, y + HALF), outline=INK, width=2)


def _full_square(on: "ImageDraw.ImageDraw", x: float, y: float, _size: tuple[float, float]) -> None:
    on.rectangle((x - HALF, y - HALF, x + HALF, y + HALF), fill=INK)


def _diamond(on: "ImageDraw.ImageDraw", x: float, y: float, _size: tuple[float, float]) -> None:
    corners = [(x, y - HALF - 2), (x + HALF + 2, y), (x, y + HALF + 2), (x - HALF - 2, y), (x, y - HALF - 2)]
    on.line(corners, fill=INK, width=2)


def _cross(on: "ImageDraw.ImageDraw", x: float, y: float, _size: tuple[float, float]) -> None:
    on.line((x - HALF, y - HALF, x + HALF, y + HALF), fill=INK, width=2)
    on.line((x - HALF, y + HALF, x + HALF, y - HALF), fill=INK, width=2)


def _down(on: "ImageDraw.ImageDraw", x: float, _y: float, size: tuple[float, float]) -> None:
    on.line((x, TOP, x, TOP + size[1]), fill=INK, width=2)


def _across(on: "ImageDraw.ImageDraw", _x: float, y: float, size: tuple[float, float]) -> None:
    on.line((LEFT, y, LEFT + size[0], y), fill=INK, width=2)


SIGNS: Mapping[str, Sign] = {
    "hot pixel": _ring(HALF),
    "bright pixel": _ring(HALF),
    "dead pixel": _full_square,
    "dim pixel": _square,
    "stuck pixel": _diamond,
    "blinking pixel": _cross,
    "cluster": _ring(1.7 * HALF),
    "blemish": _ring(2.4 * HALF),
    "defective column": _down,
    "defective row": _across,
}
"""By kind; spots of other kinds are no places on a sensor."""
_IN_LEGEND = {"defective column": "line down", "defective row": "line across"}
"""What stands in the legend where the sign is as long as the plan."""


def spot_picture(size: tuple[int, int], spots: Sequence[Mapping[str, Any]]) -> bytes:
    """Return a plan of a frame with signs at its defects as PNG; the same spots give the same bytes.

    Args:
        size: Rows and columns of the frame.
        spots: Spots of the results, of kinds in `SIGNS`.
    """
    from PIL import Image, ImageDraw  # noqa: PLC0415 - heavy

    rows, columns = size
    scale = SIDE / max(rows, columns)
    plan = max(60, round(columns * scale)), max(60, round(rows * scale))
    kinds = [kind for kind in SIGNS if any(spot["kind"] == kind for spot in spots)]
    legend = TOP + plan[1] + BELOW
    picture = Image.new("RGB", (LEFT + plan[0] + RIGHT, legend + ROW * len(kinds) + 8), GROUND)
    draw = ImageDraw.Draw(picture)
    draw.rectangle((LEFT, TOP, LEFT + plan[0] - 1, TOP + plan[1] - 1), fill=PLATE)
    axes(draw, plan, ((0.0, columns), (0.0, rows)), "px")
    for spot in spots:
        x, y = LEFT + (spot["x"] + 0.5) / columns * plan[0], TOP + (spot["y"] + 0.5) / rows * plan[1]
        SIGNS[spot["kind"]](draw, x, y, plan)
    for number, kind in enumerate(kinds):
        middle = legend + ROW * (number + 0.5)
        if kind not in _IN_LEGEND:
            SIGNS[kind](draw, LEFT - 40.0, middle, plan)
        words = f"{_IN_LEGEND.get(kind, '')}: {kind}" if kind in _IN_LEGEND else kind
        text(draw, (LEFT - 16.0, middle), f"{words}, {sum(spot['kind'] == kind for spot in spots)}", "lm")
    return png(picture)
