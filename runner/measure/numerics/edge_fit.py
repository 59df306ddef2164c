"""The joint fit of a slanted edge: where it lies, its two levels and its whole line spread, at once.

First a plain edge (pixel ⊗ Gaussian, then with a tail) finds place, levels and width; then a smooth correction made of
kernels joins in. Its prior size is not chosen but weighed by restricted likelihood, and the fit is averaged over sizes,
so that the posterior covariance also holds what the data leave open about the shape. Because the fitted line spread is
normalised to its whole area, tail beyond the region included, and transformed analytically, no window, no finite
difference and no bin width biases the transfer function.

References:
    Golub and Pereyra, SIAM J. Numer. Anal. 10 (1973) 413, doi:10.1137/0710036 (separable least squares).
    Patterson and Thompson, Biometrika 58 (1971) 545, doi:10.1093/biomet/58.3.545 (restricted likelihood).
    Hoeting et al., Statistical Science 14 (1999) 382, doi:10.1214/ss/1009212519 (averaging over models).
    Tukey, Exploratory Data Analysis (1977), ch. 16 (twicing; from memory).
"""

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure.numerics import edge_model as em
from runner.measure.numerics.edge_correlation import Correlation, correlated_information, correlation
from runner.measure.numerics.edge_geometry import find_edge
from runner.measure.numerics.edge_model import Linear, Noise, Parts, Pixels
from runner.measure.numerics.edge_noise import defects, misfit, noise_of
from runner.measure.numerics.line_spread import Array, Lattice, lattice_for

PRIOR_SIZES = np.geomspace(0.1, 0.7, 8)
"""Prior sizes of the correction relative to the line spread's peak, weighed against each other. Never below 10 %: a
smaller correction cannot be told from none in one region, yet would let u ignore it at high frequencies."""
PRIOR_REACH = (2.5, 1.5)
"""The prior falls with distance as (1 + (x / (a w))²)^-b, w the line spread's standard deviation: a line spread may
leave the plain one most where it is high; beyond, the tail part carries what falls as 1/x²."""
TAIL_SD = 0.2
"""Prior of the tail's area as a share of the step: a diffraction cutoff of 0.5 cy/px has 0.4, two deviations."""
WIDENING_SD = 0.3
"""Prior of the Gaussian's relative change once kernels share its work."""
SHIFT_SD = 0.5
"""px; prior of the spread's place against the line of the plain fit."""
SHADE_SD = 0.5
"""Prior of the relative shading over half the edge's length, when shading is fitted."""
MODEL_FLOOR = 1e-3
"""Least noise of a pixel as a share of the step: no set of kernels draws a kink better, and a fit that trusted
noiseless pixels more would press its own misfit into tails and levels."""
LEAST_SIGMA = 0.1
"""px; the plain edge's Gaussian gets no narrower, kernels sharpen it where needed."""
ROUNDS = 25
"""Most rounds of the plain fit; it takes about 8."""


@dataclass(frozen=True)
class EdgeFit:
    """A fitted edge with the posterior of all its numbers."""

    parts: Parts
    """Fitted numbers."""
    lattice: Lattice
    """Bins and kernels."""
    sides: tuple[float, float]
    """The pixel's sides along the normal, px."""
    noise: Noise
    """Variance of a pixel at either level."""
    response: Array
    """How the fitted numbers follow Jᵀ W times a change of the signal: fixed columns, sliding columns, kernels."""
    covariance: Array
    """Posterior covariance."""
    sampling: Array
    """Covariance of the fitted numbers over repeated captures (the part of it that is noise)."""
    smoothing: Array
    """Estimated bias of the fitted numbers by the kernels' prior."""
    pixels: Pixels
    """The region."""
    linear: Linear
    """The last linearisation, about the fit itself."""
    excess: float
    """Factor by which misfit or correlation between pixels raised the noise variance in the fit's weights."""
    together: Correlation | None
    """How the noise of neighbouring pixels goes together; None where it does not."""
    left_out: int
    """Defect pixels that were left out."""
    unshaded: Array
    """What the shape (see `Parts.shape`) would become if shading were fitted, minus the fit; zeros when it is."""
    shade_free: tuple[Array, Array]
    """Shading that a free fit would find, and its standard uncertainties."""
    shading: bool
    """Shading was fitted."""

    @property
    def of_means(self) -> float:
        """Factor on the variance of means over many pixels, beside what single pixels' noise makes of them."""
        return self.excess if self.together is None else max(self.excess, self.together.whole)

    @cached_property
    def shape_index(self) -> Array:
        """Places of the line spread's parts in the covariance."""
        head = self.linear.head
        return np.concatenate(
            [[em.STEP, em.WIDENING, em.SHIFT, em.TAIL], np.arange(head, self.covariance.shape[0])]
        ).astype(int)

    def change(self, signal: Array) -> Array:
        """Return by how much every fitted number moves when the region's signal changes by this much."""
        return self.response @ em.response(self.pixels, self.linear, signal)


