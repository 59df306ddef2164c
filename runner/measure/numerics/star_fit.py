"""The modulation of a sector star over frequency, sector by sector, by least squares on its pixels.

In a sector of 45° the light, divided by its local mean level, is

    w = 1 + o(f) + Re[m(f) e^{iθ}]

with the phase θ and local frequency f of the star's geometry (`star_geometry`). m is complex: an asymmetric blur turns
the phase, and a spline in f through it is far less noisy than moduli of single rings, whose noise would add up to a
floor. What is left of that floor is taken off: |m|² - u². The mean level is a smooth surface over the star.

References:
    C. Loebich, D. Wueller, B. Klingen, A. Jaeger, Proc. SPIE 6502 (2007) 65020N (sectors of a sine star).
    ISO 12233:2014, s-SFR.
    C. de Boor, A Practical Guide to Splines (1978).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import BSpline

from runner.measure.numerics.star_geometry import Cells, Geometry

Real = NDArray[np.float64]
Complex = NDArray[np.complex128]

SEGMENTS = 8
STEP = 0.02
"""Width of a ring over its radius."""
KNOT, WIDE_KNOT = 0.025, 0.05
"""Distance of the spline's knots up to 0.25 cy/px and beyond: a blur of ± 10 px has no finer structure there."""
LEAST_PER_KNOT = 30
"""Pixels of a segment between two knots at least."""
PER_RING = 2400
"""Pixels of a ring that are used, about."""
PIECE = 16_384
"""Pixels worked on at a time: in a processor's cache."""
MOST_OUTERMOST = 20_000
"""Pixels of the outermost rings that tell the harmonics."""
ORDER = 3
"""Of the polynomial surface that the mean level follows."""


@dataclass(frozen=True)
class StarFit:
    """Modulation of all segments as splines in frequency."""

    knots: Real
    """Knots, cy/px."""
    coefficients: Complex
    """Segments × splines: m, phase against the outermost rings'."""
    covariance: Real
    """Segments × (2 splines) × (2 splines), of real parts then imaginary ones."""
    band: tuple[float, float]
    """Least and greatest frequency, cy/px."""
    noise: float
    """Rms of what is left, of the mean level, over all pixels."""
    excess: float
    """Variance of single rings about the spline over that of white noise of the residual's size; at least 1."""
    harmonics: tuple[float, float]
    """Amplitudes at two and three times the frequency over the fundamental's, outermost rings."""
    harmonics_u: tuple[float, float]
    """Their standard uncertainties."""

    def segment(self, f: Real) -> tuple[Real, Real]:
        """Return |m| and its standard uncertainty, segments × frequencies."""
        splines = self._splines(f)
        m = self.coefficients @ splines.T
        size = np.maximum(np.abs(m), 1e-300)
        cos, sin = (m.real / size)[:, :, None] * splines, (m.imag / size)[:, :, None] * splines
        along = np.concatenate([cos, sin], axis=2)
        across = np.concatenate([-sin, cos], axis=2)
        variance, beside = (
            np.maximum(np.einsum("sfi,sij,sfj->sf", each, self.covariance, each), 0.0) for each in (along, across)
        )
        return np.sqrt(np.maximum(size**2 - beside, 0.0)), np.sqrt(variance)

    def mean(self, f: Real, segments: tuple[int, ...] | None = None) -> tuple[Real, Real]:
        """Return the mean of |m| over some segments (None is all), and its standard uncertainty."""
        some = list(range(self.coefficients.shape[0]) if segments is None else segments)
        size, u = self.segment(f)
        return size[some].mean(axis=0), np.sqrt((u[some] ** 2).sum(axis=0)) / len(some)

    def logs(self, f: Real, factors: Real) -> tuple[Real, Real]:
        """Return, for each segment, a sum of factors × log |m| at some frequencies, and its standard uncertainty."""
        splines = self._splines(f)
        m = self.coefficients @ splines.T
        square = np.maximum(np.abs(m) ** 2, 1e-30)
        by = [np.einsum("f,sf,fn->sn", factors, part / square, splines) for part in (m.real, m.imag)]
        both = np.concatenate(by, axis=1)
        variance = np.einsum("si,sij,sj->s", both, self.covariance, both)
        return 0.5 * np.log(square) @ factors, np.sqrt(np.maximum(variance, 0.0))

    def _splines(self, f: Real) -> Real:
        inside = np.clip(f, self.band[0], self.band[1])
        return np.asarray(BSpline.design_matrix(inside, self.knots, 3).toarray())


