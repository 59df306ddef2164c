"""NPY arrays come back code by code, and never run what a file brings along."""

import io
import pickle
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from runner.capture.formats import npy as reader
from runner.errors import FrameRefused
from runner.spec.model import Camera
from tests.capture.bad_frames import chart_codes, npy
from tests.capture.hand_made import npy_by_hand

CODES = chart_codes(1)
CAMERA = Camera(160, 120, 12, 64, 4095)


def _header(descr: str = "<u2", shape: str = "(120, 160)", *, columns_first: bool = False) -> str:
    return f"{{'descr': '{descr}', 'fortran_order': {columns_first}, 'shape': {shape}, }}"


def _pages(data: bytes) -> tuple[NDArray[np.generic], ...]:
    return reader.decode(data, "a.npy", CAMERA).pages


@pytest.mark.parametrize(
    ("data", "kind"),
    [
        (npy_by_hand(_header(), CODES.tobytes()), "u2"),
        (npy_by_hand(_header(), CODES.tobytes(), (2, 0)), "u2"),
        (npy_by_hand(_header(">u2"), CODES.astype(">u2").tobytes()), "u2"),
        (npy_by_hand(_header(columns_first=True), CODES.T.tobytes()), "u2"),
        (npy_by_hand(_header(">f8", columns_first=True), CODES.T.astype(">f8").tobytes()), "f8"),
        (npy_by_hand(_header("<i4"), CODES.astype("<i4").tobytes()), "i4"),
    ],
    ids=["rows", "version 2.0", "big-endian", "columns", "big-endian columns", "signed"],
)
def test_hand_made_array_gives_back_its_codes(data: bytes, kind: str) -> None:
    """Bytes put together after NEP 1 come back exactly: both byte orders, both storage orders, both versions."""
    (page,) = _pages(data)

    assert page.dtype == np.dtype(kind)
    assert page.flags.c_contiguous
    assert np.array_equal(page, CODES)


def test_a_stack_is_cut_along_its_first_axis() -> None:
    """Frame n of a stack is frame n, in either storage order."""
    stack = np.stack([chart_codes(seed) for seed in (5, 3, 4)])

    for data in (npy(stack), npy(np.asfortranarray(stack)), npy(stack.astype(">u2"))):
        assert np.array_equal(np.stack(_pages(data)), stack)


class _Bomb:
    """Leaves a file behind when it is unpickled."""

    def __init__(self, path: Path) -> None:
        self.path = path

    def __reduce__(self) -> tuple[object, ...]:
        return Path.touch, (self.path,)


def test_pickles_are_refused_and_never_run(tmp_path: Path) -> None:
    """An array of objects is refused before the code that it carries could run."""
    mark = tmp_path / "it ran"
    objects = np.full((120, 160), None, dtype=object)
    objects[0, 0] = _Bomb(mark)
    data = npy(objects, pickled=True)

    with pytest.raises(FrameRefused, match="the array holds pickled objects; whole or floating-point numbers"):
        _pages(data)

    assert not mark.exists()
    pickle.loads(pickle.dumps(_Bomb(mark)))  # noqa: S301 (the same object does leave its mark where it is loaded)
    assert mark.exists()


@pytest.mark.parametrize(
    ("data", "says"),
    [
        (npy_by_hand(_header(shape="(1000000000, 1000000000)"), b""), "the frame is 1000000000 x 1000000000 px"),
        (npy_by_hand(_header(shape="(10000000, 120, 160)"), b""), "more than 1000 pages"),
        (npy_by_hand(_header(shape="(1000, 120, 160)"), b""), "38400000 bytes of pixels are announced, 0 are there"),
        (npy_by_hand(_header(shape="(-1, 120, 160)"), CODES.tobytes()), r"claims the shape \(-1, 120, 160\)"),
        (npy_by_hand(_header(shape="(0, 120, 160)"), b""), "the stack holds no frame"),
        (npy_by_hand(_header(shape="(120, 160.0)"), CODES.tobytes()), "header cannot be read"),
        (npy_by_hand(_header("<M8[s]"), CODES.tobytes()), r"values of type datetime64\[s\]"),
        (npy_by_hand("(" * 9000, CODES.tobytes()), "header cannot be read"),
        (npy_by_hand("__import__('os').abort()", CODES.tobytes()), "header cannot be read"),
        (npy_by_hand(_header(), CODES.tobytes(), (3, 0)), "written in version 3.0 of the NPY format; version 1.0 or"),
        (npy_by_hand(_header(), CODES.tobytes() + b"\0"), "1 bytes follow the end of the array"),
    ],
    ids=["giant", "pages", "cut", "negative", "none", "fraction", "times", "nested", "code", "version", "surplus"],
)
def test_headers_that_claim_something_else_are_refused(data: bytes, says: str) -> None:
    """Whatever the header claims, the answer is a sentence, and no memory is set aside for it."""
    with pytest.raises(FrameRefused, match=says):
        _pages(data)


def test_agrees_with_the_format_library() -> None:
    """The library that defines the format loads the same array from the same bytes."""
    data = npy(np.asfortranarray(CODES.astype(">u2")))

    assert np.array_equal(_pages(data)[0], np.load(io.BytesIO(data), allow_pickle=False))
