"""Characters that the report's own fonts cannot print, found before anything is measured.

A font of the machine's own might have them, but then the report would print differently elsewhere and could not be
compared.
"""

from collections.abc import Iterable, Mapping, Sequence
from functools import cache
from typing import Any

from runner.errors import UsageError
from runner.resources import folder

FONT = "DejaVuSans.ttf"


def check(stated: Mapping[str, Any]) -> None:
    """Refuse what could not be printed.

    Args:
        stated: Plain data by where they were stated: an option, a file.

    Raises:
        UsageError: A character has no glyph.
    """
    for where, data in stated.items():
        if lost := missing(data):
            raise UsageError(
                f"the report's fonts have no glyph for {lost}",
                where=where,
                allowed="letters of Latin, Greek, Cyrillic, Arabic and Hebrew, and signs",
                next_step="write it in other letters",
            )


def missing(data: Any) -> str:
    """Return the characters of all texts in plain data that have no glyph, each once, in order.

    Args:
        data: Texts, and lists and mappings of them; all else is passed over.
    """
    known = _known()
    return "".join(dict.fromkeys(c for text in _texts(data) for c in text if c.isprintable() and ord(c) not in known))


@cache
def _known() -> frozenset[int]:
    from fontTools.ttLib import TTFont  # noqa: PLC0415 - heavy

    with TTFont(str(folder("templates") / "fonts" / FONT), lazy=True) as font:
        return frozenset(font.getBestCmap())


def _texts(data: Any) -> Iterable[str]:
    if isinstance(data, str):
        yield data
    elif isinstance(data, Mapping):
        for key, value in data.items():
            yield from _texts(key)
            yield from _texts(value)
    elif isinstance(data, Sequence) and not isinstance(data, bytes):
        for value in data:
            yield from _texts(value)
