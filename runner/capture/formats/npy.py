"""NPY arrays of one frame (rows × columns) or a stack of them, either byte order, either storage order; never pickles.

References:
    NumPy Enhancement Proposal 1, "A simple file format for NumPy arrays".
"""

from io import BytesIO
from math import prod
from tokenize import TokenError

import numpy as np
from numpy.lib import format as npy

from runner.capture.formats.contract import COPY_AGAIN, Decoded, check_mono, check_pages, check_size, native, truncated
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
    if len(shape) not in {2, 3}:
        raise FrameRefused(
            f"the array has {len(shape)} axes", where=where, allowed="rows x columns, or frames x rows x columns"
        )
    check_mono(
        f"{shape[-1]} values per pixel", where, mono=len(shape) == 2 or shape[:2] != (camera.height, camera.width)
    )
    check_size(shape[-1], shape[-2], camera, where)
    check_pages(prod(shape[:-2]), where)
    announced, there = prod(shape) * dtype.itemsize, len(data) - start
    if there < announced:
        raise truncated(where, f"{announced} bytes of pixels are announced, {there} are there")
    if there > announced:
        raise FrameRefused(f"{there - announced} bytes follow the end of the array", where=where, next_step=COPY_AGAIN)
    stored = np.frombuffer(data, dtype, offset=start)
    codes = stored.reshape(shape, order="F" if columns_first else "C")
    pages = (codes,) if codes.ndim == 2 else tuple(codes)
    if not pages:
        raise FrameRefused("the stack holds no frame", where=where, next_step=COPY_AGAIN)
    return Decoded(tuple(native(page) for page in pages), {}, (stored,), shape[0] if columns_first else 0)


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
