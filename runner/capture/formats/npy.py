"""NPY arrays of one frame (rows × columns, × 3 for colour) or a stack; any byte and storage order; never pickles.

References:
    NumPy Enhancement Proposal 1, "A simple file format for NumPy arrays".
"""

from io import BytesIO
from math import prod
from tokenize import TokenError

import numpy as np
from numpy.lib import format as npy

from runner.capture.formats.contract import (
    COPY_AGAIN,
    Decoded,
    check_channels,
    check_pages,
    check_size,
    native,
    samples,
    truncated,
)
from runner.errors import FrameRefused
from runner.spec.model import Camera

ENDINGS = (".npy",)
SIGNATURE = b"\x93NUMPY"


def decode(data: bytes, where: str, camera: Camera) -> Decoded:
    """Decode the array; see `Format.decode`. A stack's first axis counts its frames."""
    shape, columns_first, dtype, start = _header(data, where)
    if dtype.hasobject or dtype.kind not in "uif":
        raise FrameRefused(
            f"the array holds {'pickled objects' if dtype.hasobject else f'values of type {dtype}'}",
            where=where,
            allowed="whole or floating-point numbers",
            next_step="save the frame as an array of numbers",
        )
    if min(shape, default=0) < 0:
        raise FrameRefused(f"the array claims the shape {shape}", where=where, next_step=COPY_AGAIN)
    rank = _rank(shape, where, camera)
    check_size(shape[-rank + 1], shape[-rank], camera, where)
    check_pages(prod(shape[:-rank]), where)
    announced, there = prod(shape) * dtype.itemsize, len(data) - start
    if there < announced:
        raise truncated(where, f"{announced} bytes of pixels are announced, {there} are there")
    if there > announced:
        raise FrameRefused(f"{there - announced} bytes follow the end of the array", where=where, next_step=COPY_AGAIN)
    stored = np.frombuffer(data, dtype, offset=start)
    codes = stored.reshape(shape, order="F" if columns_first else "C")
    pages = (codes,) if codes.ndim == rank else tuple(codes)
    if not pages:
        raise FrameRefused("the stack holds no frame", where=where, next_step=COPY_AGAIN)
    return Decoded(tuple(native(page) for page in pages), {}, (stored,), shape[0] if columns_first else 0)


def _rank(shape: tuple[int, ...], where: str, camera: Camera) -> int:
    """Return the number of axes of one frame: 2, or 3 with the colours as the last."""
    rank = 2 if samples(camera) == 1 else 3
    grey = len(shape) == 2 or (len(shape) == 3 and shape[:2] != (camera.height, camera.width))
    if rank == 3 and len(shape) >= 3 and shape[-3:] == (3, camera.height, camera.width) and shape[-1] != 3:
        raise FrameRefused(
            "the array holds its three colours as planes, one behind the other",
            where=where,
            allowed="rows x columns x 3",
            next_step="save the frame with the colours as the last axis",
        )
    if len(shape) in {2, 3} and grey != (rank == 2):
        words = "one value per pixel" if grey else f"{shape[-1]} values per pixel"
        check_channels(words, where, camera, channels=1 if grey else 0)
    elif len(shape) not in {rank, rank + 1} or (rank == 3 and shape[-1] != 3):
        colours = " x 3" if rank == 3 else ""
        raise FrameRefused(
            f"the array has {len(shape)} axes" if rank == 2 else f"the array has the shape {shape}",
            where=where,
            allowed=f"rows x columns{colours}, or frames x rows x columns{colours}",
        )
    return rank


def _header(data: bytes, where: str) -> tuple[tuple[int, ...], bool, np.dtype[np.generic], int]:
    stream = BytesIO(data)
    try:
        version = npy.read_magic(stream)
        read = {(1, 0): npy.read_array_header_1_0, (2, 0): npy.read_array_header_2_0}.get(version)
        if read is None:
            raise FrameRefused(
                f"the array is written in version {version[0]}.{version[1]} of the NPY format",
                where=where,
                allowed="version 1.0 or 2.0",
                next_step="save the frame as a plain array of numbers",
            )
        shape, columns_first, dtype = read(stream)
    except (ValueError, SyntaxError, MemoryError, RecursionError, TokenError) as error:
        reason = " ".join(str(error.args[0] if error.args else error).split())[:200]
        raise FrameRefused(
            f"the array's header cannot be read ({reason})", where=where, next_step=COPY_AGAIN
        ) from error
    return shape, columns_first, dtype, stream.tell()
