"""Defective pixels: hot in a dark, dead, dim or bright in a flat, stuck or blinking in a set, and their clusters.

A pixel is defective where it departs from the median of its neighbours by more than k times the local noise, 1.4826
times the median absolute deviation of the pixels around. For normal noise of P pixels that gives P · Q(k) false ones on
each side, Q the normal's upper tail: at k = 5.6 one in 47 MP on both sides together (one in 94 MP where only high
ones count). The median of 169 neighbours and the local noise are uncertain themselves, which makes that two to three
times as many: still fewer than one in 10 MP. What departs by 6 times the noise is found, for the 0.4 times the noise
between are three standard deviations of the neighbours' median and of the noise together. A pixel planted with 6 times
the noise has its own noise on top: it is found if the sum departs so far.

Noise that is not normal: whole codes are spread before their noise is taken (see defect_ground), so a dark frame of a
noise below one step gets no hot pixels from single steps. Tails heavier than the normal's, such as dark current's or
random telegraph noise, are what hot and blinking pixels are; how heavy they are is told with the result (`tail`), so
that a k can be chosen for them.

A defect that lies in a blemish is told by what it departs from the blemish; it is overlooked if the two cancel to
within k - 1 times the noise of the surroundings.

References:
    EMVA Standard 1288 Release 4.0 Linear (2021), defect pixels: no thresholds, the application sets them.
    Threshold on the median and the median absolute deviation: common practice, no source.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import special

from runner.measure.numerics.defect_ground import Ground, Places, ground, local_medians, outstanding
from runner.measure.numerics.two_way_layout import STRIP, Frames, level_of, short_codes

Real = NDArray[np.float64]

K = 5.6
"""Times the noise from which on a pixel is defective: see above."""
MARGIN = 1.0
"""So much less than k, in times the noise, suffices for a pixel to be compared with its own neighbours."""
DEAD = 0.5
"""A pixel below this share of its neighbours' light is dead (trade: 50 to 80 %)."""
TRIMMED = 0.1
"""Share of a line's pixels left out at either end where it is asked what a frame adds to the line."""
PHASES = 16
"""Places between two codes over which the chance of equal codes is averaged."""


@dataclass(frozen=True)
class Defect:
    """One defective pixel."""

    x: int
    """Column, from 0."""
    y: int
    """Row, from 0."""
    kind: str
    """`hot`, `dead`, `dim`, `bright`, `stuck` or `blinking`."""
    contrast: float
    """Hot: light over the neighbours. Dead, dim, bright: of the neighbours' light, -1 is no light at all.

    Blinking: standard deviation over time against that of the neighbours; stuck: 0.
    """
    significance: float
    """Departure over the local noise; stuck and blinking: of normal noise as rare as this."""


@dataclass(frozen=True)
class Pixels:
    """Defective pixels of one frame or set."""

    defects: tuple[Defect, ...]
    """Row by row."""
    noise: float
    """Median of the local noise."""
    expected_false: float
    """Number of false ones that normal noise gives at this k."""
    tail: float
    """Share of pixels beyond 3.5 times the noise over that of normal noise: about 1 if it is normal."""


@dataclass(frozen=True)
class Unsteady:
    """Pixels that do not change in time, or change too much."""

    stuck: tuple[Defect, ...] | None
    """Equal in every frame although their neighbours change; None where equal codes are too likely by chance."""
    stuck_chance: float
    """Probability that a sound pixel gives equal codes in every frame."""
    blinking: Pixels
    """Temporal variance far above the neighbours'."""


@dataclass(frozen=True)
class Cluster:
    """Defective pixels that touch each other, by sides or corners."""

    pixels: tuple[tuple[int, int], ...]
    """Columns and rows, two or more."""

    @property
    def size(self) -> int:
        """Number of pixels."""
        return len(self.pixels)


def expected_false(k: float, pixels: int, sides: int = 2) -> float:
    """Return how many of so many pixels of normal noise depart by more than k standard deviations.

    Args:
        k: Times the standard deviation.
        pixels: Number of pixels.
        sides: 1 if only high ones count, 2 if low ones do too.
    """
    return float(sides * pixels * special.ndtr(-k))


