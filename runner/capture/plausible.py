"""Tells a wrong declaration of a frame's layout, depth or mosaic by what it makes of the pixels.

Each check compares the frame as declared with the same bytes read otherwise. A frame is refused only where the declared
reading is far worse and another one is plainly right; a frame that does not tell (constant, without light, without
colour) passes. The checks look at parts of a frame, so that they cost little beside reading it.

References:
    Packings and how their misreading looks (odd and even columns differ in noise): common practice, no source.
"""

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from runner.capture.formats import packed
from runner.capture.frame import Codes
from runner.capture.row_length import STREAM, row_length
from runner.errors import FrameRefused
from runner.spec.files import PACKINGS, Layout
from runner.spec.model import Camera

ROUGHER = 2.0
"""Times that a wrong reading is rougher than the right one, 10 to 1000 as a rule; of honest scenes 1.00 at most."""
SMALLEST = 12.0
"""DN of roughness below which no two nibbles or bytes can have changed places: the least such step is 16 DN."""
FEW = 8
"""Distinct codes up to which a frame counts as drawn, not as taken: it need not have noise."""
_BANDS, _ROWS, _COLUMNS = 3, 24, 512
_LAGS = (1, 2, 3, 5)
"""Distances, in steps of two px or of a packing's group, over which stripes of 2 to 10 px come back to themselves."""
_QUIET = 0.70
"""Share of neighbours that lie on the same side of every edge of a scene, at the best distance."""


def check_layout(data: bytes, number: int, codes: Codes, where: str, camera: Camera) -> None:
    """Refuse a headerless frame whose pixels speak against the declared layout.

    Args:
        data: The whole file, of the declared size.
        number: Which frame of the file, from 0.
        codes: The frame as unpacked.
        where: File, and page where there are several.
        camera: With its layout.

    Raises:
        FrameRefused: Bytes or nibbles in another order; padding counted as picture; another row length; a lower depth.
    """
    rows = packed.rows_of(data, camera)[number]
    bands = _bands(rows, camera)
    if np.unique(np.concatenate([band.ravel() for band in _unpacked(bands, camera.layout)])).size > FEW:
        _check_order(bands, where, camera)
        _check_depth(codes, where, camera)
    _check_padding(codes, where, camera)
    _check_row_length(data, number, where, camera)


def _refused(found: str, likely: str, where: str) -> FrameRefused:
    return FrameRefused(
        found, where=where, allowed=f"likely is {likely}", next_step="correct camera: layout in the spec, or the export"
    )


# ---- order of bytes and nibbles


