"""A smooth field of displacements over a frame: two polynomials fitted to vectors at many places, with covariance.

References:
    JCGM 100:2008 H.3 (least squares); JCGM 101:2008 (the largest of many).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]

LOW_ORDER, HIGH_ORDER = 3, 5
"""Orders of the polynomials: 5 holds radial terms up to the fifth power, as lateral colour has them."""
ENOUGH = 84
"""Vectors from which on the higher order is taken: four to a coefficient."""
DRAWS = 256
SEED = 20_210_419


@dataclass(frozen=True)
class VectorField:
    """The fitted field."""

    order: int
    """Of both polynomials."""
    middle: Real
    """Where they count from, px, (2,)."""
    size: float
    """px that count as 1."""
    coefficients: Real
    """Of x and of y, (terms, 2)."""
    covariance: Real
    """Of either column, (terms, terms), with the residuals' own scatter where that is larger than stated."""
    scatter: float
    """Rms of the residuals over their stated uncertainty, freedom allowed for."""

    def terms(self, points: Real) -> Real:
        """Return the powers at points (n, 2), (n, terms)."""
        return _terms((points - self.middle) / self.size, self.order)

    def at(self, points: Real) -> tuple[Real, Real]:
        """Return the vectors at points (n, 2), and the standard uncertainty of either component, (n,)."""
        terms = self.terms(points)
        u = np.sqrt(np.maximum(np.einsum("ni,ij,nj->n", terms, self.covariance, terms), 0))
        return terms @ self.coefficients, u

    def mean_along(self, points: Real, directions: Real) -> tuple[float, float]:
        """Return the mean over points of the component along a direction of each, and its standard uncertainty.

        Args:
            points: (n, 2), px.
            directions: Unit vectors, (n, 2).
        """
        terms = self.terms(points)
        weights = np.einsum("ni,nj->ij", terms, directions) / len(points)
        value = float(np.sum(weights * self.coefficients))
        return value, float(np.sqrt(max(0.0, np.einsum("ik,ij,jk->", weights, self.covariance, weights))))

    def divergence(self) -> tuple[float, float]:
        """Return half the divergence in the middle, a relative change of scale, and its standard uncertainty."""
        powers = _powers(self.order)
        x, y = powers.index((1, 0)), powers.index((0, 1))
        value = (self.coefficients[x, 0] + self.coefficients[y, 1]) / 2 / self.size
        u = np.sqrt(self.covariance[x, x] + self.covariance[y, y]) / 2 / self.size
        return float(value), float(u)

    def largest(self, points: Real) -> tuple[float, float, int]:
        """Return the largest length over points, what noise adds to it taken off, its u, and which point it is at.

        The excess is what further noise of the same kind adds to what was found; its own uncertainty counts twice,
        for it is itself taken from a noisy field.

        Args:
            points: (n, 2), px.
        """
        terms = self.terms(points)
        length = np.hypot(*(terms @ self.coefficients).T)
        most, found = int(length.argmax()), float(length.max())
        root = _root(self.covariance)
        noise = np.random.default_rng(SEED).standard_normal((DRAWS, 2, root.shape[1]))
        drawn = self.coefficients + np.einsum("ij,dkj->dik", root, noise)
        largest = np.hypot(*np.moveaxis(terms @ drawn, 2, 0)).max(axis=1)
        rise = max(0.0, float(largest.mean()) - found)
        own = float(np.sqrt(max(0.0, terms[most] @ self.covariance @ terms[most])))
        u = float(np.hypot(max(own, float(largest.std())), np.sqrt(2) * rise))
        return max(0.0, found - rise), u, most


def fit_field(points: Real, vectors: Real, u: Real, frame: tuple[int, int]) -> VectorField:
    """Fit a field.

    Args:
        points: (n, 2), px of the frame.
        vectors: (n, 2), px.
        u: Standard uncertainty of each component, (n,).
        frame: Columns and rows; the field counts from its middle.
    """
    order = HIGH_ORDER if len(points) >= ENOUGH else LOW_ORDER
    middle, size = np.array(frame) / 2, float(np.hypot(*frame)) / 2
    terms = _terms((points - middle) / size, order)
    weighted = terms / u[:, None]
    covariance = np.asarray(np.linalg.pinv(weighted.T @ weighted, hermitian=True), dtype=np.float64)
    coefficients = covariance @ (weighted.T @ (vectors / u[:, None]))
    rest = (vectors - terms @ coefficients) / u[:, None]
    freedom = max(1, rest.size - 2 * terms.shape[1])
    scatter = float(np.sqrt(np.sum(rest**2) / freedom))
    return VectorField(order, middle, size, coefficients, covariance * max(1.0, scatter) ** 2, scatter)


def _powers(order: int) -> list[tuple[int, int]]:
    return [(a, b) for a in range(order + 1) for b in range(order + 1 - a)]


def _terms(n: Real, order: int) -> Real:
    x, y = (np.stack([n[:, i] ** k for k in range(order + 1)]) for i in (0, 1))
    return np.column_stack([x[a] * y[b] for a, b in _powers(order)])


def _root(matrix: Real) -> Real:
    values, vectors = np.linalg.eigh(matrix)
    return np.asarray(vectors * np.sqrt(np.maximum(values, 0)))