class TooFewPixels(ValueError):
    """A segment has too few pixels to fit anything to."""


def rings(geometry: Geometry, finest: float) -> Real:
    """Return borders of rings, px, that hold all frequencies up to the finest, cy/px."""
    stretch = np.sqrt(geometry.ratio)
    least, most = geometry.cycles / (2 * np.pi * finest) / stretch, geometry.outer * stretch
    count = max(8, int(np.log(most / least) / STEP))
    return np.geomspace(least, most, count + 1)


def _surface(geometry: Geometry, waves: Cells) -> Real:
    """Return the factors u^i v^j of a smooth surface through the level of a star's sectors; u, v in outer radii."""
    u, v = waves.r / geometry.outer * np.cos(waves.phi), waves.r / geometry.outer * np.sin(waves.phi)
    basis = np.stack([u**i * v**j for i in range(ORDER + 1) for j in range(ORDER + 1 - i)], axis=1)
    if basis.shape[0] < 4 * basis.shape[1]:
        raise TooFewPixels(f"the light can be told in {basis.shape[0]} places")
    weighted = basis * waves.number[:, None]
    return np.asarray(np.linalg.solve(basis.T @ weighted, weighted.T @ waves.level))


def fit_star(
    geometry: Geometry,
    waves: Cells,
    x: Real,
    y: Real,
    values: Real,
    *,
    finest: float,
    first_azimuth: float = 0.0,
) -> StarFit:
    """Fit the modulation of all segments.

    Args:
        geometry: Phase of the star.
        waves: Waves of its sectors, for the mean level.
        x: Columns of pixels, px from the first pixel's centre.
        y: Rows.
        values: Their light.
        finest: Greatest frequency, cy/px.
        first_azimuth: Middle of the first segment, rad; the others follow every 45° clockwise on screen.

    Raises:
        TooFewPixels: A segment has none to fit to.
    """
    pieces = [slice(k, k + PIECE) for k in range(0, x.size, PIECE)]
    surface, low = _surface(geometry, waves), geometry.cycles / (2 * np.pi * geometry.outer)
    parts, outermost = [], []
    for piece in pieces:
        theta, f, phi = geometry.at(x[piece], y[piece])
        level = _level(geometry, surface, x[piece], y[piece])
        inside = (f <= finest) & (f >= low) & (level > 0)
        theta, f, phi, w = (each[inside] for each in (theta, f, phi, values[piece] / level - 1))
        segment = np.rint((phi - first_azimuth) / (2 * np.pi) * SEGMENTS).astype(np.intp) % SEGMENTS
        parts.append(_totals(theta, f, w, segment, (low, finest)))
        coarse = f <= max(1.5 * low, 0.02)
        outermost.append((theta[coarse], w[coarse]))
    sums = _Sums.of(np.sum(parts, axis=0))
    knots = _knots(sums)
    splines = np.asarray(BSpline.design_matrix(np.clip(sums.f, knots[0], knots[-1]), knots, 3).toarray())
    weights = np.ones(splines.shape[0])
    for _ in range(2):  # the second time with the noise of each ring
        fits = [_solve(sums, s, splines, weights) for s in range(SEGMENTS)]
        power = np.sum([fit.residual for fit in fits], axis=0)
        number = np.maximum(sums.gram[:, :, 0, 0].sum(axis=0), 1)
        variance = _smooth(power / number, number)
        share = 1 - 3 * splines.shape[1] * SEGMENTS / number.sum()
        weights = 1 / np.maximum(variance / max(share, 0.2), 1e-12)
    excess = _excess(sums, fits, splines, weights)
    coefficients = np.array([fit.coefficients for fit in fits])
    harmonics, harmonics_u = _harmonics(*(np.concatenate(each) for each in zip(*outermost, strict=True)))
    noise = float(np.sqrt(power.sum() / number.sum()))
    covariance = np.array([fit.covariance for fit in fits]) * excess
    band = float(knots[0]), float(knots[-1])
    return StarFit(knots, coefficients, covariance, band, noise, excess, harmonics, harmonics_u)