def _bands(rows: packed.Bytes, camera: Camera) -> list[packed.Bytes]:
    """Return some rows from above, the middle and below, as far as they go from the left, in whole groups."""
    packing = PACKINGS[camera.layout.packing]
    wide = min(rows.shape[1], _COLUMNS // packing.pixels * packing.octets)
    left = (rows.shape[1] - wide) // 2 // packing.octets * packing.octets
    starts = np.linspace(0, max(0, rows.shape[0] - _ROWS), _BANDS).astype(int)
    return [np.ascontiguousarray(rows[start : start + _ROWS, left : left + wide]) for start in starts]


def _unpacked(bands: Sequence[packed.Bytes], layout: Layout) -> list[Codes]:
    return [packed.unpack(band, layout) for band in bands]


def _others(layout: Layout) -> dict[str, Layout]:
    """Return the layouts that fill the same bytes with the same pixels in another order, by their words."""
    if layout.packing == "16 bit":
        order = "little" if layout.byte_order == "big" else "big"
        return {f"byte_order: {order}": replace(layout, byte_order=order)}
    mine = PACKINGS[layout.packing]
    others = [name for name, one in PACKINGS.items() if one == mine and name != layout.packing]
    return {f"packing: {name}": replace(layout, packing=name) for name in others}


def _check_order(bands: Sequence[packed.Bytes], where: str, camera: Camera) -> None:
    group = max(2, PACKINGS[camera.layout.packing].pixels)
    declared = _roughness(_unpacked(bands, camera.layout), group)
    if declared < SMALLEST:
        return
    others = {words: _roughness(_unpacked(bands, one), group) for words, one in _others(camera.layout).items()}
    words, least = min(others.items(), key=lambda item: item[1], default=("", declared))
    if ROUGHER * max(least, 0.5) >= declared:
        return
    order = camera.layout.byte_order
    as_read = f"{camera.layout.packing}, byte order {order}" if order else camera.layout.packing
    raise _refused(
        f"read as {as_read}, neighbouring pixels differ by {declared:.3g} DN, read otherwise by {least:.3g} DN",
        words,
        where,
    )


def _roughness(bands: Sequence[Codes], group: int) -> float:
    """Return how much neighbours of one kind differ, in DN: of all places in a packing's group the roughest.

    Neighbours lie whole groups apart in a row, or an even number of rows apart in a column, so that a mosaic's colours
    and a packing's places are compared with their like; of all distances the quietest counts, so that stripes do not.
    What all codes are a multiple of is divided out: codes of empty low bits are no rougher for it.
    """
    step = max(1, int(np.gcd.reduce(np.concatenate([np.unique(band) for band in bands]).astype(np.int64))))
    places = [[band[:, place::group].astype(np.int32) // step for band in bands] for place in range(group)]
    quietest = max(_quietest(place) for place in places)
    return quietest if quietest < SMALLEST else min(quietest, max(_surprise(place) for place in places))


def _quietest(bands: Sequence[NDArray[np.int32]]) -> float:
    found = []
    for lag in _LAGS:
        for axis, distance in ((1, lag), (0, 2 * lag)):
            if all(band.shape[axis] > distance for band in bands):
                found.append(sum(_typical(_apart(band, axis, distance)) for band in bands) / len(bands))
    return min(found, default=0.0)


def _surprise(bands: Sequence[NDArray[np.int32]]) -> float:
    """Return the rms in DN of what the best weighted sum of neighbours does not foretell of a pixel; waves it does."""
    around = ((0, -2), (0, -1), (0, 1), (0, 2), (-4, 0), (-2, 0), (2, 0), (4, 0))
    known, wanted = [], []
    for band in bands:
        if min(band.shape) < 16:
            return np.inf
        rows, columns = band.shape
        known.append([band[4 + y : rows - 4 + y, 2 + x : columns - 2 + x].ravel() for y, x in around])
        wanted.append(band[4:-4, 2:-2].ravel())
    design = np.vstack([np.hstack(known), np.ones(sum(one.size for one in wanted))]).astype(np.float64)
    target = np.concatenate(wanted).astype(np.float64)
    weights = np.linalg.lstsq(design @ design.T, design @ target, rcond=None)[0]
    return float(np.sqrt(np.mean((target - weights @ design) ** 2)))


def _apart(band: NDArray[np.int32], axis: int, distance: int) -> NDArray[np.int32]:
    if axis:
        return np.asarray(np.abs(band[:, distance:] - band[:, :-distance]))
    return np.asarray(np.abs(band[distance:] - band[:-distance]))


def _typical(differences: NDArray[np.int32]) -> float:
    place = int(_QUIET * (differences.size - 1))
    return float(np.partition(differences, place, axis=None)[place])


# ---- depth


def _check_depth(codes: Codes, where: str, camera: Camera) -> None:
    """Refuse codes that pile up at the top of a lower depth: 10 bit declared as 12 clip at 1023."""
    top = int(codes.max())
    bits = top.bit_length()
    if top != 2**bits - 1 or not 8 <= bits < camera.bit_depth or top >= camera.white_level:
        return
    at_top, below = (int(np.count_nonzero(codes == code)) for code in (top, top - 1))
    if at_top < max(16, 1e-4 * codes.size) or at_top < 8 * below:
        return
    raise FrameRefused(
        f"{at_top} pixels stand at {top} DN and none above: the frame clips as one of {bits} bit does",
        where=where,
        allowed=f"codes of {camera.bit_depth} bit, as the spec says, clip at {camera.white_level:g} DN",
        next_step="correct camera: bit_depth and white_level in the spec, or capture again in the full depth",
    )


# ---- rows


def _check_padding(codes: Codes, where: str, camera: Camera) -> None:
    """Refuse columns of exact zeros at the right border, which a black level above zero does not explain."""
    if camera.black_level <= 0 or codes[:, -1].any():
        return
    lit = np.flatnonzero(codes.any(axis=0))
    empty = codes.shape[1] - 1 - (int(lit[-1]) if lit.size else -1)
    if empty == codes.shape[1]:
        return  # told as a frame that was not read out
    packing = PACKINGS[camera.layout.packing]
    groups = empty // packing.pixels
    if not groups:
        return
    width, padding = codes.shape[1] - groups * packing.pixels, camera.layout.row_padding + groups * packing.octets
    raise _refused(
        f"the last {empty} columns are zero in every row: padding, counted as picture",
        f"frame_size: {width} x {codes.shape[0]} px with row_padding: {padding} bytes",
        where,
    )


def _check_row_length(data: bytes, number: int, where: str, camera: Camera) -> None:
    """Refuse rows of another length than the picture's: it repeats itself after fewer or more pixels."""
    layout, packing = camera.layout, PACKINGS[camera.layout.packing]
    pitch_bytes = layout.row_bytes(camera.width)
    if pitch_bytes % packing.octets:
        return
    pitch = pitch_bytes // packing.octets * packing.pixels
    count = min(camera.height, max(16, STREAM // pitch))
    first = (camera.height - count) // 2
    start = layout.header + (number * camera.height + first) * pitch_bytes
    raw = np.frombuffer(data, np.uint8, count * pitch_bytes, start).reshape(count, pitch_bytes)
    stream = packed.unpack(raw, layout).ravel().astype(np.float64)
    likely = row_length(stream, pitch, camera, count)
    if likely not in {0, pitch}:
        raise _refused(
            f"the picture repeats itself after {likely} px, not after the declared {pitch} px of a row",
            f"a row of {likely} px, padding included",
            where,
        )


# ---- mosaic

_CELLS = 8
"""Side of a block in cells of a mosaic."""
_MOST_BLOCKS = 24
"""Blocks along each side of a frame that are looked at."""
UNLIKE = 0.10
"""Share of a block's light by which two green sites never differ in a sound sensor (crosstalk makes 1 to 3 %)."""


def check_mosaic(codes: Codes, where: str, camera: Camera) -> None:
    """Refuse a mosaic whose green sites differ where the two others agree.

    Every pixel is compared with the mean of its four diagonal neighbours, which all belong to the other site of its
    diagonal: gradients cancel. Mean and median of a block must
    agree: the one is misled by stripes whose light and dark halves hold more odd than even columns, the other by
    stripes of which each pixel sees one half. Red for blue cannot be told, nor anything in a scene without colour.

    Args:
        codes: Rows × columns.
        where: File, and page where there are several.
        camera: With its mosaic.

    Raises:
        FrameRefused: The greens differ, red and blue do not, all over the frame.
    """
    if camera.mosaic == "none" or min(codes.shape) < 2 * (_CELLS + 2):
        return
    blocks = _blocks(codes).astype(np.float64) - camera.black_level
    inner = blocks[..., 2:-2, 2:-2]
    around = sum(blocks[..., 2 + dy : dy - 2 or None, 2 + dx : dx - 2 or None] for dy in (-1, 1) for dx in (-1, 1)) / 4
    away = inner - around
    light = inner.mean((-2, -1))
    clipped = (inner >= camera.white_level - camera.black_level).any((-2, -1))
    lit = (light > 0.02 * (camera.white_level - camera.black_level)) & ~clipped
    told, wrong, share = lit, lit, np.zeros_like(light)
    for typical in (np.median, np.mean):
        green, others = _unlike(away, typical, camera)
        told = told & (np.maximum(green, others) > UNLIKE * light)
        wrong, share = wrong & (green > UNLIKE * light) & (others < 0.2 * green), green / np.maximum(light, 1.0)
    if np.count_nonzero(wrong) < max(4, 0.8 * np.count_nonzero(told)):
        return
    percent = 100 * float(np.median(share[wrong]))
    likely = "GRBG or GBRG" if camera.mosaic in {"RGGB", "BGGR"} else "RGGB or BGGR"
    raise FrameRefused(
        f"read as {camera.mosaic}, the two green sites differ by {percent:.0f} % of the light, the others agree",
        where=where,
        allowed=f"likely is mosaic: {likely}",
        next_step="correct camera: mosaic in the spec, or capture again without shifting or turning the frame",
    )


def _unlike(
    away: NDArray[np.float64], typical: Callable[..., NDArray[np.float64]], camera: Camera
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return by how much the two sites of each diagonal of a cell differ in every block: the greens, the others."""
    corner = {(y, x): typical(away[..., y::2, x::2], axis=(-2, -1)) for y in (0, 1) for x in (0, 1)}
    falling, rising = np.abs(corner[0, 0] - corner[1, 1]) / 2, np.abs(corner[0, 1] - corner[1, 0]) / 2
    return (rising, falling) if camera.mosaic in {"RGGB", "BGGR"} else (falling, rising)


def _blocks(codes: Codes) -> Codes:
    """Return blocks of cells from all over a frame, with two pixels more around each: blocks × rows × columns."""
    side = 2 * _CELLS + 4
    starts = [
        np.unique(np.linspace(0, (size - side) // 2, min(_MOST_BLOCKS, size // side)).astype(int) * 2)
        for size in codes.shape
    ]
    return np.stack([codes[y : y + side, x : x + side] for y in starts[0] for x in starts[1]])
