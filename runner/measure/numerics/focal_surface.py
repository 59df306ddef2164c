"""The surface of best focus over the field: its height, tilt, curvature and the split of its two directions.

    z(x, y) = a + b x + c y + d ρ² + e s ρ²

ρ is the distance from the frame's centre over that of its corner; s is +1/2 where the sagittal direction was measured,
-1/2 where the tangential one was, 0 where neither or both. Terms that the places of the regions cannot tell apart are
left out.

References:
    W. T. Welford, Aberrations of Optical Systems (1986), 7: field curvature and astigmatism grow with the square of the
    field.
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

WELL_POSED = 1e-3
"""Least singular value over the largest at which terms count as told apart."""
TERMS = ("height", "tilt x", "tilt y", "curvature", "astigmatism")


@dataclass(frozen=True)
class Surface:
    """Terms of the surface that the regions determine, each with its uncertainty."""

    terms: Mapping[str, float]
    """By the words of `TERMS`; tilts are the rise from border to border, curvature and astigmatism those at ρ = 1."""
    covariance: NDArray[np.float64]
    """Of the terms in their order."""
    residual: float
    """Root mean square of what is left, in the positions' unit; 0 where nothing is left over."""

    def u(self, term: str) -> float:
        """Return a term's standard uncertainty."""
        place = list(self.terms).index(term)
        return float(np.sqrt(self.covariance[place, place]))


def fit_surface(x: Array, y: Array, size: tuple[float, float], kind: Array, z: Array, u: Array) -> Surface:
    """Fit the surface by weighted least squares.

    Scatter beyond the uncertainties widens all of them (Birge's ratio), since the surface then is no such simple one.

    Args:
        x: Columns of the regions' centres, px, (n,).
        y: Rows, px, (n,).
        size: Columns and rows of the frame.
        kind: +1/2, -1/2 or 0 for each region, see above.
        z: Best focus of each region.
        u: Its standard uncertainty.
    """
    across, down = x / size[0] - 0.5, y / size[1] - 0.5
    reach = ((x - size[0] / 2) ** 2 + (y - size[1] / 2) ** 2) / ((size[0] ** 2 + size[1] ** 2) / 4)
    columns = dict(zip(TERMS, (np.ones_like(x), across, down, reach, kind * reach), strict=True))
    kept: list[str] = []
    for term in TERMS:
        trial = np.stack([columns[name] / max(1e-12, np.abs(columns[name]).max()) for name in (*kept, term)], axis=1)
        if len(kept) < len(z) and np.abs(columns[term]).max() > WELL_POSED:
            singular = np.linalg.svd(trial, compute_uv=False)
            if singular[-1] > WELL_POSED * singular[0] * len(z) ** 0.5:
                kept.append(term)
    design = np.stack([columns[term] for term in kept], axis=1)
    inverse = np.linalg.pinv(design / u[:, None])
    terms = inverse @ (z / u)
    left = z - design @ terms
    free = len(z) - len(kept)
    birge = max(1.0, float(np.sum((left / u) ** 2)) / free) if free > 0 else 1.0
    covariance = birge * (inverse @ inverse.T)
    residual = float(np.sqrt(np.mean(left**2))) if free > 0 else 0.0
    return Surface(dict(zip(kept, map(float, terms), strict=True)), covariance, residual)