def _level(geometry: Geometry, surface: Real, x: Real, y: Real) -> Real:
    u, v = (x - geometry.centre[0]) / geometry.outer, (y - geometry.centre[1]) / geometry.outer
    out, k = np.zeros_like(u), 0
    for i in range(ORDER + 1):
        column = np.zeros_like(u)
        for j in range(ORDER - i, -1, -1):
            column = column * v + surface[k + j]
        k += ORDER + 1 - i
        out += column * u**i
    return out


@dataclass(frozen=True)
class _Sums:
    """Normal equations of rings, per segment: segments × rings × …, of 1, cos θ, sin θ."""

    f: Real
    """Mean frequency of each ring, cy/px; rising."""
    gram: Real
    """… × 3 × 3."""
    right: Real
    """… × 3."""
    square: Real
    """Σ w²."""

    @classmethod
    def of(cls, totals: Real) -> "_Sums":
        """Put sums over cells in order; rings without pixels are left out."""
        number, f, c, s, cc, cs, w, wc, ws, ww = totals[:, :, totals[0].sum(axis=0) > 0]
        gram = np.array([[number, c, s], [c, cc, cs], [s, cs, number - cc]]).transpose(2, 3, 0, 1)
        return cls(f.sum(axis=0) / number.sum(axis=0), gram, np.stack([w, wc, ws], axis=-1), ww)


def _totals(theta: Real, f: Real, w: Real, segment: NDArray[np.intp], band: tuple[float, float]) -> Real:
    """Return sums over cells of 1, f, cos θ, sin θ, cos², cos sin, w, w cos, w sin, w²: 10 × segments × rings."""
    count = int(np.log(band[1] / band[0]) / STEP) + 1
    cell = segment * count + np.minimum((np.log(f / band[0]) / STEP).astype(np.intp), count - 1)
    cos, sin = np.cos(theta), np.sin(theta)
    each = (None, f, cos, sin, cos * cos, cos * sin, w, w * cos, w * sin, w * w)
    return np.array([np.bincount(cell, one, SEGMENTS * count) for one in each]).reshape(10, SEGMENTS, count)


def _knots(sums: _Sums) -> Real:
    """Return a cubic spline's knots over the band, each interval with enough pixels of every segment."""
    number = sums.gram[:, :, 0, 0].min(axis=0)
    ends, since = [float(sums.f[0])], 0.0
    for f, n in zip(sums.f, number, strict=True):
        since += n
        wide = KNOT if f < 0.25 else WIDE_KNOT
        if f - ends[-1] >= wide and since >= LEAST_PER_KNOT:
            ends.append(float(f))
            since = 0.0
    if number.sum() < 4 * LEAST_PER_KNOT or len(ends) < 3:
        raise TooFewPixels(f"the least segment has {number.sum():.0f} pixels")
    last = float(sums.f[-1])
    if last - ends[-1] < 0.6 * (ends[-1] - ends[-2]):
        ends[-1] = last
    else:
        ends.append(last)
    return np.concatenate([[ends[0]] * 3, ends, [ends[-1]] * 3])


