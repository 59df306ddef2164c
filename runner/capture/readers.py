"""Reads a frame file once: the digest is of exactly the bytes that were decoded; what is not whole is refused."""

import hashlib
import os
import warnings
from importlib import import_module
from pathlib import Path
from typing import cast

import numpy as np

from runner.capture.formats import packed
from runner.capture.formats.contract import COPY_AGAIN, MAX_BYTES, Format, check_size, read_notes, samples
from runner.capture.frame import Codes, Frame
from runner.capture.pixels import ZERO_TAIL, check_codes, check_tail
from runner.capture.plausible import check_layout, check_mosaic
from runner.errors import FrameRefused, UsageError
from runner.spec.model import Camera

_FORMATS = (
    (b"II*\0", "tiff"),
    (b"MM\0*", "tiff"),
    (b"II+\0", "tiff"),
    (b"MM\0+", "tiff"),
    (b"\x89PNG\r\n\x1a\n", "png"),
    (b"\xff\xd8\xff", "jpeg"),
    (b"\x93NUMPY", "npy"),
    (b"SIMPLE  =", "fits"),
    (b"\x89HDF\r\n\x1a\n", "hdf5"),
)
"""First bytes of the formats that are read; each name is a module of `runner.capture.formats`."""
_ENDINGS = frozenset(
    {".tif", ".tiff", ".btf", ".tf8", ".png", ".jpg", ".jpeg", ".npy", ".fits", ".fit", ".fts", ".h5", ".hdf5", ".hdf"}
)
"""Endings that belong to a format (a test holds them against the modules' own)."""
_STRANGERS = (
    (b"BM", "a BMP picture"),
    (b"GIF8", "a GIF picture"),
    (b"PK\x03\x04", "a ZIP archive (or NPZ)"),
    (b"\x1f\x8b", "a gzip archive"),
    (b"%PDF", "a PDF document"),
    (b"\x80\x04", "a Python pickle"),
    (b"\x80\x05", "a Python pickle"),
    (b"\0\0\0\x0cjP  ", "a JPEG 2000 picture"),
    (b"RIFF", "a RIFF file (WebP, AVI)"),
    (b"<", "a text with markup (HTML, XML)"),
)
_HEADERLESS = cast("Format", packed)
READ = (
    "TIFF, PNG, NPY, FITS, HDF5, and JPEG where the product delivers it; headerless files where the spec has a layout"
)
_EXTRAS = {"fits": "astropy", "hdf5": "h5py"}
"""Formats whose package is installed only where it is asked for."""


def read_frames(path: Path, camera: Camera, *, name: str | None = None, compare: bool = True) -> tuple[Frame, ...]:
    """Read every frame of a file.

    Args:
        path: The file.
        camera: What the spec says about the camera: size, depth, levels.
        name: What the frames and refusals call it; the file's own name if None.
        compare: Digest the pixels too, so that frames can be compared with each other; half of the work of reading.

    Returns:
        One frame per page, in the order of the file; the arrays are read-only.

    Raises:
        FrameRefused: The file cannot be evidence; says where, what was found, what is allowed and what to do.
        UsageError: The package that reads this format is not installed.
    """
    where = name or path.name
    data = _bytes(path, where)
    module = _format(data, where, path.suffix.lower(), camera)
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error", UserWarning)  # what a decoder warns of is a file that is not whole
            decoded = module.decode(data, where, camera)
    except UsageError:
        raise
    except FrameRefused as error:
        raise _unfinished(data, where) or error from error
    except Exception as error:
        # Decoders fail in many ways on broken files; whatever they raise, this file is no evidence.
        reason = " ".join(str(error).split())[:200] or type(error).__name__
        plain = FrameRefused(f"the file cannot be decoded ({reason})", where=where, next_step=COPY_AGAIN)
        raise _unfinished(data, where) or plain from error
    many = len(decoded.pages) > 1
    if module is _HEADERLESS:
        check_tail(decoded, data, where, camera)  # first, for zeros would look like a wrong layout
    for number, codes in enumerate(decoded.pages):
        if codes.ndim < 2 or codes.shape[2:] != ((3,) if samples(camera) == 3 else ()):
            raise FrameRefused("a page is no plain picture", where=where, next_step=COPY_AGAIN)
        check_size(codes.shape[1], codes.shape[0], camera, where)
        page = f"{where}, page {number + 1}" if many else where
        if module is _HEADERLESS:
            check_layout(data, number, codes, page, camera)
        check_codes(codes, page, camera)
        check_mosaic(codes, page, camera)
    check_tail(decoded, data, where, camera)
    digest, notes = hashlib.sha256(data).hexdigest(), read_notes(decoded.texts)
    return tuple(
        Frame(
            where,
            digest,
            _pixel_digest(codes) if compare else "",
            _sealed(codes),
            number if many else None,
            {"page": str(number)} if many else {},
            notes.metadata,
            notes.simulated,
        )
        for number, codes in enumerate(decoded.pages)
    )


