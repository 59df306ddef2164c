"""The model of a slanted edge and one linearisation of it on all pixels of a region.

Signal at a pixel = shading × (dark level + Σ area_k × spread_k(d)), d the pixel centre's distance along the normal. The
parts k are: pixel ⊗ Gaussian, its widening and its shift (derivatives), a 1/x² tail, and kernels. Sums over pixels are
taken bin by bin along the normal, residuals are exact at every pixel: binning slows the convergence by a trifle and
biases nothing.
"""

from dataclasses import dataclass

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from runner.measure.numerics.edge_geometry import EdgeLine
from runner.measure.numerics.line_spread import (
    Array,
    Lattice,
    gauss_transfer,
    pixel_gauss,
    pixel_transfer,
    tail,
    tail_transfer,
)

Complex = NDArray[np.complex128]

LEVEL, STEP, WIDENING, SHIFT, TAIL, SHADE = range(6)
"""Columns that are functions of the distance alone, before the kernels."""
FIXED = 6
"""How many of them there are."""


@dataclass(frozen=True)
class Parts:
    """All fitted numbers of one edge."""

    line: EdgeLine
    """Where it lies."""
    low: float
    """Dark level, fraction of range."""
    step: float
    """Area of the pixel ⊗ Gaussian part, fraction of range."""
    sigma: float
    """Its Gaussian's standard deviation, px."""
    widening: float
    """Amount of its derivative to log sigma, fraction of range."""
    shift: float
    """Amount of its derivative along the normal, fraction of range times px: moves the spread against the line."""
    tail: float
    """Area of the tail part, fraction of range."""
    tail_width: float
    """Its half-width, px, fixed; kernels mend its core, its 1/x² end is what counts."""
    kernels: Array
    """Areas of the kernels, fraction of range."""
    shade: Array
    """Relative shading at d = half and at v = half; zeros when none is fitted."""

    @property
    def rise(self) -> float:
        """Bright minus dark level."""
        return float(self.step + self.tail + self.kernels.sum())

    @property
    def shape(self) -> Array:
        """Amounts of the line spread's parts: step, widening, shift, tail, kernels."""
        return np.concatenate([[self.step, self.widening, self.shift, self.tail], self.kernels])


@dataclass(frozen=True)
class Noise:
    """Variance of a pixel at either level."""

    low: float
    """At the dark level, fraction of range squared."""
    high: float
    """At the bright level."""
    dof: float
    """Degrees of freedom of both together."""

    def times(self, factor: float) -> "Noise":
        """Return the same with both variances multiplied."""
        return Noise(self.low * factor, self.high * factor, self.dof)

    def at(self, spread: Array) -> Array:
        """Return the variance where the edge spread has these values, linear in level."""
        return np.asarray(self.low + (self.high - self.low) * np.clip(spread, 0, 1))


class Pixels:
    """A region's pixels, flat, in the coordinates of the current edge line."""

    def __init__(self, signal: Array, line: EdgeLine) -> None:
        self.shape = (int(signal.shape[0]), int(signal.shape[1]))
        self.signal = np.ascontiguousarray(signal, dtype=np.float64).ravel()
        self.place(line)

    def place(self, line: EdgeLine) -> None:
        """Take the coordinates of this line's normal."""
        self.u, self.v = line.along(self.shape)
        self.polynomials = legendre.legvander(self.v / line.half, max(1, line.coefficients.size - 1)).T


@dataclass(frozen=True)
class Model:
    """Values at the lattice's nodes, and the columns of the design there."""

    value: Array
    """Signal without shading."""
    slope: Array
    """Its derivative along the normal, 1/px."""
    columns: Array
    """nodes × (level, step, widening, shift, tail, shading along d, kernels)."""
    sliding: tuple[tuple[Array, int], ...]
    """Columns that also vary along the edge: (profile, order of the polynomial); geometry, then shading along v."""


def model_of(parts: Parts, lattice: Lattice, sides: tuple[float, float]) -> Model:
    """Evaluate the model at the lattice's nodes."""
    spreads, densities = shape_columns(lattice.nodes, parts, lattice, sides, at_nodes=True)
    value = parts.low + spreads @ parts.shape
    slope = densities @ parts.shape
    columns = np.empty((value.size, FIXED + lattice.centres.size))
    columns[:, LEVEL] = 1.0
    columns[:, STEP : TAIL + 1] = spreads[:, :4]
    columns[:, SHADE] = lattice.nodes / parts.line.half * value
    columns[:, FIXED:] = spreads[:, 4:]
    sliding = [(-slope, j) for j in range(parts.line.coefficients.size)]
    return Model(value, slope, columns, (*sliding, (value, 1)))


def shape_columns(
    x: Array, parts: Parts, lattice: Lattice, sides: tuple[float, float], *, at_nodes: bool = False
) -> tuple[Array, Array]:
    """Return edge spreads and line spreads of the parts (step, widening, shift, tail, kernels), points × parts.

    Args:
        x: Distances, px.
        parts: Sigma and the tail's width.
        lattice: Kernels.
        sides: The pixel's sides along the normal, px.
        at_nodes: `x` are the lattice's nodes, whose kernel values are kept.
    """
    sigma = parts.sigma
    # heat equation: the derivative of a Gaussian-blurred function to log sigma is sigma² times its second derivative
    spread, density, bend, further = pixel_gauss(x, sigma, sides)
    tail_spread, tail_density = tail(x, parts.tail_width)
    kernel_spreads, kernel_densities = (lattice.spreads, lattice.densities) if at_nodes else lattice.kernels(x)
    first = np.column_stack([spread, sigma**2 * bend, -density, tail_spread])
    second = np.column_stack([density, sigma**2 * further, -bend, tail_density])
    return np.hstack([first, kernel_spreads]), np.hstack([second, kernel_densities])