@dataclass(frozen=True)
class _Segment:
    """One segment's solution."""

    coefficients: Complex
    """m's."""
    covariance: Real
    """Of their real, then imaginary parts."""
    solved: Real
    """Coefficients of o, cos, sin: 3 × splines."""
    residual: Real
    """Σ of squared residuals of each ring."""


def _solve(sums: _Sums, segment: int, splines: Real, weights: Real) -> _Segment:
    gram, right, n = sums.gram[segment], sums.right[segment], splines.shape[1]
    # unknowns in the order (1, cos, sin) × splines
    normal = np.einsum("k,kij,ka,kb->iajb", weights, gram, splines, splines, optimize=True).reshape(3 * n, 3 * n)
    side = np.einsum("k,ki,ka->ia", weights, right, splines, optimize=True).reshape(3 * n)
    normal[np.diag_indices_from(normal)] += 1e-9 * np.trace(normal) / normal.shape[0]
    inverse = np.linalg.inv(normal)
    solved = (inverse @ side).reshape(3, n)
    at = solved @ splines.T  # 3 × rings
    residual = sums.square[segment] - 2 * np.einsum("ik,ki->k", at, right) + np.einsum("ik,kij,jk->k", at, gram, at)
    covariance = inverse[n:, n:].copy()
    covariance[:n, n:] *= -1  # w = cos · Re m - sin · Im m
    covariance[n:, :n] *= -1
    return _Segment(solved[1] - 1j * solved[2], covariance, solved, np.maximum(residual, 0.0))


def _smooth(values: Real, number: Real) -> Real:
    """Return a running mean over rings, at least five and so many that 400 pixels are in it."""
    total, count = np.cumsum(np.insert(values * number, 0, 0)), np.cumsum(np.insert(number, 0, 0))
    out = np.empty_like(values)
    for k in range(values.size):
        reach = 2
        while True:
            low, high = max(0, k - reach), min(values.size, k + reach + 1)
            if count[high] - count[low] >= 400 or (low == 0 and high == values.size):
                break
            reach += 1
        out[k] = (total[high] - total[low]) / (count[high] - count[low])
    return out


def _excess(sums: _Sums, fits: list[_Segment], splines: Real, weights: Real) -> float:
    """Return how much single rings scatter about the spline, over what white noise would make of them."""
    chi, count = 0.0, 0
    for segment, fit in enumerate(fits):
        at = fit.solved @ splines.T
        gram = sums.gram[segment]
        off = sums.right[segment] - np.einsum("kij,jk->ki", gram, at)
        good = gram[:, 0, 0] >= 12
        inverse = np.linalg.pinv(gram[good], hermitian=True)
        each = np.einsum("ki,kij,kj->k", off[good], inverse, off[good]) * weights[good]
        chi += float(each.sum())
        count += 3 * int(good.sum()) - fit.solved.size
    return max(1.0, chi / count) if count > 0 else 1.0


def _harmonics(theta: Real, w: Real) -> tuple[tuple[float, float], tuple[float, float]]:
    """Return second and third harmonic over the fundamental, with uncertainties, from the outermost rings."""
    step = max(1, theta.size // MOST_OUTERMOST)
    turn, light = theta[::step], w[::step]
    columns = [np.ones(turn.size)] + [each(n * turn) for n in (1, 2, 3) for each in (np.cos, np.sin)]
    design = np.array(columns)
    normal = design @ design.T
    solved = np.linalg.solve(normal, design @ light)
    left = light - solved @ design
    variance = float(left @ left) / max(1, turn.size - 7) * 2 / turn.size
    sizes = [float(np.hypot(*solved[k : k + 2])) for k in (1, 3, 5)]
    u = float(np.sqrt(variance)) / sizes[0]
    second, third = (float(np.sqrt(max(0.0, size**2 - variance))) / sizes[0] for size in sizes[1:])
    return (second, third), (u, u)
