"""TIFF frames come back code by code, whoever wrote them and whoever else reads them."""

import io
import zlib
from pathlib import Path
from typing import Any

import imagecodecs
import numpy as np
import pytest
from numpy.typing import NDArray
from PIL import Image

from runner.capture.formats import tiff as reader
from runner.capture.readers import read_frames
from runner.errors import FrameRefused
from runner.spec.model import Camera
from tests.capture.bad_frames import chart_codes, tiff, zero_tail
from tests.capture.hand_made import packed_12_bit, tiff_by_hand

CODES = chart_codes(1)
CAMERA = Camera(160, 120, 12, 64, 4095)
TILES = {322: 64, 323: 48}


def _pages(data: bytes, camera: Camera = CAMERA) -> tuple[NDArray[np.generic], ...]:
    return reader.decode(data, "a.tif", camera).pages


def _tiles(codes: NDArray[np.uint16]) -> list[bytes]:
    """Cut codes into tiles of 64 x 48 px, those at the right and lower border filled up with 9999."""
    filled = np.pad(codes, ((0, 24), (0, 32)), constant_values=9999)
    return [filled[y : y + 48, x : x + 64].tobytes() for y in range(0, 120, 48) for x in range(0, 160, 64)]


HAND_MADE: dict[str, bytes] = {
    "one strip": tiff_by_hand([CODES.tobytes()]),
    "strips": tiff_by_hand([CODES[y : y + 50].tobytes() for y in (0, 50, 100)], tags={278: 50}),
    "last strip filled up": tiff_by_hand(
        [CODES[:100].tobytes(), CODES[100:].tobytes() + bytes(25600)], tags={278: 100}
    ),
    "big-endian": tiff_by_hand([CODES.astype(">u2").tobytes()], order=">"),
    "BigTIFF": tiff_by_hand([CODES.tobytes()], big=True),
    "BigTIFF, big-endian": tiff_by_hand([CODES.astype(">u2").tobytes()], order=">", big=True),
    "tiles": tiff_by_hand(_tiles(CODES), tags=TILES),
    "Deflate": tiff_by_hand([zlib.compress(CODES.tobytes())], tags={259: 8}),
    "Deflate of tiles": tiff_by_hand([zlib.compress(tile) for tile in _tiles(CODES)], tags={**TILES, 259: 8}),
    "LZW": tiff_by_hand([bytes(imagecodecs.lzw_encode(CODES.tobytes()))], tags={259: 5}),
    "differences": tiff_by_hand(
        [zlib.compress(np.diff(CODES, axis=1, prepend=CODES[:, :1] * 0).tobytes())], tags={259: 8, 317: 2}
    ),
    "packed 12 bit": tiff_by_hand([packed_12_bit(CODES)], bits=12),
    "packed 12 bit, big-endian": tiff_by_hand([packed_12_bit(CODES)], bits=12, order=">"),
}


@pytest.mark.parametrize("name", HAND_MADE)
def test_hand_made_file_gives_back_its_codes(name: str) -> None:
    """Bytes put together after TIFF 6.0 come back exactly: strips, tiles, orders, compressions, predictor, packing."""
    (page,) = _pages(HAND_MADE[name])

    assert page.dtype == np.uint16
    assert np.array_equal(page, CODES)


def test_packed_rows_start_on_whole_bytes() -> None:
    """Packed rows of an odd number of pixels are filled up to a byte (TIFF 6.0, section 3, Compression = 1)."""
    odd = CODES[:, :159]

    (page,) = _pages(tiff_by_hand([packed_12_bit(odd)], size=(159, 120), bits=12), Camera(159, 120, 12, 64, 4095))

    assert np.array_equal(page, odd)


@pytest.mark.parametrize(
    "options",
    [
        {},
        {"byteorder": ">"},
        {"compression": "zlib"},
        {"compression": "zlib", "predictor": True},
        {"compression": "lzw", "rowsperstrip": 16},
        {"compression": "packbits"},
        {"tile": (64, 64)},
        {"tile": (64, 64), "compression": "lzw", "byteorder": ">"},
    ],
    ids=str,
)
def test_an_independent_reader_sees_the_same_codes(options: dict[str, Any]) -> None:
    """Pillow, which shares no decoder with this one, reads the same codes from the same bytes."""
    data = tiff(CODES, **options)
    with Image.open(io.BytesIO(data)) as picture:
        theirs = np.asarray(picture)

    (ours,) = _pages(data)

    assert np.array_equal(ours, theirs)
    assert np.array_equal(ours, CODES)


