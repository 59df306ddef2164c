"""Files put together byte by byte after their published formats, by nothing that also reads them.

References:
    TIFF Revision 6.0 (Adobe, 1992), sections 2 and 15; BigTIFF: version 43, offsets of 8 bytes.
    Portable Network Graphics (PNG) Specification, ISO/IEC 15948:2004, 5.3 (chunks), 9.2 (filters).
    NumPy Enhancement Proposal 1, "A simple file format for NumPy arrays".
"""

import struct
import zlib
from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

_SHORT, _LONG, _LONG8 = 3, 4, 16
_SHORTS = frozenset({258, 259, 262, 266, 277, 317, 339})
"""Tags whose values TIFF 6.0 writes as 16 bit numbers."""


def tiff_by_hand(
    pieces: Sequence[bytes],
    *,
    pages: int = 1,
    order: str = "<",
    big: bool = False,
    size: tuple[int, int] = (160, 120),
    bits: int = 16,
    tags: Mapping[int, int] | None = None,
) -> bytes:
    """Return a grey TIFF whose pages all show the same strips, or tiles where `tags` give their size (322, 323)."""
    word, head = ("Q", 16) if big else ("I", 8)
    starts = [head + sum(len(piece) for piece in pieces[:n]) for n in range(len(pieces))]
    fields = {256: [size[0]], 257: [size[1]], 258: [bits], 259: [1], 262: [1], 277: [1], 278: [size[1]]}
    fields |= {tag: [value] for tag, value in (tags or {}).items()}
    tiled = 322 in fields
    fields |= {324 if tiled else 273: starts, 325 if tiled else 279: [len(piece) for piece in pieces]}
    if tiled:
        del fields[278]
    body = b"".join(pieces)
    directories, at = b"", head + len(body)
    for page in range(pages):
        made = _directory(fields, order, at, big=big, last=page == pages - 1)
        directories, at = directories + made, at + len(made)
    mark = b"II" if order == "<" else b"MM"
    first = head + len(body)
    header = struct.pack(f"{order}HHHQ", 43, 8, 0, first) if big else struct.pack(f"{order}HI", 42, first)
    assert struct.calcsize(f"{order}{word}") in {4, 8}
    return mark + header + body + directories


def _directory(fields: Mapping[int, list[int]], order: str, at: int, *, big: bool, last: bool) -> bytes:
    word, count, room = ("Q", "Q", 8) if big else ("I", "H", 4)
    length = struct.calcsize(f"<{count}") + len(fields) * (4 + 2 * room) + room
    entries, outside = struct.pack(f"{order}{count}", len(fields)), b""
    for tag, values in sorted(fields.items()):
        kind = _SHORT if tag in _SHORTS else _LONG8 if big else _LONG
        form = {_SHORT: "H", _LONG: "I", _LONG8: "Q"}[kind]
        data = struct.pack(f"{order}{len(values)}{form}", *values)
        if len(data) > room:
            data, outside = struct.pack(f"{order}{word}", at + length + len(outside)), outside + data
        entries += struct.pack(f"{order}HH{word}", tag, kind, len(values)) + data.ljust(room, b"\0")
    after = 0 if last else at + length + len(outside)
    return entries + struct.pack(f"{order}{word}", after) + outside


def packed_12_bit(codes: NDArray[np.uint16]) -> bytes:
    """Return codes as TIFF packs them: most significant bit first, every row filled up to a whole byte."""
    rows = []
    for row in codes.tolist():
        text = "".join(f"{code:012b}" for code in row)
        text += "0" * (-len(text) % 8)
        rows.append(int(text, 2).to_bytes(len(text) // 8, "big"))
    return b"".join(rows)


def chunk(kind: bytes, data: bytes) -> bytes:
    """Return a PNG chunk with its check sum."""
    return struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data))


def png_header(width: int = 160, height: int = 120, bits: int = 16) -> bytes:
    """Return the header chunk of a grey PNG."""
    return chunk(b"IHDR", struct.pack(">IIBBBBB", width, height, bits, 0, 0, 0, 0))


def png_pixels(codes: NDArray[np.uint16]) -> bytes:
    """Return the pixel chunk of 16 bit codes; the five filters of the standard take turns, row by row."""
    rows, above = [], bytes(2 * codes.shape[1])
    for number, line in enumerate(codes):
        row, kind = line.astype(">u2").tobytes(), number % 5
        rows.append(bytes([kind]) + bytes((x - _guess(kind, row, above, i)) % 256 for i, x in enumerate(row)))
        above = row
    return chunk(b"IDAT", zlib.compress(b"".join(rows)))


def _guess(kind: int, row: bytes, above: bytes, i: int) -> int:
    """Return what a filter expects of byte i: nothing, the left, the one above, their mean, or the Paeth predictor."""
    a, b, c = (row[i - 2] if i > 1 else 0), above[i], (above[i - 2] if i > 1 else 0)
    near = min((abs(b - c), 0, a), (abs(a - c), 1, b), (abs(a + b - 2 * c), 2, c))[2]
    return (0, a, b, (a + b) // 2, near)[kind]


def png_by_hand(*chunks: bytes) -> bytes:
    """Return a PNG of these chunks between its signature and its end mark."""
    return b"\x89PNG\r\n\x1a\n" + b"".join(chunks) + chunk(b"IEND", b"")


def npy_by_hand(header: str, pixels: bytes, version: tuple[int, int] = (1, 0)) -> bytes:
    """Return an NPY file with any text for a header, filled up to a multiple of 64 bytes."""
    size, form = (10, "<H") if version == (1, 0) else (12, "<I")
    text = header.encode()
    text += b" " * (-(size + len(text) + 1) % 64) + b"\n"
    return b"\x93NUMPY" + bytes(version) + struct.pack(form, len(text)) + text + pixels