def fit_edge(
    signal: Array,
    *,
    order: int = 1,
    shading: str = "none",
    noise_floor: float = 0.0,
    aperture: float = 1.0,
    sites: NDArray[np.bool_] | None = None,
) -> EdgeFit:
    """Fit one edge of a region.

    Args:
        signal: Light, rows × columns, as a fraction of the range.
        order: Order of the edge's polynomial, 1 to 5.
        shading: `fitted` fits a linear shading too; `none` does not (a known one is divided out beforehand).
        noise_floor: Least standard deviation of a pixel (quantisation), fraction of range.
        aperture: Side of the pixel's aperture, px: the square root of its fill.
        sites: Pixels that may be used, rows × columns; None is all of them.

    Raises:
        MeasurementRefused: `no edge`; or `too noisy` when the fit finds no place to settle.
    """
    line, low, high = find_edge(signal, sites)
    pixels = Pixels(signal, line, sites)
    start = Parts(line, low, high - low, 1.5, 0.0, 0.0, 0.0, 1.0, np.zeros(0), np.zeros(2))
    reach = float(np.abs(pixels.distance).max())
    plain = _plain_fit(pixels, start, reach, aperture)
    if order > 1:
        bent = np.concatenate([plain.line.coefficients, np.zeros(order - 1)])
        plain = replace(plain, line=replace(plain.line, coefficients=bent))
        pixels.place(plain.line)
        plain = _plain_fit(pixels, plain, reach, aperture)
    pixels.place(plain.line)
    return _joint_fit(pixels, plain, reach, aperture, noise_floor, shading=shading == "fitted")


def spread_width(sigma: float) -> float:
    """Return the standard deviation of pixel ⊗ Gaussian, px."""
    return float(np.sqrt(sigma**2 + 1 / 12))


