"""The chain of pages is walked strictly: what it points to lies in the file, or the file is refused."""

import io
import struct

import numpy as np
import pytest
import tifffile

from runner.capture.formats.ifd import read_directories
from runner.errors import FrameRefused
from tests.capture.bad_frames import chart_codes, tiff
from tests.capture.hand_made import tiff_by_hand

CODES = chart_codes(1)
FORMS = [(order, big) for order in "<>" for big in (False, True)]


@pytest.mark.parametrize(("order", "big"), FORMS)
def test_hand_made_directory_is_read(order: str, big: bool) -> None:
    """Both byte orders and both widths of offset give the numbers that were written."""
    pieces = [bytes([1]) * 100, bytes([2]) * 200, bytes([3]) * 50]

    first, second = read_directories(tiff_by_hand(pieces, pages=2, order=order, big=big), "a.tif")

    head = 16 if big else 8
    assert first.segments == ((head, 100), (head + 100, 200), (head + 300, 50))
    assert first == second
    assert (first.first(256, 0), first.first(257, 0), first.first(258, 0)) == (160, 120, 16)
    assert first.first(317, 1) == 1


def test_agrees_with_an_independent_walker() -> None:
    """Offsets and lengths of every piece are those that the format library finds."""
    for options in ({"rowsperstrip": 7}, {"tile": (64, 64)}, {"compression": "lzw", "rowsperstrip": 16}):
        data = tiff(np.stack([CODES, CODES + 1]), **options)
        with tifffile.TiffFile(io.BytesIO(data)) as file:
            theirs = [tuple(zip(page.dataoffsets, page.databytecounts, strict=True)) for page in file.pages]

        assert [page.segments for page in read_directories(data, "a.tif")] == theirs


@pytest.mark.parametrize(("order", "big"), FORMS)
def test_every_cut_is_refused(order: str, big: bool) -> None:
    """A chain that ends anywhere inside its last directory is told as truncated, at every single byte."""
    data = tiff_by_hand([b"x" * 40], pages=2, order=order, big=big)

    for size in range(4, len(data)):
        with pytest.raises(FrameRefused, match=r"truncated: (it points to|tag \d+ ends at|its picture goes to) byte"):
            read_directories(data[:size], "a.tif")


def test_circles_are_refused() -> None:
    """Pages that point back at each other end the walk, whichever page closes the circle."""
    data = bytearray(tiff_by_hand([b"x" * 40], pages=3))
    (first,) = struct.unpack_from("<I", data, 4)
    length = (len(data) - first) // 3
    for closes in range(3):
        circle = bytearray(data)
        struct.pack_into("<I", circle, len(data) - 4, first + closes * length)
        with pytest.raises(FrameRefused, match="pages point back at each other"):
            read_directories(bytes(circle), "a.tif")


@pytest.mark.parametrize(
    ("tags", "says"),
    [
        ({273: 10**9}, "its picture goes to byte 1000000040, the file ends at byte"),
        ({273: 0}, "a piece of the picture was never written"),
        ({279: 0}, "a piece of the picture was never written"),
    ],
    ids=str,
)
def test_pieces_outside_the_file_are_refused(tags: dict[int, int], says: str) -> None:
    """A strip must be written, have a length, and lie inside the file."""
    data = bytearray(tiff_by_hand([b"x" * 40]))
    (first,) = struct.unpack_from("<I", data, 4)
    for entry in range(first + 2, len(data) - 4, 12):
        (tag,) = struct.unpack_from("<H", data, entry)
        if tag in tags:
            struct.pack_into("<I", data, entry + 8, tags[tag])

    with pytest.raises(FrameRefused, match=says):
        read_directories(bytes(data), "a.tif")


def test_claims_of_size_cost_nothing() -> None:
    """A tag of 2^60 values and a page of 10^9 tags are refused for what they claim; types of the future pass."""
    data = tiff_by_hand([b"x" * 40], big=True)
    (first,) = struct.unpack_from("<Q", data, 8)
    giant, many, odd = bytearray(data), bytearray(data), bytearray(data)
    struct.pack_into("<Q", giant, first + 8 + 4, 2**60)
    struct.pack_into("<Q", many, first, 10**9)
    struct.pack_into("<H", odd, first + 8 + 2, 4711)

    with pytest.raises(FrameRefused, match=r"tag 256 ends at byte \d{19}"):
        read_directories(bytes(giant), "a.tif")
    with pytest.raises(FrameRefused, match="a page claims 1000000000 tags"):
        read_directories(bytes(many), "a.tif")
    assert 256 not in read_directories(bytes(odd), "a.tif")[0].integers
