"""Arrangements of marks: whether one looks like itself, or like another, in another position or in a mirror.

An arrangement that does can be found the wrong way round. Compared are all turns, shifts and sizes, seen as drawn and
mirrored, that bring a far pair of marks onto another pair; tilt and lens distortion move marks by less than the
diameter that counts as the same place.
"""

from collections.abc import Sequence
from itertools import permutations
from math import hypot

Point = tuple[float, float]

LEAST_MARKS = 8
"""Eight marks give 16 coordinates for the 8 numbers of a perspective view and two of a lens: six are left to tell."""
SIZES = (0.8, 1.25)
"""Two charts are held against each other in this range of relative sizes: a camera does not know how far they are."""


def allowed_doubles(count: int) -> int:
    """Return how many marks of an arrangement may coincide with others in a wrong position: half of them."""
    return count // 2


def likeness(at: Sequence[Point], diameter: float) -> str:
    """Return how an arrangement looks like itself in another position, in words, or nothing.

    Args:
        at: Centres, mm.
        diameter: Of the marks, mm: that near, two places are the same.
    """
    count, words = _most_alike(at, at, diameter, itself=True)
    return f"{count} of {len(at)} marks fall onto marks when it is {words}" if count > allowed_doubles(len(at)) else ""


def taken_for(one: Sequence[Point], other: Sequence[Point], diameter: float) -> str:
    """Return how one arrangement can be taken for another, in words, or nothing."""
    count, words = _most_alike(one, other, diameter, itself=False)
    return f"{count} of {len(one)} marks fall onto marks of it {words}" if count > allowed_doubles(len(one)) else ""


def _most_alike(one: Sequence[Point], other: Sequence[Point], near: float, *, itself: bool) -> tuple[int, str]:
    """Complex numbers: z → a z + b turns, sizes and shifts; conjugated before, it mirrors too."""
    points = [complex(*p) for p in one]
    best, words = 0, ""
    targets = [complex(*p) for p in other]
    for i, j in _far_pairs(one):
        for k, m in permutations(range(len(targets)), 2):
            for mirrored in (False, True):
                seen = [z.conjugate() for z in points] if mirrored else points
                a = (targets[m] - targets[k]) / (seen[j] - seen[i])
                if not SIZES[0] <= abs(a) <= SIZES[1] or (itself and not mirrored and (i, j) == (k, m)):
                    continue
                b = targets[k] - a * seen[i]
                count = sum(any(abs(a * z + b - t) < near for t in targets) for z in seen)
                if count > best:
                    best, words = count, "mirrored" if mirrored else "turned" if itself else "as drawn"
    return best, words


def _far_pairs(at: Sequence[Point]) -> list[tuple[int, int]]:
    """Return some far pairs that share no mark: a likeness that spares one of them shows in another."""
    pairs = sorted(
        ((i, j) for i in range(len(at)) for j in range(i)),
        key=lambda p: -hypot(at[p[0]][0] - at[p[1]][0], at[p[0]][1] - at[p[1]][1]),
    )
    chosen: list[tuple[int, int]] = []
    for pair in pairs:
        if not any(set(pair) & set(done) for done in chosen):
            chosen.append(pair)
    return chosen[: len(at) // 2]
