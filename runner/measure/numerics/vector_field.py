"""A smooth field of displacements over a frame, fitted to vectors at many places, with covariance.

Either component is a polynomial of the third order; a radial term of the fifth is added, so that what lenses do
(radial, odd powers), decentring (even ones) and tilted planes are held.

References:
    JCGM 100:2008 H.3 (least squares); JCGM 101:2008 (the largest of many).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]

ORDER = 3
"""Of the polynomials in x and y for either component; a radial term of the fifth power comes on top."""
POWERS = [(a, b) for a in range(ORDER + 1) for b in range(ORDER + 1 - a)]
"""Powers of x and y of the polynomials' terms."""
DRAWS = 256
SEED = 20_210_419


@dataclass(frozen=True)
class VectorField:
    """The fitted field."""

    middle: Real
    """Where the terms count from, px, (2,)."""
    size: float
    """px that count as 1."""
    coefficients: Real
    """Of the terms, (k,)."""
    covariance: Real
    """Theirs, (k, k), with the residuals' own scatter where that is larger than stated."""
    scatter: float
    """Rms of the residuals over their stated uncertainty, freedom allowed for."""

    def terms(self, points: Real) -> Real:
        """Return what each term displaces points (n, 2) by, (n, 2, k)."""
        return _terms((points - self.middle) / self.size)

    def at(self, points: Real) -> tuple[Real, Real]:
        """Return the vectors at points (n, 2), and the standard uncertainty of either component, (n,)."""
        terms = self.terms(points)
        variance = np.einsum("nci,ij,ncj->n", terms, self.covariance, terms) / 2
        return terms @ self.coefficients, np.sqrt(np.maximum(variance, 0))

    def mean_along(self, points: Real, directions: Real) -> tuple[float, float]:
        """Return the mean over points of the component along a direction of each, and its standard uncertainty.

        Args:
            points: (n, 2), px.
            directions: Unit vectors, (n, 2).
        """
        weights = np.einsum("nck,nc->k", self.terms(points), directions) / len(points)
        return float(weights @ self.coefficients), float(np.sqrt(np.maximum(0.0, weights @ self.covariance @ weights)))

    def divergence(self) -> tuple[float, float]:
        """Return half the divergence in the middle, a relative change of scale, and its standard uncertainty."""
        weights = np.zeros(len(self.coefficients))
        for component, power in enumerate(((1, 0), (0, 1))):
            weights[component * len(POWERS) + POWERS.index(power)] = 0.5 / self.size
        return float(weights @ self.coefficients), float(np.sqrt(np.maximum(0.0, weights @ self.covariance @ weights)))

    def largest(self, points: Real) -> tuple[float, float, int]:
        """Return the largest length over points, what noise adds to it taken off, its u, and which point it is at.

        The excess is what further noise of the same kind adds to what was found; its own uncertainty counts twice,
        for it is itself taken from a noisy field.

        Args:
            points: (n, 2), px.
        """
        terms = self.terms(points)
        vectors = terms @ self.coefficients
        length = np.hypot(*vectors.T)
        most, found = int(length.argmax()), float(length.max())
        root = _root(self.covariance)
        noise = np.random.default_rng(SEED).standard_normal((root.shape[1], DRAWS))
        drawn = terms @ (self.coefficients[:, None] + root @ noise)
        largest = np.hypot(drawn[:, 0], drawn[:, 1]).max(axis=0)
        rise = max(0.0, float(largest.mean()) - found)
        way = terms[most].T @ vectors[most] / max(found, 1e-12)
        own = float(np.sqrt(max(0.0, way @ self.covariance @ way)))
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
    middle, size = np.array(frame) / 2, float(np.hypot(*frame)) / 2
    terms = _terms((points - middle) / size)
    weighted = (terms / u[:, None, None]).reshape(-1, terms.shape[2])
    covariance = np.asarray(np.linalg.pinv(weighted.T @ weighted, hermitian=True), dtype=np.float64)
    coefficients = covariance @ (weighted.T @ (vectors / u[:, None]).ravel())
    rest = (vectors - terms @ coefficients) / u[:, None]
    freedom = max(1, rest.size - terms.shape[2])
    scatter = float(np.sqrt(np.sum(rest**2) / freedom))
    return VectorField(middle, size, coefficients, covariance * max(1.0, scatter) ** 2, scatter)


def _terms(n: Real) -> Real:
    """Return the terms' displacements at points over half the diagonal, (n, 2, k)."""
    x, y = n.T
    powers = np.column_stack([x**a * y**b for a, b in POWERS])
    out = np.zeros((len(n), 2, 2 * len(POWERS) + 1))
    out[:, 0, : len(POWERS)] = powers
    out[:, 1, len(POWERS) : -1] = powers
    out[:, :, -1] = n * (x * x + y * y)[:, None] ** 2
    return out


def _root(matrix: Real) -> Real:
    values, vectors = np.linalg.eigh(matrix)
    return np.asarray(vectors * np.sqrt(np.maximum(values, 0)))
