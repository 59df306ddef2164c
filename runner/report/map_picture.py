"""Maps of the results as PNG: shading over the frame, spectra over frequencies, with axes, marks and a scale.

Drawn from the results alone. As SVG a map of a few thousand cells would take seconds on paper.
"""

from collections.abc import Mapping, Sequence
from math import ceil, log10
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from runner.report.pictures import OUTLINE, SHADOW, png
from runner.resources import folder

if TYPE_CHECKING:
    from PIL import ImageDraw, ImageFont

SIDE = 460
"""px: longer side of the map itself."""
LEFT, TOP, RIGHT, BOTTOM = 104, 44, 170, 64
"""px around it, for words."""
STEPS = 48
"""Steps of grey."""
INK, GROUND = (28, 33, 38), (255, 255, 255)
SIZE = 19
"""px: letters; 6 pt where the picture is 76 mm wide."""
LEAST_SPAN = {"%": 5.0}
"""By unit: a map of a narrower range is shown on this one, so that an even field looks even."""
Rectangle = tuple[float, float, float, float]
"""Left, top, right, bottom, px."""


def map_picture(area: Mapping[str, Any]) -> bytes:
    """Return a map as PNG; the same map gives the same bytes.

    Args:
        area: A map of the results: `x`, `y`, `values`, `axes_in`, `values_in`, `marks`.
    """
    from PIL import Image, ImageDraw  # noqa: PLC0415 - heavy

    values = np.array(area["values"], dtype=np.float64)
    low, high = _span(float(values.min()), float(values.max()), str(area["values_in"]))
    x, y = _ends(area["x"]), _ends(area["y"])
    scale = SIDE / max(x[1] - x[0], y[1] - y[0])
    size = max(60, round((x[1] - x[0]) * scale)), max(60, round((y[1] - y[0]) * scale))
    shares = (values - low) / (high - low) if high > low else np.full(values.shape, 0.5)
    tiles = Image.fromarray(_grey(shares)).resize(size, Image.Resampling.NEAREST)
    picture = Image.new("RGB", (LEFT + size[0] + RIGHT, TOP + max(size[1], 120) + BOTTOM), GROUND)
    picture.paste(tiles.convert("RGB"), (LEFT, TOP))
    draw = ImageDraw.Draw(picture)
    axes(draw, size, (x, y), str(area["axes_in"]))
    _scale(draw, size, (low, high), str(area["values_in"]))
    marks = [
        (LEFT + (across - x[0]) / (x[1] - x[0]) * size[0], TOP + (down - y[0]) / (y[1] - y[0]) * size[1], str(words))
        for across, down, words in area["marks"]
    ]
    _marks(draw, marks, (LEFT, TOP, LEFT + size[0], TOP + size[1]))
    return png(picture)


def _span(low: float, high: float, unit: str) -> tuple[float, float]:
    """Return what black and white stand for."""
    lacking = LEAST_SPAN.get(unit, 0.0) - (high - low)
    return (low - lacking / 2, high + lacking / 2) if lacking > 0 else (low, high)


def _ends(places: Sequence[float]) -> tuple[float, float]:
    """Return the outer borders of cells whose middles are given."""
    if len(places) == 1:
        return places[0] - 0.5, places[0] + 0.5
    first, last = places[1] - places[0], places[-1] - places[-2]
    return places[0] - first / 2, places[-1] + last / 2


def _grey(shares: NDArray[np.float64]) -> NDArray[np.uint8]:
    steps = np.minimum(STEPS - 1, np.floor(np.clip(shares, 0, 1) * STEPS))
    return np.asarray(np.round(24 + steps * (225 / (STEPS - 1))), dtype=np.uint8)


