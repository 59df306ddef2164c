"""The model of a slanted edge and one linearisation of it on all pixels of a region.

Signal at a pixel = shading × (dark level + Σ area_k × spread_k(d)), d the pixel centre's distance along the normal. The
parts k are: pixel ⊗ Gaussian, its widening and its shift (derivatives), a 1/x² tail, and kernels. Sums over pixels are
taken bin by bin along the normal, residuals are exact at every pixel: binning slows the convergence by a trifle and
biases nothing.
"""

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from runner.measure.numerics.edge_geometry import EdgeLine
from runner.measure.numerics.line_spread import (
    GRID,
    Array,
    Lattice,
    gauss_transfer,
    pixel_gauss,
    pixel_transfer,
    tail,
    tail_transfer,
)

if TYPE_CHECKING:
    from scipy import sparse

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

    def __init__(self, signal: Array, line: EdgeLine, sites: NDArray[np.bool_] | None = None) -> None:
        self.shape = (int(signal.shape[0]), int(signal.shape[1]))
        self.kept = None if sites is None else np.flatnonzero(sites)
        self.signal = self.taken(np.asarray(signal, dtype=np.float64))
        self.place(line)

    def place(self, line: EdgeLine) -> None:
        """Take the coordinates of this line's normal, and the distances from it."""
        u, self.v = (self.taken(each) for each in line.along(self.shape))
        self.distance = line.distance(u, self.v)
        t = self.v / line.half
        order = line.coefficients.size - 1
        self.polynomials = [np.ones_like(t), t, *(legendre.legvander(t, order).T[2:] if order > 1 else ())]

    def drop(self, lost: NDArray[np.bool_], line: EdgeLine) -> None:
        """Leave some of these pixels out from now on."""
        kept = np.arange(self.shape[0] * self.shape[1]) if self.kept is None else self.kept
        self.kept, self.signal = kept[~lost], self.signal[~lost]
        self.place(line)

    def taken(self, values: NDArray[Any]) -> NDArray[Any]:
        """Return the values of these pixels out of all of the region's (rows × columns, or flat)."""
        flat = np.ravel(values)
        return flat if self.kept is None else np.asarray(flat[self.kept])

    def picture(self, values: Array) -> Array:
        """Return these pixels' values in their places, rows × columns, 0 elsewhere."""
        if self.kept is None:
            return values.reshape(self.shape)
        whole = np.zeros(self.shape)
        whole.ravel()[self.kept] = values
        return whole


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
    spreads, densities = _plain_columns(lattice.nodes, parts, sides)
    plain = parts.shape[:4]
    value = parts.low + spreads @ plain + lattice.spreads @ parts.kernels
    slope = densities @ plain + lattice.densities @ parts.kernels
    columns = np.empty((value.size, FIXED + lattice.centres.size))
    columns[:, LEVEL] = 1.0
    columns[:, STEP : TAIL + 1] = spreads
    columns[:, SHADE] = lattice.nodes / parts.line.half * value
    columns[:, FIXED:] = lattice.spreads
    sliding = [(-slope, j) for j in range(parts.line.coefficients.size)]
    return Model(value, slope, columns, (*sliding, (value, 1)))


def shape_columns(x: Array, parts: Parts, lattice: Lattice, sides: tuple[float, float]) -> tuple[Array, Array]:
    """Return edge spreads and line spreads of the parts (step, widening, shift, tail, kernels), points × parts.

    Args:
        x: Distances, px.
        parts: Sigma and the tail's width.
        lattice: Kernels.
        sides: The pixel's sides along the normal, px.
    """
    plain, kernels = _plain_columns(x, parts, sides), lattice.kernels(x)
    return np.hstack([plain[0], kernels[0]]), np.hstack([plain[1], kernels[1]])


def _plain_columns(x: Array, parts: Parts, sides: tuple[float, float]) -> tuple[Array, Array]:
    """Edge spreads and line spreads of step, widening, shift and tail, points × 4."""
    sigma = parts.sigma
    # heat equation: the derivative of a Gaussian-blurred function to log sigma is sigma² times its second derivative
    spread, density, bend, further = pixel_gauss(x, sigma, sides)
    tail_spread, tail_density = tail(x, parts.tail_width)
    first = np.column_stack([spread, sigma**2 * bend, -density, tail_spread])
    return first, np.column_stack([density, sigma**2 * further, -bend, tail_density])


def shape_transfers(frequency: Array | None, parts: Parts, lattice: Lattice, sides: tuple[float, float]) -> Complex:
    """Return the transforms of the parts (step, widening, shift, tail, kernels), frequencies × parts; None: on GRID."""
    kernels = lattice.on_grid if frequency is None else lattice.transfer(frequency)
    f = GRID if frequency is None else frequency
    base = pixel_transfer(f, sides) * gauss_transfer(f, parts.sigma)
    columns = np.empty((f.size, 4 + kernels.shape[1]), dtype=np.complex128)
    columns[:, 0] = base
    columns[:, 1] = -base * (2 * np.pi * parts.sigma * f) ** 2
    columns[:, 2] = -2j * np.pi * f * base
    columns[:, 3] = tail_transfer(f, parts.tail_width)
    columns[:, 4:] = kernels
    return columns


AREAS = (1.0, 0.0, 0.0, 1.0)
"""Areas of step, widening, shift and tail; each kernel's is 1."""


