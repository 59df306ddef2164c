"""JPEG only where the product delivers it: one grey frame, upright, to its end."""

import io
from dataclasses import replace

import imagecodecs
import numpy as np
import pytest
from numpy.typing import NDArray
from PIL import Image

from runner.capture.formats import jpeg as reader
from runner.errors import FrameRefused
from runner.spec.model import Camera
from tests.capture.bad_frames import chart_codes

CAMERA = Camera(160, 120, 8, 0, 255, delivers="jpeg")
GREY = (chart_codes(1) // 16).astype(np.uint8)


def _jpeg(codes: NDArray[np.uint8], **options: object) -> bytes:
    file = io.BytesIO()
    Image.fromarray(codes).save(file, "JPEG", **options)
    return file.getvalue()


def _decode(data: bytes, camera: Camera = CAMERA) -> NDArray[np.generic]:
    (page,) = reader.decode(data, "a.jpg", camera).pages
    return page


def test_refused_where_the_product_delivers_raw() -> None:
    """Compression has changed the pixels: it is evidence only where it is what the customer gets."""
    with pytest.raises(FrameRefused, match=r"JPEG, whose compression has changed the pixels; JPEG only where"):
        _decode(_jpeg(GREY), replace(CAMERA, delivers="raw"))


@pytest.mark.parametrize("level", [0, 37, 128, 200, 255])
def test_flat_blocks_come_back_as_the_standard_computes_them(level: int) -> None:
    """A flat block is its quantised DC term alone: 128 + round(8 (level - 128) / q) q / 8 (ITU-T T.81, A.3)."""
    data = _jpeg(np.full((120, 160), level, np.uint8), quality=75)
    with Image.open(io.BytesIO(data)) as picture:
        step = picture.quantization[0][0]  # type: ignore[attr-defined]
    truth = np.clip(np.rint(128 + np.rint(8 * (level - 128) / step) * step / 8), 0, 255)

    assert np.unique(_decode(data)).tolist() == [truth]


def test_an_independent_reader_sees_the_same_picture() -> None:
    """Another build of a decoder gives the same codes within one, all that ISO/IEC 10918-2 demands of decoders."""
    for options in ({"quality": 95}, {"quality": 60, "progressive": True}, {"restart_marker_rows": 1}):
        data = _jpeg(GREY, **options)
        theirs = imagecodecs.jpeg8_decode(data).astype(int)

        assert np.abs(_decode(data).astype(int) - theirs).max() <= 1


def test_equal_channels_are_a_grey_frame() -> None:
    """Three equal channels hold one grey frame; three different ones, or four, are colour and refused."""
    assert np.abs(_decode(_jpeg(np.stack([GREY] * 3, -1))).astype(int) - _decode(_jpeg(GREY))).max() <= 1
    with pytest.raises(FrameRefused, match="3 colour channels"):
        _decode(_jpeg(np.stack([GREY, GREY // 2, GREY], -1)))
    file = io.BytesIO()
    Image.fromarray(np.stack([GREY] * 4, -1), "CMYK").save(file, "JPEG")
    with pytest.raises(FrameRefused, match="4 colour channels"):
        _decode(file.getvalue())


def test_zeros_behind_the_end_mark_are_no_cut() -> None:
    """Cameras that fill up to a block pad behind the end mark; a file cut before it is refused."""
    data = _jpeg(GREY)

    assert np.array_equal(_decode(data + bytes(512)), _decode(data))
    for size in range(len(data) // 2, len(data), 97):
        with pytest.raises(FrameRefused, match="does not end with the end mark of a JPEG"):
            _decode(data[:size])


def test_texts_and_orientation_of_exif_are_read() -> None:
    """The serial in a file counts; a frame that is to be turned for viewing is refused (Exif 2.3, tag 274)."""
    exif = Image.Exif()
    exif[305] = "bench 4"
    exif.get_ifd(0x8769)[42033] = "WS8-000007"
    turned = Image.Exif()
    turned[274] = 6

    texts = reader.decode(_jpeg(GREY, exif=exif, comment="a note"), "a.jpg", CAMERA).texts

    assert texts == {"Software": "bench 4", "BodySerialNumber": "WS8-000007", "Comment": "a note"}
    with pytest.raises(FrameRefused, match="orientation 6"):
        _decode(_jpeg(GREY, exif=turned))


def test_a_header_that_claims_more_is_refused_before_decoding() -> None:
    """A frame header of 65535 x 65535 px is refused by its size alone (ITU-T T.81, B.2.2)."""
    data = bytearray(_jpeg(GREY))
    start = data.index(b"\xff\xc0")
    data[start + 5 : start + 9] = b"\xff\xff\xff\xff"

    with pytest.raises(FrameRefused, match="the frame is 65535 x 65535 px"):
        _decode(bytes(data))
