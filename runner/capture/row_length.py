"""Tells from a headerless frame's pixels that its rows are of another length than declared, and of which.

Read with a wrong length the picture is sheared: what lay one row below lies some columns beside. Stripes and edges at
an angle do so too, for an honest reason. What they do not have is one of three things:

- groups of zeros, padding counted as picture, that come back after another length;
- a seam, a step from one pixel to the next where the right border of the picture meets the left;
- a picture that goes on across the declared border: that begins again on the left, exactly where it ended on the right.
"""

import numpy as np
from numpy.typing import NDArray

from runner.spec.model import Camera

Real = NDArray[np.float64]

STREAM = 1 << 17
"""Pixels of a frame in which another row length is looked for."""
_SHORTEST = 32
"""px of a row that is looked for; no frame is narrower."""
_SEAM = 8.0
"""Standard deviations of all other columns by which the step between the borders of a picture stands out."""
_SURE = 10.0
"""Standard errors from which on rows are alike; the highest of a few thousand of white noise reaches four."""
_AS_ALIKE, _UNLIKE = 0.7, 0.5
"""Share of the best likeness that counts as alike, and below which rows are not."""
_LEAST = 3
"""px by which a length must differ: shears of one or two are no more than the slope of common edges."""


def row_length(stream: Real, declared: int, camera: Camera, rows: int) -> int:
    """Return the likely length of a row where the pixels speak against the declared one, else 0.

    Args:
        stream: Pixels in the order of the file, whole rows as declared.
        declared: Length of a row, padding included, px.
        camera: Black level and mosaic.
        rows: Number of rows in the stream.
    """
    if camera.black_level > 0 and (found := _between_zeros(stream, rows)) not in {0, declared}:
        return found
    seams = 1 if camera.mosaic == "none" else 2
    whole = declared * camera.height
    stream = stream[::seams]  # of a mosaic every second pixel; two rows of them, one of each colour, have the pitch
    for found in _row_lengths(stream, declared):
        if _has_seam(stream, found, declared, seams):
            return found
    found = _going_on(stream, declared // seams, seams)
    if seams == 2:  # a row of every second pixel is half as long; what goes on may do so after two, of the same colour
        found = min((found, 2 * found), key=lambda length: abs(length - declared))
    return _fitting(found, whole) if found else 0


def _going_on(stream: Real, declared: int, like: int) -> int:
    """Return the length after which the picture goes on, across the declared border too; 0 if none is plain.

    Compared are differences of neighbouring pixels, which the white noise of different rows does not make alike. All of
    these must hold, and each excludes honest pictures: one length only (no stripes); the declared rows are not alike
    (nothing upright); not alike a little beside either (an edge near the horizontal is stretched along the rows by as
    much as it moves from row to row); and alike where the length leads over the declared border.

    Args:
        stream: Pixels in the order of the file.
        declared: Length of a row.
        like: Rows from one to the next of the same colour.
    """
    steps = np.diff(stream)
    usual = 6 * max(1.4826 * float(np.median(np.abs(steps))), 1.0)
    steps = np.clip(steps, -usual, usual)  # a few hot pixels must not decide
    size = steps.size
    spread = np.fft.rfft(steps, 1 << (2 * size).bit_length())
    alike = np.fft.irfft(spread.real**2 + spread.imag**2)[: min(4 * declared + declared // 2, size // 4)]
    lengths = np.arange(max(_SHORTEST, declared // 2 + 1), alike.size - 3)
    if lengths.size < 2 or alike[0] <= 0:
        return 0
    alike = alike / alike[0] * size / (size - np.arange(alike.size))
    either, top = np.abs(alike), float(alike[lengths].max())  # stripes are also as unlike half a period on
    peaks = lengths[
        (either[lengths] >= either[lengths - 1])
        & (either[lengths] >= either[lengths + 1])
        & (either[lengths] >= _AS_ALIKE * top)
    ]
    if not peaks.size or top * np.sqrt(size) < _SURE:
        return 0
    length = int(peaks[0])
    times = np.round(peaks / length)
    if np.any(np.abs(peaks - times * length) > 2 + 2 * times):
        return 0
    rows = max(1, round(length / declared))
    shear = abs(length - rows * declared) // rows
    beside = max(2, shear // 2)
    if shear < _LEAST or length + beside >= alike.size:
        return 0
    upright = max(
        float(alike[n * declared - 2 : n * declared + 3].max())
        for n in {1, like, rows}
        if n * declared + 2 < alike.size
    )
    stretched = max(float(alike[length - beside]), float(alike[length + beside]))
    over = np.arange(size - length)
    over = over[over // declared + rows != (over + length) // declared]
    product = steps[over] * steps[over + length] / float(np.mean(steps**2))
    across = float(product.mean()) if over.size else 0.0
    plain = max(upright, stretched) < _UNLIKE * alike[length] and across > _UNLIKE * alike[length]
    if not plain or across * np.sqrt(over.size) < _SURE / 2:
        return 0
    return length


def _fitting(length: int, whole: int) -> int:
    """Return the length nearest to one that fills the file evenly, if there is one within two pixels.

    The slope of what the picture shows shifts its best length by a pixel or two.
    """
    near = [length + n for n in (0, 1, -1, 2, -2) if whole % (length + n) == 0]
    return near[0] if near else length


def _between_zeros(stream: NDArray[np.float64], rows: int) -> int:
    """Return the distance at which groups of zeros, padding, come back in the picture; 0 where there are none."""
    zeros = np.flatnonzero(stream == 0)
    if not 0.9 * rows <= zeros.size <= 0.5 * stream.size:
        return 0
    starts = zeros[np.flatnonzero(np.diff(zeros, prepend=-2) > 1)]
    gaps = np.diff(starts)
    if gaps.size < 0.9 * rows - 2:
        return 0
    usual = int(np.median(gaps))
    return usual if usual >= _SHORTEST and np.count_nonzero(gaps == usual) >= 0.95 * gaps.size else 0


def _row_lengths(stream: NDArray[np.float64], declared: int) -> list[int]:
    """Return row lengths after which the picture is at least as like itself as after the declared one, best first."""
    size = stream.size
    spread = np.fft.rfft(stream - stream.mean(), 2 * size)
    along = np.fft.irfft(spread.real**2 + spread.imag**2)[: size // 4]
    if along[0] <= 0 or declared >= along.size - 1:
        return []
    along = along / along[0] * size / (size - np.arange(along.size))
    lengths = np.arange(max(_SHORTEST, declared // 4), min(4 * declared, along.size - 1))
    peak = (along[lengths] >= along[lengths - 1]) & (along[lengths] >= along[lengths + 1])
    like = along[lengths] > np.where(declared % lengths == 0, along[declared] - 0.02, along[declared])
    lengths = lengths[peak & like & (lengths % declared != 0)]
    return sorted(lengths.tolist(), key=lambda length: -float(along[length]))[:8]


def _has_seam(stream: NDArray[np.float64], length: int, declared: int, seams: int) -> bool:
    """Tell whether one sharp step comes back after exactly that length, in nearly every row, and none where declared.

    A sharp edge of the scene is spread over more than one step by any optics, has its counterpart elsewhere in the row,
    or leaves a step where the declared rows meet.
    """
    steps = np.abs(np.diff(stream))
    rows = steps.size // length
    if rows < 8:
        return False
    folded = steps[: rows * length].reshape(rows, length)
    columns = folded.mean(axis=0)
    usual = float(np.median(columns))
    seam = int(np.argmax(columns))
    height = float(columns[seam]) - usual
    near = np.array([(seam + n) % length for n in (-2, -1, 1, 2)])
    twin = [(seam + length // seams + n) % length for n in range(-2, 3)]
    others = np.delete(columns, [seam, *near, *twin]) - usual
    wraps = np.arange(declared // seams - 1, steps.size, declared // seams)
    wraps = wraps[(wraps - seam) % (length // seams) != 0]
    if wraps.size == 0 or height <= _SEAM * max(float(others.std()), 1e-9):
        return False
    beside = (columns[near[1:3]] - usual) / height  # optics spread an edge to both sides, the picture ends on either
    second = columns[twin[2]] - usual > 0.5 * height
    alone = beside.min() < 0.1 and beside.max() < 0.35 and others.max() < 0.7 * height and second
    always = np.count_nonzero(folded[:, seam] > usual + 0.25 * height) >= (0.9 if seams == 1 else 0.6) * rows
    return bool(alone and always and steps[wraps].mean() < usual + height / 3)
