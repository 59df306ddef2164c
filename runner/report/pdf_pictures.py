"""Overview pictures in a PDF as they are: a PNG's compressed pixels and colours are a PDF image's own form.

The PDF renderer would decode each picture, and encode it twice again in three times the size, which takes a third of
the printing time. Only PNGs as `pictures` writes them are taken over; the renderer reads all others.

References:
    ISO 32000-2:2020, 8.6.6.3 (indexed colours), 7.4.4.4 (predictors); ISO/IEC 15948:2004 (PNG), clauses 5, 11.2.
"""

import struct
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from hashlib import sha256
from typing import Any

_SIGNATURE = b"\x89PNG\r\n\x1a\n"
_INDEXED = 3
"""Colour type of pictures with a palette."""
_MOST = 50_000_000
"""Pixels: larger pictures are none of ours, and are not unpacked to look."""


@dataclass(frozen=True)
class IndexedPicture:
    """A picture with a palette, in the form in which the renderer wants its images."""

    width: int
    """px."""
    height: int
    """px."""
    bits: int
    """Per pixel: 1, 2, 4 or 8."""
    palette: bytes
    """Red, green, blue of each index."""
    packed: bytes
    """The PNG's compressed rows."""

    @property
    def id(self) -> str:
        """A name, the same for the same picture."""
        return sha256(self.packed + self.palette).hexdigest()[:32]

    def get_intrinsic_size(self, resolution: float, _font_size: Any) -> tuple[float, float, float]:
        """Return width, height and their ratio; CSS px at a resolution in dots per px."""
        return self.width / resolution, self.height / resolution, self.width / self.height

    def draw(self, stream: Any, width: float, height: float, _style: Any) -> None:
        """Put the picture on a page, never smoothed (ISO 19005-3, 6.2.8)."""
        name = stream.add_image(self, interpolate=False, ratio=1)
        stream.transform(width, 0, 0, -height, 0, height)
        stream.draw_x_object(name)

    def get_x_object(self, _interpolate: bool, _ratio: float) -> Any:
        """Return the image's object for the file."""
        import pydyf  # type: ignore[import-untyped]  # noqa: PLC0415 - comes with the renderer

        colours = f"<{self.palette.hex()}>"
        rows = {"Predictor": 15, "Colors": 1, "BitsPerComponent": self.bits, "Columns": self.width}
        return pydyf.Stream(
            [self.packed],
            pydyf.Dictionary(
                {
                    "Type": "/XObject",
                    "Subtype": "/Image",
                    "Width": self.width,
                    "Height": self.height,
                    "ColorSpace": pydyf.Array(["/Indexed", "/DeviceRGB", len(self.palette) // 3 - 1, colours]),
                    "BitsPerComponent": self.bits,
                    "Interpolate": "false",
                    "Filter": "/FlateDecode",
                    "DecodeParms": pydyf.Dictionary(rows),
                }
            ),
        )


def indexed(png: bytes) -> IndexedPicture | None:
    """Return a PNG in a PDF's own form, or None for any other than a whole, plain one with a palette.

    Args:
        png: The file; may be anything.
    """
    try:
        chunks = list(_chunks(png))
        width, height, bits, kind, _, _, interlaced = struct.unpack(">IIBBBBB", chunks[0][1])
    except struct.error:
        return None
    found = dict(chunks)
    palette = found.get(b"PLTE", b"")
    plain = chunks[0][0] == b"IHDR" and b"tRNS" not in found and kind == _INDEXED and not interlaced
    if not plain or bits not in {1, 2, 4, 8} or not 0 < width * height <= _MOST or not palette or len(palette) % 3:
        return None
    packed = b"".join(data for name, data in chunks if name == b"IDAT")
    wanted = height * (1 + -(-width * bits // 8))
    try:
        unpacker = zlib.decompressobj()
        rows = unpacker.decompress(packed, wanted + 1)
    except zlib.error:
        return None
    return IndexedPicture(width, height, bits, palette, packed) if len(rows) == wanted and unpacker.eof else None


def _chunks(png: bytes) -> Iterator[tuple[bytes, bytes]]:
    """Yield name and data of each chunk up to the last; raises struct.error where one is damaged or cut off."""
    name, at = b"", len(_SIGNATURE) if png.startswith(_SIGNATURE) else len(png)
    while name != b"IEND":
        size, name = struct.unpack_from(">I4s", png, at)
        end = at + 8 + size
        if struct.unpack_from(">I", png, end)[0] != zlib.crc32(png[at + 4 : end]):
            raise struct.error
        yield name, png[at + 8 : end]
        at = end + 4
