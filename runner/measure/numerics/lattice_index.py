"""Tells which place of a square lattice each of many points is, under rotation, keystone, distortion and gaps.

From a seed whose neighbours lie in opposite pairs, indices spread to neighbours that lie where two steps already known
say, so that the lattice may bend from place to place by more than its own pitch. A point that nothing predicts keeps no
index; a gap is jumped over.

References:
    C. F. Gauss, Disquisitiones arithmeticae (1801) 171 (reduced basis of a lattice); the spreading is common practice,
    no source.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]
Whole = NDArray[np.intp]
Flags = NDArray[np.bool_]

NEIGHBOURS = 9
"""Nearest points looked at about a seed, itself included."""
MATCH = 0.2
"""A seed's opposite neighbours are so far from symmetric at most, in steps."""
REACH = 0.28
"""A point may lie so far from where its neighbour's steps put it, in steps."""
BEND = 0.18
"""A cell may miss closing, or a row bend from one step to the next, by so much, in steps: views bend by less."""
MAIN = 0.6
"""Share of all cells that close in one patch: there is a lattice; else they close by chance."""
SEEDS = 8
"""Seeds that are tried, from the middle outwards; the largest lattice counts."""
FAR = 250
"""Places that an index may lie from the seed's."""
STEPS: Whole = np.array([(1, 0), (-1, 0), (0, 1), (0, -1)], dtype=np.intp)
JUMPS: Whole = np.array([(2, 0), (-2, 0), (0, 2), (0, -2), (1, 1), (1, -1), (-1, 1), (-1, -1)], dtype=np.intp)


@dataclass(frozen=True)
class LatticeIndex:
    """Which points form a lattice, and where in it they lie."""

    members: Whole
    """Numbers of the points that have a place, (m,)."""
    places: Whole
    """Column and row of each, from 0, (m, 2): columns count along the direction nearest to +x, rows along +y."""
    steps: Real
    """Steps of one column and one row about each, as columns of a matrix, px, (m, 2, 2)."""

    @property
    def size(self) -> tuple[int, int]:
        """Columns and rows that the places span."""
        if not len(self.members):
            return 0, 0
        columns, rows = self.places.max(axis=0) + 1
        return int(columns), int(rows)


def index_lattice(points: Real, parity: Whole | None = None) -> LatticeIndex:
    """Give points their places on the largest lattice that is found among them.

    Args:
        points: (n, 2), px, x to the right, y down.
        parity: For each point 0 or 1, which neighbours in a row or column do not share; None where there is none.
    """
    from scipy.spatial import cKDTree  # noqa: PLC0415 - heavy

    if len(points) < NEIGHBOURS:
        return _nothing()
    tree = cKDTree(points)
    best = _nothing()
    tried: set[int] = set()
    turn = 0
    for seed, basis in _seeds(points, tree, parity):
        if seed in tried:
            continue
        turn += 1
        found = _Spread(points, tree, parity, seed, basis).result()
        tried.update(found.members.tolist())
        if len(found.members) > len(best.members):
            best = found
        if turn >= SEEDS or 2 * len(best.members) > len(points):
            break
    return best


def _nothing() -> LatticeIndex:
    return LatticeIndex(np.zeros(0, np.intp), np.zeros((0, 2), np.intp), np.zeros((0, 2, 2)))


def _seeds(points: Real, tree: Any, parity: Whole | None) -> list[tuple[int, Real]]:
    """Return points with neighbours in opposite pairs, each with its two steps, from the points' middle outwards."""
    count = min(NEIGHBOURS, len(points))
    _, near = tree.query(points, k=count)
    away = points[near[:, 1:]] - points[:, None, :]
    if parity is not None:  # along rows and columns only
        other = parity[near[:, 1:]] != parity[:, None]
        away = np.where(other[..., None], away, np.inf)
        order = np.argsort(np.hypot(away[..., 0], away[..., 1]), axis=1)
        away = np.take_along_axis(away, order[..., None], axis=1)
    length = np.hypot(away[..., 0], away[..., 1])
    first = away[:, 0]
    with np.errstate(invalid="ignore"):
        cross = np.abs(first[:, None, 0] * away[..., 1] - first[:, None, 1] * away[..., 0])
        aside = np.isfinite(length) & (cross > 0.5 * length * length[:, :1])
    second = away[np.arange(len(points)), aside.argmax(axis=1)]
    good = aside.any(axis=1) & np.isfinite(first).all(axis=1)
    for step in (first, second):
        with np.errstate(invalid="ignore"):
            opposite = np.nan_to_num(np.hypot(*np.moveaxis(away + step[:, None, :], 2, 0)), nan=np.inf).min(axis=1)
            good &= opposite < MATCH * np.hypot(*step.T)
    where = np.flatnonzero(good)
    middle = np.median(points, axis=0)
    order = where[np.argsort(np.hypot(*(points[where] - middle).T), kind="stable")]
    return [(int(n), _oriented(first[n], second[n])) for n in order]