def shape_transfers(frequency: Array, parts: Parts, lattice: Lattice, sides: tuple[float, float]) -> Complex:
    """Return the transforms of the parts (step, widening, shift, tail, kernels), frequencies × parts."""
    base = pixel_transfer(frequency, sides) * gauss_transfer(frequency, parts.sigma)
    widening = -base * (2 * np.pi * parts.sigma * frequency) ** 2
    shift = -2j * np.pi * frequency * base
    first = np.column_stack([base, widening, shift, tail_transfer(frequency, parts.tail_width)])
    return np.hstack([first, lattice.transfer(frequency)])


AREAS = (1.0, 0.0, 0.0, 1.0)
"""Areas of step, widening, shift and tail; each kernel's is 1."""


@dataclass(frozen=True)
class Linear:
    """Normal equations of one Gauss-Newton step, in the order fixed columns, sliding columns, kernels."""

    model: Model
    """Where it was linearised."""
    index: NDArray[np.intp]
    """Bin of every pixel."""
    residual: Array
    """Exact residual of every pixel."""
    matrix: Array
    """Jᵀ W J."""
    right: Array
    """Jᵀ W r."""
    counts: Array
    """Pixels per bin."""
    means: Array
    """Mean residual per bin."""
    within: Array
    """Sum of squared residuals about that mean, per bin."""
    weights: Array
    """1 / variance of a pixel, per bin."""
    spread: Array
    """Normalised edge spread at the nodes."""

    @property
    def head(self) -> int:
        """Number of parameters before the kernels."""
        return FIXED + len(self.model.sliding)


def linearise(
    pixels: Pixels, parts: Parts, lattice: Lattice, sides: tuple[float, float], noise: Noise | None
) -> Linear:
    """Linearise the model about `parts` on all pixels; without noise every pixel has weight 1."""
    model = model_of(parts, lattice, sides)
    d = parts.line.distance(pixels.u, pixels.v)
    at = lattice.warped(d)
    fitted = lattice.interpolate(at, d, model.value, model.slope)
    if parts.shade.any():
        fitted *= 1 + parts.shade[0] * d / parts.line.half + parts.shade[1] * pixels.polynomials[1]
    residual = pixels.signal - fitted
    size = lattice.nodes.size
    index = np.clip(np.asarray(np.rint(at), dtype=np.intp), 0, size - 1)
    counts = np.bincount(index, minlength=size).astype(np.float64)
    sums = _summed(index, residual, size)
    squares = _summed(index, residual * residual, size)
    spread = (model.value - parts.low) / parts.rise
    weights = 1 / noise.at(spread) if noise is not None else np.ones(size)
    matrix = _matrix(pixels, model, index, counts, weights)
    right = _right(pixels, model, index, residual, sums, weights)
    means = sums / np.maximum(counts, 1)
    return Linear(model, index, residual, matrix, right, counts, means, squares - counts * means**2, weights, spread)


def response(pixels: Pixels, linear: Linear, change: Array) -> Array:
    """Return Jᵀ W change for any change of the region's signal (rows × columns, or flat)."""
    flat = np.ravel(change)
    sums = _summed(linear.index, flat, linear.counts.size)
    return _right(pixels, linear.model, linear.index, flat, sums, linear.weights)


def _summed(index: NDArray[np.intp], values: Array, size: int) -> Array:
    return np.asarray(np.bincount(index, values, minlength=size), dtype=np.float64)


def _right(pixels: Pixels, model: Model, index: NDArray[np.intp], values: Array, sums: Array, weights: Array) -> Array:
    fixed = model.columns.T @ (weights * sums)
    moments = {0: sums}
    for _, j in model.sliding:
        if j not in moments:
            moments[j] = _summed(index, values * pixels.polynomials[j], sums.size)
    slid = [float((weights * profile) @ moments[j]) for profile, j in model.sliding]
    return np.concatenate([fixed[:FIXED], slid, fixed[FIXED:]])


def _matrix(pixels: Pixels, model: Model, index: NDArray[np.intp], counts: Array, weights: Array) -> Array:
    used = np.flatnonzero(counts)
    f, w = model.columns[used], weights[used]
    fixed = f.T @ (f * (w * counts[used])[:, None])
    moments: dict[tuple[int, int], Array] = {(0, 0): counts[used]}

    def moment(i: int, j: int) -> Array:
        key = (min(i, j), max(i, j))
        if key not in moments:
            product = pixels.polynomials[key[1]] * (pixels.polynomials[key[0]] if key[0] else 1.0)
            moments[key] = _summed(index, product, counts.size)[used]
        return moments[key]

    slid = np.column_stack([(w * profile[used]) * moment(0, j) for profile, j in model.sliding])
    cross = f.T @ slid
    own = np.array([[(w * p[used] * q[used]) @ moment(i, j) for q, j in model.sliding] for p, i in model.sliding])
    a, b = slice(0, FIXED), slice(FIXED, None)
    return np.block(
        [[fixed[a, a], cross[a], fixed[a, b]], [cross[a].T, own, cross[b].T], [fixed[b, a], cross[b], fixed[b, b]]]
    )
