"""The chain of image file directories of a TIFF, walked strictly: every tag and every piece of every page lies inside.

A reader made for viewing forgives a broken chain and shows fewer pages. Here a page that is lost must be seen.

References:
    TIFF Revision 6.0 (Adobe, 1992), section 2; BigTIFF: 64-bit offsets, version number 43.
"""

import struct
from collections.abc import Mapping
from dataclasses import dataclass

from runner.capture.formats.contract import check_pages, truncated
from runner.errors import FrameRefused

STRIP_OFFSETS, STRIP_COUNTS, TILE_OFFSETS, TILE_COUNTS = 273, 279, 324, 325
_PIECES = frozenset({STRIP_OFFSETS, STRIP_COUNTS, TILE_OFFSETS, TILE_COUNTS})
_TYPES = {1: "B", 2: "s", 3: "H", 4: "I", 5: "II", 6: "b", 7: "B", 8: "h", 9: "i", 10: "ii", 11: "f", 12: "d"}
_TYPES |= {13: "I", 16: "Q", 17: "q", 18: "Q"}
MOST_PIECES = 2**20
"""Tiles of 16 x 16 px in a frame of 268 megapixels; no page has more pieces."""
MOST_VALUES = 64
"""Values of any other tag; those that are needed here have a few, private ones hold megabytes."""


@dataclass(frozen=True)
class Directory:
    """One page's directory."""

    integers: Mapping[int, tuple[int, ...]]
    """Values of the tags of whole numbers, by tag number."""
    segments: tuple[tuple[int, int], ...]
    """Offset and byte count of every strip or tile, in the order of the picture."""

    def first(self, tag: int, otherwise: int) -> int:
        """Return the first value of a tag, or the format's own default."""
        return next(iter(self.integers.get(tag, ())), otherwise)


def read_directories(data: bytes, where: str) -> tuple[Directory, ...]:
    """Walk the chain and check that everything it points to lies inside the file.

    Args:
        data: The whole file.
        where: Its name, for refusals.

    Raises:
        FrameRefused: The chain is broken, runs in a circle, or points beyond the end of the file.
    """
    walker = _Walker(data, where)
    offset, seen, found = walker.start(), set[int](), list[Directory]()
    while offset:
        if offset in seen:
            raise FrameRefused("the file's pages point back at each other", where=where, next_step="export it again")
        seen.add(offset)
        check_pages(len(seen), where)
        directory, offset = walker.directory(offset)
        found.append(directory)
    if not found:
        raise truncated(where, "it holds no page")
    return tuple(found)


class _Walker:
    """Reads numbers out of the bytes and refuses every one that is not there."""

    def __init__(self, data: bytes, where: str) -> None:
        self._data, self._where = data, where
        self._order = "<" if data[:2] == b"II" else ">"
        self._big = len(data) > 3 and self._get("H", 2)[0] == 43
        self._word, self._entry = ("Q", 20) if self._big else ("I", 12)

    def _get(self, form: str, offset: int) -> tuple[int, ...]:
        size = struct.calcsize(self._order + form)
        if offset < 0 or offset + size > len(self._data):
            raise truncated(self._where, f"it points to byte {offset + size}, but ends at byte {len(self._data)}")
        return struct.unpack_from(self._order + form, self._data, offset)

    def start(self) -> int:
        """Return the offset of the first directory."""
        return self._get(self._word, 8 if self._big else 4)[0]

    def directory(self, offset: int) -> tuple[Directory, int]:
        """Return the directory at an offset and the offset of the next one."""
        count_form = "Q" if self._big else "H"
        (count,) = self._get(count_form, offset)
        first = offset + struct.calcsize("<" + count_form)
        if count > 4096:
            raise FrameRefused(f"a page claims {count} tags", where=self._where, next_step="export the file again")
        integers = dict(filter(None, (self._tag(first + i * self._entry) for i in range(count))))
        (following,) = self._get(self._word, first + count * self._entry)
        return Directory(integers, self._segments(integers)), following

    def _tag(self, offset: int) -> tuple[int, tuple[int, ...]] | None:
        tag, kind = self._get("HH", offset)
        (count,) = self._get(self._word, offset + 4)
        value_at = offset + 4 + struct.calcsize("<" + self._word)
        form = _TYPES.get(kind)
        if form is None:
            return None  # a type of the future; nothing here needs it
        size = count * struct.calcsize("<" + form)
        if size > struct.calcsize("<" + self._word):
            (value_at,) = self._get(self._word, value_at)
        if value_at + size > len(self._data):
            end = len(self._data)
            raise truncated(self._where, f"tag {tag} ends at byte {value_at + size}, the file at byte {end}")
        if form not in {"B", "H", "I", "Q"} or count > (MOST_PIECES if tag in _PIECES else MOST_VALUES):
            return None
        return tag, self._get(f"{count}{form}", value_at)

    def _segments(self, integers: Mapping[int, tuple[int, ...]]) -> tuple[tuple[int, int], ...]:
        tiled = TILE_OFFSETS in integers
        offsets = integers.get(TILE_OFFSETS if tiled else STRIP_OFFSETS, ())
        counts = integers.get(TILE_COUNTS if tiled else STRIP_COUNTS, ())
        if not offsets or len(offsets) != len(counts):
            raise FrameRefused(
                f"a page lists {len(offsets)} pieces of picture and {len(counts)} lengths",
                where=self._where,
                next_step="export the file again",
            )
        for offset, count in zip(offsets, counts, strict=True):
            if not offset or not count:
                raise truncated(self._where, "a piece of the picture was never written")
            if offset + count > len(self._data):
                end = len(self._data)
                raise truncated(self._where, f"its picture goes to byte {offset + count}, the file ends at byte {end}")
        return tuple(zip(offsets, counts, strict=True))