def _oriented(one: Real, other: Real) -> Real:
    """Return two steps as columns: the one nearer to the x axis to the right, the other one downwards."""
    across, down = (one, other) if abs(one[0]) * np.hypot(*other) >= abs(other[0]) * np.hypot(*one) else (other, one)
    return np.column_stack([across if across[0] > 0 else -across, down if down[1] > 0 else -down])


class _Spread:
    """Indices spreading from one seed."""

    def __init__(self, points: Real, tree: Any, parity: Whole | None, seed: int, basis: Real) -> None:
        self.points, self.tree, self.parity = points, tree, parity
        self.grid: Whole = np.full((2 * FAR + 1, 2 * FAR + 1), -1, dtype=np.intp)
        self.place: Whole = np.zeros((len(points), 2), dtype=np.intp)
        self.known = np.zeros(len(points), dtype=bool)
        self.steps: Real = np.zeros((len(points), 2, 2))
        self.seed = seed
        self.steps[seed] = basis
        self._set(np.array([seed]), np.array([[FAR, FAR]]))
        front = np.array([seed])
        while len(front):
            front = self._advance(front, STEPS, REACH)
            if not len(front):
                front = self._advance(np.flatnonzero(self.known), JUMPS, 1.2 * REACH)

    def _set(self, which: Whole, places: Whole) -> None:
        self.known[which] = True
        self.place[which] = places
        self.grid[places[:, 0], places[:, 1]] = which

    def _advance(self, front: Whole, steps: Whole, reach: float) -> Whole:
        """Give places to what lies where the front's own steps lead; return what is new."""
        source = np.repeat(front, len(steps))
        step = np.tile(steps, (len(front), 1))
        place = self.place[source] + step
        free = (place.min(axis=1) > 3) & (place.max(axis=1) < 2 * FAR - 4)
        free &= self.grid[np.clip(place[:, 0], 0, 2 * FAR), np.clip(place[:, 1], 0, 2 * FAR)] < 0
        source, step, place = source[free], step[free], place[free]
        if not len(source):
            return np.asarray(source)
        move = np.einsum("nij,nj->ni", self.steps[source], step)
        distance, hit = self.tree.query(self.points[source] + move)
        size = np.hypot(*move.T) / np.hypot(*step.T)
        good = (distance < reach * size) & ~self.known[hit]
        if self.parity is not None:
            flips = (place - self.place[self.seed]).sum(axis=1) % 2
            good &= self.parity[hit] == (self.parity[self.seed] + flips) % 2
        distance, hit, place, source = (distance / size)[good], hit[good], place[good], source[good]
        order = np.argsort(distance, kind="stable")
        hit, place, source = hit[order], place[order], source[order]
        _, one = np.unique(hit, return_index=True)  # the nearest prediction of each point …
        hit, place, source = hit[np.sort(one)], place[np.sort(one)], source[np.sort(one)]
        _, one = np.unique(place[:, 0] * (4 * FAR) + place[:, 1], return_index=True)  # … and the nearest of each place
        hit, place, source = hit[one], place[one], source[one]
        self._set(hit, place)
        self.steps[hit] = self.steps[source]
        self._refresh(hit)
        return np.asarray(hit)

    def _refresh(self, which: Whole) -> None:
        """Take the steps about points from their neighbours, as far as these are known."""
        self.steps[which] = _steps_of(self.points, self.grid, self.place[which], self.steps[which])

    def result(self) -> LatticeIndex:
        """Return the lattice: the largest patch of cells that close, and what continues its rows and columns."""
        used = np.argwhere(self.grid >= 0)
        low, high = used.min(axis=0) - 3, used.max(axis=0) + 4
        self.grid = self.grid[low[0] : high[0], low[1] : high[1]]
        self.place = self.place - low
        at = _positions(self.points, self.grid)
        kept = _attached(at, _patch(at))
        for place in np.argwhere((self.grid >= 0) & ~kept):
            self.known[self.grid[tuple(place)]] = False
            self.grid[tuple(place)] = -1
        members = np.flatnonzero(self.known)
        if not len(members):
            return _nothing()
        self._refresh(members)
        places = self.place[members]
        return LatticeIndex(members, places - places.min(axis=0), self.steps[members])


