"""Where a flat chart lies in a frame: a perspective view through a lens with radial distortion.

    (u, v) = H (x, y)            chart mm to an ideal picture, in half diagonals of the frame from its centre
    d = (u, v) - c               from the optical centre
    px = frame centre + half diagonal · (c + d (1 + k1 |d|² + k2 |d|⁴))

A view of few marks cannot tell a lens' numbers well; they are held near zero by what lenses are like (`SPREADS`), so
that what is not told by the marks does no harm between them.

References:
    R. Hartley and A. Zisserman, Multiple View Geometry, 2nd ed. (2003), ch. 4 (direct linear transform).
    D. C. Brown, Photogramm. Eng. 37 (1971) 855 (radial distortion).
"""

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]

SPREADS = (0.5, 0.3, 0.03, 0.03)
"""k1, k2 and the optical centre as lenses have them: up to a fisheye's barrel, 3 % of the half diagonal off."""
TELLS = {0: 0, 7: 1, 9: 2, 12: 4}
"""Marks from which on so many numbers of the lens are fitted: two coordinates each against 8 of the view and them."""
STEPS = 25
SETTLED = 1e-10
DOUBT = 0.02
"""px: standard uncertainty of a mark's centre against which the spreads are weighed."""


@dataclass(frozen=True)
class ChartPose:
    """A solved view. It is a `contract.Pose`."""

    view: tuple[float, ...]
    """The nine numbers of H, row by row, the last one 1."""
    centre: tuple[float, float]
    """Centre of the frame, px."""
    half_diagonal: float
    """px."""
    lens: tuple[float, float, float, float] = (0.0, 0.0, 0.0, 0.0)
    """k1, k2 and the optical centre."""
    rms: float = 0.0
    """Root mean square distance of the marks from where the view has them, px."""

    @cached_property
    def _matrix(self) -> Real:
        return np.array(self.view).reshape(3, 3)

    def to_frame(self, points: Real) -> Real:
        """Turn chart positions (n, 2), mm, into px of the frame, pixel centres at +0.5."""
        return np.asarray(self.centre + self.half_diagonal * _distorted(self.ideal(points), self.lens))

    def to_chart(self, points: Real) -> Real:
        """Turn px of the frame (n, 2) into mm on the chart."""
        seen = (np.asarray(points, dtype=np.float64) - self.centre) / self.half_diagonal
        return projected(np.asarray(np.linalg.inv(self._matrix), dtype=np.float64), _undistorted(seen, self.lens))

    def ideal(self, points: Real) -> Real:
        """Turn chart positions (n, 2), mm, into a picture without distortion, half diagonals from the centre."""
        return projected(self._matrix, np.asarray(points, dtype=np.float64))

    def slopes(self, points: Real) -> Real:
        """Return ∂px/∂mm at chart positions, (n, 2, 2): rows are x and y in the frame."""
        points = np.asarray(points, dtype=np.float64)
        step = 1e-3
        columns = [
            (self.to_frame(points + np.array(d)) - self.to_frame(points - np.array(d))) / (2 * step)
            for d in ((step, 0.0), (0.0, step))
        ]
        return np.stack(columns, axis=-1)

    def plain_scales(self, points: Real) -> Real:
        """Return px to a mm at chart positions, (n,), as a lens without distortion would have them."""
        plain = replace(self, lens=(0.0, 0.0, 0.0, 0.0))
        return np.asarray(np.sqrt(np.abs(np.linalg.det(plain.slopes(points)))), dtype=np.float64)


def projected(matrix: Real, points: Real) -> Real:
    """Return where a perspective view (3, 3) has points (n, 2)."""
    mapped = np.column_stack([points, np.ones(len(points))]) @ matrix.T
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(mapped[:, :2] / mapped[:, 2:], dtype=np.float64)


def _distorted(points: Real, lens: tuple[float, ...]) -> Real:
    k1, k2, cx, cy = lens
    d = points - (cx, cy)
    r2 = np.sum(d * d, axis=1, keepdims=True)
    return np.asarray((cx, cy) + d * (1 + r2 * (k1 + r2 * k2)), dtype=np.float64)


def _undistorted(points: Real, lens: tuple[float, ...]) -> Real:
    """Invert the radius by Newton's method, from where the picture is; beyond a fold it stays near."""
    k1, k2, cx, cy = lens
    d = points - (cx, cy)
    seen = np.hypot(d[:, 0], d[:, 1])
    r = seen.copy()
    for _ in range(30):
        r2 = r * r
        slope = np.maximum(1 + r2 * (3 * k1 + r2 * 5 * k2), 0.05)
        r = np.clip(r - (r * (1 + r2 * (k1 + r2 * k2)) - seen) / slope, 0.0, 4.0)
    factor = np.divide(r, seen, out=np.ones_like(r), where=seen > 0)
    return np.asarray((cx, cy) + d * factor[:, None], dtype=np.float64)


