"""TIFF: 8, 12 (packed or in 16), 16 bit, float; grey, colour interleaved or in planes; strips, tiles; pages; BigTIFF.

Bare pages are views of the file's bytes; lossless compression, OME and everything else is decoded by tifffile.

References:
    TIFF Revision 6.0 (Adobe, 1992).
"""

import logging
import re
from collections.abc import Mapping
from io import BytesIO
from itertools import chain, pairwise
from math import prod
from operator import itemgetter

import numpy as np
import tifffile

from runner.capture.formats.contract import (
    Decoded,
    check_channels,
    check_pages,
    check_size,
    check_upright,
    native,
    samples,
    truncated,
)
from runner.capture.formats.ifd import Directory, read_directories
from runner.capture.frame import Codes
from runner.errors import FrameRefused
from runner.spec.model import Camera

ENDINGS = (".tif", ".tiff", ".btf", ".tf8")

WIDTH, LENGTH, BITS, COMPRESSION, PHOTOMETRIC, FILL_ORDER = 256, 257, 258, 259, 262, 266
ORIENTATION, SAMPLES, STRIP_ROWS, PREDICTOR, TILE_WIDTH, TILE_LENGTH = 274, 277, 278, 317, 322, 323
PLANAR, EXTRA_SAMPLES, SAMPLE_FORMAT = 284, 338, 339
RGB = 2
"""Photometric interpretation of red, green and blue."""
MOST_TILE = 4096
"""Side of a tile in px that no writer of small frames exceeds."""
CFA = 32803
"""Photometric interpretation of a colour filter mosaic: still one number per pixel."""
LOSSLESS = {1: "none", 5: "LZW", 8: "Deflate", 32946: "Deflate", 32773: "PackBits", 34925: "LZMA", 50000: "Zstandard"}
_KINDS = {(1, 8): "u1", (1, 16): "u2", (1, 32): "u4", (2, 8): "i1", (2, 16): "i2", (2, 32): "i4"}
_KINDS |= {(3, 32): "f4", (3, 64): "f8"}

# The decoder reports odd tags of other vendors through a logger; what matters here is checked here.
logging.getLogger("tifffile").addHandler(logging.NullHandler())


