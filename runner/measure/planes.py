"""A colour channel's own pixels as a plain array of rows and columns, and the way back to places in the frame.

Mono frames and planes of RGB are the codes themselves. Of a mosaic, red and blue are every second row and column; green
is of each row its green pixels, so that an odd row lies one pixel beside the even ones: what is next to each other in
the array is next to each other in the frame.

Values are linear DN with the camera's black level for black. Where the tone is linear they are the stored codes as they
are, a view of the frame. What cannot be a view (green of a mosaic, and any other tone, undone in float32) is put
together some rows at a time when they are asked for: a set of large frames is in memory once.

References:
    B. E. Bayer, US patent 3971065 (1976) (mosaic: green on every second pixel in rows and columns, shifted from row to
    row).
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from math import ceil
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Codes, Crop, linearise
from runner.errors import MeasurementRefused
from runner.spec.model import Camera

Values = Any
"""Rows × columns: an array of stored codes, or `Pixels`."""

PIECE = 32_768
"""Pixels whose tone is undone at a time: pieces of float64 stay in a processor's cache."""
MOST_CLIPPED = 0.001
"""Share of pixels at an end of the range: below, noise and means are biased by some 0.1 % of the noise at most."""
DARKEST = 0.01
"""Light of a lit frame below this share of the range is no light."""
MOST_SPIKED = 0.01
"""Share of pixels at the highest code from which on it may be a spike."""
SPIKED = 4
"""Times as many as at the next lower code make a spike: levels below a true highest one thin out, or go on."""
ENOUGH = 1_000_000
"""Pixels that tell a share of 0.1 % within 0.003 %."""


@dataclass(frozen=True)
class Grid:
    """Where the array's pixels lie in the frame."""

    x0: int
    """Column of the first row's first pixel, px of the frame."""
    y0: int
    """Its row."""
    across: int = 1
    """Columns of the frame from one pixel to the next."""
    down: int = 1
    """Rows of the frame from one pixel to the next."""
    shift: int = 0
    """Columns by which odd rows of the array lie to the right of even ones: ±1 for green, else 0."""

    def pixel(self, row: int, column: int) -> tuple[int, int]:
        """Return column and row in the frame of one pixel of the array."""
        return self.x0 + self.across * column + self.shift * (row % 2), self.y0 + self.down * row

    def point(self, y: float, x: float) -> tuple[float, float]:
        """Return (x, y) in the frame of a point of the array.

        Both count from the outer corner, so that the first pixel's centre is (0.5, 0.5); of green the mean of even and
        odd rows is meant.
        """
        return (
            self.x0 + self.across * (x - 0.5) + self.shift / 2 + 0.5,
            self.y0 + self.down * (y - 0.5) + 0.5,
        )


