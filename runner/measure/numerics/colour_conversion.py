"""From a camera's linear R, G, B of a chart's patches to tristimulus values under the white of its references.

Three ways: a known matrix (sRGB's own, or a stated one), a stated one under another white with adaptation, or one that
is fitted to the references themselves. Arrays are (…, patches, 3), so that draws are converted all at once.

References:
    ISO 17321-1:2012 (matrices between camera signals and tristimulus values).
    Linear least squares by normal equations; weights follow the slope of lightness, dL*/dY ∝ Y^(-2/3) (CIE 15:2018).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.colour_spaces import SRGB, SRGB_WHITE, adaptation

Real = NDArray[np.float64]

BLACK = 0.02
"""Of white: darker references count no more than this one in fits."""


@dataclass(frozen=True)
class Way:
    """How R, G, B become tristimulus values."""

    matrix: Real | None
    """R, G, B to X, Y, Z; None is fitted to the references."""
    white: Real
    """White that the matrix's values are seen under."""
    target: Real
    """White of the references."""
    adapt: bool = True
    """Adapt from one white to the other."""
    matched: bool = True
    """Bring the exposure to the references' Y by one factor."""


def tristimulus(rgb: Real, reference: Real, neutral: NDArray[np.bool_], way: Way) -> Real:
    """Return X, Y, Z of patches under the references' white.

    Args:
        rgb: Linear light (…, n, 3).
        reference: X, Y, Z of the references, (…, n, 3) or (n, 3).
        neutral: Patches (n) by which the exposure is matched.
        way: How.
    """
    if way.matrix is None:
        return _fitted(rgb, reference)
    xyz = rgb @ way.matrix.T
    if way.adapt:
        xyz = xyz @ adaptation(way.white, way.target).T
    if way.matched:
        y, wanted = xyz[..., neutral, 1], reference[..., neutral, 1]
        w = _weights(wanted)
        factor = np.sum(w * y * wanted, axis=-1) / np.maximum(np.sum(w * y**2, axis=-1), 1e-300)
        xyz = xyz * np.asarray(factor)[..., None, None]
    return np.asarray(xyz)


def left_of_fit(rgb: Real, reference: Real) -> float:
    """Return the share of the references' sum of squares that no matrix explains: of a chart in order some hundredths.

    Args:
        rgb: Linear light (n, 3).
        reference: X, Y, Z (n, 3).
    """
    w = _weights(reference[:, 1])[:, None]
    left = np.sum(w * (_fitted(rgb, reference) - reference) ** 2)
    middle = np.sum(w * reference, axis=0) / np.sum(w)
    return float(left / max(float(np.sum(w * (reference - middle) ** 2)), 1e-300))


def srgb_of(xyz: Real, white: Real) -> Real:
    """Return linear sRGB of tristimulus values under another white, adapted to its own."""
    return np.asarray(xyz @ (np.linalg.inv(SRGB) @ adaptation(white, SRGB_WHITE)).T)


def _weights(y: Real) -> Real:
    return np.asarray(np.maximum(y, BLACK) ** (-4 / 3))


def _fitted(rgb: Real, reference: Real) -> Real:
    weighted = rgb * _weights(reference[..., 1])[..., None]
    across = np.swapaxes(weighted, -1, -2)
    normal, right = across @ rgb, across @ reference
    small = 1e-12 * np.trace(normal, axis1=-2, axis2=-1)[..., None, None] * np.eye(3)  # two channels alike
    return np.asarray(rgb @ np.linalg.solve(normal + small, right))