def _patch(at: Real) -> Flags:
    """Return the places in cells that are nearly parallelograms; of many patches of them in the largest alone."""
    from scipy.ndimage import label  # noqa: PLC0415 - heavy

    corners = at[:-1, :-1], at[1:, :-1], at[:-1, 1:], at[1:, 1:]
    close = np.hypot(*np.moveaxis(corners[0] + corners[3] - corners[1] - corners[2], 2, 0))
    sides = [np.hypot(*np.moveaxis(corners[n] - corners[0], 2, 0)) for n in (1, 2)]
    with np.errstate(invalid="ignore"):
        cells, count = label(close < BEND * np.minimum(*sides))
    kept = np.zeros(at.shape[:2], dtype=bool)
    if count:
        sizes = np.bincount(cells.ravel())[1:]
        sound = sizes.max() > MAIN * sizes.sum()  # what gaps have cut off from a large lattice is part of it too
        meant = cells > 0 if sound else cells == sizes.argmax() + 1
        for i, j in ((0, 0), (1, 0), (0, 1), (1, 1)):
            kept[i : i - 1 or None, j : j - 1 or None] |= meant
    return kept


def _attached(at: Real, kept: Flags) -> Flags:
    """Return the places of a patch with those that continue a row or column by two known steps of it."""
    while True:
        more = np.zeros_like(kept)
        for axis in (0, 1):
            for side in (1, -1):
                near, far = (np.roll(kept, n * side, axis) for n in (1, 2))
                one, two = (np.roll(at, n * side, axis) for n in (1, 2))
                off = np.hypot(*np.moveaxis(at - 2 * one + two, 2, 0))
                with np.errstate(invalid="ignore"):
                    more |= near & far & (off < BEND * np.hypot(*np.moveaxis(one - two, 2, 0)))
        more &= ~np.isnan(at[..., 0]) & ~kept
        if not more.any():
            return kept
        kept = kept | more


def _positions(points: Real, grid: Whole) -> Real:
    """Return the point of every place, NaN where there is none."""
    return np.where((grid >= 0)[..., None], points[grid], np.nan)


def _steps_of(points: Real, grid: Whole, places: Whole, old: Real) -> Real:
    """Return the steps about places from neighbours: central differences, else one-sided, else the old ones."""
    out = old.copy()
    for axis in (0, 1):
        step = np.eye(2, dtype=np.intp)[axis]
        mine, before, after = (grid[tuple((places + s * step).T)] for s in (0, -1, 1))
        start, end = np.where(before >= 0, before, mine), np.where(after >= 0, after, mine)
        count = (before >= 0).astype(float) + (after >= 0)
        some = count > 0
        out[some, :, axis] = ((points[end] - points[start]) / np.maximum(count, 1)[:, None])[some]
    return out


def gaps(places: Whole) -> Whole:
    """Return the places inside a lattice's outline that hold no point, (k, 2).

    A place is inside if points lie on both sides of it in its row and in its column.

    Args:
        places: Columns and rows of the points, from 0, (m, 2).
    """
    columns, rows = places.max(axis=0) + 1
    there = np.zeros((columns, rows), dtype=bool)
    there[places[:, 0], places[:, 1]] = True
    inside = ~there
    for axis in (0, 1):
        before = np.logical_or.accumulate(there, axis=axis)
        after = np.flip(np.logical_or.accumulate(np.flip(there, axis), axis=axis), axis)
        inside &= before & after
    return np.argwhere(inside)


@dataclass(frozen=True)
class Turned:
    """How a lattice's places are to be counted so that its marks lie where the chart has them."""

    places: Whole
    """Column and row of each point, from the first mark, (m, 2)."""
    quarter_turns: int
    """By how many quarter turns, clockwise on screen, the chart stands turned."""
    mirrored: bool
    """The marks fit only if the chart is seen from behind."""


def by_marks(places: Whole, marked: Whole, pattern: Sequence[tuple[int, int]]) -> Turned | None:
    """Count places from the chart's first mark along the chart's own axes; None if the marks lie otherwise.

    Args:
        places: Columns and rows as found, (m, 2).
        marked: The same of the marked points, (k, 2).
        pattern: Columns and rows of the chart's marks.
    """
    if len(marked) != len(pattern):
        return None
    wanted = np.array(pattern, dtype=np.intp)
    target = {tuple(one) for one in (wanted - wanted[0]).tolist()}
    for mirrored in (False, True):
        for turns in range(4):
            m = np.linalg.matrix_power(np.array([[0, 1], [-1, 0]]), turns)
            if mirrored:
                m = np.array([[-1, 0], [0, 1]]) @ m
            turned = marked @ m.T
            for first in turned:
                if {tuple(one) for one in (turned - first).tolist()} == target:
                    return Turned(places @ m.T - first, turns, mirrored)
    return None
