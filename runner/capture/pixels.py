"""Checks on decoded codes: finite, of the camera's depth, written to the end."""

from collections.abc import Sequence

import numpy as np

from runner.capture.formats.contract import COPY_AGAIN, Decoded
from runner.capture.frame import Codes
from runner.errors import FrameRefused
from runner.spec.model import Camera

MOST_DARK_RUN = 64
"""Exact zeros in a row that a sensor with a black level never gives; padding of tiles may hide the others."""
ZERO_TAIL = 4096
"""Bytes of zeros at the end that are more than chance: the usual block of file systems and network copies."""


def check_codes(codes: Codes, where: str, camera: Camera) -> None:
    """Refuse codes that are no numbers of the camera's depth.

    Args:
        codes: Rows × columns (× 3).
        where: File, and page where there are several.
        camera: The camera.

    Raises:
        FrameRefused: NaN or infinite; too few bits; codes outside the depth; left-aligned; normalised.
    """
    top = 2**camera.bit_depth - 1
    allowed = f"codes 0 to {top} DN of a {camera.bit_depth} bit camera"
    if codes.dtype.kind == "f":
        _check_floats(codes, where, camera, allowed)
    elif codes.dtype.itemsize * 8 < camera.bit_depth:
        raise FrameRefused(
            f"the file holds {codes.dtype.itemsize * 8} bit per pixel",
            where=where,
            allowed=allowed,
            next_step="capture again in the camera's full depth",
        )
    low, high = codes.min(), codes.max()
    if low < (0 if codes.dtype.kind == "i" else -top):  # noise about a subtracted dark frame is honest
        raise FrameRefused(
            f"the lowest code is {low:.10g} DN", where=where, allowed=allowed, next_step="export unsigned codes"
        )
    if codes.dtype.kind != "f" and _left_aligned(codes, camera.bit_depth):
        raise FrameRefused(
            f"every code is a multiple of {2 ** (codes.dtype.itemsize * 8 - camera.bit_depth)}: "
            f"the {camera.bit_depth} bit stand at the upper end of {codes.dtype.itemsize * 8}",
            where=where,
            allowed=allowed,
            next_step="export the codes right-aligned",
        )
    if high > top:
        swapped = codes.dtype.kind != "f" and codes.byteswap().max() <= top
        raise FrameRefused(
            f"the highest code is {high:.10g} DN" + ("; the bytes of each pixel seem swapped" if swapped else ""),
            where=where,
            allowed=allowed,
            next_step="export the camera's own codes, or correct camera: bit_depth in the spec",
        )


def _check_floats(codes: Codes, where: str, camera: Camera, allowed: str) -> None:
    if codes.dtype.itemsize < 4:
        raise FrameRefused(
            f"the file holds {codes.dtype.itemsize * 8} bit floating-point numbers, too coarse for codes",
            where=where,
            allowed="32 or 64 bit floating-point numbers",
            next_step="export whole numbers",
        )
    lost = int(np.count_nonzero(~np.isfinite(codes)))
    if lost:
        raise FrameRefused(
            f"{lost} of {codes.size} pixels are not finite numbers",
            where=where,
            allowed=allowed,
            next_step="export the camera's own codes",
        )
    if camera.white_level > 2 and 0 < codes.max() <= 1:
        raise FrameRefused(
            f"the highest value is {codes.max():.6g}: the frame seems scaled to 0 … 1",
            where=where,
            allowed=allowed,
            next_step="export the camera's own codes",
        )


def _left_aligned(codes: Codes, bits: int) -> bool:
    """Tell whether all codes have their low bits empty; a few distinct codes (a clipped or constant frame) may."""
    spare = codes.dtype.itemsize * 8 - bits
    if spare < 2 or codes.max() < 2**spare or int(np.bitwise_or.reduce(codes, axis=None)) % 2**spare:
        return False
    return np.unique(codes).size > 8


def check_tail(decoded: Decoded, data: bytes, where: str, camera: Camera) -> None:
    """Refuse a file whose last pixels are zeros that the black level does not explain: a copy still under way.

    With a black level above zero, 4096 bytes of exact zeros are no picture. At black level zero a dark border is an
    honest reason, unless light of more than a tenth of the range falls to exact zero from one stored line to the next,
    for good: optics blur every edge over more than that.

    Args:
        decoded: What the file holds.
        data: Its bytes; compressed pixels never end in such zeros.
        where: The file.
        camera: The camera.

    Raises:
        FrameRefused: The tail is zero.
    """
    if not decoded.stored and data.endswith(bytes(ZERO_TAIL)):
        raise FrameRefused(
            f"the file ends in {len(data) - len(data.rstrip(bytes(1)))} bytes of zeros: a copy still under way",
            where=where,
            allowed=f"less than {ZERO_TAIL} bytes of zeros at the end",
            next_step=COPY_AGAIN,
        )
    stored = decoded.stored or tuple(page.ravel() for page in decoded.pages)
    run, before = _zero_run(stored, decoded.line or decoded.pages[0][0].size)
    size, total = stored[0].dtype.itemsize, sum(piece.size for piece in stored)
    padded = camera.black_level > 0 and data.endswith(bytes(ZERO_TAIL)) and run >= MOST_DARK_RUN
    if run * size < min(ZERO_TAIL, total * size) and not padded:
        return
    if camera.black_level <= 0:
        lit = camera.black_level + 0.1 * (camera.white_level - camera.black_level)
        if np.count_nonzero(before > lit) < max(3, 0.01 * before.size):
            return
    found = f"the last {run} of {total} {'pixels' if decoded.pages[0].ndim == 2 else 'values'} are zero"
    if run == total:
        found = f"every pixel is zero, below the black level of {camera.black_level:g} DN"
    raise FrameRefused(
        f"{found}: a copy still under way, or a frame that was not read out",
        where=where,
        allowed=f"less than {ZERO_TAIL} bytes of zeros at the end, unless the black level explains them",
        next_step=f"{COPY_AGAIN}; if it stays so, capture again",
    )


def _zero_run(stored: Sequence[Codes], line: int) -> tuple[int, Codes]:
    """Return the number of zero pixels at the end and the stored line before them."""
    run = 0
    for piece in reversed(stored):
        end = piece.size
        while end:
            start = max(0, end - 65536)
            lit = np.flatnonzero(piece[start:end])
            if lit.size:
                end = start + int(lit[-1]) + 1
                return run + piece.size - end, piece[max(0, end - line) : end]
            end = start
        run += piece.size
    return run, stored[0][:0]
