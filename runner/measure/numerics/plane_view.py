"""A flat lattice seen through a distorting lens: homography, centre of distortion, radial and tangential terms.

A place (u, v) of the chart goes through a homography to an ideal position about the centre, and that through the lens.
With n the ideal position over half the frame's diagonal and r its length,

    seen = centre + half · [ n (1 + k1 r² + k2 r⁴ + …) + (2 p1 xy + p2 (r² + 2x²), p1 (r² + 2y²) + 2 p2 xy) ]

so that the scale of the homography is the paraxial one. In one view of one plane a shift of the centre and tangential
terms show the same to first order (p = k1 · shift): either is fitted, not both.

What marks show is not their middle's picture. The centre of area of a disc's picture, and the crossing of two lines
fitted over a window, lie off it by second derivatives of the view; `marks` says which, and the difference is taken off.

References:
    D. C. Brown, Photogrammetric Engineering 32 (1966) 444 (radial and decentring distortion)
    R. Hartley, A. Zisserman, Multiple View Geometry (2004) 4.1, 4.4 (homography by normalised direct linear solution)
    J. Heikkilä, IEEE Trans. Pattern Anal. Mach. Intell. 22 (2000) 1066 (centre of a disc's picture under perspective)
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]

MOST_STEPS = 60
SETTLED = 1e-7
"""Relative fall of the sum of squares that ends the iteration."""
MIDDLE = 0.45
"""Share of the points nearest to the middle that start the homography: there distortion is least."""
PLAIN = 1.3
"""Residuals that scatter less than so many times their uncertainty are noise as far as anyone can tell."""
MOST_ALIKE = 0.9
"""Correlation of neighbours' residuals that is counted at most."""
RINGS = 24
"""Corners of the polygon that stands for a disc."""


@dataclass(frozen=True)
class Lens:
    """Which terms are fitted."""

    radial: int = 3
    """Number of radial terms."""
    centre: bool = True
    """The centre is fitted; else it is held and the tangential terms are fitted."""


@dataclass(frozen=True)
class Marks:
    """What of the chart the points are."""

    kind: str = "points"
    """`points`, `discs` or `crossings`."""
    extent: float | Real = 0.0
    """Radius of a disc, or half the side of a crossing's window, in pitches; of all points, or (n,)."""


@dataclass(frozen=True)
class View:
    """Parameters of a view."""

    plane: Real
    """Homography from places to ideal px about the centre, 3 × 3, last element 1 at the lattice's middle."""
    centre: Real
    """px of the frame, (2,)."""
    radial: Real
    """k1, k2 …"""
    tangential: Real
    """p1, p2."""
    half: float
    """Half the frame's diagonal, px."""

    def ideal(self, places: Real) -> Real:
        """Return where a lens without distortion shows places (n, 2), px about the centre."""
        w = places @ self.plane[2, :2] + self.plane[2, 2]
        return np.asarray((places @ self.plane[:2, :2].T + self.plane[:2, 2]) / w[:, None])

    def distorted(self, ideal: Real) -> Real:
        """Return where the lens shows ideal positions (n, 2), px about the centre."""
        n = ideal / self.half
        x, y = n[:, 0], n[:, 1]
        r2 = x * x + y * y
        factor = np.ones_like(r2)
        power = np.ones_like(r2)
        for k in self.radial:
            power = power * r2
            factor = factor + k * power
        p1, p2 = self.tangential
        out = np.empty_like(n)
        out[:, 0] = x * factor + 2 * p1 * x * y + p2 * (r2 + 2 * x * x)
        out[:, 1] = y * factor + p1 * (r2 + 2 * y * y) + 2 * p2 * x * y
        return np.asarray(out * self.half)

    def seen(self, places: Real) -> Real:
        """Return where places (n, 2) lie in the frame, px."""
        return np.asarray(self.distorted(self.ideal(places)) + self.centre)

    def undistorted(self, points: Real) -> Real:
        """Return the ideal positions (n, 2), px about the centre, of points of the frame; NaN where there are none.

        Newton's method from the points themselves.
        """
        wanted = points - self.centre
        ideal = wanted.copy()
        e = 1e-4 * self.half
        for _ in range(40):
            rest = wanted - self.distorted(ideal)
            across, down = (
                (self.distorted(ideal + step) - self.distorted(ideal - step)) / (2 * e) for step in e * np.eye(2)
            )
            det = across[:, 0] * down[:, 1] - across[:, 1] * down[:, 0]
            det = np.where(np.abs(det) < 0.02, np.nan, det)
            step = np.column_stack(
                [
                    (rest[:, 0] * down[:, 1] - rest[:, 1] * down[:, 0]) / det,
                    (rest[:, 1] * across[:, 0] - rest[:, 0] * across[:, 1]) / det,
                ]
            )
            length = np.maximum(np.hypot(*step.T), 1e-12)
            ideal = ideal + step * np.minimum(1.0, 0.3 * self.half / length)[:, None]
            if np.nanmax(length, initial=0.0) < 1e-9 * self.half:
                break
        ideal[~(np.hypot(*(self.distorted(ideal) - wanted).T) < 1e-6 * self.half)] = np.nan
        return np.asarray(ideal)

    def places(self, points: Real) -> Real:
        """Return the places (n, 2) of the chart that points of the frame show; NaN where there are none."""
        return self.places_of(self.undistorted(points))

    def places_of(self, ideal: Real) -> Real:
        """Return the places (n, 2) of the chart that a lens without distortion shows at ideal positions."""
        out = np.column_stack([ideal, np.ones(len(ideal))]) @ np.linalg.inv(self.plane).T
        return np.asarray(out[:, :2] / out[:, 2:])

    def steps(self, points: Real) -> Real:
        """Return the ideal steps of one column and one row at ideal points (n, 2), as columns of matrices, px."""
        inverse = np.linalg.inv(self.plane)
        at = np.column_stack([points, np.ones(len(points))]) @ inverse.T
        u, v = at[:, 0] / at[:, 2], at[:, 1] / at[:, 2]
        w = self.plane[2, 0] * u + self.plane[2, 1] * v + self.plane[2, 2]
        return np.asarray((self.plane[:2, :2] - points[:, :, None] * self.plane[2, :2]) / w[:, None, None])


