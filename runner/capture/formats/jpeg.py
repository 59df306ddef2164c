"""JPEG, 8 bit grey, for products that deliver it: any other frame has been through JPEG only by mistake.

References:
    ITU-T T.81 | ISO/IEC 10918-1: markers SOI and EOI.
"""

from io import BytesIO

import numpy as np
from PIL.JpegImagePlugin import JpegImageFile

from runner.capture.formats.contract import Decoded, check_mono, check_size, check_upright, native, truncated
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
    if codes.ndim == 3:  # a mono picture is often written with three equal channels
        equal = codes.shape[2] == 3 and bool((codes[..., :1] == codes).all())
        check_mono(f"{codes.shape[2]} colour channels", where, mono=equal)
        codes = codes[..., 0]
    return Decoded((native(codes),), texts)
