"""What happened to frames between the sensor and the file: lost, repeated, out of order, torn; and their timing.

A camera's counter says it outright. Without one, time stamps do: a gap of about n periods has lost n - 1 frames. Two
frames of a living sensor never hold the same pixels, so equal pixels are one frame delivered twice, and a run of equal
rows in a frame that is new elsewhere is the rest of an older one.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from hashlib import sha256
from itertools import pairwise
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

LEAST_ROWS = 4
"""Equal rows one below the other that make a torn frame; rows of noise are never equal, constant ones do not count."""
UNDITHERED = 0.25
"""Share of a rounding's variance that stays in doubt: where the jitter is half a step, its phase matters that much."""
CLEAR = 4.0
"""Excess variance over its own uncertainty from which its root has a normal spread; below, zero is as likely."""
LEAST_STAMPS = 4
"""Time stamps from which a rate has a spread."""


@dataclass(frozen=True)
class Order:
    """Places of frames in the sequence, from 0, by what is the matter with them."""

    lost: tuple[tuple[int, int], ...] | None
    """Place of the frame after each gap, and how many are lost; None where neither counters nor times tell."""
    repeated: tuple[int, ...]
    """Frames that were there before."""
    reordered: tuple[int, ...] | None
    """Frames that come after a later one; None where neither counters nor times tell."""
    torn: tuple[int, ...]
    """Frames of which some rows belong to the one before."""


@dataclass(frozen=True)
class Timing:
    """Straight line through time stamps over the number of the frame."""

    period: float
    """s."""
    period_u: float
    """Its standard uncertainty."""
    jitter: float
    """Standard deviation of the stamps from the line, s."""
    jitter_u: float
    """Its standard uncertainty."""


def put_in_order(
    counters: Sequence[int | None], times: Sequence[float | None], rows: Sequence[Sequence[bytes]]
) -> Order:
    """Find what is the matter with the order of frames.

    Args:
        counters: Of each frame, or None.
        times: Time stamp of each frame in s, or None.
        rows: Digest of each row of each frame, see `row_digests`.
    """
    same = _same_pixels(rows)
    if all(counter is not None for counter in counters):
        numbers = [int(counter or 0) for counter in counters]
    elif all(time is not None for time in times):
        numbers = numbered([float(time or 0.0) for time in times])
    else:
        return Order(None, tuple(sorted(same)), None, _torn(rows, same))
    seen: set[int] = set()
    repeated, reordered, highest = set(same), [], None
    for place, number in enumerate(numbers):
        if number in seen:
            repeated.add(place)
        elif highest is not None and number < highest:
            reordered.append(place)
        seen.add(number)
        highest = number if highest is None else max(highest, number)
    return Order(_gaps(numbers), tuple(sorted(repeated)), tuple(reordered), _torn(rows, same))


def row_digests(codes: NDArray[np.generic]) -> list[bytes]:
    """Return a short digest of every row; one of equal pixels, which tells nothing, has none."""
    return [
        b"" if bool((row == row.flat[0]).all()) else sha256(np.ascontiguousarray(row).tobytes()).digest()[:12]
        for row in codes
    ]


def timing(numbers: Sequence[int], times: Sequence[float], resolution: float = 0.0) -> Timing | None:
    """Return period and jitter, or None with too few frames.

    Args:
        numbers: Of each frame, gaps and all.
        times: Time stamps, s.
        resolution: Step in which stamps are given, s: its rounding enters the uncertainties and leaves the jitter.
    """
    if len(set(numbers)) < LEAST_STAMPS:
        return None
    n, t = np.array(numbers, dtype=np.float64), np.array(times)
    n, t = n - n.mean(), t - t.mean()
    spread = float(n @ n)
    period = float(n @ t) / spread
    free = len(t) - 2
    rounding = resolution**2 / 12
    variance = float(np.sum((t - period * n) ** 2)) / free
    own = max(0.0, variance - rounding)
    doubt = hypot(variance * sqrt(2 / free), UNDITHERED * rounding)
    jitter = sqrt(own)
    jitter_u = doubt / (2 * jitter) if jitter**2 > CLEAR * doubt else sqrt(doubt)
    return Timing(period, sqrt(max(variance, rounding) / spread), jitter, jitter_u)


def numbered(times: Sequence[float]) -> list[int]:
    """Return the numbers that frames must have by their times: the usual distance of neighbours is one."""
    order = sorted(set(times))
    steps = [after - before for before, after in pairwise(order)]
    period = float(np.median(steps)) if steps else 1.0
    number, numbers = 0, dict.fromkeys(order[:1], 0)
    for before, after in pairwise(order):
        number += max(1, round((after - before) / period))
        numbers[after] = number
    return [numbers[time] for time in times]


def _gaps(numbers: Sequence[int]) -> tuple[tuple[int, int], ...]:
    """Return where numbers are missing: the place of the frame after each gap, and how many."""
    first = {number: place for place, number in reversed(list(enumerate(numbers)))}
    inside = sorted(first)
    return tuple((first[after], after - before - 1) for before, after in pairwise(inside) if after - before > 1)


def _same_pixels(rows: Sequence[Sequence[bytes]]) -> set[int]:
    """Return frames whose pixels were all there before; constant frames tell nothing."""
    seen: set[tuple[bytes, ...]] = set()
    same = set()
    for place, one in enumerate(rows):
        key = tuple(one)
        if key in seen and any(key):
            same.add(place)
        seen.add(key)
    return same


def _torn(rows: Sequence[Sequence[bytes]], same: set[int]) -> tuple[int, ...]:
    """Return frames with a run of rows of the frame before them, and other rows of their own."""
    found = []
    for place in range(1, len(rows)):
        if place in same:
            continue
        run = longest = 0
        for own, before in zip(rows[place], rows[place - 1], strict=False):
            run = run + 1 if own and own == before else 0
            longest = max(longest, run)
        if longest >= LEAST_ROWS:
            found.append(place)
    return tuple(found)