@dataclass(frozen=True)
class ViewFit:
    """A fitted view with the covariance of its parameters."""

    view: View
    """The view."""
    covariance: Real
    """Of the parameters from the points' stated uncertainties, p × p."""
    parameters: Real
    """The parameters, (p,)."""
    build: Callable[[Real], View]
    """Makes a view of parameters."""
    residuals: Real
    """Points less the view of their places, px, (n, 2)."""
    shifts: Real
    """What was taken off each point because of its kind of mark, px, (n, 2)."""
    scatter: float
    """Rms of the residuals over their stated uncertainty, freedom allowed for."""
    excess: float
    """What the view does not explain, over the stated uncertainty: by so many times more does a figure scatter."""

    def spread(self, readout: Callable[[View], Real]) -> tuple[Real, Real]:
        """Return figures of the view and their covariance (k × k), by numerical derivatives.

        Args:
            readout: Gives figures (k,) of a view.
        """
        value = readout(self.view)
        size = np.sqrt(np.maximum(np.diag(self.covariance), 0))
        rows = []
        for i, s in enumerate(size):
            step = np.zeros(len(size))
            step[i] = 0.3 * s if s > 0 else 1e-9
            up, down = readout(self.build(self.parameters + step)), readout(self.build(self.parameters - step))
            rows.append((up - down) / (2 * step[i]))
        slopes = np.array(rows)
        return value, np.asarray(slopes.T @ self.covariance @ slopes)


class ViewLost(ArithmeticError):
    """No view fits the points."""


def fit_view(
    points: Real, places: Real, u: Real, frame: tuple[int, int], lens: Lens, marks: Marks, centre: Real | None = None
) -> ViewFit:
    """Fit a view by weighted least squares.

    Args:
        points: (n, 2), px of the frame, pixel centres at +0.5.
        places: Columns and rows of the chart, (n, 2).
        u: Standard uncertainty of each point in each direction, px, (n,).
        frame: Columns and rows of the frame.
        lens: Terms that are fitted.
        marks: What the points are.
        centre: Where the centre is held, or where it starts; None is the frame's middle.

    Raises:
        ViewLost: There are too few points, or the fit does not settle.
    """
    half = float(np.hypot(*frame)) / 2
    start_centre = np.array(frame) / 2 if centre is None else np.asarray(centre, dtype=np.float64)
    middle = places.mean(axis=0)
    span = float(np.abs(places - middle).max())
    normal = np.array([[1 / span, 0, -middle[0] / span], [0, 1 / span, -middle[1] / span], [0, 0, 1]])
    count = 8 + lens.radial + 2
    if len(points) * 2 < count + 8:
        raise ViewLost(f"{len(points)} points do not determine {count} parameters")

    def build(p: Real) -> View:
        h = np.append(p[:8], 1.0).reshape(3, 3) * np.array([[half], [half], [1.0]])
        aside = p[8 + lens.radial :]
        at = start_centre + aside * half if lens.centre else start_centre
        tangential = np.zeros(2) if lens.centre else aside
        return View(h @ normal, at, p[8 : 8 + lens.radial], tangential, half)

    p = _start(points - start_centre, (places - middle) / span, half, count)
    shifts = np.zeros_like(points)
    for _ in range(3 if marks.kind != "points" else 1):
        p, jacobian, rest = _least_squares(build, p, points - shifts, places, u)
        shifts = shifts_of_marks(build(p), places, marks)
    freedom = max(1, rest.size - count)
    scatter = float(np.sqrt(np.sum((rest / u[:, None]) ** 2) / freedom))
    covariance = np.asarray(np.linalg.pinv(jacobian.T @ jacobian, rcond=1e-15, hermitian=True), np.float64)
    excess = np.sqrt(max(0.0, scatter**2 - 1)) * (_together(rest, places) if scatter > PLAIN else 1.0)
    return ViewFit(build(p), covariance, p, build, rest, shifts, scatter, float(excess))


