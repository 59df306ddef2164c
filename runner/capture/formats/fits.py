"""FITS: the primary image, or the first image extension; whole numbers shifted by BZERO; not compressed.

The first row of a FITS file is the lowest of the picture as viewers show it. Frames here have their upper row first, so
they are turned upside down, unless the file (ROWORDER = 'TOP-DOWN', common practice of cameras) or the spec
(layout: first_row: top) says that the first row is the upper one.

References:
    FITS Standard 4.0 (IAU FITS Working Group, 2018): 3.1 (blocks of 2880 bytes), 4.4.2.5 (BSCALE, BZERO), 5.2.5
    (unsigned integers).
"""

from io import BytesIO
from math import prod

import numpy as np
from astropy.io import fits

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
from runner.capture.frame import Codes
from runner.capture.pixels import MOST_DARK_RUN, ZERO_TAIL
from runner.errors import FrameRefused
from runner.spec.model import Camera

ENDINGS = (".fits", ".fit", ".fts")
_BLOCK = 2880
_TEXTS = {"SERIAL": "Serial", "CAMSN": "Serial", "DATE-OBS": "DateTime", "SOFTWARE": "Software", "COMMENT": "Comment"}


def decode(data: bytes, where: str, camera: Camera) -> Decoded:
    """Decode the image; see `Format.decode`. Planes along a third axis are frames, or the three colours."""
    if len(data) % _BLOCK:
        raise truncated(where, f"it holds {len(data)} bytes, no whole blocks of {_BLOCK}")
    with fits.open(
        BytesIO(data), memmap=False, lazy_load_hdus=False, do_not_scale_image_data=True, checksum=True
    ) as file:
        unit = next((one for one in file if one.is_image and one.header.get("NAXIS", 0) > 0), None)
        if unit is None or isinstance(unit, fits.CompImageHDU):
            raise FrameRefused(
                "the file holds no image" if unit is None else "the file holds a compressed image",
                where=where,
                allowed="a primary image or an image extension, not compressed",
                next_step="export the frame as a plain FITS image",
            )
        shift = _shift(unit.header, where)
        shape = tuple(int(unit.header[f"NAXIS{n}"]) for n in range(int(unit.header["NAXIS"]), 0, -1))
        frames = _frames(shape, where, camera)
        start = int(unit.fileinfo()["datLoc"])
        kind = np.dtype({8: ">u1", 16: ">i2", 32: ">i4", 64: ">i8", -32: ">f4", -64: ">f8"}[int(unit.header["BITPIX"])])
        texts = {name: str(unit.header[key]).strip() for key, name in _TEXTS.items() if key in unit.header}
        order = str(unit.header.get("ROWORDER", "")).upper()
    if start + prod(shape) * kind.itemsize > len(data):
        raise truncated(
            where, f"{prod(shape) * kind.itemsize} bytes of pixels are announced, {len(data) - start} there"
        )
    stored = np.frombuffer(data, kind, prod(shape), start)
    if shift:
        _check_end(stored, data, shift, where)
    first_row = camera.layout.first_row or ("top" if order == "TOP-DOWN" else "bottom")
    codes = _shifted(native(stored), shift).reshape(frames, *shape[-2:] if samples(camera) == 1 else shape[-3:])
    pages = tuple(_upright(page, first_row, camera) for page in codes)
    return Decoded(pages, texts, (stored,), shape[-1])


def _shift(header: fits.Header, where: str) -> int:
    """Return BZERO; refuse scales that make other numbers of codes."""
    scale, zero = float(header.get("BSCALE", 1)), float(header.get("BZERO", 0))
    if scale != 1 or zero != int(zero) or (zero and int(header["BITPIX"]) < 0):
        raise FrameRefused(
            f"the file scales its numbers (BSCALE {scale:g}, BZERO {zero:g})",
            where=where,
            allowed="whole numbers, shifted by a whole BZERO at most",
            next_step="export the camera's own codes",
        )
    return int(zero)


def _frames(shape: tuple[int, ...], where: str, camera: Camera) -> int:
    """Return how many frames an image holds, after checks of its axes."""
    planes = prod(shape[:-2])
    if len(shape) < 2 or len(shape) > (3 if samples(camera) == 1 else 4):
        raise FrameRefused(
            f"the image has {len(shape)} axes",
            where=where,
            allowed="columns and rows, then frames" if samples(camera) == 1 else "columns, rows, three colours, frames",
            next_step="export each frame as a file of its own",
        )
    check_size(shape[-1], shape[-2], camera, where)
    if samples(camera) == 3:
        words = "one grey channel" if planes == 1 else f"{planes} planes"
        check_channels(words, where, camera, channels=3 if len(shape) > 2 and shape[-3] == 3 else 0)
    frames = planes // samples(camera)
    check_pages(frames, where, 8 * camera.width * camera.height)
    if not frames:
        raise FrameRefused("the image holds no frame", where=where, next_step=COPY_AGAIN)
    return frames


def _check_end(stored: Codes, data: bytes, shift: int, where: str) -> None:
    """Refuse stored zeros at the end: with a BZERO they would be codes in the middle of the range."""
    lit = np.flatnonzero(stored[-ZERO_TAIL:])
    run = min(stored.size, ZERO_TAIL) - 1 - (int(lit[-1]) if lit.size else -1)
    padded = run >= MOST_DARK_RUN and data.endswith(bytes(ZERO_TAIL))  # the last block is filled up with zeros
    if run * stored.itemsize >= ZERO_TAIL or padded:
        raise FrameRefused(
            f"the last {run} stored numbers or more are zero, {shift} DN by BZERO: a copy still under way",
            where=where,
            next_step=COPY_AGAIN,
        )


def _shifted(stored: Codes, shift: int) -> Codes:
    """Return codes of the smallest type that holds them: 16 bit shifted by 32768 are unsigned 16 bit."""
    if not shift:
        return stored
    bits = 8 * stored.dtype.itemsize
    if shift == 2 ** (bits - 1) and stored.dtype.kind == "i":
        return np.asarray(stored.view(f"u{stored.dtype.itemsize}") ^ np.array(shift, f"u{stored.dtype.itemsize}"))
    return np.asarray(stored.astype(np.int64) + shift)


def _upright(page: Codes, first_row: str, camera: Camera) -> Codes:
    if samples(camera) == 3:
        page = np.moveaxis(page, 0, -1)
    return np.ascontiguousarray(page[::-1] if first_row == "bottom" else page)