def plane_view(chart: Real, frame: Real) -> Real:
    """Return the perspective view (3, 3) of four or more points by the direct linear transform.

    Args:
        chart: (n, 2), any unit.
        frame: (n, 2), any unit.

    Raises:
        numpy.linalg.LinAlgError: The points determine no view.
    """
    (a, t), (b, s) = (_normal(chart), _normal(frame))
    zero, one = np.zeros(len(a)), np.ones(len(a))
    x, y, u, v = a[:, 0], a[:, 1], b[:, 0], b[:, 1]
    rows = np.concatenate(
        [
            np.column_stack([x, y, one, zero, zero, zero, -u * x, -u * y, -u]),
            np.column_stack([zero, zero, zero, x, y, one, -v * x, -v * y, -v]),
        ]
    )
    view = np.linalg.inv(s) @ np.linalg.svd(rows)[2][-1].reshape(3, 3) @ t
    if not abs(view[2, 2]) > 1e-12:
        msg = "the chart's centre lies at infinity"
        raise np.linalg.LinAlgError(msg)
    return np.asarray(view / view[2, 2], dtype=np.float64)


def _normal(points: Real) -> tuple[Real, Real]:
    """Return points about zero of unit size, and the matrix that makes them so."""
    middle = points.mean(axis=0)
    size = float(np.sqrt(np.mean((points - middle) ** 2))) or 1.0
    return (points - middle) / size, np.array(
        [[1 / size, 0, -middle[0] / size], [0, 1 / size, -middle[1] / size], [0, 0, 1]]
    )


def solve_pose(chart: Real, frame: Real, size: tuple[int, int]) -> ChartPose:
    """Return the view of marks that fits best, with as much of the lens as their number tells.

    Args:
        chart: Centres on the chart (n, 2), mm; four or more.
        frame: Their px in the frame (n, 2).
        size: Columns, rows of the frame.

    Raises:
        numpy.linalg.LinAlgError: The points determine no view.
    """
    centre = np.array(size) / 2
    half = float(np.hypot(*size)) / 2
    seen = (frame - centre) / half
    terms = max(count for least, count in TELLS.items() if len(chart) >= least)
    view = plane_view(chart, seen)
    p = np.concatenate([view.ravel()[:8], np.zeros(terms)])
    reach = float(np.abs(chart).max())
    units = np.array([1 / reach, 1 / reach, 1.0] * 2 + [1 / reach] * 2 + [1.0] * terms)
    weights = DOUBT / half / np.array(SPREADS[:terms])
    rest = _rest(p, chart, seen, weights)
    damping = 1e-6
    for _ in range(STEPS):
        slopes = np.column_stack([(_rest(p + d, chart, seen, weights) - rest) / 1e-6 for d in 1e-6 * np.diag(units)])
        normal = slopes.T @ slopes
        step = np.linalg.solve(normal + damping * np.diag(np.diag(normal)), -slopes.T @ rest) * units
        trial = _rest(p + step, chart, seen, weights)
        if not np.all(np.isfinite(trial)) or float(trial @ trial) > float(rest @ rest):
            damping *= 10
            if damping > 1e3:
                break
            continue
        gain = float(rest @ rest) - float(trial @ trial)
        p, rest, damping = p + step, trial, max(damping / 10, 1e-12)
        if gain <= SETTLED * float(rest @ rest) + 1e-24:
            break
    lens = tuple(float(x) for x in p[8:]) + (0.0,) * (4 - terms)
    k1, k2, cx, cy = lens
    count = 2 * len(chart)
    rms = half * float(np.sqrt(rest[:count] @ rest[:count] / len(chart)))
    view9 = tuple(float(x) for x in [*p[:8], 1.0])
    return ChartPose(view9, (float(centre[0]), float(centre[1])), half, (k1, k2, cx, cy), rms)


def _rest(p: Real, chart: Real, seen: Real, weights: Real) -> Real:
    """Return the distances of all marks from where the view has them, and how far the lens is from a usual one."""
    view = np.append(p[:8], 1.0).reshape(3, 3)
    lens = (*p[8:], *([0.0] * (4 - len(p[8:]))))
    return np.concatenate([(_distorted(projected(view, chart), lens) - seen).ravel(), weights * p[8:]])