def _together(rest: Real, places: Real) -> float:
    """Return by how much more figures scatter because neighbours' residuals are alike: fewer of them are independent.

    Along each axis the correlation of neighbours ρ leaves (1 - ρ) / (1 + ρ) of the points (a first-order process).
    """
    at = np.round(places - places.min(axis=0)).astype(np.intp)
    grid = np.full((*(at.max(axis=0) + 1), 2), np.nan)
    grid[at[:, 0], at[:, 1]] = rest - rest.mean(axis=0)
    power = np.nanmean(grid**2)
    factor = 1.0
    for axis in (0, 1):
        one, two = np.moveaxis(grid, axis, 0)[:-1], np.moveaxis(grid, axis, 0)[1:]
        alike = float(np.clip(np.nan_to_num(np.nanmean(one * two) / power), 0.0, MOST_ALIKE))
        factor *= (1 + alike) / (1 - alike)
    return float(np.sqrt(factor))


def _start(points: Real, places: Real, half: float, count: int) -> Real:
    """Return parameters of the homography through the points nearest to the centre, all else zero."""
    order = np.argsort(np.hypot(*points.T), kind="stable")
    some = order[: max(12, int(MIDDLE * len(order)))]
    x, y = points[some].T / half
    a, b = places[some].T
    one, none = np.ones_like(a), np.zeros_like(a)
    top = np.column_stack([a, b, one, none, none, none, -x * a, -x * b])
    low = np.column_stack([none, none, none, a, b, one, -y * a, -y * b])
    h, *_ = np.linalg.lstsq(np.vstack([top, low]), np.concatenate([x, y]), rcond=None)
    return np.concatenate([h, np.zeros(count - 8)])


def _least_squares(
    build: Callable[[Real], View], p: Real, points: Real, places: Real, u: Real
) -> tuple[Real, Real, Real]:
    """Return parameters, weighted derivatives and residuals (n, 2) by Levenberg's and Marquardt's method."""
    weight = (1 / np.repeat(u, 2)).reshape(-1, 2)
    rest = points - build(p).seen(places)
    squares, damping = float(np.sum((rest * weight) ** 2)), 1e-3
    for _ in range(MOST_STEPS):
        jacobian = _derivatives(build, p, places, weight)
        normal, right = jacobian.T @ jacobian, jacobian.T @ (rest * weight).ravel()
        while True:
            step = np.linalg.lstsq(normal + damping * np.diag(np.diag(normal) + 1e-30), right, rcond=1e-15)[0]
            new = points - build(p + step).seen(places)
            after = float(np.sum((new * weight) ** 2))
            if np.isfinite(after) and after <= squares:
                break
            damping *= 8
            if damping > 1e9:
                return p, jacobian, rest
        fall, p, rest, squares = squares - after, p + step, new, after
        damping = max(damping / 10, 1e-12)
        if fall <= SETTLED * squares + 1e-12:
            return p, _derivatives(build, p, places, weight), rest
    raise ViewLost(f"the view did not settle in {MOST_STEPS} steps")


def _derivatives(build: Callable[[Real], View], p: Real, places: Real, weight: Real) -> Real:
    columns = []
    for i in range(len(p)):
        e = np.zeros(len(p))
        e[i] = 1e-6
        columns.append(((build(p + e).seen(places) - build(p - e).seen(places)) / 2e-6 * weight).ravel())
    return np.column_stack(columns)


def shifts_of_marks(view: View, places: Real, marks: Marks) -> Real:
    """Return where marks' fitted centres lie off the pictures of their middles, px, (n, 2).

    Of a disc, the centre of area of the polygon that its border becomes. Of a crossing, the offset of each line's
    mean normal distance over the window: the square of half the window over 6, times the line's second derivative.

    Args:
        view: The view.
        places: (n, 2).
        marks: What they are, and how large.
    """
    middle = view.seen(places)
    if marks.kind == "discs":
        turn = 2 * np.pi * np.arange(RINGS) / RINGS
        radius = np.broadcast_to(marks.extent, len(places))[:, None, None]
        ring = radius * np.column_stack([np.cos(turn), np.sin(turn)])
        border = view.seen((places[:, None, :] + ring).reshape(-1, 2)).reshape(len(places), RINGS, 2) - middle[:, None]
        after = np.roll(border, -1, axis=1)
        cross = border[..., 0] * after[..., 1] - border[..., 1] * after[..., 0]
        return np.asarray(((border + after) * cross[..., None]).sum(axis=1) / (3 * cross.sum(axis=1))[:, None])
    if marks.kind == "crossings":
        e = np.broadcast_to(marks.extent, len(places))[:, None]
        normals, offsets = [], []
        for step in (e * [1.0, 0.0], e * [0.0, 1.0]):
            ahead, behind = view.seen(places + step), view.seen(places - step)
            along, bend = (ahead - behind) / 2, ahead + behind - 2 * middle
            across = np.column_stack([-along[:, 1], along[:, 0]])
            normals.append(across)
            offsets.append((across * bend).sum(axis=1) / 6)
        system = np.stack(normals, axis=1)
        return np.asarray(np.linalg.solve(system, np.stack(offsets, axis=1)[..., None])[..., 0])
    return np.zeros_like(middle)
