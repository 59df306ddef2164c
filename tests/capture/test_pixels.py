"""Codes that no such camera gives, and ends of files that were never written, are told; honest frames pass."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from runner.capture.formats.contract import Decoded
from runner.capture.pixels import check_codes, check_tail
from runner.errors import FrameRefused
from runner.spec.model import Camera
from tests.capture.bad_frames import chart_codes

CAMERA = Camera(160, 120, 12, 64, 4095)
CODES = chart_codes(1)


def _refused(codes: NDArray[np.generic], says: str, camera: Camera = CAMERA) -> None:
    with pytest.raises(FrameRefused, match=says):
        check_codes(codes, "a.tif", camera)


@pytest.mark.parametrize("bits", range(8, 17))
def test_a_cameras_own_codes_pass_and_one_more_does_not(bits: int) -> None:
    """Codes 0 to 2^bits - 1 are the camera's, in every type that holds them; 2^bits is not (whatever the container)."""
    camera, top = replace(CAMERA, bit_depth=bits), 2**bits - 1
    codes = np.linspace(0, top, 160 * 120).round().reshape(120, 160)
    for kind in ("u2", "u4", "i4", "f4", "f8", *(["u1"] if bits == 8 else [])):
        check_codes(codes.astype(kind), "a.tif", camera)
    over = codes + (codes == top)

    _refused(
        over.astype("u4"), rf"the highest code is {2**bits} DN; codes 0 to {top} DN of a {bits} bit camera", camera
    )
    _refused(over.astype("f4"), rf"the highest code is {2**bits} DN", camera)


def test_left_aligned_codes_are_told_from_pictures_that_look_so() -> None:
    """12 bit at the upper end of 16 are refused; constant, clipped or coarse frames of few codes are not."""
    _refused((CODES // 2 * 16).astype(np.uint16), "every code is a multiple of 16: the 12 bit stand at the upper end")
    for honest in (np.full((120, 160), 4080), np.where(CODES > 1700, 4080, 64), CODES // 512 * 512, CODES * 0):
        check_codes(honest.astype(np.uint16), "a.tif", CAMERA)


def test_too_few_bits_are_refused() -> None:
    """A 12 bit camera's frame in 8 bit has lost its last four, whatever the codes are."""
    _refused(CODES.astype(np.uint8), "holds 8 bit per pixel; codes 0 to 4095 DN.*full depth")


def test_swapped_bytes_are_named() -> None:
    """Where turning each pixel's bytes round gives the camera's codes, the sentence says so; elsewhere it does not."""
    _refused(CODES.byteswap(), "the bytes of each pixel seem swapped")
    with pytest.raises(FrameRefused, match=r"the highest code is 65535 DN; codes 0 to"):
        check_codes(np.where(CODES > 1700, 65535, CODES).astype(np.uint16), "a.tif", CAMERA)


@pytest.mark.parametrize("lost", [np.nan, np.inf, -np.inf])
def test_a_single_value_that_is_no_number_is_found(lost: float) -> None:
    """One pixel anywhere that is not finite makes the frame no evidence, and is counted."""
    for place in ((0, 0), (119, 159), (60, 80)):
        codes = CODES.astype(np.float32)
        codes[place] = lost
        _refused(codes, "1 of 19200 pixels are not finite numbers")


def test_floats_on_another_scale_are_refused() -> None:
    """Frames scaled to 1, half precision, and values far below zero are refused; a subtracted dark frame is not."""
    _refused((CODES / 4095).astype(np.float32), "seems scaled to 0 … 1")
    _refused(CODES.astype(np.float16), "16 bit floating-point numbers, too coarse")
    _refused(-1e30 * CODES.astype(np.float64), "the lowest code is -")
    check_codes((CODES - 1700.0).astype(np.float32), "a.tif", CAMERA)


def _tail(zeros: int, kind: str, black: float) -> str:
    """Return the sentence about a frame whose last pixels are zero, or nothing if it passes."""
    codes = np.full(160 * 120, 900, kind)
    codes[codes.size - zeros :] = 0
    decoded = Decoded((codes.reshape(120, 160),), {}, (codes,))
    try:
        check_tail(decoded, codes.tobytes(), "a.tif", replace(CAMERA, black_level=black))
    except FrameRefused as error:
        return str(error)
    return ""


@given(st.integers(0, 160 * 120), st.sampled_from(["u2", "u4", "f4", "f8"]))
def test_a_zero_tail_is_refused_from_4096_bytes_on(zeros: int, kind: str) -> None:
    """Above a black level exactly the tails of 4096 bytes and more are refused, with their length in pixels."""
    sentence = _tail(zeros, kind, black=64)

    assert bool(sentence) == (zeros * np.dtype(kind).itemsize >= 4096)
    assert not sentence or (f"last {zeros} of 19200 pixels" if zeros < 19200 else "every pixel is zero") in sentence


def test_black_level_zero_explains_darkness_but_no_cliff() -> None:
    """At black level zero a dark frame passes; full light that ends in exact zeros at one line does not."""
    assert not _tail(19200, "u2", black=0)
    assert "the last 8000 of 19200 pixels are zero" in _tail(8000, "u2", black=0)


def test_the_order_of_the_file_counts_not_that_of_the_picture() -> None:
    """Zeros at the picture's end that lie in the middle of the file are no tail, and the other way round."""
    codes = np.full((120, 160), 900, np.uint16)
    codes[-20:] = 0
    upside_down = Decoded((codes,), {}, (codes[60:].ravel(), codes[:60].ravel()))
    cut = Decoded((codes[::-1],), {}, (codes[:60].ravel(), codes[60:].ravel()))

    check_tail(upside_down, b"x", "a.tif", CAMERA)
    with pytest.raises(FrameRefused, match="the last 3200 of 19200 pixels are zero"):
        check_tail(cut, b"x", "a.tif", CAMERA)
