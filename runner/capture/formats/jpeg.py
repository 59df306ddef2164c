"""JPEG, 8 bit grey or colour, for products that deliver it: any other frame has been through JPEG only by mistake.

References:
    ITU-T T.81 | ISO/IEC 10918-1: markers SOI and EOI.
"""

from io import BytesIO

import numpy as np
from PIL.JpegImagePlugin import JpegImageFile

from runner.capture.formats.contract import Decoded, check_channels, check_size, check_upright, native, truncated
from runner.errors import FrameRefused
from runner.spec.model import Camera

ENDINGS = (".jpg", ".jpeg")
_EXIF_TEXTS = {270: "ImageDescription", 305: "Software", 306: "DateTime"}
_END = b"\xff\xd9"


def decode(data: bytes, where: str, camera: Camera) -> Decoded:
    """Decode the one picture; see `Format.decode`."""
    if camera.delivers != "jpeg":
        raise FrameRefused(
            "the file holds a JPEG, whose compression has changed the pixels",
            where=where,
            allowed="JPEG only where the spec says that the product delivers it (camera: delivers: jpeg)",
            next_step="capture again in a lossless format",
        )
    if not data.rstrip(b"\0").endswith(_END):  # some cameras fill up to a block with zeros behind the end mark
        raise truncated(where, "it does not end with the end mark of a JPEG")
    with JpegImageFile(BytesIO(data)) as picture:
        check_size(*picture.size, camera, where)
        picture.load()
        exif = picture.getexif()
        check_upright(int(exif.get(274, 1)), where)
        texts = {name: str(exif[tag]) for tag, name in _EXIF_TEXTS.items() if tag in exif}
        serial = exif.get_ifd(0x8769).get(42033)
        texts |= {"BodySerialNumber": str(serial)} if serial else {}
        comment = picture.info.get("comment", b"")
        texts |= {"Comment": comment.decode("utf-8", "replace")} if comment else {}
        codes = np.asarray(picture)
        mode = picture.mode
    if camera.colour == "mono" and mode == "RGB" and bool((codes[..., :1] == codes).all()):
        codes, mode = codes[..., 0], "L"  # a mono picture is often written with three equal channels
    words = "one grey channel" if mode == "L" else f"{codes.shape[-1]} colour channels"
    check_channels(words, where, camera, channels={"L": 1, "RGB": 3}.get(mode, 0))
    return Decoded((native(codes),), texts)
