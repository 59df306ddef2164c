"""Finds the one edge of a picture part and tells why there is none: robust first, precise afterwards elsewhere.

Coordinates: x to the right, y down, px, from the array's centre to pixel centres. The normal points from the dark to
the bright side. Defect pixels are taken out by medians of three, noise by means of small squares, shading by a plane
on each side of the edge; so none of them is mistaken for an edge.
"""

from dataclasses import dataclass
from math import cos, hypot, pi, sin, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from runner.errors import MeasurementRefused

Array = NDArray[np.float64]

MEAN = 5
"""Side of the square over which gradients are smoothed, px."""
LARGE = 48
"""Shorter side, px, from which on every third mean is enough."""
LEAST_MEANS = 12
"""Means on either side that a plane is fitted to."""
STRONG = 0.25
"""Gradients of this share of the strong ones' power vote for the direction."""
LEAST_MODULATION = 0.02
"""Below 2 % Michelson contrast, what is left of shading and fixed pattern passes for an edge."""
LEAST_SHARE = 0.25
"""The step must be this share of the region's whole range of levels; shading alone has none."""
LEAST_CONTRAST = 8.0
"""Step over the scatter of 5 × 5 px means: below, chance makes such steps somewhere in a region."""
LEAST_AGREEMENT = 0.6
"""Share of the rows that must meet one smooth line."""
STRANGE_LEVEL = 0.25
"""A point that departs from its side's plane by this share of the step belongs to something else."""
STRANGE_SHARE = 0.015
"""That share of strange points is another edge; dust and defects stay below."""
LEAST_REACH = 0.36
"""Plateaus are looked for no further from the edge than this share of the region's extent across it."""
LEAST_GUARD = 0.7
"""Nearer to the edge than this share of its width, there is no plateau (96 % of a Gaussian edge's step is reached)."""
MOST_FALL = 0.43
"""The profile may fall by that share of its rise (overshoot does); a bar falls as far as it rises."""
CHANCE = 6.0
"""Peak over the median of a noisy profile's slopes: below, it is nothing but noise."""
MOST_BEND = 0.08
"""Departure from the straight line over half the edge's length: more is a corner of 10° or over, no curve."""


@dataclass(frozen=True)
class EdgeTrace:
    """Where an edge lies in an array."""

    normal: float
    """Direction of the normal, rad from +x towards +y."""
    offset: float
    """Distance of the edge from the array's centre along the normal, px."""
    bend: float
    """Departure from the straight line, px, at `half` from the middle: bend · (v / half)²."""
    half: float
    """Half the traced length, px."""
    u_angle: float
    """Standard uncertainty of the direction from the scatter of the rows, rad."""
    agreement: float
    """Share of the rows that meet the line."""
    width: float
    """Step over steepest slope, px (about the 10-90 % width)."""

    def moved(self, dx: float, dy: float) -> "EdgeTrace":
        """Return the same edge seen from a centre that lies (dx, dy) px further."""
        along = dx * cos(self.normal) + dy * sin(self.normal)
        return EdgeTrace(
            self.normal, self.offset - along, self.bend, self.half, self.u_angle, self.agreement, self.width
        )

    def distance(self, shape: tuple[int, int]) -> Array:
        """Return every pixel's signed distance, px, rows × columns."""
        y, x = _axes(shape)
        u = x * cos(self.normal) + y * sin(self.normal) - self.offset
        v = -x * sin(self.normal) + y * cos(self.normal)
        return np.asarray(u - self.bend * (v / self.half) ** 2)

    @property
    def angle(self) -> float:
        """Angle from the nearest axis, rad, 0 to π/4."""
        return abs((self.normal + pi / 4) % (pi / 2) - pi / 4)

    def ends(self, shape: tuple[int, int]) -> tuple[tuple[float, float], tuple[float, float]] | None:
        """Return where the straight line enters and leaves the array, (x, y) px from its outer upper left corner."""
        rows, columns = shape
        c, s = cos(self.normal), sin(self.normal)
        low, high = -np.inf, np.inf
        for start, rate, reach in ((self.offset * c, -s, columns / 2), (self.offset * s, c, rows / 2)):
            if abs(rate) < 1e-12:
                if abs(start) > reach:
                    return None
                continue
            near, far = sorted(((-reach - start) / rate, (reach - start) / rate))
            low, high = max(low, near), min(high, far)
        if low >= high:
            return None
        points = [(self.offset * c - v * s + columns / 2, self.offset * s + v * c + rows / 2) for v in (low, high)]
        return points[0], points[1]


