"""Single values read from a fitted edge's curves: crossings, widths, overshoot, phase, symmetry, angle, modulation.

Each is returned with its derivative to everything that was fitted, so that every part of its uncertainty follows to
first order; where a curve is flat or a value sits at its bound, u comes from draws of the posterior (JCGM 101:2008).

References:
    ISO 12233:2014 6.2 (frequencies along the normal).
    Kelly, Statistical Method (1923): skewness of a distribution from its 10, 50 and 90 % points (from memory).
    Efron and Tibshirani, An Introduction to the Bootstrap (1993), ch. 10: estimates of bias (from memory).
"""

import numpy as np

from runner.errors import MeasurementRefused
from runner.measure.numerics import edge_model as em
from runner.measure.numerics.edge_curves import Curves, Gradient
from runner.measure.numerics.line_spread import GRID, Array

LEVELS = (0.1, 0.5, 0.9)
"""Shares of the step whose places widths and symmetry are made of."""
SPIKE_FOOT, SPIKE_HEAD = 0.35, 0.65
"""Shares of the line spread's height between which its half width lies."""
MOST_SPIKE = 2.4
"""Width at the foot over that at the head; 1.56 for a Gaussian, 1.86 for a Lorentzian, 2.44 for an exponential spread
before the pixel rounds its tip."""
KINK = 0.015
"""Kernels round off a kink: noiseless boxes, triangles and exponentials have their half width within 1.5 %."""
CLEAR = 3.0
"""Standard deviations from which an extremum stands out of the noise."""
FLAT = 0.3
"""Relative difference of the crossings of the band's two sides from which first order is no longer trusted."""
LEAST_MODULUS = 0.02
"""Phase below this modulus is not given: a hundredth of the signal's own rounding would turn it."""


def level(curves: Curves, share: float) -> Gradient:
    """Return where the edge spread crosses a share of the step: next to the middle, px from the fitted edge line.

    Raises:
        MeasurementRefused: `not defined`, it crosses nowhere.
    """
    if share not in curves.levels:
        shares = sorted({*LEVELS, share})
        starts = np.array([_rise_through(curves, each) for each in shares])
        value, _, slope, _ = curves.at(starts)
        # one Newton step from the chord between two nodes: good to 1e-7 px
        steps = np.where(slope > 0, (shares - value) / np.where(slope > 0, slope, 1.0), 0.0)
        places = starts + np.clip(steps, -0.05, 0.05)
        _, by, slope, _ = curves.at(places)
        for each, x, row in zip(shares, places, -by / slope[:, None], strict=True):
            curves.levels[each] = Gradient(float(x), curves.full(row))
    return curves.levels[share]


