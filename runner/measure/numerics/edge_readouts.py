"""Single values read from a fitted edge's curves: crossings, widths, overshoot, phase, symmetry, angle, modulation.

Each is returned with its derivative to everything that was fitted, so that every part of its uncertainty follows to
first order; where a curve is flat or a value sits at its bound, u comes from draws of the posterior (JCGM 101:2008).

References:
    ISO 12233:2014 6.2 (frequencies along the normal).
    Kelly, Statistical Method (1923): skewness of a distribution from its 10, 50 and 90 % points (from memory).
"""

from collections.abc import Callable

import numpy as np

from runner.errors import MeasurementRefused
from runner.measure.numerics import edge_model as em
from runner.measure.numerics.edge_curves import Curves, Gradient
from runner.measure.numerics.line_spread import Array

GRID = 0.005
"""cy/px; step of the grid on which crossings are looked for."""
FLAT = 0.3
"""Relative difference of the crossings of the band's two sides from which first order is no longer trusted."""
LEAST_MODULUS = 0.02
"""Phase below this modulus is not given: a hundredth of the signal's own rounding would turn it."""


def level(curves: Curves, share: float) -> Gradient:
    """Return where the edge spread crosses a share of the step: next to the middle, px from the fitted edge line.

    Raises:
        MeasurementRefused: `not defined`, it crosses nowhere.
    """
    if share in curves.levels:
        return curves.levels[share]
    e, nodes = curves.at_nodes, curves.nodes
    rising = np.flatnonzero((e[:-1] <= share) & (e[1:] > share))
    if not rising.size:
        raise MeasurementRefused("not defined", f"the edge spread does not cross {100 * share:g} % of the step")
    at = int(rising[np.argmin(np.abs(nodes[rising]))])
    x = float(np.interp(share, e[at : at + 2], nodes[at : at + 2]))
    for _ in range(2):
        value, _, slope, _ = curves.at(x)
        x += float(np.clip((share - value) / slope, -0.05, 0.05)) if slope > 0 else 0.0
    _, by, slope, _ = curves.at(x)
    curves.levels[share] = Gradient(x, curves.full(-by / slope))
    return curves.levels[share]


def edge_width(curves: Curves) -> Gradient:
    """Return the distance from 10 to 90 % of the step, px."""
    ten, ninety = level(curves, 0.1), level(curves, 0.9)
    return Gradient(ninety.value - ten.value, ninety.by - ten.by)


def asymmetry(curves: Curves) -> Gradient:
    """Return Kelly's skewness of the line spread, %: (d90 + d10 - 2 d50) / (d90 - d10), positive: longer to bright."""
    ten, fifty, ninety = (level(curves, share) for share in (0.1, 0.5, 0.9))
    width = ninety.value - ten.value
    value = (ninety.value + ten.value - 2 * fifty.value) / width
    by = (ninety.by + ten.by - 2 * fifty.by - value * (ninety.by - ten.by)) / width
    return Gradient(100 * value, 100 * by)


def full_width(curves: Curves) -> Gradient:
    """Return the full width of the line spread at half its maximum, px.

    Raises:
        MeasurementRefused: `not defined`, the line spread does not fall to half on either side.
    """
    density, nodes = curves.density_at_nodes, curves.nodes
    top = int(np.argmax(density))
    peak = float(nodes[top])
    _, _, height, by_height = curves.at(peak)
    ends: list[Gradient] = []
    for way in (-1, 1):
        side = density[top::way]
        below = np.flatnonzero(side < height / 2)
        if not below.size:
            raise MeasurementRefused("not defined", "the line spread does not fall to half its maximum in the region")
        outer = top + way * int(below[0])
        pair = [outer, outer - way]
        x = float(np.interp(height / 2, density[pair], nodes[pair]))
        slope = float((density[pair[1]] - density[pair[0]]) / (nodes[pair[1]] - nodes[pair[0]]))
        for _ in range(2):
            x += float(np.clip((height / 2 - curves.at(x)[2]) / slope, -0.05, 0.05))
        ends.append(Gradient(x, curves.full(-(curves.at(x)[3] - by_height / 2) / slope)))
    return Gradient(ends[1].value - ends[0].value, ends[1].by - ends[0].by)


