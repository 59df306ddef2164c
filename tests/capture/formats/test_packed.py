"""Headerless files give back each code in every packing, fit to the byte, and cost little to unpack."""

import re
import time
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from runner.capture.formats.packed import decode, rows_of, unpack
from runner.errors import FrameRefused
from runner.spec.files import PACKINGS, Layout
from runner.spec.model import Camera
from tests.capture.raw_scenes import write

ORDERED = [Layout(name, order) for name in PACKINGS for order in (["little", "big"] if name == "16 bit" else [""])]
PRINTED = {
    "12 bit low bits first": "BC FA DE",
    "12 bit high bits first": "AB CD EF",
    "12 bit low nibbles in the middle": "AB FC DE",
    "MIPI RAW12": "AB DE FC",
}
"""Bytes of the pixels 0xABC and 0xDEF, worked out by hand from the bit orders."""


def _camera(layout: Layout, width: int = 8, height: int = 4) -> Camera:
    return Camera(width, height, min(12, PACKINGS[layout.packing].bits), 4, 250, layout=layout)


@pytest.mark.parametrize(("packing", "printed"), PRINTED.items())
def test_two_pixels_by_hand(packing: str, printed: str) -> None:
    """Each 12 bit packing takes 0xABC and 0xDEF out of its own three bytes."""
    assert unpack(np.frombuffer(bytes.fromhex(printed), np.uint8).reshape(1, 3), Layout(packing)).tolist() == [
        [0xABC, 0xDEF]
    ]


def test_raw10_by_hand() -> None:
    """The pixels 0x3FF, 0, 0x155 and 0x2AA make FF 00 55 AA, and low bits 11, 00, 01, 10 from the right: 93."""
    rows = np.frombuffer(bytes.fromhex("FF 00 55 AA 93"), np.uint8).reshape(1, 5)

    assert unpack(rows, Layout("MIPI RAW10")).tolist() == [[0x3FF, 0, 0x155, 0x2AA]]


@given(st.sampled_from(ORDERED), st.integers(0, 9), st.integers(0, 40), st.integers(1, 3), st.integers(0, 2**32 - 1))
def test_every_code_comes_back(layout: Layout, padding: int, header: int, frames: int, seed: int) -> None:
    """Any codes, any padding, header and number of frames: what an independent writer packed is unpacked."""
    layout = replace(layout, row_padding=padding, header=header, frames_per_file=frames)
    top = 2 ** PACKINGS[layout.packing].bits
    codes = np.random.default_rng(seed).integers(0, top, (frames, 4, 8)).astype(np.uint16)

    found = decode(write(codes, layout, fill=0xA5), "a.raw", _camera(layout))

    assert np.array_equal(np.stack(found.pages), codes)
    assert all(page.flags.c_contiguous and page.dtype.isnative for page in found.pages)


def test_a_file_may_begin_at_the_bottom() -> None:
    """Where the first row is the lowest, the picture is turned; the end of the file stays where it is."""
    layout = Layout("16 bit", "little", first_row="bottom")
    codes = np.arange(32, dtype=np.uint16).reshape(4, 8)

    found = decode(write(codes, layout), "a.raw", _camera(layout))

    assert np.array_equal(found.pages[0], codes)
    assert found.stored[0][-8:].tolist() == codes[0].tolist()


@pytest.mark.parametrize("layout", ORDERED, ids=str)
def test_only_the_exact_size_passes(layout: Layout) -> None:
    """One byte less or more, or half the file, is refused, and the sentence says which sizes there are."""
    layout = replace(layout, row_padding=2, header=10)
    camera = _camera(layout)
    data = write(np.full((4, 8), 77), layout)
    assert len(data) == layout.file_bytes(8, 4)

    for wrong in (data[:-1], data + b"\0", data[: len(data) // 2], b""):
        with pytest.raises(
            FrameRefused, match=rf"holds {len(wrong)} bytes; 8 x 4 px of {re.escape(layout.packing)} fill {len(data)}"
        ):
            decode(wrong, "a.raw", camera)


def test_layouts_that_would_fit_are_named() -> None:
    """Another depth, more frames, padding or a header that explain the size exactly are told."""
    camera = Camera(160, 120, 8, 4, 250, layout=Layout("8 bit"))
    told = {
        38400: "packing: 16 bit or frames_per_file: 2 or row_padding: 160 bytes",
        28800: "12 bit packed",
        24000: "10 bit packed",
        19200 + 120 * 32: "row_padding: 32 bytes",
        19200 + 512: "header: 512 bytes",
    }
    for size, words in told.items():
        with pytest.raises(FrameRefused, match=f"it would fit .*{words}"):
            decode(bytes(size), "a.raw", camera)
    with pytest.raises(FrameRefused, match=r"the file is truncated: it holds 19000 bytes.*exactly 19200 bytes; copy"):
        decode(bytes(19000), "a.raw", camera)


def test_more_frames_than_any_test_takes_are_refused() -> None:
    """A declared thousand and one frames are refused before anything is unpacked."""
    with pytest.raises(FrameRefused, match="more than 1000 pages"):
        decode(b"", "a.raw", _camera(Layout("8 bit", frames_per_file=1001)))


def _seconds(call: object) -> float:
    best = 9.0
    for _ in range(5):
        start = time.perf_counter()
        call()  # type: ignore[operator]
        best = min(best, time.perf_counter() - start)
    return best


@pytest.mark.benchmark
@pytest.mark.parametrize("layout", ORDERED, ids=str)
def test_unpacking_is_fast(layout: Layout) -> None:
    """200 MP/s, or at most twice the time in which plain NumPy unpacks 12 bit, on a frame of 12 MP."""
    camera = _camera(layout, 4000, 3000)
    data = np.random.default_rng(1).bytes(layout.file_bytes(4000, 3000))
    (rows,) = rows_of(data, camera)
    three = np.frombuffer(data, np.uint8)[: len(data) // 3 * 3].reshape(-1, 3)

    def plain() -> None:
        x = three.astype(np.uint16)
        out = np.empty((x.shape[0], 2), np.uint16)
        out[:, 0] = x[:, 0] | (x[:, 1] & 15) << 8
        out[:, 1] = x[:, 1] >> 4 | x[:, 2] << 4

    ours, theirs = _seconds(lambda: unpack(rows, layout)), _seconds(plain)
    print(f"{layout.packing} {layout.byte_order}: {12 / ours:.0f} MP/s, {ours / theirs:.2f} of plain NumPy")

    assert 12 / ours >= 200 or ours <= 2 * theirs
