"""Maps of the results as PNG: shading over the frame, spectra over frequencies, with axes, marks and a scale.

Drawn from the results alone. As SVG a map of a few thousand cells would take seconds on paper.
"""

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from runner.report.pictures import OUTLINE, SHADOW, png
from runner.resources import folder

if TYPE_CHECKING:
    from PIL import ImageDraw

SIDE = 460
"""px: longer side of the map itself."""
LEFT, TOP, RIGHT, BOTTOM = 104, 44, 170, 64
"""px around it, for words."""
STEPS = 48
"""Steps of grey."""
INK, GROUND = (28, 33, 38), (255, 255, 255)
SIZE = 19
"""px: letters; 6 pt where the picture is 76 mm wide."""


def map_picture(area: Mapping[str, Any]) -> bytes:
    """Return a map as PNG; the same map gives the same bytes.

    Args:
        area: A map of the results: `x`, `y`, `values`, `axes_in`, `values_in`, `marks`.
    """
    from PIL import Image, ImageDraw  # noqa: PLC0415 - heavy

    values = np.array(area["values"], dtype=np.float64)
    low, high = float(values.min()), float(values.max())
    x, y = _ends(area["x"]), _ends(area["y"])
    scale = SIDE / max(x[1] - x[0], y[1] - y[0])
    size = max(60, round((x[1] - x[0]) * scale)), max(60, round((y[1] - y[0]) * scale))
    shares = (values - low) / (high - low) if high > low else np.full(values.shape, 0.5)
    tiles = Image.fromarray(_grey(shares)).resize(size, Image.Resampling.NEAREST)
    picture = Image.new("RGB", (LEFT + size[0] + RIGHT, TOP + max(size[1], 120) + BOTTOM), GROUND)
    picture.paste(tiles.convert("RGB"), (LEFT, TOP))
    draw = ImageDraw.Draw(picture)
    _axes(draw, size, (x, y), str(area["axes_in"]))
    _scale(draw, size, (low, high), str(area["values_in"]))
    for across, down, words in area["marks"]:
        place = LEFT + (across - x[0]) / (x[1] - x[0]) * size[0], TOP + (down - y[0]) / (y[1] - y[0]) * size[1]
        _mark(draw, place, str(words), LEFT + size[0])
    return png(picture)


def _ends(places: Sequence[float]) -> tuple[float, float]:
    """Return the outer borders of cells whose middles are given."""
    if len(places) == 1:
        return places[0] - 0.5, places[0] + 0.5
    first, last = places[1] - places[0], places[-1] - places[-2]
    return places[0] - first / 2, places[-1] + last / 2


def _grey(shares: NDArray[np.float64]) -> NDArray[np.uint8]:
    steps = np.minimum(STEPS - 1, np.floor(np.clip(shares, 0, 1) * STEPS))
    return np.asarray(np.round(24 + steps * (225 / (STEPS - 1))), dtype=np.uint8)


def _axes(draw: "ImageDraw.ImageDraw", size: tuple[int, int], ends: tuple[tuple[float, float], ...], unit: str) -> None:
    (x0, x1), (y0, y1) = ends
    draw.rectangle((LEFT - 1, TOP - 1, LEFT + size[0], TOP + size[1]), outline=INK)
    bottom = TOP + size[1]
    for value in _round_numbers(x0, x1):
        across = LEFT + (value - x0) / (x1 - x0) * size[0]
        draw.line((across, bottom, across, bottom + 5), fill=INK)
        _text(draw, (across, bottom + 8), _number(value), "ma")
    for value in _round_numbers(y0, y1):
        down = TOP + (value - y0) / (y1 - y0) * size[1]
        draw.line((LEFT - 6, down, LEFT - 1, down), fill=INK)
        _text(draw, (LEFT - 10, down), _number(value), "rm")
    _text(draw, (LEFT + size[0] / 2, bottom + 32), f"x, {unit}", "ma")
    _text(draw, (LEFT - 10, TOP - 14), f"y, {unit}", "mb")


def _round_numbers(low: float, high: float) -> list[float]:
    """Return some three to five round numbers between two ends."""
    size = (high - low) / 3
    step = 10.0 ** np.floor(np.log10(size))
    step *= max(m for m in (1, 2, 5) if m * step <= size * (1 + 1e-9))
    return [float(n * step) for n in range(int(np.ceil(low / step - 1e-9)), int(np.floor(high / step + 1e-9)) + 1)]


def _scale(draw: "ImageDraw.ImageDraw", size: tuple[int, int], ends: tuple[float, float], unit: str) -> None:
    left, high = LEFT + size[0] + 26, max(size[1], 120)
    for step in range(STEPS):
        top = TOP + high - (step + 1) * high / STEPS
        grey = round(24 + step * (225 / (STEPS - 1)))
        draw.rectangle((left, top, left + 18, top + high / STEPS), fill=(grey, grey, grey))
    draw.rectangle((left, TOP, left + 18, TOP + high), outline=INK)
    for share, value in ((0.0, ends[0]), (1.0, ends[1])):
        _text(draw, (left + 24, TOP + (1 - share) * high), _number(value), "lm")
    _text(draw, (left, TOP - 14), "" if unit == "1" else unit, "lb")


def _mark(draw: "ImageDraw.ImageDraw", place: tuple[float, float], words: str, right: float) -> None:
    x, y = place
    for colour, width in ((SHADOW, 5), (OUTLINE, 3)):
        draw.ellipse((x - 9, y - 9, x + 9, y + 9), outline=colour, width=width)
    near = x > right - 60
    _text(draw, (x - 14 if near else x + 14, y - 14), words, "rb" if near else "lb", OUTLINE, SHADOW)


def _text(
    draw: "ImageDraw.ImageDraw",
    place: tuple[float, float],
    words: str,
    anchor: str,
    colour: tuple[int, int, int] = INK,
    around: tuple[int, int, int] | None = None,
) -> None:
    from PIL import ImageFont  # noqa: PLC0415 - heavy

    font = ImageFont.truetype(str(folder("templates") / "fonts" / "DejaVuSans.ttf"), SIZE)
    draw.text(place, words, fill=colour, font=font, anchor=anchor, stroke_width=2 if around else 0, stroke_fill=around)


def _number(value: float) -> str:
    return f"{value:.3g}".replace("-", "\N{MINUS SIGN}")
