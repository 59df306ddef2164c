"""Drawings in a PDF: the few kinds of strokes and words that `drawing` makes, written as PDF operators at once.

The PDF renderer takes an SVG for anything that an SVG may be, and lays out its words letter by letter: a fifth of the
printing time of a report. What is taken over is exactly what is known here; the renderer draws all else itself.

References:
    ISO 32000-2:2020, 8.5 (paths), 8.4 (graphics state), 9.4 (text); SVG 2 (W3C CR 2018-10-04), 9.3 (path data), 8.6
    (view box); circles by four cubic curves, whose radius errs by 0.03 % at most (common practice).
"""

import re
from collections.abc import Iterator
from dataclasses import dataclass
from types import SimpleNamespace
from typing import Any
from xml.etree import ElementTree as ET

_SVG = "{http://www.w3.org/2000/svg}"
_QUARTER = 0.5522847498
"""Length of the handles of a quarter of a unit circle."""
_PLAIN = {"class", "fill", "stroke", "stroke-width", "stroke-dasharray"}
_SHAPES = {
    "path": {"d"} | _PLAIN,
    "rect": {"x", "y", "width", "height", "rx"} | _PLAIN,
    "circle": {"cx", "cy", "r"} | _PLAIN,
    "text": {"x", "y", "font-size", "text-anchor", "font-family", "fill", "class"},
}
"""Elements and their attributes that are known here; the class speaks to screens only."""
_TOKEN = re.compile(r"([MLHVhvZ])|(-?\d+(?:\.\d+)?)|[\s,]+|(.)")


class _UnknownError(Exception):
    """Something in a drawing that is not known here."""


@dataclass(frozen=True)
class Words:
    """A text of one line that begins at a place."""

    x: float
    """px."""
    y: float
    """Base line, px."""
    size: float
    """px."""
    family: tuple[str, ...]
    """Fonts, the first that has the letters."""
    text: str
    """The text."""


@dataclass(frozen=True)
class PaperDrawing:
    """A drawing, in the form in which the renderer wants its images."""

    size: tuple[float, float]
    """Width and height of its own, px."""
    box: tuple[float, float]
    """Width and height in its own units."""
    parts: tuple[tuple[bytes, Words | None], ...]
    """Operators, each run with the words that follow it."""
    fonts: Any
    """The renderer's fonts."""

    def get_intrinsic_size(self, _resolution: float, _font_size: Any) -> tuple[float, float, float]:
        """Return width, height and their ratio."""
        return *self.size, self.size[0] / self.size[1]

    def draw(self, stream: Any, width: float, height: float, _style: Any) -> None:
        """Draw into a box as large as it fits, in its middle."""
        scale = min(width / self.box[0], height / self.box[1])
        left, top = (width - scale * self.box[0]) / 2, (height - scale * self.box[1]) / 2
        stream.push_state()
        stream.transform(scale, 0, 0, scale, left, top)
        stream.set_miter_limit(4)  # as in SVG
        for operators, words in self.parts:
            stream.stream.append(operators)
            if words is not None:
                _write(stream, words, self.fonts)
        stream.pop_state()


def drawn(svg: bytes, fonts: Any) -> PaperDrawing | None:
    """Return a drawing for paper, or None for one that holds anything unknown.

    Args:
        svg: Made by `drawing`, all words beginning at their place.
        fonts: The renderer's font configuration.
    """
    root = ET.fromstring(svg)  # noqa: S314 - made by the program itself
    try:
        return PaperDrawing(_pair(root, "width", "height"), _box(root), tuple(_parts(root)), fonts)
    except _UnknownError:
        return None


def _parts(root: ET.Element) -> Iterator[tuple[bytes, Words | None]]:
    ready: list[str] = []
    for element in root:
        kind = element.tag.removeprefix(_SVG)
        if kind not in _SHAPES or set(element.attrib) - _SHAPES[kind] or len(element):
            raise _UnknownError
        if kind == "text":
            ready.append(_colour(element.get("fill", "#000"), "rg"))
            yield " ".join(ready).encode(), _words(element)
            ready = []
        else:
            ready += _shape(kind, element)
    yield " ".join(ready).encode(), None


def _shape(kind: str, element: ET.Element) -> list[str]:
    fill, stroke = element.get("fill", "#000"), element.get("stroke", "none")
    inked = [_colour(fill, "rg")] if fill != "none" else []
    if stroke != "none":
        dashes = " ".join(f"{_number(part):g}" for part in element.get("stroke-dasharray", "").split())
        inked += [_colour(stroke, "RG"), f"{_number(element.get('stroke-width', '1')):g} w", f"[{dashes}] 0 d"]
    outline = {"path": _path, "rect": _rectangle, "circle": _circle}[kind](element)
    return [*inked, *outline, {(1, 0): "f", (0, 1): "S", (1, 1): "B", (0, 0): "n"}[fill != "none", stroke != "none"]]