class Pixels:
    """A channel's own pixels of one frame as an array of rows × columns of which only what is asked for is made.

    Asked for are rows, as `[a:b]`, `[a:b:c]` or `take(rows, 0)`, and single pixels, as `[row, column]` of numbers or
    of arrays. `dtype` is that of the codes, or float32 where a tone is undone.
    """

    ndim = 2

    def __init__(self, codes: Codes, shift: int = 0, start: int = 0, camera: Camera | None = None) -> None:
        """Keep where the pixels lie.

        Args:
            codes: Rows × columns of the frame.
            shift: 0 if all of them are own ones; of green the columns by which odd rows lie to the right of even ones.
            start: Column of the first row's first green.
            camera: Whose tone is undone; None leaves the codes.
        """
        self._codes, self._shift, self._start, self._camera = codes, shift, start, camera
        self.shape = codes.shape[0], codes.shape[1] // 2 if shift else codes.shape[1]
        self.size = self.shape[0] * self.shape[1]
        self.dtype = codes.dtype if camera is None else np.dtype(np.float32)
        self._light = None
        if camera is not None and codes.dtype.kind == "u" and codes.dtype.itemsize <= 2:
            self._light = _scaled(np.arange(int(codes.max()) + 1), camera)

    def __getitem__(self, key: Any) -> Any:
        """Return rows × columns of rows, or one value for each pixel; every second row of a tone is again not made."""
        if isinstance(key, slice):
            first, last, step = key.indices(self.shape[0])
            rows = self._rows(first, last, step)
            return Pixels(rows, camera=self._camera) if step % 2 == 0 and self._camera else self._toned(rows)
        rows, columns = key
        if self._shift:
            columns = self._start + 2 * columns + self._shift * (rows % 2)
        return self._toned(self._codes[rows, columns])

    def take(self, rows: NDArray[np.intp], axis: int = 0) -> NDArray[Any]:
        """Return some rows.

        Raises:
            ValueError: Another axis is asked for.
        """
        if axis != 0:
            raise ValueError(f"taken along axis {axis}; only rows, axis 0, are made one by one")
        if not self._shift:
            return self._toned(self._codes.take(rows, axis=0))
        out = np.empty((rows.size, self.shape[1]), dtype=self._codes.dtype)
        for n in (0, 1):
            mine, x = rows % 2 == n, self._start + n * self._shift
            out[mine] = self._codes[rows[mine], x : x + 2 * self.shape[1] : 2]
        return self._toned(out)

    def astype(self, kind: Any) -> NDArray[Any]:
        """Return all of them as an array of a type of number."""
        return np.asarray(self[:], dtype=kind)

    def __array__(self, dtype: Any = None, copy: bool | None = None) -> NDArray[Any]:
        """Return all of them."""
        return np.array(self[:], dtype, copy=copy)

    def _rows(self, first: int, last: int, step: int) -> Codes:
        """Return rows of the codes; a view where they are of one kind."""
        codes, width = self._codes, 2 * self.shape[1]
        if not self._shift:
            return codes[first:last:step]
        start = [self._start + self._shift * ((first + n * step) % 2) for n in (0, 1)]
        if step % 2 == 0:
            return codes[first:last:step, start[0] : start[0] + width : 2]
        out = np.empty((len(range(first, last, step)), self.shape[1]), dtype=codes.dtype)
        for n, x in enumerate(start):
            out[n::2] = codes[first + n * step : last : 2 * step, x : x + width : 2]
        return out

    def _toned(self, codes: Codes) -> NDArray[Any]:
        if self._light is not None:
            return np.asarray(self._light.take(codes, mode="clip"))
        return codes if self._camera is None else _scaled(codes, self._camera)