def axes(draw: "ImageDraw.ImageDraw", size: tuple[int, int], ends: tuple[tuple[float, float], ...], unit: str) -> None:
    """Draw a frame of so many px (width, height) with round numbers along x and y between two ends each."""
    (x0, x1), (y0, y1) = ends
    draw.rectangle((LEFT - 1, TOP - 1, LEFT + size[0], TOP + size[1]), outline=INK)
    bottom = TOP + size[1]
    for value in _round_numbers(x0, x1):
        across = LEFT + (value - x0) / (x1 - x0) * size[0]
        draw.line((across, bottom, across, bottom + 5), fill=INK)
        text(draw, (across, bottom + 8), _number(value), "ma")
    for value in _round_numbers(y0, y1):
        down = TOP + (value - y0) / (y1 - y0) * size[1]
        draw.line((LEFT - 6, down, LEFT - 1, down), fill=INK)
        text(draw, (LEFT - 10, down), _number(value), "rm")
    text(draw, (LEFT + size[0] / 2, bottom + 32), f"x, {unit}", "ma")
    text(draw, (LEFT - 10, TOP - 14), f"y, {unit}", "mb")


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
        text(draw, (left + 24, TOP + (1 - share) * high), _number(value, ends[1] - ends[0]), "lm")
    text(draw, (left, TOP - 14), "" if unit == "1" else unit, "lb")


def _marks(draw: "ImageDraw.ImageDraw", marks: Sequence[tuple[float, float, str]], inside: Rectangle) -> None:
    """Draw rings at their places, and their words on dark labels beside them, none over a ring or another label.

    A line leads from a ring to a label that found no room beside it.
    """
    taken = [(x - 10, y - 10, x + 10, y + 10) for x, y, _ in marks]
    labels = []
    for x, y, words in marks:
        label = _free(x, y, draw.textbbox((0, 0), words, font=_font(), anchor="lt"), taken, inside)
        if words:
            taken.append(label)
            labels.append((label, words))
            end = min(max(x, label[0]), label[2]), min(max(y, label[1]), label[3])
            if max(abs(end[0] - x), abs(end[1] - y)) > 14:
                draw.line((x, y, *end), fill=SHADOW, width=3)
    for x, y, _ in marks:
        for colour, width in ((SHADOW, 5), (OUTLINE, 3)):
            draw.ellipse((x - 9, y - 9, x + 9, y + 9), outline=colour, width=width)
    for label, words in labels:
        draw.rectangle(label, fill=SHADOW)
        text(draw, ((label[0] + label[2]) / 2, (label[1] + label[3]) / 2), words, "mm", OUTLINE)


def _free(x: float, y: float, letters: Rectangle, taken: Sequence[Rectangle], inside: Rectangle) -> Rectangle:
    """Return where a label covers least of what is taken, the nearer places first; inside the map if it can be."""
    wide, high = letters[2] - letters[0] + 8, letters[3] - letters[1] + 8
    best, least = (x, y, x + wide, y + high), float("inf")
    for away in (12, 12 + high, 12 + 2 * high):
        left, right, above, below = x - away - wide, x + away, y - away - high, y + away
        middle = min(max(x - wide / 2, inside[0]), inside[2] - wide), y - high / 2
        straight = (middle[0], above), (middle[0], below), (right, middle[1]), (left, middle[1])
        for at in (*straight, (right, above), (left, above), (right, below), (left, below)):
            label = (*at, at[0] + wide, at[1] + high)
            out = wide * high - _shared(label, inside)
            covered = 2 * out + sum(_shared(label, other) for other in taken)
            if covered < least - 1e-9:
                best, least = label, covered
    return best


def _shared(one: Rectangle, other: Rectangle) -> float:
    """Return the area that two rectangles have in common, px²."""
    across, down = min(one[2], other[2]) - max(one[0], other[0]), min(one[3], other[3]) - max(one[1], other[1])
    return max(0.0, across) * max(0.0, down)


def _font() -> "ImageFont.FreeTypeFont":
    from PIL import ImageFont  # noqa: PLC0415 - heavy

    return ImageFont.truetype(str(folder("templates") / "fonts" / "DejaVuSans.ttf"), SIZE)


def text(
    draw: "ImageDraw.ImageDraw",
    place: tuple[float, float],
    words: str,
    anchor: str,
    colour: tuple[int, int, int] = INK,
) -> None:
    """Write words at a place in the font that travels with the program."""
    draw.text(place, words, fill=colour, font=_font(), anchor=anchor)


def _number(value: float, span: float = 0.0) -> str:
    """Return a number with three digits, or as many as a tenth of the span needs."""
    digits = 3 if not span else max(3, ceil(log10(max(abs(value), span) / span)) + 2)
    text = f"{value:.{digits}g}" if not span else f"{value:#.{digits}g}".rstrip(".")
    return text.replace("-", "\N{MINUS SIGN}")
