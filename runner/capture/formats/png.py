"""PNG, 8 and true 16 bit, grey or colour; every chunk's check sum is verified before anything is decoded.

References:
    Portable Network Graphics (PNG) Specification, W3C / ISO/IEC 15948:2004, 5 and 11.
"""

import struct
from io import BytesIO

import numpy as np
from imagecodecs import png_decode
from PIL.PngImagePlugin import PngImageFile

from runner.capture.formats.contract import Decoded, check_channels, check_size, check_upright, native, truncated
from runner.errors import FrameRefused
from runner.spec.model import Camera

ENDINGS = (".png",)
SIGNATURE = b"\x89PNG\r\n\x1a\n"
_LAST_CHUNK = b"\x00\x00\x00\x00IEND\xaeB`\x82"
_COLOURS = {
    0: "one grey channel",
    2: "3 colour channels",
    3: "a colour palette",
    4: "transparency",
    6: "colour and transparency",
}


def decode(data: bytes, where: str, camera: Camera) -> Decoded:
    """Decode the one picture; see `Format.decode`."""
    if len(data) < 33 or data[12:16] != b"IHDR":
        raise truncated(where, f"it ends at byte {len(data)}, inside its header")
    width, height, bits, colour = struct.unpack_from(">IIBB", data, 16)
    words = _COLOURS.get(colour, f"pixels of the unknown kind {colour}")
    check_channels(words, where, camera, channels={0: 1, 2: 3}.get(colour, 0))
    check_size(width, height, camera, where)
    if bits not in {8, 16}:
        raise FrameRefused(f"the file holds {bits} bit per pixel", where=where, allowed="8 or 16 bit per pixel")
    if not data.endswith(_LAST_CHUNK):
        raise truncated(where, "it does not end with the end mark of a PNG")
    with PngImageFile(BytesIO(data)) as checked:
        checked.verify()  # every chunk against its CRC; decoding alone lets a zeroed tail pass
    with PngImageFile(BytesIO(data)) as picture:
        check_size(*picture.size, camera, where)  # a second header would win
        if getattr(picture, "is_animated", False):
            raise FrameRefused(
                f"the file holds an animation of {picture.n_frames} pictures",
                where=where,
                allowed="one frame in a PNG",
                next_step="export each frame as a file of its own",
            )
        if "transparency" in picture.info:
            check_channels("transparency", where, camera, channels=0)
        picture.load()
        check_upright(int(picture.getexif().get(274, 1)), where)
        texts = {str(name): str(text) for name, text in picture.text.items()}
    # Not the codes of `picture`: where whole rows are missing behind sound check sums, it fills them up with zeros.
    codes = np.asarray(png_decode(data), dtype=np.uint8 if bits == 8 else np.uint16)
    return Decoded((native(codes),), texts)