@dataclass(frozen=True)
class Stack:
    """All frames of a capture in one channel."""

    frames: tuple[Values, ...]
    """Each rows × columns, linear DN, black at the camera's black level."""
    codes: tuple[Values, ...]
    """The same pixels' stored codes."""
    files: tuple[str, ...]
    """Where each frame comes from."""
    grid: Grid
    """Where they lie."""
    camera: Camera
    """Levels and tone."""

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns of the array."""
        rows, columns = self.frames[0].shape
        return rows, columns

    @property
    def size(self) -> int:
        """Number of pixels of one frame."""
        return int(self.frames[0].size)


def stack(crops: Sequence[Crop]) -> Stack:
    """Return a channel's own pixels of all its crops.

    Args:
        crops: One box and channel out of one frame or more.
    """
    grid = _grid(crops[0])
    codes = tuple(_own(crop, grid, None) for crop in crops)
    frames = codes if crops[0].camera.tone.kind == "linear" else tuple(_own(c, grid, c.camera) for c in crops)
    return Stack(frames, codes, tuple(crop.file for crop in crops), grid, crops[0].camera)


def strips(values: Values) -> Iterator[NDArray[Any]]:
    """Yield all rows, some at a time.

    Args:
        values: Rows × columns.
    """
    height = max(1, PIECE // values.shape[1])
    for y in range(0, values.shape[0], height):
        yield values[y : y + height]


def sums(values: Values, axis: int) -> NDArray[Any]:
    """Return the sums of an array along an axis; short codes are added up as such, which is twice as fast and exact.

    Args:
        values: Rows × columns.
        axis: 0 adds rows up, 1 columns.
    """
    short = values.dtype.kind == "u" and values.dtype.itemsize <= 2 and values.shape[axis] <= 65_536
    kind: Any = np.uint32 if short else np.float64
    if isinstance(values, np.ndarray):
        return np.asarray(values.sum(axis=axis, dtype=kind))
    pieces = [strip.sum(axis=axis, dtype=kind) for strip in strips(values)]
    return np.asarray(np.concatenate(pieces) if axis else np.sum(pieces, axis=0, dtype=kind))


def step(of: Stack) -> float:
    """Return the width of one code at the mean level, linear DN; 0 where the codes are not whole numbers."""
    if of.codes[0].dtype.kind not in "ui":
        return 0.0
    mean = round(float(np.mean(_some(of.codes[0]), dtype=np.float64)))
    one, two = linearise(np.array([mean, mean + 1]), of.camera)
    return float(two - one) * (of.camera.white_level - of.camera.black_level)


def refuse_clipped(of: Stack, *, most_low: float = 1.0, most_high: float = 1.0) -> None:
    """Refuse frames whose pixels lie at an end of the range, where noise and level are no longer to be seen.

    The low end is code 0, whatever the black level: a dark signal about it is cut there. A spike at the highest code
    is an end of the range too, wherever the white level is said to be.

    Args:
        of: The frames.
        most_low: Share of a frame's pixels that may lie at code 0; 1 is all of them.
        most_high: Share that may lie at the white level; 1 is all of them.

    Raises:
        MeasurementRefused: `clipped`, `too bright` or `no picture`.
    """
    for file, codes in zip(of.files, of.codes, strict=True):
        first = codes[0, 0]
        if _share(codes, np.equal, first, 1.0) == 1.0:
            raise MeasurementRefused("no picture", f"every pixel has the code {first}", where=file)
        high = _share(codes, np.greater_equal, of.camera.white_level, most_high)
        if high > max(0.5, most_high):
            found = f"{100 * high:.0f} % of the pixels lie at the white level"
            raise MeasurementRefused("too bright", found, where=file, next_step="give less light")
        for share, most, end, step in (
            (high, most_high, "at the white level", "give less light"),
            (_spike(codes) if most_high < 1 else 0.0, MOST_SPIKED, "at their highest code", "give less light"),
            (_share(codes, np.less_equal, 0, most_low), most_low, "at code 0", "raise the camera's black level"),
        ):
            if share > most:
                found = f"{100 * share:.2f} % of the pixels lie {end}"
                allowed = f"at most {100 * most:g} % may"
                raise MeasurementRefused("clipped", found, where=file, allowed=allowed, next_step=step)


def refuse_dark(of: Stack) -> None:
    """Refuse a set of lit frames in which one has no light: the first alone told that the field is lit.

    Raises:
        MeasurementRefused: `too dark`.
    """
    for file, values in zip(of.files, of.frames, strict=True):
        some = _some(values)
        light = float(some.mean(dtype=np.float64)) - of.camera.black_level
        share = light / (of.camera.white_level - of.camera.black_level)
        if share < DARKEST:
            raise MeasurementRefused(
                "too dark",
                f"the field lies {100 * share:.2f} % of the range over the black level",
                where=file,
                allowed=f"{100 * DARKEST:g} % is needed in every frame",
            )


def green_balance(values: Values, grid: Grid) -> float:
    """Return how far the green pixels of odd rows lie over those of even rows; 0 for anything but green.

    Args:
        values: Rows × columns.
        grid: Their grid.
    """
    if not grid.shift:
        return 0.0
    even, odd = (float(np.mean(values[first::2], dtype=np.float64)) for first in (0, 1))
    return odd - even


def balance_greens(values: NDArray[np.float32], grid: Grid, *, gain: bool) -> None:
    """Bring green pixels of odd rows to the mean of those of even rows, in place; nothing else is changed.

    Args:
        values: Rows × columns, over black if as a gain.
        grid: Their grid.
        gain: By a factor, as of light, else by an offset.
    """
    if not grid.shift:
        return
    apart = green_balance(values, grid)
    odd = values[1::2]
    if gain:
        level = float(np.mean(odd, dtype=np.float64))
        odd *= np.float32((level - apart) / level)
    else:
        odd -= np.float32(apart)


def square(values: NDArray[Any], grid: Grid) -> tuple[NDArray[Any], int]:
    """Return an array whose pixels are as wide as high, and how many rows of the array make one of its rows.

    Of green, means of pairs of rows; all else is so already.

    Args:
        values: Rows × columns.
        grid: Their grid.
    """
    if not grid.shift:
        return values, 1
    pairs = values.shape[0] // 2
    return np.asarray((values[: 2 * pairs : 2] + values[1 : 2 * pairs : 2]) / 2), 2


def _grid(crop: Crop) -> Grid:
    if crop.sites is None:
        return Grid(crop.box.x0, crop.box.y0)
    corner = crop.sites[:2, :2]
    if min(corner.shape) < 2:
        rows, columns = crop.sites.shape
        raise MeasurementRefused(
            "outside the estimator's limits", f"the region has {rows} × {columns} px; a mosaic needs 2 × 2 at least"
        )
    (y, x), *others = np.argwhere(corner).tolist()
    if others:
        return Grid(crop.box.x0 + x, crop.box.y0, 2, 1, 1 - 2 * x)
    return Grid(crop.box.x0 + x, crop.box.y0 + y, 2, 2)


def _own(crop: Crop, grid: Grid, camera: Camera | None) -> Values:
    """Return the own pixels of a crop, their tone undone if there is a camera: a view if it can be."""
    y, x = grid.y0 - crop.box.y0, grid.x0 - crop.box.x0
    if grid.shift:
        return Pixels(crop.codes, grid.shift, x, camera)
    own = crop.codes[y :: grid.down, x :: grid.across]
    return own if camera is None else Pixels(own, camera=camera)


def _some(values: Values) -> NDArray[Any]:
    """Return every so many-th row: an odd number, for even and odd rows of green lie beside different colours."""
    return np.asarray(values[:: max(1, values.size // ENOUGH) | 1])


def _share(codes: Values, compare: np.ufunc, end: float, most: float) -> float:
    """Return the share of pixels for which a comparison holds: that of some rows, if it is far less than allowed."""
    if codes.dtype.kind in "iu":
        end = ceil(end)  # codes are whole: they need not be made numbers with a point to be compared
    some = _some(codes)
    share = np.count_nonzero(compare(some, end)) / some.size
    if share < most / 2:
        return share
    return sum(int(np.count_nonzero(compare(strip, end))) for strip in strips(codes)) / int(codes.size)


def _spike(codes: Values) -> float:
    """Return the share of pixels at the highest code if it is a spike, far more than at the next lower ones, else 0."""
    some = _some(codes)
    top = some.max()
    share = float(np.mean(some == top))
    if share <= MOST_SPIKED or some.dtype.kind not in "ui":
        return 0.0
    below = some[some < top]
    spread = below.size > 0 and float(np.median(top - below)) > 2  # else it is a field without noise
    return share if spread and share * some.size > SPIKED * np.count_nonzero(below == below.max()) else 0.0


def _scaled(codes: Codes, camera: Camera) -> NDArray[np.float32]:
    span = camera.white_level - camera.black_level
    return np.asarray(linearise(codes, camera) * span + camera.black_level, dtype=np.float32)