def _axes(shape: tuple[int, int]) -> tuple[Array, Array]:
    y, x = (np.arange(n, dtype=np.float64) - (n - 1) / 2 for n in shape)
    return y[:, None], x[None, :]


def without_specks(signal: Array) -> Array:
    """Return the median of three along rows, then along columns: single defect pixels vanish, edges stay in place."""
    for _ in range(2):
        signal = signal.T
        padded = np.concatenate([signal[:1], signal, signal[-1:]])
        before, after = padded[:-2], padded[2:]
        signal = np.maximum(np.minimum(before, after), np.minimum(np.maximum(before, after), signal))
    return signal


def level_range(signal: Array) -> tuple[float, float]:
    """Return the levels below and above which 2 % of the region's 5 × 5 px means lie."""
    means = ndimage.uniform_filter(signal, MEAN, mode="nearest")[2:-2:2, 2:-2:2]
    low, high = np.quantile(means, (0.02, 0.98))
    return float(low), float(high)


def trace_edge(signal: Array, margin: int = 0) -> EdgeTrace:
    """Find the strongest edge, its direction, place and course.

    The direction is that of the gradient's structure tensor; the place is the steepest point along it; the course is
    a robust fit through the centroids of the line derivatives of all rows (columns for an edge nearer to horizontal).

    Args:
        signal: Rows × columns, specks removed.
        margin: Border that may hold other things, px: it counts less and less towards the rim.

    Raises:
        MeasurementRefused: `no edge` when nothing stands out.
    """
    smooth = ndimage.uniform_filter(signal, MEAN, mode="nearest")
    gx = np.zeros_like(smooth)
    gy = np.zeros_like(smooth)
    gx[:, 2:-2] = smooth[:, 4:] - smooth[:, :-4]
    gy[2:-2, :] = smooth[4:, :] - smooth[:-4, :]
    weight = _taper(signal.shape[0], margin)[:, None] * _taper(signal.shape[1], margin)[None, :]
    power = (gx * gx + gy * gy) * weight
    top = float(np.quantile(power, 0.98))
    if top <= 0:
        raise MeasurementRefused("no edge", "all pixels of the region have one value")
    strong = power > STRONG * top
    wx, wy = gx[strong], gy[strong]
    share = weight[strong]
    xx, yy, xy = (float(np.sum(p * share)) for p in (wx * wx, wy * wy, wx * wy))
    normal = 0.5 * float(np.arctan2(2 * xy, xx - yy))
    u = _distance(signal.shape, normal)
    index = np.rint(u).astype(np.intp)
    first = int(np.min(index))
    along = (gx * cos(normal) + gy * sin(normal)) * weight
    slope = np.asarray(np.bincount((index - first).ravel(), along.ravel()), dtype=np.float64)
    best = int(np.argmax(np.abs(slope)))
    width = float(np.sum(np.abs(slope)) / abs(slope[best]))
    sign = float(np.sign(slope[best]))
    other = float(np.max(-sign * slope))
    try:
        return _follow(smooth, weight, normal if sign > 0 else normal + pi, sign * (first + best), width)
    except MeasurementRefused:
        if other > max(MOST_FALL * abs(slope[best]), CHANCE * float(np.median(np.abs(slope)))):
            share = 100 * other / abs(slope[best])
            raise MeasurementRefused(
                "two edges",
                f"beside the steepest step lies one the other way of {share:.0f} % of its slope; at most "
                f"{100 * MOST_FALL:.0f} % may",
            ) from None
        raise