def beyond(curves: Curves, *, bright: bool) -> Gradient:
    """Return overshoot (bright side) or undershoot (dark side) of the edge spread, % of the step, 0 when none."""
    reach = 6 * edge_width(curves).value + 2
    near = np.abs(curves.nodes) < min(reach, float(curves.nodes[-1]) / 1.2)
    nodes = curves.nodes[near]
    excess = curves.at_nodes[near] - 1 if bright else -curves.at_nodes[near]
    at = int(np.argmax(excess))
    _, by, _, _ = curves.at(float(nodes[at]))
    by = by if bright else -by
    value = max(0.0, float(excess[at]))
    gradient = Gradient(100 * value, curves.full(100 * by))
    if 100 * value > 3 * gradient.u(curves.fit.covariance):
        return gradient
    # at its bound: the greatest of many noisy values, by draws
    columns = curves.fit.linear.model.columns[near]
    parts = np.hstack([columns[:, em.STEP : em.TAIL + 1], columns[:, em.FIXED :]])[::4]
    drawn = curves.draws
    spread = drawn @ parts.T / (drawn @ curves.areas)[:, None]
    most = 100 * np.maximum(0.0, (spread - 1 if bright else -spread).max(axis=1))
    u = float(np.sqrt(np.mean((most - 100 * value) ** 2)))
    return Gradient(100 * value, np.zeros_like(gradient.by), ("not told from none",), u)


Divisor = Callable[[Array], Array]
"""A transfer function that is divided out, by frequency in cy/px."""


def crossing(curves: Curves, modulation: float, most: float, divisor: Divisor = np.ones_like) -> Gradient | None:
    """Return the first frequency at which |H| / divisor falls to a modulation, or None if it does not up to `most`.

    Args:
        curves: The fitted edge.
        modulation: Between 0 and 1.
        most: End of the band, cy/px.
        divisor: What is divided out; 1 by default.
    """
    grid = np.linspace(0.0, most, max(3, int(np.ceil(most / GRID)) + 1))
    part = divisor(grid)
    size, u = (each / part for each in curves.modulus(grid))
    first = _first_below(grid, size, modulation)
    if first is None:
        return None
    near = np.array([first - 1e-4, first + 1e-4])
    slope = float(np.diff(curves.modulus(near)[0] / divisor(near))[0]) / 2e-4
    by = curves.modulus_at(first).by / float(divisor(np.array([first]))[0])
    gradient = Gradient(first, -by / slope if slope < 0 else 0 * by)
    early, late = _first_below(grid, size - u, modulation), _first_below(grid, size + u, modulation)
    linear = gradient.u(curves.fit.covariance)
    if early is not None and late is not None and slope < 0:
        sides = first - early, late - first
        if max(sides) - min(sides) < FLAT * sum(sides) and abs(sum(sides) / 2 - linear) < FLAT * linear:
            return gradient
    u_drawn = _drawn(curves, grid, modulation * part, first)
    return Gradient(first, gradient.by, ("the curve is flat at the crossing",), u_drawn)


def _first_below(grid: Array, size: Array, modulation: float) -> float | None:
    below = np.flatnonzero(size < modulation)
    if not below.size or below[0] == 0:
        return None
    k = int(below[0])
    # a parabola through three points is good to 1e-6 on this grid, a line to 1e-4
    lo = max(0, k - 2)
    x, y = grid[lo : lo + 3], size[lo : lo + 3] - modulation
    a, b, c = np.polyfit(x - grid[k - 1], y, 2)
    roots = np.roots([a, b, c]) if abs(a) > 1e-9 else np.array([-c / b])
    real = roots[np.isreal(roots)].real + grid[k - 1]
    inside = real[(real >= grid[k - 1] - 1e-9) & (real <= grid[k] + 1e-9)]
    if inside.size:
        return float(inside[0])
    return float(np.interp(-modulation, -size[k - 1 : k + 1], grid[k - 1 : k + 1]))