def _plain_fit(pixels: Pixels, parts: Parts, reach: float, aperture: float) -> Parts:
    """Place, levels, sigma, at last tail: unweighted Gauss-Newton."""
    lattice = lattice_for(reach, 0.8).without_kernels()
    order = parts.line.coefficients.size - 1
    place = [em.FIXED + k for k in range(order + 1)]
    settled = False
    for turn in range(ROUNDS):
        linear = em.linearise(pixels, parts, lattice, parts.line.sides(aperture), None)
        use = [em.LEVEL, em.STEP, em.WIDENING, *([em.TAIL] if settled else []), *place]
        matrix = linear.matrix[np.ix_(use, use)]
        unit = np.sqrt(np.diag(matrix)) + 1e-9  # a column may vanish on the way to no edge at all
        matrix = matrix / (unit[:, None] * unit[None, :]) + 1e-9 * np.eye(unit.size)
        solved = np.linalg.solve(matrix, linear.right[use] / unit) / unit
        # half steps end a swing between two places that samples far apart leave open
        move = {k: float(v) / (1 + (turn > ROUNDS // 3)) for k, v in zip(use, solved, strict=True)}
        wider = float(np.clip(move[em.WIDENING] / parts.step, -0.5, 0.5))
        wider = max(wider, float(np.log(LEAST_SIGMA / parts.sigma)))
        slide = np.array([move[k] for k in place])
        slide *= min(1.0, 3 * parts.sigma / max(float(np.abs(slide).sum()), 1e-9))
        line = replace(parts.line, coefficients=parts.line.coefficients + slide)
        parts = replace(
            parts,
            line=line.turned() if order == 1 else line,
            low=parts.low + move[em.LEVEL],
            step=parts.step + move[em.STEP],
            sigma=parts.sigma * float(np.exp(wider)),
            tail=parts.tail + move.get(em.TAIL, 0.0),
        )
        lost = abs(float(line.coefficients[0])) > reach or float(np.abs(line.coefficients[1:]).sum()) > reach
        if lost or not 0 < parts.rise < 10 or parts.sigma > reach:
            raise MeasurementRefused("no edge", "no pair of levels with a step between them fits the region")
        pixels.place(parts.line)
        still = float(np.abs(slide).max()) < 0.01 and abs(wider) < 0.02
        if still and settled:
            return parts
        settled = settled or still or turn > ROUNDS // 2
    raise MeasurementRefused("too noisy", f"the fit did not settle on an edge in {ROUNDS} rounds")


@dataclass(frozen=True)
class _Solved:
    """One solution of the penalised normal equations; covariances are made when they are asked for."""

    change: Array
    """Fixed and sliding columns: change; kernels: new areas."""
    freedom: float
    """Effective number of parameters."""
    unit: Array
    """Scale of every parameter: all below is of parameters times unit."""
    head: Array
    """Covariance of the parameters before the kernels, kernels known."""
    lift: Array
    """How all parameters follow the principal directions of the kernels."""
    data: Array
    """Information of the data along each direction."""
    gain: Array
    """Variance along each direction, averaged over prior sizes."""
    between: Array
    """Prior sizes × directions: deviation of each size's solution from the average, times the root of its weight."""

    information: Array
    """Jᵀ W J, the data's share of the normal equations, not scaled."""

    @cached_property
    def response(self) -> Array:
        """How all parameters follow Jᵀ W times a change of the signal: their covariance for one prior size."""
        return self._whole((self.lift * self.gain) @ self.lift.T, self.head)

    @cached_property
    def covariance(self) -> Array:
        """Posterior covariance, prior sizes averaged over."""
        aside = self.lift @ self.between.T
        return self.response + self._whole(aside @ aside.T, np.zeros_like(self.head))

    def sampling(self, information: Array) -> Array:
        """Return the covariance over repeated captures whose noise gives Jᵀ W r this covariance."""
        return np.asarray(self.response @ information @ self.response)

    @cached_property
    def smoothing(self) -> Array:
        """Estimated bias of every parameter by the prior's pull, Tukey's twicing: what the fit of itself would lose."""
        at = self.head.shape[0]
        directions = self.lift[at:].T @ (self.change[at:] * self.unit[at:])
        return np.asarray(self.lift @ ((self.gain * self.data - 1) * directions) / self.unit)

    def _whole(self, inner: Array, head: Array) -> Array:
        size = head.shape[0]
        inner[:size, :size] += head
        return np.asarray(inner / (self.unit[:, None] * self.unit[None, :]))


def _joint_fit(
    pixels: Pixels, parts: Parts, reach: float, aperture: float, noise_floor: float, *, shading: bool
) -> EdgeFit:
    lattice = lattice_for(reach, spread_width(parts.sigma))
    scale = abs(parts.rise)
    sizes = _kernel_sizes(lattice, spread_width(parts.sigma), scale)
    parts = replace(parts, kernels=np.zeros(lattice.centres.size), tail_width=max(1.0, spread_width(parts.sigma)))
    floor = max(noise_floor, MODEL_FLOOR * scale)
    noise = noise_of(em.residuals(pixels, parts, lattice, parts.line.sides(aperture)), floor)
    excess, together, left_out = 1.0, None, 0
    for turn in range(10):
        linear = em.linearise(pixels, parts, lattice, parts.line.sides(aperture), noise.times(excess))
        solved = _solve(linear, parts, sizes, scale, shading=shading)
        parts = _moved(parts, solved, linear, shading=shading)
        slide = solved.change[em.FIXED : linear.head - 1]
        if parts.line.coefficients.size == 2:
            parts = replace(parts, line=parts.line.turned())
        pixels.place(parts.line)
        if turn == 1 or (left_out and turn < 4):  # what a defect line has bent shows others when it is gone
            lost = defects(em.residuals(pixels, parts, lattice, parts.line.sides(aperture)), pixels, floor)
            left_out += int(lost.sum())
            if lost.any():
                pixels.drop(lost, parts.line)
                noise = noise_of(em.residuals(pixels, parts, lattice, parts.line.sides(aperture)), floor)
                continue
        if turn > 1:
            together = correlation(linear, pixels, excess)
            least = 1.0 if together is None else together.within_band(parts.line.normal)
            before, excess = excess, max(least, excess * misfit(linear, solved.freedom))
            if float(np.abs(slide).max()) < 1e-3 and abs(excess / before - 1) < 0.05:
                break
        noise = noise_of(linear, floor)
    sides = parts.line.sides(aperture)
    linear = em.linearise(pixels, parts, lattice, sides, noise.times(excess))
    free = solved if shading else _solve(linear, parts, sizes, scale, shading=True)
    covariance, sampling = solved.covariance, solved.sampling(solved.information)
    if together is not None:
        mixed = correlated_information(linear, pixels, lattice, together, parts.line.normal) / least
        covariance, sampling = covariance - sampling + solved.sampling(mixed), solved.sampling(mixed)
    return EdgeFit(
        parts,
        lattice,
        sides,
        noise,
        solved.response,
        covariance,
        sampling,
        solved.smoothing,
        pixels,
        linear,
        excess,
        together,
        left_out,
        *_unshaded(parts, solved if shading else free, linear.head, fitted=shading),
        shading,
    )


def _unshaded(parts: Parts, free: _Solved, head: int, *, fitted: bool) -> tuple[Array, tuple[Array, Array]]:
    """Return what a free shading would change in the shape, and that shading with its standard uncertainties."""
    at = [em.SHADE, head - 1]
    u = np.sqrt(np.diag(free.covariance)[at])
    if fitted:
        return np.zeros(parts.shape.size), (parts.shade, u)
    moved = [free.change[[em.STEP, em.WIDENING, em.SHIFT, em.TAIL]], free.change[head:] - parts.kernels]
    return np.concatenate(moved), (free.change[at], u)


def _kernel_sizes(lattice: Lattice, width: float, rise: float) -> Array:
    """Prior standard deviations of the kernels' areas for a prior size of 1."""
    fall, power = PRIOR_REACH
    peak = rise / (width * np.sqrt(2 * np.pi))
    return np.asarray(peak * lattice.steps * (1 + (lattice.centres / (fall * width)) ** 2) ** -power)


def _solve(linear: Linear, parts: Parts, sizes: Array, scale: float, *, shading: bool) -> _Solved:
    """Solve the normal equations under the priors, averaged over prior sizes by their restricted likelihood."""
    head = linear.head
    matrix, right = linear.matrix.copy(), linear.right.copy()
    right += matrix[:, head:] @ parts.kernels  # kernels are solved for as a whole, all else as changes
    shade_sd = SHADE_SD if shading else 1e-9
    for at, now, sd in (
        (em.WIDENING, parts.widening, WIDENING_SD * scale),
        (em.SHIFT, parts.shift, SHIFT_SD * scale),
        (em.FIXED, 0.0, 1e-9),  # the line stays where it is, so that the shape is linear; the shift moves instead
        (em.TAIL, parts.tail, TAIL_SD * scale),
        (em.SHADE, parts.shade[0], shade_sd),
        (head - 1, parts.shade[1], shade_sd),
    ):
        matrix[at, at] += 1 / sd**2
        right[at] -= now / sd**2
    unit = np.sqrt(np.diag(matrix))
    unit[head:] = 1 / sizes
    matrix /= unit[:, None] * unit[None, :]
    right /= unit
    own = np.asarray(np.linalg.inv(matrix[:head, :head] + 1e-12 * np.eye(head)), dtype=np.float64)
    pull = own @ matrix[:head, head:]
    values, vectors = np.linalg.eigh(matrix[head:, head:] - matrix[head:, :head] @ pull)
    values = np.maximum(values, 0)
    rho = vectors.T @ (right[head:] - pull.T @ right[:head])
    squared = PRIOR_SIZES[:, None] ** 2
    gain = squared / (1 + squared * values)
    likelihood = -0.5 * (np.log1p(squared * values).sum(axis=1) - (gain * rho**2).sum(axis=1))
    weight = np.exp(likelihood - likelihood.max())
    weight /= weight.sum()
    mean_gain = weight @ gain
    kernels = vectors @ (mean_gain * rho)
    between = (gain - mean_gain) * rho * np.sqrt(weight)[:, None]
    change = np.concatenate([own @ right[:head] - pull @ kernels, kernels])
    freedom = head + float((mean_gain * values).sum())
    lift = np.vstack([-pull @ vectors, vectors])
    return _Solved(change / unit, freedom, unit, own, lift, values, mean_gain, between, linear.matrix)


def _moved(parts: Parts, solved: _Solved, linear: Linear, *, shading: bool) -> Parts:
    head, change = linear.head, solved.change
    slide = np.clip(change[em.FIXED : head - 1], -0.5, 0.5)
    shade = parts.shade + change[[em.SHADE, head - 1]] if shading else parts.shade
    return replace(
        parts,
        line=replace(parts.line, coefficients=parts.line.coefficients + slide),
        low=parts.low + change[em.LEVEL],
        step=parts.step + change[em.STEP],
        widening=parts.widening + change[em.WIDENING],
        shift=parts.shift + change[em.SHIFT],
        tail=parts.tail + change[em.TAIL],
        kernels=change[head:],
        shade=shade,
    )