def _taper(length: int, margin: int) -> Array:
    place = np.arange(1.0, length + 1)
    return np.asarray(np.minimum(1.0, np.minimum(place, place[::-1]) / (margin + 1)))


def _distance(shape: tuple[int, int], normal: float) -> Array:
    y, x = _axes(shape)
    return np.asarray(x * cos(normal) + y * sin(normal))


def _follow(smooth: Array, weight: Array, normal: float, offset: float, width: float) -> EdgeTrace:
    """Refine a rough line by the rows' centroids, in four passes of a shrinking window, the last two with a bend."""
    upright = abs(cos(normal)) >= abs(sin(normal))
    picture, share = (smooth, weight) if upright else (smooth.T, weight.T)
    c, s = (cos(normal), sin(normal)) if upright else (sin(normal), cos(normal))
    y, x = _axes((picture.shape[0], picture.shape[1]))
    slope = np.zeros_like(picture)
    slope[:, 1:-1] = (picture[:, 2:] - picture[:, :-2]) * np.sign(c)
    at, rate, bend = offset / c, -s / c, 0.0
    half = (picture.shape[0] - 1) / 2
    reach = float(np.clip(1.5 * width, 6.0, 0.45 * picture.shape[1]))
    t = y[:, 0] / half
    good, scatter = np.ones(t.size, dtype=bool), 1.0
    for turn in range(4):
        line = at + rate * y[:, 0] + bend * t**2
        near = x - line[:, None]
        window = np.maximum(0.0, 1 - (near / reach) ** 2) * (slope * share.max(axis=1)[:, None])
        mass = window.sum(axis=1)
        inside = np.abs(line) < picture.shape[1] / 2 - min(2.0 + reach, picture.shape[1] / 4)
        if np.count_nonzero(inside) < 6:
            crossed = f"{np.count_nonzero(inside)} of {inside.size} lines"
            raise MeasurementRefused("no edge", f"the strongest step crosses only {crossed} of pixels; 6 are needed")
        good = inside & (mass > 0.35 * np.median(mass[inside]))
        if np.count_nonzero(good) < 6 or np.median(mass[inside]) <= 0:
            agree = f"{np.count_nonzero(good)} of {np.count_nonzero(inside)} lines"
            raise MeasurementRefused("no edge", f"{agree} of pixels show a step at the same line; at least 6 must")
        shift = np.sum(window * near, axis=1)[good] / mass[good]
        terms, kept, scatter = _robust_fit(t[good], shift, order=1 + (turn > 1))
        at, rate = at + terms[0], rate + terms[1] / half
        bend += terms[2] if terms.size > 2 else 0.0
        good[good] = kept
        reach = max(4.0, 0.8 * reach)
    agreement = float(np.mean(good[inside]))
    angle = float(np.arctan(-rate))
    direction = angle if c > 0 else angle + pi
    if not upright:
        direction = pi / 2 - direction
    # smoothing over MEAN rows makes that many neighbours one
    freedom = max(1.0, np.count_nonzero(good) / MEAN)
    u_angle = scatter / (half * float(np.std(t[good])) * freedom**0.5 + 1e-12)
    flat = 1 / hypot(1, rate)
    return EdgeTrace(
        float((direction + pi) % (2 * pi) - pi),
        float(at * flat * np.sign(c)),
        float(bend * flat * np.sign(c)),
        half / flat,
        float(u_angle * flat**2),
        float(agreement),
        width,
    )


