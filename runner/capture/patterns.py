"""File patterns of a spec: `*` for any text inside one name, named parts in braces that become a frame's axes."""

import re
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache

from runner.errors import UsageError

_PART = re.compile(r"\{([^{}]*)\}|(\*)|([^{}*]+)|(.)")
_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_ ]*")
_VALUE = "[A-Za-z0-9._-]+"
"""What a named part may stand for: letters, digits, full stop, low line, hyphen; never a `/`."""
_NUMBER = re.compile(r"[+-]?\d+(\.\d+)?")


@dataclass(frozen=True)
class FilePattern:
    """A pattern made ready for matching."""

    text: str
    """As written in the spec."""
    regex: re.Pattern[str]
    """Matches a whole relative path; group p0, p1 … are the named parts."""
    axes: tuple[str, ...]
    """Names of the parts, in the order of the pattern."""

    def match(self, file: str) -> Mapping[str, str] | None:
        """Return the axes of a file, or None if it does not match.

        Args:
            file: Path relative to the unit's or attempt's folder, with `/`; case matters.
        """
        found = self.regex.fullmatch(file)
        return found and {name: found[f"p{i}"] for i, name in enumerate(self.axes)}


@cache
def read_pattern(text: str) -> FilePattern:
    """Make a pattern ready.

    Args:
        text: E.g. `dark-{repeat}.tif` or `chart/*.tif`.

    Raises:
        UsageError: It is absolute, leads out of the unit's folder, or its braces are wrong.
    """
    segments = text.split("/")
    if not text or "\\" in text or re.match("[A-Za-z]:", text) or any(s in {"", ".", ".."} for s in segments):
        raise UsageError(
            f"the file pattern '{text}' is not a path inside the unit's folder",
            allowed="a relative path with '/', without '.' and '..', e.g. dark-{repeat}.tif",
        )
    axes: list[str] = []
    regex = ""
    for part in _PART.finditer(text):
        name, star, literal, stray = part.groups()
        if stray or (name is not None and (not _NAME.fullmatch(name) or name in axes)):
            raise UsageError(
                f"the file pattern '{text}' has a wrong part '{part[0]}'",
                allowed="named parts in braces, each name once, e.g. {repeat}",
            )
        if name is not None:
            regex += f"(?P<p{len(axes)}>{_VALUE})"
            axes.append(name)
        else:
            regex += "[^/]*" if star else re.escape(literal)
    return FilePattern(text, re.compile(regex), tuple(axes))


def natural(text: str) -> tuple[object, ...]:
    """Return a key that sorts text as people do: `z2` before `z10`, and plain numbers by their value."""
    if _NUMBER.fullmatch(text):
        return (0, float(text), text)
    chunks = tuple((0, int(c), "") if c[0] in "0123456789" else (1, 0, c) for c in re.split("([0-9]+)", text) if c)
    return (1, chunks, text)