def decode(data: bytes, where: str, camera: Camera) -> Decoded:
    """Decode every page; see `Format.decode`."""
    directories = read_directories(data, where)
    for page in directories:
        _check(page, where, camera)
    check_pages(
        len(directories), where, camera.width * camera.height * samples(camera) * -(-directories[0].first(BITS, 1) // 8)
    )
    order = "<" if data[:2] == b"II" else ">"
    pieces = [_pieces(data, page, order) for page in directories]
    tiled = any(TILE_WIDTH in page.integers for page in directories)
    with tifffile.TiffFile(BytesIO(data)) as file:
        texts = _texts(file.pages.first)
        if len(file.pages) != len(directories):
            raise truncated(where, f"{len(directories)} pages are listed, {len(file.pages)} can be read")
        _check_promised(texts, len(directories), where, camera)
        pages = tuple(
            _plain(views, camera, where, planes=_planes(page))
            if views and not tiled
            else native(_colours_last(file.pages[number].asarray(maxworkers=1), page))
            for number, (page, views) in enumerate(zip(directories, pieces, strict=True))
        )
    stored = tuple(piece for _, piece in sorted(chain(*pieces), key=itemgetter(0))) if all(pieces) else ()
    return Decoded(pages, texts, stored, _line(directories[0]))


def _line(page: Directory) -> int:
    """Return how many numbers one stored line holds; see `Decoded.line`."""
    if _planes(page):
        return page.first(TILE_WIDTH, page.first(WIDTH, 0))
    return page.first(TILE_WIDTH, 0) * page.first(SAMPLES, 1)


def _planes(page: Directory) -> bool:
    """Tell whether the colours lie in planes one behind the other."""
    return page.first(SAMPLES, 1) > 1 and page.first(PLANAR, 1) == 2


def _colours_last(codes: Codes, page: Directory) -> Codes:
    return np.moveaxis(codes, 0, -1) if _planes(page) else codes


def _texts(page: tifffile.TiffPage) -> dict[str, str]:
    """Return the page's texts by tag name; a tag that stands twice is numbered."""
    texts: dict[str, str] = {}
    for tag in page.tags.values():
        if isinstance(tag.value, str):
            texts[f"{tag.name} {len(texts)}" if tag.name in texts else tag.name] = tag.value
    return texts


def _check(page: Directory, where: str, camera: Camera) -> None:
    channels, extra = page.first(SAMPLES, 1), page.integers.get(EXTRA_SAMPLES, ())
    photometric, compression, bits = page.first(PHOTOMETRIC, 1), page.first(COMPRESSION, 1), page.first(BITS, 1)
    grey = channels == 1 and photometric in {0, 1, CFA}
    plain = not extra and (grey or photometric == RGB) and len(set(page.integers.get(BITS, (1,)))) == 1
    words = "transparency" if extra else f"{channels} colour channels" if channels != 1 else "coded colours"
    check_channels("one grey channel" if grey and plain else words, where, camera, channels=channels if plain else 0)
    if photometric == 0:
        raise FrameRefused(
            "the file stores white as zero (min-is-white)",
            where=where,
            allowed="black as zero (min-is-black)",
            next_step="export the frame with black as zero",
        )
    if compression not in LOSSLESS:
        raise FrameRefused(
            f"the file is compressed by TIFF method {compression}, which is not known to be lossless",
            where=where,
            allowed=f"no compression, {', '.join(sorted(set(LOSSLESS.values())))}",
            next_step="export the frame without compression",
        )
    check_upright(page.first(ORIENTATION, 1), where)
    check_size(page.first(WIDTH, 0), page.first(LENGTH, 0), camera, where)
    if bits < 8:
        raise FrameRefused(f"the file holds {bits} bit per pixel", where=where, allowed="8 bit or more per pixel")
    _check_pieces(page, where, bits, packed=compression == 1)


def _check_pieces(page: Directory, where: str, bits: int, *, packed: bool) -> None:
    """Refuse strips and tiles that do not fit the frame: a decoder would set aside what they claim, or misread them.

    Bare pixels must fill as many bytes as their depth says, within an eighth for padding: 12 bit kept in 16 but
    announced as packed would be read as a picture of other codes. Behind a compression this cannot be seen, and few
    programs pack and compress; those files are refused.
    """
    width, height = page.first(WIDTH, 0), page.first(LENGTH, 0)
    tiled = TILE_WIDTH in page.integers
    wide = page.first(TILE_WIDTH, 0) if tiled else width
    high = page.first(TILE_LENGTH, 0) if tiled else page.first(STRIP_ROWS, height)
    if wide < 1 or high < 1 or (tiled and (wide > max(MOST_TILE, width + 15) or high > max(MOST_TILE, height + 15))):
        raise FrameRefused(
            f"the file cuts a frame of {width} x {height} px into pieces of {wide} x {high} px",
            where=where,
            allowed=f"tiles up to {MOST_TILE} px or the frame's own size",
            next_step="export the file again",
        )
    rows = -(-width // wide) * -(-height // high) * (high if tiled else min(high, height))
    channels = page.first(SAMPLES, 1)
    wanted = channels * rows * -(-wide * bits // 8) if _planes(page) else rows * -(-wide * channels * bits // 8)
    there = sum(count for _, count in page.segments)
    if packed and there > 1.125 * wanted:
        raise FrameRefused(
            f"{width} x {height} px of {bits} bit fill {wanted} bytes, the file holds {there}",
            where=where,
            allowed="as many bytes as the announced depth needs",
            next_step="export the frame with the depth in which the pixels are stored",
        )
    if packed and page.first(PREDICTOR, 1) != 1:
        raise FrameRefused(
            "the file announces differences of pixels without compression, which readers take in two ways",
            where=where,
            allowed="differences (a predictor) only where there is compression",
            next_step="export the frame without a predictor",
        )
    if not packed and bits not in {8, 16, 32, 64}:
        raise FrameRefused(
            f"the file packs {bits} bit per pixel and compresses them",
            where=where,
            allowed="8, 16 or 32 bit per pixel where there is compression",
            next_step="export the frame without compression, or in 16 bit",
        )


def _pieces(data: bytes, page: Directory, order: str) -> list[tuple[int, Codes]]:
    """Return (offset, view of the bytes) per piece where they are plain numbers; else nothing."""
    kind = _KINDS.get((page.first(SAMPLE_FORMAT, 1), page.first(BITS, 1)))
    as_they_are = all(page.first(tag, 1) == 1 for tag in (COMPRESSION, FILL_ORDER))
    if kind is None or not as_they_are:
        return []
    dtype, spans = np.dtype(order + kind), page.segments
    if TILE_WIDTH in page.integers:
        return _tiles(data, page, dtype)
    if all(offset + count == following for (offset, count), (following, _) in pairwise(spans)):
        spans = ((spans[0][0], sum(count for _, count in spans)),)
    return [(offset, np.frombuffer(data, dtype, count // dtype.itemsize, offset)) for offset, count in spans]


def _tiles(data: bytes, page: Directory, dtype: np.dtype[np.generic]) -> list[tuple[int, Codes]]:
    """Return (offset, codes of one tile) without the padding of the tiles at the right and lower border."""
    wide, high = page.first(TILE_WIDTH, 0), page.first(TILE_LENGTH, 0)
    width, height = page.first(WIDTH, 0), page.first(LENGTH, 0)
    across, down = -(-width // wide), -(-height // high)
    each = 1 if _planes(page) else page.first(SAMPLES, 1)
    found = []
    for number, (offset, count) in enumerate(page.segments):
        row, column = divmod(number % (across * down), across)
        numbers = np.frombuffer(data, dtype, count // dtype.itemsize, offset)[: wide * high * each]
        tile = numbers.reshape(high, wide, each)
        found.append((offset, tile[: height - row * high, : width - column * wide].ravel()))
    return found


def _plain(pieces: list[tuple[int, Codes]], camera: Camera, where: str, *, planes: bool) -> Codes:
    """Return the page out of its plain strips without decoding: a view of the file's bytes, if they adjoin."""
    flat = pieces[0][1] if len(pieces) == 1 else np.concatenate([piece for _, piece in pieces])
    size, each = (camera.height, camera.width), samples(camera)
    wanted = camera.width * camera.height * each
    if flat.size < wanted:
        raise truncated(where, f"{wanted} px are announced, {flat.size} are there")
    if each == 1:
        return native(flat[:wanted].reshape(size))
    codes = flat[:wanted].reshape((each, *size) if planes else (*size, each))
    return native(np.moveaxis(codes, 0, -1) if planes else codes)


def _check_promised(texts: Mapping[str, str], pages: int, where: str, camera: Camera) -> None:
    """Refuse a stack whose own description speaks of more frames than its chain of pages holds."""
    promised, frame = 1, camera.width * camera.height * samples(camera)
    for text in texts.values():
        images = re.search(r"^images=(\d{1,9})\s*$", text, re.MULTILINE) if text.startswith("ImageJ=") else None
        shape = re.match(r'\{"shape": \[(\d{1,9}(?:, \d{1,9}){1,7})\]', text)
        if images:
            promised = max(promised, int(images[1]))
        if shape:
            promised = max(promised, prod(int(n) for n in shape[1].split(",")) // frame)
    if promised > pages:
        raise FrameRefused(
            f"the file describes {promised} frames, {pages} can be found as pages",
            where=where,
            next_step="copy the file again, or export it as a TIFF with one page per frame",
        )