def _robust_fit(t: Array, shift: Array, order: int) -> tuple[Array, NDArray[np.bool_], float]:
    """Polynomial by repeated least squares that drops what lies far off; returns terms, what was kept, the scatter."""
    columns = np.vander(t, order + 1, increasing=True)
    kept, scatter = np.ones(t.size, dtype=bool), 0.0
    middle = float(np.median(shift))
    residual = shift - middle
    for _ in range(3):
        scatter = max(1.4826 * float(np.median(np.abs(residual))), 0.02)
        kept = np.abs(residual) < max(4 * scatter, 0.5) if order else kept
        if np.count_nonzero(kept) < order + 3:
            kept = np.abs(residual) <= np.median(np.abs(residual))
        terms = np.linalg.lstsq(columns[kept], shift[kept], rcond=None)[0]
        residual = shift - columns @ terms
    return terms, kept, scatter


@dataclass(frozen=True)
class EdgeLevels:
    """The two plateaus beside an edge."""

    low: float
    """Level of the dark side at the edge, shading followed."""
    high: float
    """Level of the bright side at the edge."""
    scatter: float
    """Scatter of 5 × 5 px means from one to the next."""

    @property
    def modulation(self) -> float:
        """Michelson contrast of the two levels."""
        return (self.high - self.low) / max(self.high + self.low, 1e-12)


