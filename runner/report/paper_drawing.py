"""Drawings on paper: words begin where their widths in the report's own font say, in place of being moved afterwards.

The PDF renderer draws every word that is centred or ends at a place as an object of its own, 180 in a report of six
curves. On paper the font is known, so each word's beginning can be worked out before.
"""

import re
from functools import cache
from html import unescape
from typing import Any

from runner.resources import folder

_MOVED = re.compile(
    r'<text x="([^"]*)" y="([^"]*)" font-size="([^"]*)" text-anchor="(middle|end)"([^>]*)>([^<]*)</text>'
)
_SHARE = {"middle": 0.5, "end": 1.0}
_EM = 1000
"""px: size at which widths are taken; hinting plays no part in it."""


def from_the_left(svg: str) -> str:
    """Return a drawing whose words all begin at their place.

    Args:
        svg: Made by `drawing`: text of one line, in the report's plain font.
    """
    return _MOVED.sub(_moved, svg)


def _moved(found: re.Match[str]) -> str:
    x, y, size, anchor, rest, words = found.groups()
    left = float(x) - _SHARE[anchor] * float(size) * _width(unescape(words))
    return f'<text x="{left:.2f}" y="{y}" font-size="{size}" text-anchor="start"{rest}>{words}</text>'


def _width(words: str) -> float:
    """Return the width of words in the report's font, em."""
    return float(_font().getlength(words)) / _EM


@cache
def _font() -> Any:
    from PIL import ImageFont  # noqa: PLC0415 - heavy

    place = str(folder("templates") / "fonts" / "DejaVuSans.ttf")
    return ImageFont.truetype(place, _EM, layout_engine=ImageFont.Layout.BASIC)
