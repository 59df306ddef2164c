"""A flat frame's smooth shading, to divide an edge region by, with the uncertainty that its noise leaves.

Illumination and vignetting vary slowly over one region, so a low polynomial holds all of it and hardly any noise.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure.numerics.edge_fit import EdgeFit
from runner.measure.numerics.line_spread import Array

DEGREE = 3
"""Total degree of the polynomial: a cubic leaves less than 0.1 % of 20 % natural vignetting over a region."""
LEAST_LEVEL = 0.02
"""Mean of the flat as a fraction of range: a darker one has nothing to divide by."""
MOST_ROUGH = 0.01
"""Rms of the flat's 8 × 8 px means about the polynomial, noise taken off: a rougher flat is no smooth shading."""
BLOCK = 8
"""px, side of those squares."""


@dataclass(frozen=True)
class Flat:
    """A smooth shading over one region."""

    field: Array
    """Relative shading, mean 1, rows × columns."""
    terms: Array
    """Polynomials, terms × rows × columns, the constant left out."""
    covariance: Array
    """Covariance of their coefficients."""

    def covariance_of(self, fit: EdgeFit, corrected: Array) -> Array:
        """Return the covariance of everything fitted that the flat's own noise brings.

        Args:
            fit: The fit of the corrected region.
            corrected: The region after division, rows × columns.
        """
        relative = corrected / self.field
        moved = np.column_stack([fit.change(relative * term) for term in self.terms])
        return np.asarray(moved @ self.covariance @ moved.T)


def smooth_flat(crops: Sequence[Array], sites: NDArray[np.bool_] | None = None) -> Flat:
    """Fit the smooth shading of flat frames of one region.

    Args:
        crops: Light, rows × columns each, as fractions of range; repeats are averaged.
        sites: Pixels that may be used, rows × columns; None is all of them.

    Raises:
        MeasurementRefused: `missing companion`, the flat is too dark or not smooth.
    """
    mean = np.mean(np.stack([np.asarray(c, dtype=np.float64) for c in crops]), axis=0)
    used = np.ones(mean.shape, dtype=bool) if sites is None else sites
    level = float(mean[used].mean())
    if not level > LEAST_LEVEL:
        raise MeasurementRefused(
            "missing companion",
            f"the flat's mean is {100 * level:.1f} % of the range",
            allowed=f"at least {100 * LEAST_LEVEL:g} %",
            next_step="capture the flat with more light",
        )
    relative = mean / level
    rows, columns = relative.shape
    y, x = (legendre.legvander(np.linspace(-1, 1, n), DEGREE).T for n in (rows, columns))
    powers = [(i, j) for i in range(DEGREE + 1) for j in range(DEGREE + 1 - i)]
    terms = np.array([y[i][:, None] * x[j][None, :] for i, j in powers])
    design = terms[:, used].T
    gram = design.T @ design
    coefficients = np.linalg.solve(gram, design.T @ relative[used])
    field = np.tensordot(coefficients, terms, 1)
    least = float(field[used].min()) * level
    if not least > LEAST_LEVEL:
        raise MeasurementRefused(
            "missing companion",
            f"the flat falls to {100 * least:.1f} % of the range within the region",
            allowed=f"at least {100 * LEAST_LEVEL:g} %",
            next_step="light the flat more evenly, or with more light",
        )
    residual = np.where(used, relative - field, 0.0)
    variance = float((residual**2).sum()) / max(1, int(used.sum()) - len(powers))
    rough = _roughness(residual, used, variance)
    if rough > MOST_ROUGH:
        raise MeasurementRefused(
            "missing companion",
            f"the flat departs from a smooth shading by {100 * rough:.1f} % rms in squares of {BLOCK} px",
            allowed=f"at most {100 * MOST_ROUGH:g} %",
            next_step="use a flat frame without structure",
        )
    return Flat(field / field.mean(), terms[1:], variance * np.linalg.inv(gram)[1:, 1:])


def _roughness(residual: Array, used: NDArray[np.bool_], variance: float) -> float:
    rows, columns = (n // BLOCK * BLOCK for n in residual.shape)
    if not rows or not columns:
        return 0.0
    squares, counts = (
        values[:rows, :columns].reshape(rows // BLOCK, BLOCK, columns // BLOCK, BLOCK).sum(axis=(1, 3))
        for values in (residual, used)
    )
    return float(np.sqrt(max(0.0, float(((squares / counts) ** 2).mean()) - variance / float(counts.mean()))))