def test_floats_are_kept_to_the_last_bit() -> None:
    """Fractions of a code, and noise below a subtracted dark frame, come back unrounded; Pillow agrees."""
    values = (CODES.astype(np.float32) - 64) * np.float32(0.37) - 200
    data = tiff(values)
    with Image.open(io.BytesIO(data)) as picture:
        theirs = np.asarray(picture)

    (ours,) = _pages(data)

    assert values.min() < 0
    assert ours.dtype == np.float32
    assert np.array_equal(ours, values)
    assert np.array_equal(ours, theirs)


def test_pages_come_in_the_order_of_the_file() -> None:
    """The second page is the second frame, in OME files too; a stack is not averaged and not mixed up."""
    stack = np.stack([chart_codes(seed) for seed in (5, 3, 4)])

    for data in (tiff(stack), tiff(stack, ome=True, metadata={"axes": "TYX"}), tiff(stack, compression="zlib")):
        assert np.array_equal(np.stack(_pages(data)), stack)


def test_depth_that_the_bytes_deny_is_refused() -> None:
    """12 bit kept in 16 but announced as packed would be another picture; as many bytes must be there as are told."""
    with pytest.raises(FrameRefused, match=r"160 x 120 px of 12 bit fill 28800 bytes, the file holds 38400; .*depth"):
        _pages(tiff_by_hand([CODES.tobytes()], bits=12))
    with pytest.raises(FrameRefused, match=r"packs 12 bit per pixel and compresses them"):
        _pages(tiff_by_hand([zlib.compress(CODES.tobytes())], bits=12, tags={259: 8}))
    with pytest.raises(FrameRefused, match=r"truncated: 19200 px are announced, 14400 are there"):
        _pages(tiff_by_hand([packed_12_bit(CODES)]))


def test_differences_without_compression_are_refused() -> None:
    """A predictor without compression is undone by some readers and passed over by others: no evidence."""
    with pytest.raises(FrameRefused, match="differences of pixels without compression, which readers take in two ways"):
        _pages(tiff_by_hand([CODES.tobytes()], tags={317: 2}))


def test_zero_tail_of_tiles_counts_the_pixels_of_the_picture(tmp_path: Path) -> None:
    """4096 zero bytes are the last 32 lines of a tile of 64 x 48 px; 8 of them show, 32 px wide, at the border."""
    path = tmp_path / "a.tif"
    path.write_bytes(zero_tail(tiff(CODES, tile=(48, 64)), 4096))

    with pytest.raises(FrameRefused, match="the last 256 of 19200 pixels are zero"):
        read_frames(path, CAMERA)


@pytest.mark.parametrize("tags", [{322: 0, 323: 0}, {322: 65536, 323: 65536, 259: 8}, {278: 0}], ids=str)
def test_pieces_of_impossible_size_are_refused(tags: dict[int, int]) -> None:
    """Tiles without pixels, or of gigabytes, are refused before anything is set aside for them."""
    with pytest.raises(FrameRefused, match=r"cuts a frame of 160 x 120 px into pieces of \d+ x \d+ px"):
        _pages(tiff_by_hand([zlib.compress(CODES.tobytes())], tags=tags))


@pytest.mark.parametrize(
    ("text", "promised"),
    [
        ("ImageJ=1.54f\nimages=3\nslices=3\n", 3),
        ('{"shape": [2, 120, 160]}', 2),
        ("ImageJ=1.54f\nimages=1\n", 1),
        ("images=3, said in passing", 1),
    ],
)
def test_a_description_cannot_promise_more_frames(text: str, promised: int) -> None:
    """A stack whose description counts more frames than there are pages has lost some; other texts promise nothing."""
    data = tiff(CODES, description=text)

    if promised == 1:
        assert len(_pages(data)) == 1
    else:
        with pytest.raises(FrameRefused, match=f"describes {promised} frames, 1 can be found"):
            _pages(data)


def test_a_thousand_pages_that_share_one_strip_are_refused(tmp_path: Path) -> None:
    """A small file that unpacks to many gigabytes is told by its sums, not by running out of memory."""
    strip = zlib.compress(bytes(4000 * 3000 * 2), 9)
    path = tmp_path / "a.tif"
    path.write_bytes(tiff_by_hand([strip], pages=999, size=(4000, 3000), tags={259: 8}))

    with pytest.raises(FrameRefused, match=r"unpacks to 23976000000 bytes of pixels; at most 4294967296"):
        read_frames(path, Camera(4000, 3000, 12, 64, 4095))
