"""HDF5 datasets come back code by code, however they are stored, and are refused where they are not whole."""

from dataclasses import replace
from io import BytesIO
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from numpy.typing import NDArray

from runner.capture.formats import hdf5 as reader
from runner.capture.pixels import check_tail
from runner.errors import FrameRefused
from runner.spec.files import Layout
from runner.spec.model import Camera
from tests.capture.bad_frames import chart_codes
from tests.capture.bad_frames_colour import as_hdf5

CODES = chart_codes(1)
STACK = np.stack([chart_codes(seed) for seed in (1, 2, 3)])
CAMERA = Camera(160, 120, 12, 64, 4095)
RGB = replace(CAMERA, colour="rgb")


def _pages(data: bytes, camera: Camera = CAMERA) -> NDArray[np.generic]:
    return np.stack(reader.decode(data, "a.h5", camera).pages)


@pytest.mark.parametrize(
    "options",
    [
        {},
        {"chunks": (1, 32, 48)},
        {"compression": "gzip"},
        {"compression": "lzf", "shuffle": True},
        {"fletcher32": True},
    ],
    ids=str,
)
@pytest.mark.parametrize("kind", ["<u2", ">u2", "i4", "f4"])
def test_every_storage_gives_back_the_codes(options: dict[str, Any], kind: str) -> None:
    """Whole, in chunks, compressed or with check sums; either byte order; a stack's first axis counts its frames."""
    found = _pages(as_hdf5(STACK.astype(kind), **options))

    assert np.array_equal(found, STACK)
    assert found.dtype.isnative


def test_the_dataset_is_named_or_the_only_one() -> None:
    """A path that is not there, or none among several, is told with those that are."""
    file = BytesIO()
    with h5py.File(file, "w") as written:
        written["entry/frames"], written["entry/dark"] = CODES, CODES // 2
    data = file.getvalue()

    assert np.array_equal(_pages(data, replace(CAMERA, layout=Layout(dataset="entry/dark")))[0], CODES // 2)
    with pytest.raises(FrameRefused, match="holds 2 datasets; datasets in it: entry/dark, entry/frames; name one"):
        _pages(data)
    with pytest.raises(FrameRefused, match="holds no dataset 'frames'; datasets in it: entry/dark"):
        _pages(data, replace(CAMERA, layout=Layout(dataset="frames")))
    assert np.array_equal(_pages(as_hdf5(CODES), replace(CAMERA, layout=Layout(first_row="bottom")))[0], CODES[::-1])


def test_colours_are_the_last_axis() -> None:
    """Rows x columns x 3 for a colour camera, and a stack of them; one for the other is refused."""
    colours = np.stack([CODES, CODES // 2, CODES // 3], axis=-1)
    assert np.array_equal(_pages(as_hdf5(colours), RGB)[0], colours)
    assert _pages(as_hdf5(np.stack([colours] * 2)), RGB).shape == (2, 120, 160, 3)
    with pytest.raises(FrameRefused, match="holds one value per pixel; three colour channels"):
        _pages(as_hdf5(CODES), RGB)
    with pytest.raises(FrameRefused, match="holds 3 values per pixel; one grey channel"):
        _pages(as_hdf5(colours))


def test_pieces_that_were_never_written_are_lost(tmp_path: Path) -> None:
    """HDF5 fills what was never written with zeros; here it is a lost piece of the frame."""
    for name, options in (("chunks", {"chunks": (40, 160)}), ("whole", {})):
        with h5py.File(tmp_path / name, "w") as written:
            dataset = written.create_dataset("a", (120, 160), "u2", **options)
            if options:
                dataset[:40] = CODES[:40]
        with pytest.raises(
            FrameRefused, match=r"truncated: (1 of 3 pieces of the dataset were|the dataset was never) written"
        ):
            _pages((tmp_path / name).read_bytes())


def test_the_end_of_the_file_counts_not_that_of_the_picture() -> None:
    """Zeros in the chunk that lies last in the file are a zero tail, wherever in the picture it stands."""
    codes = CODES.copy()
    data = as_hdf5(codes, chunks=(120, 40))
    decoded = reader.decode(data, "a.h5", CAMERA)
    assert [piece.size for piece in decoded.stored] == [4800] * 4
    codes[:, 120:] = 0

    with pytest.raises(FrameRefused, match="the last 4800 of 19200 pixels are zero"):
        check_tail(reader.decode(as_hdf5(codes, chunks=(120, 40)), "a.h5", CAMERA), b"x", "a.h5", CAMERA)


@pytest.mark.parametrize(
    ("codes", "options", "says"),
    [
        (CODES.astype(complex), {}, "holds values of type complex128"),
        (CODES.ravel(), {}, r"has the shape \(19200,\); rows x columns, or a stack"),
        (CODES[:, :99], {}, "the frame is 99 x 120 px"),
        (
            CODES.astype("f4"),
            {"scaleoffset": 1, "chunks": (120, 160)},
            "compressed by HDF5 filter 6, which is not known",
        ),
    ],
    ids=["complex", "axes", "size", "lossy"],
)
def test_what_are_no_frames_is_refused(codes: NDArray[np.generic], options: dict[str, Any], says: str) -> None:
    """Other types, shapes, sizes and lossy filters have their sentence."""
    with pytest.raises(FrameRefused, match=says):
        _pages(as_hdf5(codes, **options))


def test_links_out_of_the_file_are_not_followed(tmp_path: Path) -> None:
    """Pixels that lie in another file are no part of the bytes whose digest is kept."""
    with h5py.File(tmp_path / "other.h5", "w") as other:
        other["a"] = CODES
    linked, mapped = BytesIO(), BytesIO()
    with h5py.File(linked, "w") as written:
        written["a"] = h5py.ExternalLink(str(tmp_path / "other.h5"), "a")
    with h5py.File(mapped, "w") as written:
        layout = h5py.VirtualLayout((120, 160), "u2")
        layout[...] = h5py.VirtualSource(str(tmp_path / "other.h5"), "a", (120, 160))
        written.create_virtual_dataset("a", layout)

    with pytest.raises(FrameRefused, match="the file holds 0 datasets; datasets in it: none"):
        _pages(linked.getvalue())
    with pytest.raises(FrameRefused, match="the dataset holds pixels in other files"):
        _pages(mapped.getvalue())
