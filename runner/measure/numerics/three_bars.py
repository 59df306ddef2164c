"""Three bars with spaces as wide as they are, fitted by least squares: place, period, direction, blur, contrast.

Along the bars' normal t the light is modelled as

    b0 + b1 t + b2 s + a Σ_i B(t - i p) + Σ_i d_i B(t - i p) + g B_all(t),   i = -1, 0, 1

with B a bar of half a period p under a Gaussian blur and the pixel's own area, and B_all the whole pattern of five
widths. Place, direction, period and blur are fitted with a alone; then bars and spaces may have levels of their own, d
and g, which are expected to be some per cent of a, and are left at nothing where noise hides them. Only the middle part
along the bars is used, where their ends do not reach.

References:
    MIL-STD-150A (1959) 5.1.1.7 (three bars five times as long as wide).
    G. H. Golub and V. Pereyra, SIAM J. Numer. Anal. 10 (1973) 413 (linear parameters apart from the others).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import fft
from scipy.ndimage import gaussian_filter
from scipy.optimize import least_squares

from runner.measure.numerics.line_spread import pixel_gauss

Real = NDArray[np.float64]

ALONG, ACROSS = 0.75, 1.7
"""Periods from the middle that are used, along the bars (which reach 1.25) and along their normal."""
LEAST_PERIOD, MOST_PERIOD = 3.0, 0.5
"""px, and share of the patch: bars narrower than 1.5 px, or a pattern wider than the patch, are not looked for."""
WIDEST = 0.45
"""Blur over the period: a wider one leaves nothing of the bars."""
UNLIKE = 0.03
"""Standard deviation, over the bars' own rise, by which levels of single bars and of spaces may differ."""
EXACT = 2e-3
"""Of the rise: what the model itself leaves; levels of their own are not made of less."""
MOST_PIXELS = 800
"""Pixels that place, direction, period and blur are fitted to."""
COVERED = 0.85
"""Part of the looked-at area that must lie in the patch."""
LEAST_PIXELS = 24
"""Pixels of a pattern: three bars of 3 × 8 px."""
SHIFTS = (0.0, -0.25, 0.25, -0.5, 0.5, -1.0, 1.0)
"""Periods from the crest found first: it may be that of a space, or of an outer bar."""
BLURS, BEST = (0.15, 0.33), 3
"""Blurs over the period to start from, and the best of all starts that are followed."""


@dataclass(frozen=True)
class ThreeBarFit:
    """Three bars as found; positions count from the patch's first pixel's centre."""

    centre: tuple[float, float]
    """x, y of the middle bar's middle, px; along the bar only as found roughly."""
    period: float
    """px."""
    period_u: float
    """Its standard uncertainty."""
    turn: float
    """Direction of the normal from the x axis, rad, in (-π/2, π/2]; positive clockwise on screen."""
    turn_u: float
    """Its standard uncertainty."""
    sigma: float
    """Blur, px."""
    contrast: float
    """(bar - space) / (bar + space) in their middles; negative where bars are darker."""
    contrast_u: float
    """Its standard uncertainty from noise."""
    explained: float
    """Share of the pixels' variance that the bars explain."""
    noise: float
    """Rms of what is left."""
    excess: float
    """Power of neighbouring pixels' shared noise over white noise's, at least 1."""
    count: int
    """Pixels used."""


def start_of(values: Real, known: tuple[float, float] | None = None) -> tuple[float, float, float, float] | None:
    """Return x, y, period and turn to start from, or None where nothing repeats.

    Args:
        values: Rows × columns.
        known: Period and turn, if they are.
    """
    rows, columns = values.shape
    if min(rows, columns) < 10 or np.ptp(values) == 0:
        return None
    u, v = _line(values) if known is None else (np.cos(known[1]) / known[0], np.sin(known[1]) / known[0])
    if not u and not v:
        return None
    period = 1 / float(np.hypot(u, v))
    y, x = np.indices(values.shape, dtype=np.float64)
    wave = _windowed(values) * np.exp(-2j * np.pi * (u * x + v * y))
    real, imaginary = (gaussian_filter(each, 0.8 * period, mode="constant") for each in (wave.real, wave.imag))
    around = real + 1j * imaginary
    top_row, top = (int(n) for n in np.unravel_index(int(np.argmax(np.abs(around))), values.shape))
    turn = float(np.arctan2(v, u))
    # the bar nearest to that place: where the wave has its crest, bright or dark
    phase = float(np.angle(around[top_row, top])) + 2 * np.pi * (u * top + v * top_row)
    step = -((phase + np.pi / 2) % np.pi - np.pi / 2) / (2 * np.pi) * period
    return top + step * np.cos(turn), top_row + step * np.sin(turn), period, turn