def hot_pixels(dark: NDArray[Any], k: float = K, *, step: float = 0.0) -> Pixels:
    """Find pixels of a dark above their neighbours.

    Args:
        dark: Mean of dark frames (or one), rows × columns, light or DN; one colour of a mosaic at a time.
        k: Times the local noise, above 2.
        step: Step of the codes in the frame's unit (1 DN over n for a mean of n frames), where known; whole numbers
            have at least 1. It only matters where the noise is so low that no step is seen among the sampled pixels.

    Raises:
        ValueError: k out of range, or values that are not finite.
    """
    return _pixels(dark, ground(_checked(dark, k), step=step), None, k, dead=None)


def flat_pixels(flat: NDArray[Any], k: float = K, *, dead: float = DEAD, step: float = 0.0) -> Pixels:
    """Find dead, dim and bright pixels of a flat field against their neighbours.

    Args:
        flat: Mean of flat frames (or one), rows × columns, light or DN over black; one colour at a time.
        k: Times the local noise, above 2.
        dead: Share of the neighbours' light below which a pixel is dead and not only dim.
        step: As of `hot_pixels`.

    Raises:
        ValueError: k out of range, no light, or values that are not finite.
    """
    of = ground(_checked(flat, k), step=step)
    if float(np.median(of.level)) <= 0:
        raise ValueError(f"the flat's median light is {np.median(of.level):g}; light over black is needed")
    return _pixels(flat, of, k, k, dead=dead)


def unsteady_pixels(frames: Frames, k: float = K, *, gain_drift: bool = False) -> Unsteady:
    """Find stuck and blinking pixels of a set of frames of the same scene.

    A blinking pixel's variance over n frames passes what chi-square of n-1 degrees of freedom gives as rarely as
    normal noise passes k. Equal codes tell a stuck pixel only where chance gives them as rarely: with whole codes
    finer than the noise that takes some ten frames; without whole codes three are enough. What a frame adds to a whole
    row or column (bands that run) is no single pixel's: it is taken off first.

    Args:
        frames: n ≥ 2 frames × rows × columns, light over black or DN.
        k: As above, above 2.
        gain_drift: A frame's level departs as a factor on its light (a lamp), else as an offset.

    Raises:
        ValueError: k out of range, fewer than two frames, frames of different size, or values that are not finite.
    """
    if len(frames) < 2 or len({f.shape for f in frames}) > 1:
        raise ValueError(f"{len(frames)} frames of sizes {sorted({f.shape for f in frames})}; 2 of one size are needed")
    _checked(frames[0][:1], k)
    levels = np.array([level_of(f) for f in frames])
    if not np.all(np.isfinite(levels)):
        raise ValueError("the frames hold values that are not finite numbers")
    factors = levels.mean() / levels if gain_drift else np.ones(levels.size)
    variance, n = _Variances(frames, factors, levels * factors), len(frames)
    one = ground(frames[0], frames[1])
    spread = Ground(one.y, one.x, np.zeros_like(one.level), one.noise**2 / 2, one.tail, one.step)
    limit = float(special.chdtri(n - 1, 2 * special.ndtr(-k))) / (n - 1)
    rows, columns = outstanding(variance, spread, None, limit)
    found = variance.off_lines(rows, columns)
    ratio = found / _positive(spread.at(rows, columns)[1], found)
    there = ratio > limit
    rows, columns, ratio = rows[there], columns[there], ratio[there]
    blinking = _defects(rows, columns, "blinking", np.sqrt(ratio), _as_normal(ratio, n))
    noise = float(np.sqrt(np.median(spread.noise)))
    chance = equal_chance(noise / one.step if one.step > 0 else np.inf, n)
    told = Pixels(blinking, noise, expected_false(k, variance.size), one.tail)
    if noise == 0 or chance > 2 * special.ndtr(-k):
        return Unsteady(None, chance, told)
    rows, columns = _equal(frames)
    changing = spread.at(rows, columns)[1] > 0
    rarity = -float(special.ndtri(max(chance, 1e-300) / 2))
    zeros = np.zeros(int(changing.sum()))
    return Unsteady(_defects(rows[changing], columns[changing], "stuck", zeros, zeros + rarity), chance, told)


