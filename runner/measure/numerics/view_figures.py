"""Figures that are read off a fitted view: scale, rotation, keystone, distortion in its several forms, bows of rows.

Distortion is D = 100 (H' - H)/H % with H' the image height in the frame and H the ideal one, by the scale on the axis.
Both percentages of the picture's height take a rectangle of the frame's size about the axis and look at its picture:
one is the sag of a side over the picture's height, the other, twice as large, the excess of the sides' mean height over
the height in the middle.

References:
    ISO 17850:2015 4.2, 6.1 (local geometric distortion)
    EBU Tech 3249 (1995), IEC 61146-1:1994 (picture-height distortion: sag over picture height)
    SMIA 1.0 Part 5 (2004) (TV distortion of camera modules: heights at the sides against the middle)
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.plane_view import View

Real = NDArray[np.float64]

ALONG = 41
"""Heights at which a curve of distortion is worked out."""


@dataclass(frozen=True)
class Outlook:
    """Where the frame looks on the chart: through its middle, its sides' middles and its corners."""

    ideal: Real
    """Ideal positions of middle, left, right, upper, lower side, upper left and lower right corner, px, (7, 2)."""
    places: Real
    """Places of the chart there, (7, 2); NaN where the lens's terms have no ideal position."""


def outlook(view: View, frame: tuple[int, int]) -> Outlook:
    """Return where a frame looks.

    Args:
        view: The view.
        frame: Columns and rows.
    """
    w, h = frame
    ends = np.array([[w / 2, h / 2], [0, h / 2], [w, h / 2], [w / 2, 0], [w / 2, h], [0, 0], [w, h]], dtype=np.float64)
    ideal = view.undistorted(ends)
    return Outlook(ideal, view.places_of(ideal))


def axes_of(view: View, at: Outlook) -> Real:
    """Return scale (px to a place), rotation (deg, clockwise) and column over row scale, in the frame's middle.

    The scale is the ideal one, distortion taken out, the geometric mean of both directions.
    """
    step = view.steps(at.ideal[:1])[0]
    scale = np.sqrt(abs(np.linalg.det(step)))
    turn = np.degrees(np.arctan2(step[1, 0] - step[0, 1], step[0, 0] + step[1, 1]))
    return np.array([scale, turn, np.hypot(*step[:, 0]) / np.hypot(*step[:, 1])])


def keystone(view: View, frame: tuple[int, int]) -> Real:
    """Return by how many % the scale at the right border exceeds that at the left, and at the lower that at the upper.

    Of a rectangle of the frame's size, distortion taken out: sides' lengths on the chart, their difference over their
    mean.
    """
    w, h = frame
    corners = np.array([[0, 0], [w, 0], [w, h], [0, h]], dtype=np.float64) - view.centre
    inverse = np.linalg.inv(view.plane)
    at = np.column_stack([corners, np.ones(4)]) @ inverse.T
    place = at[:, :2] / at[:, 2:]
    upper, right, lower, left = np.hypot(*(np.roll(place, -1, axis=0) - place).T)
    return np.array([200 * (left - right) / (left + right), 200 * (upper - lower) / (upper + lower)])


def reach(at: Outlook) -> Real:
    """Return how far the frame looks on the chart, in places: width, height and diagonal, each through the middle."""
    return np.asarray(np.hypot(*(at.places[2::2] - at.places[1::2]).T))


def arms(at: Outlook) -> Real:
    """Return how far the frame looks to the left, right, up, down and into two corners from its middle, in places."""
    return np.asarray(np.hypot(*(at.places[1:] - at.places[0]).T))


def distortion(view: View, heights: Sequence[float] | Real) -> Real:
    """Return the distortion at image heights in the frame, %; the radial terms alone.

    Args:
        view: The view.
        heights: H' over half the frame's diagonal.
    """
    wanted = np.asarray(heights, dtype=np.float64)
    n = wanted.copy()
    for _ in range(60):
        value, slope = _radial(view, n)
        step = np.clip((wanted - value) / np.where(np.abs(slope) < 0.02, np.nan, slope), -0.2, 0.2)
        n = n + step
        if np.nanmax(np.abs(step), initial=0.0) < 1e-12:
            break
    n = np.where(np.abs(_radial(view, n)[0] - wanted) < 1e-8, n, np.nan)
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(np.where(wanted > 0, 100 * (wanted / n - 1), 0.0))


def _radial(view: View, n: Real) -> tuple[Real, Real]:
    """Return the height in the frame of an ideal one, and its derivative."""
    value, slope, power = n.copy(), np.ones_like(n), n.copy()
    for i, k in enumerate(view.radial):
        power = power * n * n
        value = value + k * power
        slope = slope + (2 * i + 3) * k * power / np.where(n == 0, 1, n)
    return value, slope


def picture_height(view: View, frame: tuple[int, int]) -> Real:
    """Return the distortion of the picture's height, %: sag over height (EBU), sides against middle (SMIA).

    Both are the mean of the upper and lower, or left and right, side, of a rectangle of the frame's size about the
    axis.
    """
    w, h = frame
    places = np.array([[x, y] for y in (-h / 2, h / 2) for x in (-w / 2, 0.0, w / 2)])
    seen = View(view.plane, np.zeros(2), view.radial, np.zeros(2), view.half).distorted(places)
    left, middle, right = seen[3:, 1] - seen[:3, 1]
    sides = (left + right) / 2
    return np.array([100 * (sides - middle) / 2 / middle, 100 * (sides - middle) / middle])


def largest_bow(view: View, places: Real, axis: int) -> float:
    """Return the largest bow of a row or a column: its farthest point from the chord between its ends, % of the chord.

    Args:
        view: The view.
        places: Columns and rows that were seen, (n, 2).
        axis: 1 takes rows, 0 columns.
    """
    order = np.lexsort((places[:, 1 - axis], places[:, axis]))
    line = places[order, axis]
    starts = np.flatnonzero(np.append(True, np.diff(line) > 0))
    lengths = np.diff(np.append(starts, len(line)))
    seen = view.seen(places[order])
    first = seen[starts]
    chord = seen[starts + lengths - 1] - first
    of = np.repeat(np.arange(len(starts)), lengths)
    dx, dy = (seen - first[of]).T
    size = np.maximum((chord**2).sum(axis=1), 1e-12)
    away = np.abs(chord[of, 0] * dy - chord[of, 1] * dx) / size[of]
    bows = np.where(lengths >= 3, np.maximum.reduceat(away, starts), 0.0)
    return 100 * float(bows.max())
