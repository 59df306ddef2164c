"""What every file format gives back, and the checks that come before any decoding."""

import json
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np

from runner.capture.frame import Codes
from runner.errors import FrameRefused
from runner.spec.model import Camera

COPY_AGAIN = "copy the file again from the station"
MAX_PAGES = 1000
"""More frames than any step of an acceptance test takes into one file."""
MAX_BYTES = 2**32
"""Of a file, and of its pixels when unpacked; more would not fit a worker's memory, and no frame comes near it."""
MAX_TEXT = 2000
"""Characters kept of each text that a file carries; OME descriptions run to megabytes."""


@dataclass(frozen=True)
class Decoded:
    """Everything that one file holds."""

    pages: tuple[Codes, ...]
    """Stored codes of each page, rows × columns (× 3 for colour), native byte order."""
    texts: Mapping[str, str]
    """Texts that the file carries, by the format's own names, uncut."""
    stored: tuple[Codes, ...] = ()
    """The codes in file order, one-dimensional pieces; empty where that is page by page, row by row."""
    line: int = 0
    """Length of one stored line in numbers (a row, a column or a tile's row); 0 for a row."""


class Format(Protocol):
    """The module of a file format."""

    ENDINGS: tuple[str, ...]
    """File name endings that belong to it, lower case with the dot."""

    def decode(self, data: bytes, where: str, camera: Camera) -> Decoded:
        """Decode the bytes of a whole file.

        Raises:
            FrameRefused: The file is not whole, or holds something else than frames of that camera.
        """


@dataclass(frozen=True)
class Notes:
    """What a file says of itself, in our words."""

    metadata: Mapping[str, str] = field(default_factory=dict)
    """Description, software, serial, time …; each cut to `MAX_TEXT` characters."""
    simulated: bool = False
    """One of the texts carries the mark of a rehearsed frame."""


_NAMES = {
    "imagedescription": "description",
    "description": "description",
    "comment": "description",
    "software": "software",
    "datetime": "time",
    "creation time": "time",
    "serial": "serial",
    "bodyserialnumber": "serial",
    "cameraserialnumber": "serial",
}
_MARK = re.compile(r"probatum\W+simulated frame", re.IGNORECASE)


def read_notes(texts: Mapping[str, str]) -> Notes:
    """Sort out a file's texts; a description in JSON may carry `serial` and `software` itself."""
    found: dict[str, str] = {}
    for name, text in texts.items():
        ours = _NAMES.get(name.lower())
        if ours and text.strip():
            found.setdefault(ours, text.strip()[:MAX_TEXT])
    for text in texts.values():
        found |= {key: value for key, value in _from_json(text).items() if key not in found}
    return Notes(found, simulated=any(_MARK.search(text) for text in texts.values()))


def _from_json(text: str) -> dict[str, str]:
    if not text.lstrip().startswith("{"):
        return {}
    try:
        fields = json.loads(text)
    except (ValueError, RecursionError):
        return {}
    wanted = ((key, fields.get(key)) for key in ("serial", "software"))
    return {key: str(value).strip()[:MAX_TEXT] for key, value in wanted if isinstance(value, str | int)}


def native(codes: Codes) -> Codes:
    """Return codes in this machine's byte order, row after row; the same array where they are so already."""
    return np.ascontiguousarray(codes, dtype=codes.dtype.newbyteorder("="))


def truncated(where: str, found: str) -> FrameRefused:
    """Return the refusal of a file that ends too early."""
    return FrameRefused(f"the file is truncated: {found}", where=where, next_step=COPY_AGAIN)


def check_size(width: int, height: int, camera: Camera, where: str) -> None:
    """Refuse a frame of another size than the camera's, before its pixels are decoded.

    Raises:
        FrameRefused: The size differs.
    """
    if (width, height) == (camera.width, camera.height):
        return
    allowed = f"the spec's camera delivers {camera.width} x {camera.height} px"
    if (width, height) == (camera.height, camera.width):
        raise FrameRefused(
            f"the frame is {width} x {height} px, turned by 90 degrees",
            where=where,
            allowed=allowed,
            next_step="capture again without turning the frame",
        )
    raise FrameRefused(
        f"the frame is {width} x {height} px",
        where=where,
        allowed=allowed,
        next_step="capture again in the full frame format, or correct camera: frame_size in the spec",
    )


def samples(camera: Camera) -> int:
    """Return how many numbers a pixel of the camera's frames has."""
    return 3 if camera.colour == "rgb" else 1


def check_channels(found: str, where: str, camera: Camera, *, channels: int) -> None:
    """Refuse what does not hold as many plain channels as the camera delivers.

    Args:
        found: What the file holds, as words.
        where: The file.
        camera: The camera.
        channels: Plain channels of it, 1 or 3; 0 where there is transparency, a palette or the like.

    Raises:
        FrameRefused: One channel for three, three for one, or something else.
    """
    if channels == samples(camera):
        return
    if camera.colour == "rgb":
        raise FrameRefused(
            f"the file holds {found}",
            where=where,
            allowed="three colour channels without transparency, for the spec says colour: rgb",
            next_step="export the frame in colour, or correct camera: colour in the spec",
        )
    raise FrameRefused(
        f"the file holds {found}",
        where=where,
        allowed="one grey channel without transparency, for the spec's camera is mono",
        next_step="export the raw or grey frame, or state camera: colour: rgb in the spec",
    )


def check_upright(orientation: int, where: str) -> None:
    """Refuse a file that asks its viewer to turn or mirror it: regions would lie in other corners.

    Args:
        orientation: Orientation tag of TIFF 6.0 and Exif; 0 or 1 is upright.
        where: The file.

    Raises:
        FrameRefused: The tag asks for turning or mirroring.
    """
    if orientation not in {0, 1}:
        raise FrameRefused(
            f"the file asks to be turned or mirrored for viewing (orientation {orientation})",
            where=where,
            allowed="frames upright as the sensor reads them (orientation 1)",
            next_step="export the frame without an orientation tag",
        )


def check_pages(pages: int, where: str, page_bytes: int = 0) -> None:
    """Refuse a file of more pages than a capture has, or than fit into memory.

    Args:
        pages: How many there are.
        where: The file.
        page_bytes: Bytes that the pixels of one page fill.

    Raises:
        FrameRefused: There are too many.
    """
    if pages > MAX_PAGES:
        raise FrameRefused(
            f"the file holds more than {MAX_PAGES} pages",
            where=where,
            allowed=f"at most {MAX_PAGES} frames in one file",
            next_step="split the stack into several files",
        )
    if pages * page_bytes > MAX_BYTES:
        raise FrameRefused(
            f"the file unpacks to {pages * page_bytes} bytes of pixels",
            where=where,
            allowed=f"at most {MAX_BYTES} bytes in one file",
            next_step="split the stack into several files",
        )