def _rise_through(curves: Curves, share: float) -> float:
    e, nodes = curves.at_nodes, curves.nodes
    rising = np.flatnonzero((e[:-1] <= share) & (e[1:] > share))
    if not rising.size:
        raise MeasurementRefused("not defined", f"the edge spread does not cross {100 * share:g} % of the step")
    at = int(rising[np.argmin(np.abs(nodes[rising]))])
    return float(np.interp(share, e[at : at + 2], nodes[at : at + 2]))


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

    It hangs on the height of one point, which smoothing lowers where the line spread is peaked and raises where it is
    flat: the estimated smoothing is taken off, and counts in full as a standard uncertainty of what is left of it.

    Raises:
        MeasurementRefused: `not defined`, the line spread does not fall to half on either side.
    """
    density, nodes = curves.density_at_nodes, curves.nodes
    top = int(np.argmax(density))
    half = float(density[top]) / 2
    ends, slopes = np.zeros(2), np.zeros(2)
    for k, way in enumerate((-1, 1)):
        below = np.flatnonzero(density[top::way] < half)
        if not below.size:
            raise MeasurementRefused("not defined", "the line spread does not fall to half its maximum in the region")
        outer = top + way * int(below[0])
        pair = [outer, outer - way]
        ends[k] = np.interp(half, density[pair], nodes[pair])
        slopes[k] = (density[pair[1]] - density[pair[0]]) / (nodes[pair[1]] - nodes[pair[0]])
    _refuse_spike(density / density[top], nodes, top)
    ends += np.clip((half - curves.at(ends)[2]) / slopes, -0.05, 0.05)
    by = curves.at(np.append(ends, nodes[top]))[3]
    moved = -(by[:2] - by[2] / 2) / slopes[:, None]
    gradient = curves.full(moved[1] - moved[0])
    value, smoothing = float(ends[1] - ends[0]), float(gradient @ curves.fit.smoothing)
    return Gradient(value - smoothing, gradient, bias=float(np.hypot(smoothing, KINK * value / np.sqrt(3))))


def _refuse_spike(density: Array, nodes: Array, top: int) -> None:
    """Refuse the half width of a peak on a plateau near half its height: a little noise would widen it."""
    wide = nodes[density >= SPIKE_FOOT]
    narrow = [np.flatnonzero(density[top::way] < SPIKE_HEAD) for way in (-1, 1)]
    if not all(each.size for each in narrow):
        return
    head = float(nodes[top + narrow[1][0]] - nodes[top - narrow[0][0]])
    if float(wide[-1] - wide[0]) > MOST_SPIKE * head:
        raise MeasurementRefused(
            "not defined",
            f"the line spread is {wide[-1] - wide[0]:.1f} px wide at {100 * SPIKE_FOOT:.0f} % of its height and "
            f"{head:.1f} px at {100 * SPIKE_HEAD:.0f} %: its half width hangs on a narrow tip",
        )


def beyond(curves: Curves, *, bright: bool) -> Gradient:
    """Return overshoot (bright side) or undershoot (dark side) of the edge spread, % of the step; never below 0.

    The highest point of a noisy curve reads high, and where there is no overshoot it is chance that makes one. So,
    unless the extremum stands out by three of its own deviations, draws from the posterior tell how far its maximum
    scatters and how far above the curve they start from it lies on average; that lift is taken off (bootstrap
    correction of bias, Efron and Tibshirani 1993, ch. 10). u never falls below the posterior's deviation at the
    extremum itself: an edge spread known to that much at one point cannot tell overshoot from none any better, even
    where the value is held at zero.
    """
    reach = 6 * edge_width(curves).value + 2
    near = np.flatnonzero(np.abs(curves.nodes) < min(reach, float(curves.nodes[-1]) / 1.2))
    excess = curves.at_nodes[near] - 1 if bright else -curves.at_nodes[near]
    at = int(np.argmax(excess))
    _, by, _, _ = curves.at(curves.nodes[near[at : at + 1]])
    value = 100 * max(0.0, float(excess[at]))
    gradient = Gradient(value, curves.full(100 * by[0] if bright else -100 * by[0]))
    own = gradient.u(curves.fit.covariance)
    if value > CLEAR * own:
        return gradient
    columns = curves.fit.linear.model.columns[near[::4]]
    parts = np.hstack([columns[:, em.STEP : em.TAIL + 1], columns[:, em.FIXED :]])
    spread = curves.draws @ parts.T / (curves.draws @ curves.areas)[:, None]
    most = 100 * np.maximum(0.0, (spread - 1 if bright else -spread).max(axis=1))
    lift = float(most.mean()) - value
    return Gradient(max(0.0, value - lift), gradient.by, (), max(own, float(most.std())))


def crossing(curves: Curves, modulation: float, most: float, divisor: Array | None = None) -> Gradient | None:
    """Return the first frequency at which |H| / divisor falls to a modulation, or None if it does not up to `most`.

    Args:
        curves: The fitted edge.
        modulation: Between 0 and 1.
        most: End of the band, cy/px, at most 1.
        divisor: What is divided out, on `GRID`, NaN where it cannot be; nothing by default.
    """
    part = divisor if divisor is not None else np.ones_like(GRID)
    size, u = (each / part for each in curves.on_grid)
    found = _first_below(size, modulation)
    if found is None or found[0] > most:
        return None
    first, slope = found
    by = curves.modulus_at(first).by / float(np.interp(first, GRID, part))
    gradient = Gradient(first, -by / slope if slope < 0 else 0 * by)
    early, late = _first_below(size - u, modulation), _first_below(size + u, modulation)
    linear = gradient.u(curves.fit.covariance)
    if early is not None and late is not None and slope < 0:
        sides = first - early[0], late[0] - first
        if max(sides) - min(sides) < FLAT * sum(sides) and abs(sum(sides) / 2 - linear) < FLAT * linear:
            return gradient
    u_drawn = _drawn(curves, modulation * part, first, most)
    return Gradient(first, gradient.by, ("the curve is flat at the crossing",), u_drawn)


def _first_below(size: Array, modulation: float) -> tuple[float, float] | None:
    """Return (frequency, slope there) of the first fall below a modulation on `GRID`, by a parabola through three."""
    below = np.flatnonzero(size < modulation)
    if not below.size or below[0] == 0:
        return None
    k = int(below[0])
    lo = max(0, k - 2)
    y0, y1, y2 = (float(v) - modulation for v in size[lo : lo + 3])
    bend, tilt = (y0 - 2 * y1 + y2) / 2, (y2 - y0) / 2
    # in grid steps from the middle one: y1 + tilt t + bend t²; the root on the falling branch, written stably
    inner = tilt * tilt - 4 * bend * y1
    start, step = float(GRID[lo + 1]), float(GRID[1])
    if tilt < 0 and inner >= 0:
        t = 2 * y1 / (-tilt + inner**0.5)
        if k - 1 - 1e-9 <= lo + 1 + t <= k + 1e-9:
            return start + step * t, (tilt + 2 * bend * t) / step
    high, low = float(size[k - 1]), float(size[k])
    return float(GRID[k - 1]) + step * (high - modulation) / (high - low), (low - high) / step


def _drawn(curves: Curves, modulation: Array, value: float, most: float) -> float:
    """Standard uncertainty of a crossing from draws; draws without one count as the end of the band."""
    columns = em.shape_transfers(None, curves.fit.parts, curves.fit.lattice, curves.fit.sides)
    drawn = curves.draws
    size = np.abs(drawn @ columns.T) / (drawn @ curves.areas)[:, None]
    below = size < modulation
    first = np.where(below.any(axis=1), GRID[below.argmax(axis=1)], most)
    return float(np.sqrt(np.mean((np.minimum(first, most) - value) ** 2)))


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
    shared = 1.0 if curves.fit.together is None else curves.fit.together.squared
    return value, value * float(np.sqrt(shared / (2 * found.dof)))