def _path(element: ET.Element) -> Iterator[str]:
    """Turn path data into operators; each letter stands before every point (`drawing` never leaves one out)."""
    tokens: list[str | float] = []
    for letter, number, other in _TOKEN.findall(element.get("d", "")):
        if other:
            raise _UnknownError
        if letter or number:
            tokens.append(letter or float(number))
    x = y = 0.0
    at = 0
    while at < len(tokens):
        letter = tokens[at]
        taken = tokens[at + 1 : at + 1 + (2 if letter in ("M", "L") else 0 if letter == "Z" else 1)]
        numbers = [part for part in taken if isinstance(part, float)]
        if isinstance(letter, float) or len(numbers) < len(taken) or (letter in "ML") != (len(taken) == 2):
            raise _UnknownError
        at += 1 + len(taken)
        if letter == "Z":
            yield "h"
            continue
        if letter in "ML":
            x, y = numbers
        elif letter in "Hh":
            x = numbers[0] + (x if letter == "h" else 0.0)
        else:
            y = numbers[0] + (y if letter == "v" else 0.0)
        yield f"{x:g} {y:g} {'m' if letter == 'M' else 'l'}"


def _rectangle(element: ET.Element) -> Iterator[str]:
    (x, y), (w, h) = _pair(element, "x", "y"), _pair(element, "width", "height")
    r = _number(element.get("rx", "0"))
    if not r:
        yield f"{x:g} {y:g} {w:g} {h:g} re"
        return
    k = r * (1 - _QUARTER)
    right, bottom = x + w, y + h
    yield f"{x + r:g} {y:g} m {right - r:g} {y:g} l"
    yield f"{right - k:g} {y:g} {right:g} {y + k:g} {right:g} {y + r:g} c {right:g} {bottom - r:g} l"
    yield f"{right:g} {bottom - k:g} {right - k:g} {bottom:g} {right - r:g} {bottom:g} c {x + r:g} {bottom:g} l"
    yield f"{x + k:g} {bottom:g} {x:g} {bottom - k:g} {x:g} {bottom - r:g} c {x:g} {y + r:g} l"
    yield f"{x:g} {y + k:g} {x + k:g} {y:g} {x + r:g} {y:g} c h"


def _circle(element: ET.Element) -> Iterator[str]:
    (x, y), r = _pair(element, "cx", "cy"), _number(element.get("r"))
    k = _QUARTER * r
    yield f"{x + r:g} {y:g} m"
    yield f"{x + r:g} {y + k:g} {x + k:g} {y + r:g} {x:g} {y + r:g} c"
    yield f"{x - k:g} {y + r:g} {x - r:g} {y + k:g} {x - r:g} {y:g} c"
    yield f"{x - r:g} {y - k:g} {x - k:g} {y - r:g} {x:g} {y - r:g} c"
    yield f"{x + k:g} {y - r:g} {x + r:g} {y - k:g} {x + r:g} {y:g} c h"


def _words(element: ET.Element) -> Words:
    if element.get("text-anchor", "start") != "start" or "\n" in (element.text or ""):
        raise _UnknownError
    family = tuple(name.strip() for name in element.get("font-family", "").split(","))
    return Words(*_pair(element, "x", "y"), _number(element.get("font-size")), family, element.text or "")


def _write(stream: Any, words: Words, fonts: Any) -> None:
    """Let the renderer's own text engine write words, so that fonts are embedded and searched like all others."""
    # heavy
    from weasyprint.css.properties import INITIAL_VALUES  # noqa: PLC0415
    from weasyprint.draw.text import draw_first_line  # noqa: PLC0415
    from weasyprint.matrix import Matrix  # noqa: PLC0415
    from weasyprint.text.line_break import Layout  # noqa: PLC0415

    class Style(dict[str, Any]):
        font_config = fonts

    style = Style(INITIAL_VALUES, font_family=list(words.family), font_size=words.size, font_weight=400)
    layout = Layout(style)
    layout.set_text(words.text)
    line = SimpleNamespace(pango_layout=layout, style=style, text=words.text, baseline=0.0)
    stream.begin_text()
    draw_first_line(stream, line, "none", "none", Matrix(d=-1, e=words.x, f=words.y))
    stream.end_text()


def _box(root: ET.Element) -> tuple[float, float]:
    x, y, width, height = (_number(part) for part in root.get("viewBox", "0 0 0 0").split())
    if x or y or width <= 0 or height <= 0:
        raise _UnknownError
    return width, height


def _pair(element: ET.Element, first: str, second: str) -> tuple[float, float]:
    return _number(element.get(first)), _number(element.get(second))


def _number(text: str | None) -> float:
    if text is None or not re.fullmatch(r"-?\d+(\.\d+)?", text):
        raise _UnknownError
    return float(text)


def _colour(text: str, operator: str) -> str:
    """Return an operator that sets `#rrggbb` or `#rgb`."""
    digits = text[1:] if len(text) == 7 else "".join(2 * digit for digit in text[1:])
    if not re.fullmatch(r"#[0-9a-fA-F]{3}|#[0-9a-fA-F]{6}", text):
        raise _UnknownError
    return " ".join(f"{int(digits[i : i + 2], 16) / 255:.4g}" for i in (0, 2, 4)) + f" {operator}"