def equal_chance(noise: float, count: int) -> float:
    """Return the probability that so many codes of one pixel are equal, averaged over its level between two codes.

    Args:
        noise: Standard deviation in steps of the codes.
        count: Frames.
    """
    if noise == 0:
        return 1.0
    if not np.isfinite(noise):
        return 0.0
    reach = int(np.ceil(8 * noise)) + 1
    codes = np.linspace(-reach, reach, min(2 * reach + 1, 2001))  # many codes are as good as a continuum
    step = codes[1] - codes[0]
    levels = (np.arange(PHASES) + 0.5)[:, None] / PHASES
    shares = special.ndtr((codes - levels + 0.5) / noise) - special.ndtr((codes - levels - 0.5) / noise)
    return float(min(1.0, np.mean(np.sum(shares**count, axis=1)) * step))


def clusters(defects: Sequence[Defect]) -> tuple[Cluster, ...]:
    """Return groups of two or more defective pixels that touch by sides or corners, the largest first.

    Args:
        defects: Of any kinds; a pixel named twice counts once.
    """
    places = np.array(sorted({(d.y, d.x) for d in defects}), dtype=np.intp).reshape(-1, 2)
    if len(places) < 2:
        return ()
    labels = touching(places[:, 0], places[:, 1])
    order = np.argsort(labels, kind="stable")
    groups = np.split(places[order], np.cumsum(np.bincount(labels))[:-1])
    found = [Cluster(tuple((int(x), int(y)) for y, x in group)) for group in groups if len(group) > 1]
    return tuple(sorted(found, key=lambda c: (-c.size, c.pixels)))


def touching(rows: Places, columns: Places) -> NDArray[np.int32]:
    """Return a number for each place, from 0, the same for those that touch by sides or corners, also through others.

    Args:
        rows: Rows of the places, row by row.
        columns: Their columns; no place comes twice.
    """
    from scipy.sparse import coo_array  # noqa: PLC0415 - heavy
    from scipy.sparse.csgraph import connected_components  # noqa: PLC0415 - heavy

    if rows.size == 0:
        return np.empty(0, dtype=np.int32)
    width = int(columns.max()) + 3  # no neighbour wraps into the next row
    keys = rows * width + columns
    ones, others = [], []
    for away in (1, width - 1, width, width + 1):
        at = np.minimum(np.searchsorted(keys, keys + away), keys.size - 1)
        near = np.flatnonzero(keys[at] == keys + away)
        ones.append(near)
        others.append(at[near])
    pairs = (np.concatenate(ones), np.concatenate(others))
    links = coo_array((np.ones(pairs[0].size, dtype=bool), pairs), shape=(keys.size, keys.size))
    return np.asarray(connected_components(links, directed=False)[1], dtype=np.int32)


def _checked(frame: NDArray[Any], k: float) -> NDArray[Any]:
    if not k > 2:
        raise ValueError(f"k is {k:g}; above 2 is allowed, else noise alone makes most of the defects")
    if frame.ndim != 2 or frame.size == 0:
        raise ValueError(f"the frame has the shape {frame.shape}; rows × columns are needed")
    if not np.isfinite(frame.sum()):
        raise ValueError("the frame holds values that are not finite numbers")
    return frame


def _pixels(frame: NDArray[Any], of: Ground, low: float | None, high: float, *, dead: float | None) -> Pixels:
    rows, columns = outstanding(frame, of, None if low is None else low - MARGIN, high - MARGIN)
    around = local_medians(frame, rows, columns)
    away = frame[rows, columns] - around
    significance = away / _positive(of.at(rows, columns)[1], away)
    keep = significance > high
    if low is not None:
        keep |= significance < -low
    rows, columns, away, around, significance = rows[keep], columns[keep], away[keep], around[keep], significance[keep]
    if dead is None:
        defects = _defects(rows, columns, "hot", away, significance)
    else:
        contrast = away / np.maximum(around, np.finfo(float).tiny)
        kinds = np.where(away > 0, "bright", np.where(1 + contrast < dead, "dead", "dim"))
        defects = _defects(rows, columns, kinds, contrast, significance)
    sides = 1 if low is None else 2
    return Pixels(defects, float(np.median(of.noise)), expected_false(high, frame.size, sides), of.tail)


def _positive(noise: Real, away: Real) -> Real:
    """Return the noise, at least a millionth of the departure, so that significance stays finite."""
    return np.asarray(np.maximum(noise, np.maximum(1e-6 * np.abs(away), np.finfo(float).tiny)))