def confirm_edge(signal: Array, trace: EdgeTrace) -> EdgeLevels:
    """Make sure that a region holds one edge and nothing else, and return its levels.

    Args:
        signal: Rows × columns, specks removed.
        trace: The edge as seen from this array's centre.

    Raises:
        MeasurementRefused: `no edge`, `no modulation` or `two edges`, with the figures.
    """
    pace = 3 if min(signal.shape) >= LARGE else 2  # small regions are short of means to tell a plateau by
    taken = slice(2, -2, pace)
    means = ndimage.uniform_filter(signal, MEAN, mode="nearest")[taken, taken]
    distance = trace.distance((signal.shape[0], signal.shape[1]))[taken, taken]
    y, x = np.meshgrid(*(np.linspace(-1, 1, n) for n in means.shape), indexing="ij")
    plane = np.stack([np.ones(means.size), x.ravel(), y.ravel()], axis=1)
    values, where = means.ravel(), distance.ravel()
    spread = float(np.ptp(np.quantile(values, (0.02, 0.98))))
    extent = 2 * float(np.quantile(np.abs(where), 0.9))
    guard = min(1.2 * trace.width + 3, LEAST_REACH * extent)
    sides = [where < -guard, where > guard]
    fewest = min(np.count_nonzero(side) for side in sides)
    if guard >= LEAST_GUARD * trace.width and fewest < LEAST_MEANS:
        raise MeasurementRefused(
            "no edge",
            f"the region reaches {extent / 2:.0f} px to either side of its middle, and the edge, {trace.width:.0f} px "
            f"wide, lies {abs(trace.offset):.0f} px off it: one side is left too small to tell its level",
        )
    if guard < LEAST_GUARD * trace.width:
        raise MeasurementRefused(
            "no edge",
            f"the strongest transition takes {trace.width:.0f} px of the region's {extent:.0f} px across it; "
            f"{100 * LEAST_REACH / LEAST_GUARD:.0f} % is the most that leaves a plateau on both sides",
        )
    fits = [_robust_plane(plane[side], values[side]) for side in sides]
    foot = np.abs(where) < guard
    low, high = (float(np.mean(plane[foot] @ terms)) for terms in fits)
    residual = np.concatenate([values[side] - plane[side] @ terms for side, terms in zip(sides, fits, strict=True)])
    # mixed differences of means that share no pixel: edges and planes cancel, noise stays
    lag = -(-MEAN // pace)
    mixed = means[lag:, lag:] - means[lag:, :-lag] - means[:-lag, lag:] + means[:-lag, :-lag]
    scatter = 1.4826 / 2 * float(np.median(np.abs(mixed)))
    # in a small region most of these straddle the edge; what the planes leave beside it is noise and more
    scatter = min(scatter, 1.4826 * float(np.median(np.abs(residual))) * sqrt(residual.size / (residual.size - 6)))
    levels = EdgeLevels(low, high, scatter)
    _refuse_weak(levels, spread, trace, signal)
    strange = float(np.mean(np.abs(residual) > max(STRANGE_LEVEL * (high - low), 4 * scatter)))
    if strange > STRANGE_SHARE or trace.agreement < LEAST_AGREEMENT:
        raise MeasurementRefused(
            "two edges",
            f"{100 * strange:.0f} % of the region departs from its side's level by a quarter of the step or more "
            f"(at most {100 * STRANGE_SHARE:.1f} % may), and {100 * trace.agreement:.0f} % of the lines meet one edge "
            f"(at least {100 * LEAST_AGREEMENT:.0f} % must)",
        )
    if abs(trace.bend) > MOST_BEND * trace.half:
        raise MeasurementRefused(
            "edge not straight",
            f"the edge bends by {abs(trace.bend):.1f} px over a length of {2 * trace.half:.0f} px; at most "
            f"{MOST_BEND * trace.half:.1f} px still is a curve and no corner",
        )
    return levels


def _refuse_weak(levels: EdgeLevels, spread: float, trace: EdgeTrace, signal: Array) -> None:
    step = levels.high - levels.low
    rise, fall = _rise_and_fall(signal, trace)
    if fall > MOST_FALL * rise and spread > LEAST_CONTRAST * levels.scatter:
        raise MeasurementRefused(
            "two edges",
            f"across the region the level changes by {100 * rise / spread:.0f} % of its range one way and by "
            f"{100 * fall / spread:.0f} % the other; beside a single edge the second stays below "
            f"{100 * MOST_FALL:.0f} % of the first",
        )
    modulation = spread / max(levels.high + levels.low, 1e-12)
    if modulation < LEAST_MODULATION:
        raise MeasurementRefused(
            "no modulation",
            f"the levels of the region differ by a modulation of {100 * modulation:.1f} %; "
            f"{100 * LEAST_MODULATION:g} % is needed",
        )
    if step < LEAST_CONTRAST * levels.scatter or step < LEAST_SHARE * spread:
        raise MeasurementRefused(
            "no edge",
            f"the strongest step is {100 * step / spread:.0f} % of the region's range of levels (at least "
            f"{100 * LEAST_SHARE:.0f} %) and {step / max(levels.scatter, 1e-12):.1f} times the scatter beside it (at "
            f"least {LEAST_CONTRAST:g})",
        )
    if levels.modulation < LEAST_MODULATION:
        raise MeasurementRefused(
            "no modulation",
            f"the edge's modulation is {100 * levels.modulation:.1f} %; {100 * LEAST_MODULATION:g} % is needed",
        )


def _robust_plane(plane: Array, values: Array) -> Array:
    """Fit a plane by repeated least squares that drops what lies far off."""
    kept = np.ones(values.size, dtype=bool)
    terms = np.array([np.median(values), 0.0, 0.0])
    for turn in range(4):
        residual = np.abs(values - plane @ terms)
        limit = 3 * 1.4826 * float(np.median(residual))
        kept = residual <= max(limit, 1e-12) if turn else residual <= np.quantile(residual, 0.8)
        if np.count_nonzero(kept) >= 6:
            terms = np.linalg.lstsq(plane[kept], values[kept], rcond=None)[0]
    return terms


def _rise_and_fall(signal: Array, trace: EdgeTrace) -> tuple[float, float]:
    """Return how far the profile across the edge climbs and falls steeply in all, the larger first."""
    index = np.rint(trace.distance((signal.shape[0], signal.shape[1])) / 2).astype(np.intp)
    index -= index.min()
    counts = np.bincount(index.ravel())
    profile = (np.bincount(index.ravel(), signal.ravel()) / np.maximum(counts, 1))[counts > 0.25 * counts.max()]
    steps = np.diff(profile)
    size = np.abs(steps)
    # shading climbs slowly; only what is steep beside the steepest is an edge
    steps = np.where(size > max(2 * float(np.median(size)), 0.2 * float(size.max())), steps, 0.0)
    ways = float(steps[steps > 0].sum()), -float(steps[steps < 0].sum())
    return max(ways), min(ways)