def fit_three_bars(
    values: Real, own: NDArray[np.bool_] | None = None, known: tuple[float, float] | None = None
) -> ThreeBarFit | None:
    """Fit the pattern of a patch that holds one.

    Args:
        values: Rows × columns of light.
        own: Which pixels may be used; None is all.
        known: Period (px) and turn (rad), if other patterns of the chart tell them; only place and blur are fitted.

    Returns:
        The fit, or None where nothing repeats or nothing settles.
    """
    filled = values if own is None else _filled(values, own)
    share = 1.0 if own is None else float(own.mean())
    start = start_of(filled, known)
    if start is None:
        return None
    x, y, period, turn = start
    tried = []
    for shift in SHIFTS:
        state = np.array([x + shift * period * np.cos(turn), y + shift * period * np.sin(turn), period, turn])
        t, s, light = _used(values, own, state)
        if _covered(light.size, period, share):
            power = max(float(np.var(light)) * light.size, 1e-300)
            for blur in BLURS:
                left, _ = _rigid(np.array([0.0, 0.0, np.log(period), np.log(blur * period)]), t, s, light, turn)
                tried.append((float(left @ left) / power, np.append(state, blur * period)))
    tried.sort(key=lambda one: one[0])
    best = None
    for _, state in tried[:BEST]:
        found = _settled(values, own, state, fixed=known is not None, most=8)
        if best is None or found[0] > best[0]:
            best = found
    if best is not None:
        best = _settled(values, own, best[1], fixed=known is not None, most=40)  # the pixels used follow the fit
    if best is None or not _covered(_used(values, own, best[1][:4])[2].size, float(best[1][2]), share):
        return None
    return _read_out(values, own, best[1], fixed=known is not None)


def _covered(count: int, period: float, share: float) -> bool:
    """Tell whether a pattern lies in the patch: most of the pixels that are looked at are there."""
    return count >= max(LEAST_PIXELS, COVERED * share * 4 * ACROSS * ALONG * period**2)


def _filled(values: Real, own: NDArray[np.bool_]) -> Real:
    """Return the patch with foreign pixels replaced by their neighbours' means, to find things in."""
    near = gaussian_filter(np.where(own, values, 0.0), 1.0) / np.maximum(gaussian_filter(own.astype(float), 1.0), 1e-9)
    return np.where(own, values, near)


def _windowed(values: Real) -> Real:
    """Return a patch without its mean under a Hann window: the pattern lies about its middle."""
    rows, columns = values.shape
    window = np.outer(np.hanning(rows + 2)[1:-1], np.hanning(columns + 2)[1:-1])
    return np.asarray((values - float((values * window).sum() / window.sum())) * window)


def _line(values: Real) -> tuple[float, float]:
    """Return the frequency of the strongest line, cy/px along x and y, weighted by frequency; 0, 0 if there is none."""
    rows, columns = values.shape
    size = 2 * rows, 2 * columns
    power = np.abs(fft.rfft2(_windowed(values), size)) ** 2
    fx, fy = fft.rfftfreq(size[1])[None, :], fft.fftfreq(size[0])[:, None]
    f = np.hypot(fx, fy)
    allowed = (f > 1 / (MOST_PERIOD * min(rows, columns))) & (f < 1 / LEAST_PERIOD)
    if not allowed.any():
        return 0.0, 0.0
    row, column = np.unravel_index(int(np.argmax(np.where(allowed, power * f, 0.0))), power.shape)
    return float(fx[0, column]), float(fy[row, 0])


def _used(values: Real, own: NDArray[np.bool_] | None, state: Real) -> tuple[Real, Real, Real]:
    """Return along the normal, along the bars, and light, of the pixels that are used; state is x, y, period, turn."""
    reach = 2 * state[2] + 1
    rows, columns = (
        slice(max(0, int(at - reach)), max(0, min(size, int(at + reach) + 2)))
        for at, size in ((state[1], values.shape[0]), (state[0], values.shape[1]))
    )
    y, x = np.mgrid[rows, columns]
    x, y, turn = x - state[0], y - state[1], state[3]
    t, s = x * np.cos(turn) + y * np.sin(turn), -x * np.sin(turn) + y * np.cos(turn)
    inside = (np.abs(t) <= ACROSS * state[2]) & (np.abs(s) <= ALONG * state[2])
    if own is not None:
        inside &= own[rows, columns]
    return t[inside], s[inside], values[rows, columns][inside]