def _defects(
    rows: Places, columns: Places, kinds: str | NDArray[np.str_], contrast: Real, significance: Real
) -> tuple[Defect, ...]:
    order = np.lexsort((columns, rows))
    names = np.broadcast_to(np.asarray(kinds), rows.shape)
    return tuple(
        Defect(x, y, kind, c, s)
        for x, y, kind, c, s in zip(
            *(v[order].tolist() for v in (columns, rows, names, contrast, significance)), strict=True
        )
    )


class _Variances:
    """The variance over time of each pixel, drift taken out, worked out where it is asked for: it is looked at once.

    Asked for are rows, as `[a:b]`, and single pixels, as `[rows, columns]`.
    """

    def __init__(self, frames: Frames, factors: Real, offsets: Real) -> None:
        self._frames, self._factors, self._levels = frames, factors, offsets / factors
        self.shape: tuple[int, int] = frames[0].shape
        self.size = self.shape[0] * self.shape[1]
        # float32 is off by less than a hundredth of a short code
        self._kind: Any = np.float32 if all(short_codes(frame) for frame in frames) else np.float64

    def __getitem__(self, key: Any) -> NDArray[np.float32]:
        if len(self._frames) == 2:
            return self._of_two(key)
        pieces: list[NDArray[Any]] = []
        for frame, factor, level in zip(self._frames, self._factors, self._levels, strict=True):
            piece = np.subtract(frame[key], self._kind(level), dtype=self._kind)
            if factor != 1:
                piece *= self._kind(factor)
            pieces.append(piece)
        return np.asarray(np.var(pieces, axis=0, ddof=1), dtype=np.float32)

    def off_lines(self, rows: Places, columns: Places) -> Real:
        """Return the variances of single pixels without what each frame adds to the pixel's whole row and column."""
        values = self._values((rows, columns))
        values -= self._added(rows, lambda at: (at, slice(None)))
        values -= self._added(columns, lambda at: (slice(None), at))
        return np.asarray(values.var(axis=0, ddof=1))

    def _added(self, lines: Places, key: Callable[[int], tuple[Any, ...]]) -> Real:
        """Return what each frame adds to lines, frames × lines: a mean that a few far pixels do not move."""
        added = np.zeros((len(self._frames), lines.size))
        for line in np.unique(lines):
            away = self._values(key(int(line)))
            away -= away.mean(axis=0)
            cut = int(TRIMMED * away.shape[1])
            away.sort(axis=1)
            added[:, lines == line] = away[:, cut : away.shape[1] - cut].mean(axis=1)[:, None]
        return added

    def _values(self, key: Any) -> Real:
        """Return values with drift taken out, frames × what the key asks for."""
        known = zip(self._frames, self._factors, self._levels, strict=True)
        return np.array([(frame[key].astype(np.float64) - level) * factor for frame, factor, level in known])

    def _of_two(self, key: Any) -> NDArray[np.float32]:
        """Return half the squared difference; levels of equal frames cancel but for what float32 leaves of them."""
        (one, other), (factor, second) = self._frames, self._factors * sqrt(0.5)
        apart, less = one[key].astype(self._kind), other[key].astype(self._kind)
        apart *= self._kind(factor)
        less *= self._kind(second)
        apart -= less
        between = float(factor * self._levels[0] - second * self._levels[1])
        if between:
            apart -= self._kind(between)
        apart *= apart
        return np.asarray(apart, dtype=np.float32)


def _equal(frames: Frames) -> tuple[Places, Places]:
    """Return rows and columns of the pixels that hold the same code in every frame."""
    (m, n), rows, columns = frames[0].shape, [], []
    height = max(1, STRIP // n)
    for y in range(0, m, height):
        first = frames[0][y : y + height]
        same = np.equal(first, frames[1][y : y + height])
        for frame in frames[2:]:
            same &= np.equal(first, frame[y : y + height])
        down, across = np.nonzero(same)
        rows.append(down + y)
        columns.append(across)
    return np.concatenate(rows), np.concatenate(columns)


def _as_normal(ratio: Real, count: int) -> Real:
    """Return how many standard deviations of normal noise are as rare as a variance so many times the expected."""
    if count == 2:
        return np.sqrt(ratio)
    rare = special.chdtrc(count - 1, ratio * (count - 1))
    return np.asarray(-special.ndtri(np.maximum(rare, 1e-300) / 2))
