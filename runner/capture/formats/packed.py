"""Headerless files: nothing but pixels, in the layout that the spec states. The size must fit to the byte.

What each packing means, for two pixels a and b in three bytes (or four pixels in five), bit by bit:

    12 bit low bits first             a[7:0]   b[3:0]|a[11:8]   b[11:4]      one stream, least significant bit first
    12 bit high bits first            a[11:4]  a[3:0]|b[11:8]   b[7:0]       one stream, most significant bit first
    12 bit low nibbles in the middle  a[11:4]  b[3:0]|a[3:0]    b[11:4]
    MIPI RAW12                        a[11:4]  b[11:4]          b[3:0]|a[3:0]
    10 bit low bits first             one stream, least significant bit first
    MIPI RAW10                        a[9:2] b[9:2] c[9:2] d[9:2] and d[1:0]|c[1:0]|b[1:0]|a[1:0]

References:
    MIPI Alliance, Specification for Camera Serial Interface 2, 11.4.4 (RAW10), 11.4.5 (RAW12).
    TIFF Revision 6.0 (Adobe, 1992): most significant bit first. The two others: common practice of cameras.
"""

from collections.abc import Callable, Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from runner.capture.formats.contract import COPY_AGAIN, Decoded, check_pages
from runner.capture.frame import Codes
from runner.errors import FrameRefused
from runner.spec.files import PACKINGS, Layout
from runner.spec.model import Camera

ENDINGS = ()
"""Any ending that no other format claims."""
Bytes = NDArray[np.uint8]
_BLOCK = 1 << 15
"""Groups unpacked at a time: what they fill stays in a processor's cache."""
_Words = NDArray[np.uint16]


def decode(data: bytes, where: str, camera: Camera) -> Decoded:
    """Decode every frame; see `Format.decode`."""
    layout = camera.layout
    check_pages(layout.frames_per_file, where, 2 * camera.width * camera.height)
    if len(data) != layout.file_bytes(camera.width, camera.height):
        raise _wrong_size(len(data), where, camera)
    in_file = tuple(unpack(rows, layout) for rows in rows_of(data, camera))
    stored = tuple(page.ravel() for page in in_file)
    if layout.first_row == "bottom":
        return Decoded(tuple(np.ascontiguousarray(page[::-1]) for page in in_file), {}, stored)
    return Decoded(in_file, {}, stored)


def rows_of(data: bytes, camera: Camera) -> tuple[Bytes, ...]:
    """Return each frame's bytes, rows × bytes of a row, without the padding; views of the file."""
    layout, height = camera.layout, camera.height
    pitch = layout.row_bytes(camera.width)
    whole = np.frombuffer(data, np.uint8, layout.frames_per_file * height * pitch, layout.header)
    frames = whole.reshape(layout.frames_per_file, height, pitch)
    return tuple(frame[:, : pitch - layout.row_padding] for frame in frames)


def unpack(rows: Bytes, layout: Layout) -> Codes:
    """Unpack whole rows.

    Args:
        rows: Rows × bytes of a row.
        layout: Packing and byte order.

    Returns:
        Codes, rows × columns: 8 bit for `8 bit`, else 16 bit in this machine's byte order.
    """
    if layout.packing == "8 bit":
        return np.ascontiguousarray(rows)
    if layout.packing == "16 bit":
        kind = ">u2" if layout.byte_order == "big" else "<u2"
        return np.ascontiguousarray(np.ascontiguousarray(rows).view(kind), dtype=np.uint16)
    packing, take = PACKINGS[layout.packing], _TAKE[layout.packing]
    height, width = rows.shape[0], rows.shape[1] // packing.octets * packing.pixels
    groups = rows.reshape(-1, packing.octets)  # copies only where rows are padded
    out = np.empty((groups.shape[0], packing.pixels), np.uint16)
    for start in range(0, groups.shape[0], _BLOCK):
        take(groups[start : start + _BLOCK].astype(np.uint16), out[start : start + _BLOCK])
    return out.reshape(height, width)


def _low_first_12(x: _Words, out: _Words) -> None:
    out[:, 0] = x[:, 0] | (x[:, 1] & 15) << 8
    out[:, 1] = x[:, 1] >> 4 | x[:, 2] << 4


def _high_first_12(x: _Words, out: _Words) -> None:
    out[:, 0] = x[:, 0] << 4 | x[:, 1] >> 4
    out[:, 1] = (x[:, 1] & 15) << 8 | x[:, 2]


def _middle_12(x: _Words, out: _Words) -> None:
    out[:, 0] = x[:, 0] << 4 | x[:, 1] & 15
    out[:, 1] = x[:, 2] << 4 | x[:, 1] >> 4


def _raw12(x: _Words, out: _Words) -> None:
    out[:, 0] = x[:, 0] << 4 | x[:, 2] & 15
    out[:, 1] = x[:, 1] << 4 | x[:, 2] >> 4


def _low_first_10(x: _Words, out: _Words) -> None:
    for n in range(4):
        out[:, n] = x[:, n] >> 2 * n | (x[:, n + 1] & (1 << 2 * n + 2) - 1) << 8 - 2 * n


def _raw10(x: _Words, out: _Words) -> None:
    for n in range(4):
        out[:, n] = x[:, n] << 2 | x[:, 4] >> 2 * n & 3


_TAKE: Mapping[str, Callable[[_Words, _Words], None]] = {
    "12 bit low bits first": _low_first_12,
    "12 bit high bits first": _high_first_12,
    "12 bit low nibbles in the middle": _middle_12,
    "MIPI RAW12": _raw12,
    "10 bit low bits first": _low_first_10,
    "MIPI RAW10": _raw10,
}


def _wrong_size(there: int, where: str, camera: Camera) -> FrameRefused:
    """Return the refusal of a file of another size, with the layouts that would fit it."""
    layout, size = camera.layout, (camera.width, camera.height)
    wanted = layout.file_bytes(*size)
    fitting = _fitting(there, camera)
    many = "" if layout.frames_per_file == 1 else f"{layout.frames_per_file} frames of "
    short = "the file is truncated: it" if there < wanted and not fitting else "the file"
    return FrameRefused(
        f"{short} holds {there} bytes; {many}{size[0]} x {size[1]} px of {layout.packing} fill {wanted}",
        where=where,
        allowed=f"it would fit {' or '.join(fitting)}" if fitting else f"exactly {wanted} bytes",
        next_step=f"{COPY_AGAIN}, or correct camera: layout in the spec" if fitting else COPY_AGAIN,
    )


def _fitting(there: int, camera: Camera) -> list[str]:
    """Return the changes of one key of the layout that give a file of that size."""
    layout, size = camera.layout, (camera.width, camera.height)
    found: dict[str, None] = {}
    for name, packing in PACKINGS.items():
        other = replace(layout, packing=name)
        holds = packing.bits >= camera.bit_depth and not camera.width % packing.pixels
        if holds and other.file_bytes(*size) == there:
            found[f"packing: {packing.bits} bit" if packing.pixels == 1 else f"{packing.bits} bit packed"] = None
    frames, left = divmod(there - layout.header, camera.height * layout.row_bytes(camera.width))
    if left == 0 and frames > 0:
        found[f"frames_per_file: {frames}"] = None
    rows = layout.frames_per_file * camera.height
    padding, left = divmod(there - layout.file_bytes(*size) + rows * layout.row_padding, rows)
    if left == 0 and 0 <= padding <= 4096:
        found[f"row_padding: {padding} bytes"] = None
    header = there - layout.file_bytes(*size) + layout.header
    if layout.header < header <= 65536:
        found[f"header: {header} bytes"] = None
    return list(found)