def _columns(p: Real, t: Real, s: Real, base: float) -> Real:
    """Return b0, b1, b2, three bars and the whole pattern; p is offset, turn from the base, log period and blur."""
    offset, more, period, sigma = p[0], p[1], float(np.exp(p[2])), float(np.exp(p[3]))
    along = t * np.cos(more) + s * np.sin(more) - offset
    sides = abs(float(np.cos(base + more))), abs(float(np.sin(base + more)))
    # one blurred step, tabulated: straight lines between its nodes are good to 3e-4 of it
    nodes = np.linspace(-4 * sigma - 1.5, 4 * sigma + 1.5, int((8 * sigma + 3) / (0.04 * max(sigma, 0.3))) + 2)
    table = pixel_gauss(nodes, sigma, sides)[0]
    steps = {k: np.interp(along - k * period / 4, nodes, table) for k in (-5, -3, -1, 1, 3, 5)}
    bars = [steps[k] - steps[k + 2] for k in (-5, -1, 3)]
    return np.stack([np.ones_like(along), along / period, s / period, *bars, steps[-5] - steps[5]], axis=1)


def _rigid(p: Real, t: Real, s: Real, light: Real, base: float) -> tuple[Real, Real]:
    """Return what bars of one rise leave, and the four factors."""
    columns = _columns(p, t, s, base)
    design = np.column_stack([columns[:, :3], columns[:, 3:6].sum(axis=1)])
    normal = design.T @ design
    normal[np.diag_indices(4)] += 1e-10 * np.trace(normal)
    factors = np.linalg.solve(normal, design.T @ light)
    return light - design @ factors, factors