@dataclass(frozen=True)
class Residuals:
    """The model against all pixels."""

    model: Model
    """The model at the nodes."""
    index: NDArray[np.intp]
    """Bin of every pixel."""
    residual: Array
    """Exact residual of every pixel."""
    counts: Array
    """Pixels per bin."""
    sums: Array
    """Sum of residuals per bin."""
    spread: Array
    """Normalised edge spread at the nodes."""

    @property
    def means(self) -> Array:
        """Mean residual per bin."""
        return np.asarray(self.sums / np.maximum(self.counts, 1))

    @property
    def within(self) -> Array:
        """Sum of squared residuals about that mean, per bin."""
        squares = _summed(self.index, self.residual * self.residual, self.counts.size)
        return np.asarray(squares - self.counts * self.means**2)


@dataclass(frozen=True)
class Linear(Residuals):
    """Normal equations of one Gauss-Newton step, in the order fixed columns, sliding columns, kernels."""

    matrix: Array
    """Jᵀ W J."""
    right: Array
    """Jᵀ W r."""
    weights: Array
    """1 / variance of a pixel, per bin."""

    @property
    def head(self) -> int:
        """Number of parameters before the kernels."""
        return FIXED + len(self.model.sliding)


def residuals(pixels: Pixels, parts: Parts, lattice: Lattice, sides: tuple[float, float]) -> Residuals:
    """Compare the model with all pixels, which were placed on the parts' line before."""
    model = model_of(parts, lattice, sides)
    at = lattice.warped(pixels.distance)
    fitted = lattice.interpolate(at, model.value, model.slope)
    if parts.shade.any():
        fitted *= 1 + parts.shade[0] * pixels.distance / parts.line.half + parts.shade[1] * pixels.polynomials[1]
    residual = pixels.signal - fitted
    size = lattice.nodes.size
    index = np.clip((at + 0.5).astype(np.intp), 0, size - 1)
    counts = np.bincount(index, minlength=size).astype(np.float64)
    sums = _summed(index, residual, size)
    return Residuals(model, index, residual, counts, sums, (model.value - parts.low) / parts.rise)


def linearise(
    pixels: Pixels, parts: Parts, lattice: Lattice, sides: tuple[float, float], noise: Noise | None
) -> Linear:
    """Linearise the model about `parts` on all pixels; without noise every pixel has weight 1."""
    found = residuals(pixels, parts, lattice, sides)
    weights = 1 / noise.at(found.spread) if noise is not None else np.ones(lattice.nodes.size)
    matrix = information(pixels, found, weights)
    right = _right(pixels, found, found.residual, found.sums, weights)
    return Linear(**vars(found), matrix=matrix, right=right, weights=weights)


def response(pixels: Pixels, linear: Linear, change: Array) -> Array:
    """Return Jᵀ W change for any change of the region's signal (rows × columns, or flat)."""
    flat = pixels.taken(change)
    return _right(pixels, linear, flat, _summed(linear.index, flat, linear.counts.size), linear.weights)


def _summed(index: NDArray[np.intp], values: Array, size: int) -> Array:
    return np.asarray(np.bincount(index, values, minlength=size), dtype=np.float64)


def _right(pixels: Pixels, found: Residuals, values: Array, sums: Array, weights: Array) -> Array:
    fixed = found.model.columns.T @ (weights * sums)
    moments = {0: sums}
    for _, j in found.model.sliding:
        if j not in moments:
            moments[j] = _summed(found.index, values * pixels.polynomials[j], sums.size)
    slid = [float((weights * profile) @ moments[j]) for profile, j in found.model.sliding]
    return np.concatenate([fixed[:FIXED], slid, fixed[FIXED:]])


def information(pixels: Pixels, found: Residuals, weights: Array, mix: "sparse.csr_array | None" = None) -> Array:
    """Return Jᵀ W J; with a mix (nodes × nodes) Jᵀ W½ mix W½ J, taken bin by bin."""
    used, sliding = np.flatnonzero(found.counts), found.model.sliding
    counts, columns, slid = found.counts[used], found.model.columns, np.column_stack([each for each, _ in sliding])
    if mix is None:
        root = np.sqrt(weights[used])[:, None]
        left, slid = columns[used] * root, slid[used] * root
        right, further = left, slid
    else:
        root = np.sqrt(weights)[:, None]
        right, further = (mix @ (each * root) for each in (columns, slid))
        left, slid, right, further = columns[used] * root[used], slid[used] * root[used], right[used], further[used]
    moments: dict[tuple[int, int], Array] = {(0, 0): counts}

    def moment(i: int, j: int) -> Array:
        key = (min(i, j), max(i, j))
        if key not in moments:
            product = pixels.polynomials[key[1]] * (pixels.polynomials[key[0]] if key[0] else 1.0)
            moments[key] = _summed(found.index, product, found.counts.size)[used]
        return moments[key]

    orders = [j for _, j in sliding]
    first = np.column_stack([moment(0, j) for j in orders])
    head, size = FIXED + len(sliding), left.shape[1] + len(sliding)
    matrix = np.empty((size, size))
    at = np.concatenate([np.arange(FIXED), np.arange(head, size)])
    if mix is None:
        scaled = left * np.sqrt(counts)[:, None]
        matrix[np.ix_(at, at)] = scaled.T @ scaled
    else:
        matrix[np.ix_(at, at)] = (left * counts[:, None]).T @ right
    matrix[at, FIXED:head] = left.T @ (further * first)
    matrix[FIXED:head, at] = (slid * first).T @ right
    matrix[FIXED:head, FIXED:head] = [
        [(slid[:, a] * further[:, b]) @ moment(i, j) for b, j in enumerate(orders)] for a, i in enumerate(orders)
    ]
    return matrix
