"""PNG frames come back code by code; a chunk that is not what its check sum says is no evidence."""

import io
import struct
import zlib
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from runner.capture.formats import png as reader
from runner.capture.readers import read_frames
from runner.errors import FrameRefused
from runner.spec.model import Camera
from tests.capture.bad_frames import chart_codes, picture, png
from tests.capture.hand_made import chunk, png_by_hand, png_header, png_pixels

CODES = chart_codes(1)
CAMERA = Camera(160, 120, 12, 64, 4095)
PIXELS = png_pixels(CODES)
_CONTROL = struct.pack(">IIIIHHBB", 160, 120, 0, 0, 1, 10, 0, 0)


def _decode(data: bytes) -> np.ndarray[tuple[int, ...], np.dtype[np.generic]]:
    (page,) = reader.decode(data, "a.png", CAMERA).pages
    return page


def test_all_five_filters_come_back_exactly() -> None:
    """A PNG made by hand after ISO/IEC 15948, with each of its filters, gives back every bit of 16."""
    found = _decode(png_by_hand(png_header(), PIXELS))

    assert found.dtype == np.uint16
    assert np.array_equal(found, CODES)


def test_an_independent_reader_sees_the_same_codes() -> None:
    """Pillow, whose own decoder is not used for the codes, reads the same ones, of 8 and of 16 bit."""
    grey = (CODES // 16).astype(np.uint8)

    for codes in (CODES, grey):
        data = png(codes)
        with Image.open(io.BytesIO(data)) as theirs:
            assert np.array_equal(_decode(data), np.asarray(theirs))
        assert _decode(data).dtype == codes.dtype


def test_every_chunk_answers_for_its_check_sum(tmp_path: Path) -> None:
    """One bit turned over in any byte between signature and end mark is refused."""
    data = png_by_hand(png_header(), PIXELS)

    for place in (*range(8, 41), *range(41, len(data) - 12, 997)):
        spoilt = bytearray(data)
        spoilt[place] ^= 4
        (tmp_path / "a.png").write_bytes(spoilt)
        with pytest.raises(FrameRefused, match=r"^a\.png: the (file|frame) "):
            read_frames(tmp_path / "a.png", CAMERA)


@pytest.mark.parametrize(
    ("chunks", "says"),
    [
        ((png_header(10**9, 10**9), PIXELS), "the frame is 1000000000 x 1000000000 px"),
        ((png_header(), png_header(60000, 60000), PIXELS), "the frame is 60000 x 60000 px"),
        ((png_header(bits=13), PIXELS), "holds 13 bit per pixel; 8 or 16 bit"),
        ((png_header(), chunk(b"tRNS", b"\0\1"), PIXELS), "holds transparency"),
        (
            (
                png_header(),
                chunk(b"acTL", struct.pack(">II", 2, 0)),
                chunk(b"fcTL", struct.pack(">I", 0) + _CONTROL),
                PIXELS,
                chunk(b"fcTL", struct.pack(">I", 1) + _CONTROL),
                chunk(b"fdAT", struct.pack(">I", 2) + PIXELS[8:-4]),
            ),
            "an animation of 2 pictures",
        ),
    ],
    ids=["giant", "second header", "depth", "transparency", "animation"],
)
def test_what_is_no_single_grey_frame_is_refused(chunks: tuple[bytes, ...], says: str) -> None:
    """Sound check sums do not help a file whose header, or second header, is of something else."""
    with pytest.raises(FrameRefused, match=says):
        _decode(png_by_hand(*chunks))


def test_too_few_pixels_behind_sound_check_sums_are_refused() -> None:
    """Rows that are missing from a well-formed chunk are not filled up with zeros."""
    rows = zlib.decompress(PIXELS[8:-4])

    for kept in (0, 321 * 100, 321 * 119, 321 * 120 - 1):
        with pytest.raises((OSError, RuntimeError), match=r"truncated|Not enough image data"):
            _decode(png_by_hand(png_header(), chunk(b"IDAT", zlib.compress(rows[:kept]))))


def test_a_frame_to_be_turned_is_refused() -> None:
    """The orientation of an Exif chunk counts as in every other format."""
    exif = Image.Exif()
    exif[274] = 3
    data = png_by_hand(png_header(), chunk(b"eXIf", exif.tobytes().removeprefix(b"Exif\0\0")), PIXELS)

    with pytest.raises(FrameRefused, match=r"turned or mirrored for viewing \(orientation 3\)"):
        _decode(data)
    assert np.array_equal(_decode(picture(Image.fromarray(CODES), "PNG")), CODES)
