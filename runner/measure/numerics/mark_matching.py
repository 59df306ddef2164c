"""Tells which found mark is which of a known arrangement, in any view of it, turned or mirrored.

Three marks of the arrangement are held against all triples of found ones; each gives an affine view whose sizes must
agree with the found marks' own. The best are refined to perspective views with a lens. An arrangement without symmetry
fits one way only, and an arrangement of another chart does not fit: six marks have four coordinates more than a view.
"""

from dataclasses import dataclass
from itertools import combinations, permutations

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.chart_pose import ChartPose, plane_view, projected, solve_pose

Real = NDArray[np.float64]

TRIPLES = 14
"""Triples of the arrangement that are tried: of so many large ones some are without the marks that are missing."""
SIZES = 1.35
"""A found mark's size against that of a view, either way: tilt and lens distortion change it so much."""
NEAR = 0.1
"""Of the arrangement's diagonal: so far an affine view is off where tilt and a wide lens bend it."""
REFINED = 24
"""Views that are refined."""
LEAST = 6
"""Marks that must fit."""
LEAST_SHARE = 0.7
"""Of the marks that lie in the frame, so many must be found."""
TIGHT = 0.3
"""Diameters of a mark from where the view has it: rough centres are better, other arrangements are not."""


@dataclass(frozen=True)
class Match:
    """An arrangement found."""

    pose: ChartPose
    """The view, from rough centres."""
    marks: tuple[int, ...]
    """Numbers of the arrangement's marks."""
    found: tuple[int, ...]
    """Numbers of the found marks that they are."""


def match_marks(
    arrangement: Real, diameter: float, centres: Real, radii: Real, size: tuple[int, int]
) -> tuple[Match | None, int]:
    """Return the arrangement as found, or None, and how many marks fit at most.

    Args:
        arrangement: (n, 2), mm.
        diameter: Of a mark, mm.
        centres: Found marks (m, 2), px.
        radii: Their radii, px.
        size: Columns, rows of the frame.
    """
    if len(centres) < 3:
        return None, len(centres)
    best: Match | None = None
    most = min(len(arrangement), len(centres))
    tried: set[tuple[int, ...]] = set()
    for view in _affine_views(arrangement, diameter, centres, radii):
        begun = _begun(view, arrangement, centres)
        if begun in tried:
            continue
        tried.add(begun)
        match = _refined(view, arrangement, diameter, centres, size)
        if match is None:
            continue
        if best is None or (len(match.marks), -match.pose.rms) > (len(best.marks), -best.pose.rms):
            best = match
        if len(best.marks) == most:
            break
    if best is None:
        return None, 0
    good = convincing(len(best.marks), best.pose, arrangement, size)
    return (best if good else None), len(best.marks)


def convincing(count: int, pose: ChartPose, arrangement: Real, size: tuple[int, int]) -> bool:
    """Tell whether so many marks are enough of those that a view has in the frame."""
    where = pose.to_frame(arrangement)
    inside = int(np.sum(np.all((where > 0) & (where < size), axis=1)))
    return count >= max(LEAST, LEAST_SHARE * inside)


def _affine_views(arrangement: Real, diameter: float, centres: Real, radii: Real) -> list[Real]:
    """Return the affine views, (2, 3) each, under which most marks lie near found ones, best first."""
    found = np.array(list(permutations(range(len(centres)), 3)))
    corners = np.concatenate([centres[found], np.ones((len(found), 3, 1))], axis=2)
    wanted = 2 * radii[found] / diameter
    near = NEAR * float(np.hypot(*np.ptp(arrangement, axis=0)))
    plain = np.column_stack([arrangement, np.ones(len(arrangement))])
    scored: list[tuple[float, Real]] = []
    for triple in _triples(arrangement):
        views = np.linalg.inv(plain[list(triple)]) @ corners[:, :, :2]  # (t, 3, 2): chart to frame
        scales = np.sqrt(np.abs(np.linalg.det(views[:, :2, :])))
        ratio = scales[:, None] / wanted
        views, scales = (part[np.all((ratio < SIZES) & (ratio > 1 / SIZES), axis=1)] for part in (views, scales))
        if not len(views):
            continue
        places = plain @ views
        gaps = np.min(np.linalg.norm(places[:, :, None, :] - centres[None, None], axis=3), axis=2) / scales[:, None]
        hits = gaps < near
        score = hits.sum(axis=1) - np.where(hits, gaps, 0).sum(axis=1) / near / len(arrangement)
        scored += [(float(score[n]), views[n]) for n in np.argsort(-score)[:REFINED]]
    scored.sort(key=lambda pair: -pair[0])
    return [view.T for _, view in scored[:REFINED]]


def _triples(arrangement: Real) -> list[tuple[int, int, int]]:
    """Return large triangles of the arrangement, no mark in too many of them."""

    def area(triple: tuple[int, int, int]) -> float:
        a, b, c = arrangement[list(triple)]
        return -abs(float((b - a)[0] * (c - a)[1] - (b - a)[1] * (c - a)[0]))

    chosen: list[tuple[int, int, int]] = []
    uses = np.zeros(len(arrangement))
    for triple in sorted(combinations(range(len(arrangement)), 3), key=area):
        if uses[list(triple)].max() < 1 + 3 * TRIPLES / len(arrangement):
            chosen.append(triple)
            uses[list(triple)] += 1
        if len(chosen) == TRIPLES:
            break
    return chosen


def _begun(view: Real, arrangement: Real, centres: Real) -> tuple[int, ...]:
    """Return which found mark lies nearest to each of the arrangement's under an affine view."""
    places = arrangement @ view[:, :2].T + view[:, 2]
    return tuple(int(n) for n in np.linalg.norm(places[:, None, :] - centres[None], axis=2).argmin(axis=1))


def _refined(view: Real, arrangement: Real, diameter: float, centres: Real, size: tuple[int, int]) -> Match | None:
    """Turn an affine view into a perspective one, drawing the limit within which marks belong together tighter."""
    places = arrangement @ view[:, :2].T + view[:, 2]
    scale = float(np.sqrt(abs(np.linalg.det(view[:, :2]))))
    near = NEAR * float(np.hypot(*np.ptp(arrangement, axis=0)))
    for limit in (near, near / 2, near / 4, TIGHT * diameter, TIGHT * diameter):
        marks, found = _pairs(places, centres, limit * scale)
        if len(marks) < LEAST:
            return None
        try:
            if limit > near / 4:
                places = projected(plane_view(arrangement[marks], centres[found]), arrangement)
            else:
                pose = solve_pose(arrangement[marks], centres[found], size)
                places = pose.to_frame(arrangement)
        except np.linalg.LinAlgError:
            return None
        if not np.all(np.isfinite(places)):
            return None
    limit = TIGHT * diameter * scale
    if np.linalg.norm(places[marks] - centres[found], axis=1).max() > limit:
        return None
    return Match(pose, tuple(marks), tuple(found))


def _pairs(places: Real, centres: Real, limit: float) -> tuple[list[int], list[int]]:
    """Return marks and found marks that are each other's nearest, within a limit in px."""
    gaps = np.linalg.norm(places[:, None, :] - centres[None], axis=2)
    nearest = gaps.argmin(axis=1)
    marks = [n for n, m in enumerate(nearest) if gaps[n, m] < limit and int(gaps[:, m].argmin()) == n]
    return marks, [int(nearest[n]) for n in marks]
