"""FITS images come back code by code with the upper row first, and are refused where they are not whole."""

import struct
from dataclasses import replace
from io import BytesIO

import numpy as np
import pytest
from astropy.io import fits
from numpy.typing import NDArray

from runner.capture.formats import fits as reader
from runner.errors import FrameRefused
from runner.spec.files import Layout
from runner.spec.model import Camera
from tests.capture.bad_frames import chart_codes

CODES = chart_codes(1)
CAMERA = Camera(160, 120, 12, 64, 4095)
TOP = replace(CAMERA, layout=Layout(first_row="top"))
RGB = replace(TOP, colour="rgb")


def _file(data: NDArray[np.generic], extension: bool = False, **cards: object) -> bytes:
    file = BytesIO()
    unit = fits.ImageHDU(data) if extension else fits.PrimaryHDU(data)
    unit.header.update({key.replace("_", "-"): value for key, value in cards.items()})
    (fits.HDUList([fits.PrimaryHDU(), unit]) if extension else unit).writeto(file)
    return file.getvalue()


def _by_hand(codes: NDArray[np.uint16]) -> bytes:
    """Return a FITS file put together card by card (FITS Standard 4.0, 3 and 4): 16 bit big-endian, BZERO 32768."""
    cards = [("SIMPLE", "T"), ("BITPIX", "16"), ("NAXIS", "2"), ("NAXIS1", "160"), ("NAXIS2", "120")]
    cards += [("BZERO", "32768"), ("BSCALE", "1")]
    text = "".join(f"{key:<8}= {value:>20}".ljust(80) for key, value in cards) + "END".ljust(80)
    body = b"".join(struct.pack(">h", int(code) - 32768) for code in codes.ravel())
    return text.ljust(2880).encode() + body.ljust(-(-len(body) // 2880) * 2880, b"\0")


def _page(data: bytes, camera: Camera = TOP) -> NDArray[np.generic]:
    (page,) = reader.decode(data, "a.fits", camera).pages
    return page


def test_a_file_by_hand_gives_back_its_codes() -> None:
    """Unsigned 16 bit, as the standard stores them (5.2.5), keep every bit and their type."""
    found = _page(_by_hand(CODES))

    assert found.dtype == np.uint16
    assert np.array_equal(found, CODES)


@pytest.mark.parametrize("kind", ["u1", "i2", "u2", "i4", "u4", "f4", "f8"])
@pytest.mark.parametrize("extension", [False, True])
def test_every_number_type_of_the_library(kind: str, extension: bool) -> None:
    """What the format's own library writes, in the primary unit or an extension, is read code by code."""
    codes = (CODES // 16).astype(kind)

    assert np.array_equal(_page(_file(codes, extension)), codes)


def test_the_first_row_is_the_lowest_unless_someone_says_otherwise() -> None:
    """FITS counts rows upwards; ROWORDER of the file, and above it the spec, may say that it counts down."""
    assert np.array_equal(_page(_file(CODES), CAMERA), CODES[::-1])
    assert np.array_equal(_page(_file(CODES, ROWORDER="TOP-DOWN"), CAMERA), CODES)
    assert np.array_equal(_page(_file(CODES, ROWORDER="BOTTOM-UP"), CAMERA), CODES[::-1])
    assert np.array_equal(
        _page(_file(CODES, ROWORDER="TOP-DOWN"), replace(TOP, layout=Layout(first_row="bottom"))), CODES[::-1]
    )


def test_planes_are_frames_or_colours() -> None:
    """A third axis counts frames of a mono camera, or the colours of a colour camera; then a fourth counts frames."""
    stack = np.stack([CODES, CODES + 1, CODES + 2])
    pages = reader.decode(_file(stack), "a.fits", TOP).pages
    assert np.array_equal(np.stack(pages), stack)
    assert np.array_equal(_page(_file(stack), RGB), np.moveaxis(stack, 0, -1))
    both = reader.decode(_file(np.stack([stack, stack + 9])), "a.fits", RGB).pages
    assert [page.shape for page in both] == [(120, 160, 3)] * 2
    with pytest.raises(FrameRefused, match="holds one grey channel; three colour channels"):
        _page(_file(CODES), RGB)
    with pytest.raises(FrameRefused, match="the image has 4 axes; columns and rows, then frames"):
        reader.decode(_file(np.stack([stack])), "a.fits", TOP)


@pytest.mark.parametrize(
    ("data", "says"),
    [
        (_file(CODES.astype(np.int16), BSCALE=0.5), r"scales its numbers \(BSCALE 0.5, BZERO 0\); whole numbers"),
        (_file(CODES.astype(np.int16), BZERO=0.5), r"BZERO 0.5"),
        (_file(CODES[:, :150].copy()), "the frame is 150 x 120 px"),
        (_file(np.zeros(5)), "the image has 1 axes"),
    ],
    ids=["BSCALE", "BZERO", "size", "axes"],
)
def test_what_are_no_codes_is_refused(data: bytes, says: str) -> None:
    """Scaled numbers, other sizes and other shapes have their sentence."""
    with pytest.raises(FrameRefused, match=says):
        _page(data)


def test_no_image_and_compressed_images_are_refused() -> None:
    """A table, an empty file and a compressed image are no plain frame."""
    empty, packed = BytesIO(), BytesIO()
    fits.HDUList([fits.PrimaryHDU()]).writeto(empty)
    fits.HDUList([fits.PrimaryHDU(), fits.CompImageHDU(CODES.astype(np.int16))]).writeto(packed)

    with pytest.raises(FrameRefused, match="the file holds no image"):
        _page(empty.getvalue())
    with pytest.raises(FrameRefused, match="the file holds a compressed image"):
        _page(packed.getvalue())


def test_texts_name_serial_and_time() -> None:
    """What the header says of unit, time and program is kept under our names."""
    texts = reader.decode(_file(CODES, SERIAL="WS8-000007", DATE_OBS="2026-12-01T09:30:00"), "a.fits", TOP).texts

    assert (texts["Serial"], texts["DateTime"]) == ("WS8-000007", "2026-12-01T09:30:00")


def test_zeros_that_bzero_hides_are_seen() -> None:
    """A zero tail of stored numbers would be codes in mid range; it is told where decoding alone sees no fault."""
    start = 2880
    data = bytearray(_by_hand(CODES))
    data[start + CODES.nbytes - 5000 : start + CODES.nbytes] = bytes(5000)

    with pytest.raises(
        FrameRefused, match="stored numbers or more are zero, 32768 DN by BZERO: a copy still under way"
    ):
        _page(bytes(data))