def _drawn(curves: Curves, grid: Array, modulation: Array, value: float) -> float:
    """Standard uncertainty of a crossing from draws; draws without one count as the end of the band."""
    columns = em.shape_transfers(grid, curves.fit.parts, curves.fit.lattice, curves.fit.sides)
    drawn = curves.draws
    size = np.abs(drawn @ columns.T) / (drawn @ curves.areas)[:, None]
    below = size < modulation
    first = np.where(below.any(axis=1), grid[below.argmax(axis=1)], grid[-1])
    return float(np.sqrt(np.mean((first - value) ** 2)))


def phase(curves: Curves, frequency: float) -> Gradient:
    """Return the phase of H about the edge spread's 50 % point, degrees in (-180, 180].

    H(f) = ∫ line spread(x) exp(-2πi f x) dx, x from the 50 % point towards the bright side: a line spread that trails
    towards bright has a negative phase; 180° is reversed contrast.

    Raises:
        MeasurementRefused: `not defined` where the modulus is near zero.
    """
    h, by = curves.transfer(np.array([frequency]))
    size, u = curves.modulus(np.array([frequency]))
    if size[0] < max(LEAST_MODULUS, 3 * float(u[0])):
        raise MeasurementRefused(
            "not defined", f"the modulus at {frequency:g} cy/px is {size[0]:.3f}: its phase is not told from chance"
        )
    middle = level(curves, 0.5)
    turned = complex(h[0]) * np.exp(2j * np.pi * frequency * middle.value)
    value = float(np.degrees(np.angle(turned)))
    derivative = curves.full(np.imag(np.conj(h[0]) * by[0]) / abs(h[0]) ** 2)
    return Gradient(180.0 if value <= -180 else value, np.degrees(derivative + 2 * np.pi * frequency * middle.by))


def angle(curves: Curves) -> Gradient:
    """Return the edge's angle from the nearest pixel axis, degrees in [-45, 45], positive: clockwise on the screen."""
    fit = curves.fit
    by = np.zeros(fit.covariance.shape[0])
    by[em.FIXED + 1] = -np.degrees(1 / fit.parts.line.half)
    return Gradient(float(np.degrees(fit.parts.line.tilt)), by)


def position(curves: Curves) -> Gradient:
    """Return the 50 % point's distance from the region's centre along the normal, at the edge's middle, px."""
    middle = level(curves, 0.5)
    line = curves.fit.parts.line
    by = middle.by.copy()
    even = np.array([1.0, 0.0, -0.5, 0.0, 0.375, 0.0])[: line.coefficients.size]  # Legendre polynomials at 0
    by[em.FIXED : em.FIXED + line.coefficients.size] += even
    return Gradient(middle.value + float(even @ line.coefficients), by)


def modulation(curves: Curves) -> Gradient:
    """Return (bright - dark) / (bright + dark) of the fitted plateaus, %."""
    low, rise = curves.fit.parts.low, curves.rise
    total = 2 * low + rise
    if not total > 0:
        raise MeasurementRefused("not defined", "the two levels add up to less than nothing: check the black level")
    by = curves.full(curves.areas * (2 * low / total**2))
    by[em.LEVEL] = -2 * rise / total**2
    return Gradient(100 * rise / total, 100 * by)


def noise(curves: Curves) -> tuple[float, float]:
    """Return the rms noise of a pixel, mid between both levels, % of the step, and its u."""
    found = curves.fit.noise
    value = 100 * float(np.sqrt((found.low + found.high) / 2)) / curves.rise
    return value, value / float(np.sqrt(2 * found.dof))