def _unfinished(data: bytes, where: str) -> FrameRefused | None:
    """Return the likeliest reason why a file whose end is still zero cannot be decoded."""
    zeros = len(data) - len(data.rstrip(b"\0"))
    if zeros < ZERO_TAIL:
        return None
    found = f"its last {zeros} bytes are zero, and it cannot be decoded: a copy still under way"
    return FrameRefused(found, where=where, next_step=COPY_AGAIN)


def _bytes(path: Path, where: str) -> bytes:
    """Read the whole file once."""
    try:
        if path.is_dir():
            raise FrameRefused("it is a folder", where=where, allowed="a frame file", next_step="check the pattern")
        if path.exists() and not path.is_file():
            raise FrameRefused("it is a device or a pipe", where=where, allowed="a frame file")
        with path.open("rb") as stream:
            # Not `read(MAX_BYTES + 1)`: that sets aside all of those bytes first, which costs more than reading.
            size = os.fstat(stream.fileno()).st_size
            data = stream.read() if size <= MAX_BYTES else b""
    except OSError as error:
        reason = error.strerror or type(error).__name__
        raise FrameRefused(
            f"the file cannot be read ({reason.lower()})", where=where, next_step="check that it is there and readable"
        ) from error
    if max(size, len(data)) > MAX_BYTES:
        raise FrameRefused(
            f"the file is larger than {MAX_BYTES} bytes", where=where, next_step="split the stack into several files"
        )
    if not data:
        raise FrameRefused("the file is empty", where=where, next_step=COPY_AGAIN)
    return data


def _format(data: bytes, where: str, ending: str, camera: Camera) -> Format:
    """Return the module for what the file holds; its ending must say the same.

    Where the spec states a packing, a file whose ending no format claims is headerless, whatever its first bytes are,
    if its size fits.
    """
    if camera.layout.packing and ending not in _ENDINGS:
        begins = any(data.startswith(start) for start, _ in _FORMATS)
        if not begins or len(data) == camera.layout.file_bytes(camera.width, camera.height):
            return _HEADERLESS
    kind = next((kind for start, kind in _FORMATS if data.startswith(start)), None)
    if kind is None:
        zeros = not data.strip(b"\0")
        other = next((words for start, words in _STRANGERS if data.startswith(start)), "no picture that is known here")
        raise FrameRefused(
            "the file holds nothing but zeros: a copy still under way" if zeros else f"the file holds {other}",
            where=where,
            allowed=READ,
            next_step=COPY_AGAIN,
        )
    try:
        module = cast("Format", import_module(f"runner.capture.formats.{kind}"))
    except ModuleNotFoundError as error:
        missing = str(error.name).split(".")[0]
        if missing != _EXTRAS.get(kind):
            raise
        raise UsageError(
            f"the file holds {kind.upper()}, and the package {missing}, which reads it, is not installed",
            where=where,
            next_step=f"install it: pip install 'probatum[{kind}]'",
        ) from error
    if ending not in module.ENDINGS:
        raise FrameRefused(
            f"the file holds {kind.upper()}, its name ends in '{ending}'",
            where=where,
            allowed=f"{kind.upper()} in files that end in {', '.join(module.ENDINGS)}",
            next_step="find out how it came by its name; export the frame again",
        )
    return module


def _pixel_digest(codes: Codes) -> str:
    """Digest shape, type and codes, whatever the file's byte order was."""
    digest = hashlib.sha256(f"{codes.shape} {codes.dtype.kind}{codes.dtype.itemsize}".encode())
    digest.update(np.ascontiguousarray(codes, dtype=codes.dtype.newbyteorder("<")).data)
    return digest.hexdigest()


def _sealed(codes: Codes) -> Codes:
    view = codes.view()
    view.flags.writeable = False
    return view