def _settled(values: Real, own: NDArray[np.bool_] | None, start: Real, *, fixed: bool, most: int) -> tuple[float, Real]:
    """Return the share explained and (x, y, period, turn, sigma) from a start after so many steps at most."""
    t, s, light = _used(values, own, start[:4])
    if light.size < LEAST_PIXELS:
        return -np.inf, start
    step, base = max(1, light.size // MOST_PIXELS), float(start[3])
    t, s, light = t[::step], s[::step], light[::step]
    free = [0, 3] if fixed else [0, 1, 2, 3]
    first = np.array([0.0, 0.0, np.log(start[2]), np.log(max(start[4], 0.2))])
    low = np.array([-0.3 * start[2], -0.2, first[2] - 0.25, np.log(0.1)])
    high = np.array([0.3 * start[2], 0.2, first[2] + 0.25, np.log(WIDEST * start[2])])
    first[3] = np.clip(first[3], low[3] + 1e-3, high[3] - 1e-3)
    steps = np.array([1e-3 * start[2], 1e-3, 1e-3, 1e-2])[free]

    def left(q: Real) -> Real:
        p = first.copy()
        p[free] = q
        return _rigid(p, t, s, light, base)[0]

    def slopes(q: Real) -> Real:
        at = left(q)
        return np.stack(
            [(left(q + h * unit) - at) / h for h, unit in zip(steps, np.eye(len(free)), strict=True)], axis=1
        )

    scale = np.array([1, 0.05, 0.05, 0.3])[free]
    solved = least_squares(left, first[free], slopes, bounds=(low[free], high[free]), x_scale=scale, max_nfev=most)
    p = first.copy()
    p[free] = solved.x
    turn = base + p[1]
    x, y = start[0] + p[0] * np.cos(turn), start[1] + p[0] * np.sin(turn)
    share = 1 - 2 * solved.cost / max(float(np.var(light)) * light.size, 1e-300)
    return share, np.array([x, y, np.exp(p[2]), turn, np.exp(p[3])])


def _contrast(q: Real, base: float) -> float:
    """Return (bar - space) / (bar + space) of the means over three bars and two spaces."""
    places = np.exp(q[2]) * np.array([-1.0, 0.0, 1.0, -0.5, 0.5]) + q[0]
    part = _columns(q[:4], places, np.zeros(5), base)
    seen = np.column_stack([part[:, :1], part[:, 3:6].sum(axis=1), part[:, 3:7]]) @ q[[4, 7, 8, 9, 10, 11]]
    bar, space = float(seen[:3].mean()), float(seen[3:].mean())
    return (bar - space) / (bar + space)


def _read_out(values: Real, own: NDArray[np.bool_] | None, state: Real, *, fixed: bool) -> ThreeBarFit | None:
    x, y, period, turn, sigma = (float(v) for v in state)
    t, s, light = _used(values, own, state[:4])
    if light.size < LEAST_PIXELS:
        return None
    p = np.array([0.0, 0.0, np.log(period), np.log(sigma)])
    rigid_left, rigid = _rigid(p, t, s, light, turn)
    variance = float(rigid_left @ rigid_left) / max(1, light.size - 8)
    columns = _columns(p, t, s, turn)
    design = np.column_stack([columns[:, :3], columns[:, 3:6].sum(axis=1), columns[:, 3:7]])
    # d and g are expected to be nothing, give or take some per cent of a: that many pixels' worth of evidence
    prior = np.zeros(8)
    rise = max(abs(float(rigid[3])), 1e-150)
    prior[4:] = max(variance, (EXACT * rise) ** 2) / (UNLIKE * rise) ** 2
    factors = np.linalg.solve(design.T @ design + np.diag(prior) + 1e-12 * np.eye(8), design.T @ light)
    left = light - design @ factors
    variance = float(left @ left) / max(1, light.size - 12)
    excess = _excess(t, s, left, period)

    def bent(q: Real) -> Real:
        part = _columns(q[:4], t, s, turn)
        return np.column_stack([part[:, :3], part[:, 3:6].sum(axis=1), part[:, 3:7]]) @ q[4:]

    q = np.concatenate([p, factors])
    sizes = np.concatenate([[1e-3 * period, 1e-3, 1e-3, 1e-2], np.full(8, 1e-4 * max(1e-9, float(np.ptp(light))))])
    free = [0, 3] if fixed else [0, 1, 2, 3]
    slopes = [
        (bent(q + sizes * unit) - bent(q - sizes * unit)) / (2 * sizes[k]) for k, unit in enumerate(np.eye(12)[:4])
    ]
    jacobian = np.column_stack([*(slopes[k] for k in free), design])
    normal = jacobian.T @ jacobian + np.diag(np.concatenate([np.zeros(len(free)), prior]))
    rigid_normal = normal[: len(free) + 4, : len(free) + 4]  # place and period are fitted with bars of one rise
    placed = np.zeros((4, 4))
    placed[np.ix_(free, free)] = (np.linalg.pinv(rigid_normal, rcond=1e-12, hermitian=True) * variance * excess)[
        : len(free), : len(free)
    ]
    inner = np.linalg.pinv(normal, rcond=1e-12, hermitian=True) * variance * excess
    covariance = np.zeros((12, 12))
    covariance[np.ix_([*free, *range(4, 12)], [*free, *range(4, 12)])] = inner
    by = np.array(
        [
            (_contrast(q + sizes * unit, turn) - _contrast(q - sizes * unit, turn)) / (2 * sizes[k])
            for k, unit in enumerate(np.eye(12))
        ]
    )
    scatter = max(float(np.var(light)) * light.size, 1e-300)
    return ThreeBarFit(
        (x, y),
        period,
        float(period * np.sqrt(max(placed[2, 2], 0.0))),
        (turn + np.pi / 2) % np.pi - np.pi / 2,
        float(np.sqrt(max(placed[1, 1], 0.0))),
        sigma,
        _contrast(q, turn),
        float(np.sqrt(max(0.0, float(by @ covariance @ by)))),
        1 - float(left @ left) / scatter,
        float(np.sqrt(variance)),
        excess,
        int(light.size),
    )


def _excess(t: Real, s: Real, left: Real, period: float) -> float:
    """Return how much more than white noise means over squares of a sixth of a period scatter; 1 if by chance."""
    side = max(2.0, period / 6)
    column, row = (np.floor((each - each.min()) / side).astype(np.intp) for each in (t, s))
    cell = row * (int(column.max()) + 1) + column
    number, total = np.bincount(cell), np.bincount(cell, left)
    full = number >= 3
    if np.count_nonzero(full) < 8:
        return 1.0
    power = float((total[full] ** 2 / number[full]).mean()) / max(float(left @ left) / left.size, 1e-300)
    return power if power > 1 + 2 * np.sqrt(2 / np.count_nonzero(full)) else 1.0


def smoothed(values: Real, sigma: float, own: NDArray[np.bool_] | None = None) -> Real:
    """Return a patch smoothed by a Gaussian, of its own pixels only.

    Args:
        values: Rows × columns.
        sigma: px; 0 leaves them as they are.
        own: Which pixels may be used; None is all.
    """
    if sigma == 0:
        return values
    if own is None:
        return np.asarray(gaussian_filter(values, sigma))
    share = gaussian_filter(own.astype(np.float64), sigma)
    return np.asarray(gaussian_filter(np.where(own, values, 0.0), sigma) / np.maximum(share, 1e-9))
