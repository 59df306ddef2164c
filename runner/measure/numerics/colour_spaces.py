"""CIE 1976 L*a*b* from tristimulus values, sRGB, and adaptation from one white to another.

Tristimulus values are relative: Y of the perfect diffuser is 1. Arrays hold the three numbers in their last axis.

References:
    CIE 15:2018 and ISO/CIE 11664-4 (L*a*b*).
    ASTM E308 (whites of illuminants, 2° observer).
    IEC 61966-2-1:1999 (sRGB primaries and white).
    K. M. Lam, Metamerism and Colour Constancy, thesis, Bradford (1985) (sharpened adaptation; linear form as in ICC.1).
"""

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]

WHITES: dict[str, tuple[float, float, float]] = {
    "A": (1.09850, 1.0, 0.35585),
    "D50": (0.96422, 1.0, 0.82521),
    "D55": (0.95682, 1.0, 0.92149),
    "D65": (0.95047, 1.0, 1.08883),
}
"""X, Y, Z of illuminants."""
SRGB: Real = np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]])
"""Linear sRGB to X, Y, Z."""
SRGB_WHITE: Real = SRGB.sum(axis=1)
"""X, Y, Z of R = G = B = 1: D65 in the four digits of the matrix."""
BRADFORD: Real = np.array([[0.8951, 0.2664, -0.1614], [-0.7502, 1.7135, 0.0367], [0.0389, -0.0685, 1.0296]])
"""X, Y, Z to sharpened cone responses."""
LINEAR = (6 / 29) ** 3
"""Below this share of white's Y lightness is proportional to it."""


def white_of(x: float, y: float) -> Real:
    """Return X, Y, Z with Y = 1 of a chromaticity."""
    return np.array([x / y, 1.0, (1 - x - y) / y])


def lab_of(xyz: Real, white: Real) -> Real:
    """Return L*, a*, b* of tristimulus values; those below 0 go on along the straight part."""
    share = xyz / white
    f = np.where(share > LINEAR, np.cbrt(np.maximum(share, LINEAR)), share / (3 * (6 / 29) ** 2) + 4 / 29)
    x, y, z = f[..., 0], f[..., 1], f[..., 2]
    return np.stack([116 * y - 16, 500 * (x - y), 200 * (y - z)], axis=-1)


def xyz_of(lab: Real, white: Real) -> Real:
    """Return tristimulus values of L*, a*, b*."""
    y = (lab[..., 0] + 16) / 116
    f = np.stack([y + lab[..., 1] / 500, y, y - lab[..., 2] / 200], axis=-1)
    return np.asarray(np.where(f > 6 / 29, f**3, 3 * (6 / 29) ** 2 * (f - 4 / 29)) * white)


def adaptation(source: Real, target: Real) -> Real:
    """Return the matrix that takes X, Y, Z seen under one white to those of the same look under another (Bradford)."""
    gains = (BRADFORD @ target) / (BRADFORD @ source)
    return np.asarray(np.linalg.inv(BRADFORD) @ np.diag(gains) @ BRADFORD)


def chroma_of(lab: Real) -> Real:
    """Return C*ab."""
    return np.asarray(np.hypot(lab[..., 1], lab[..., 2]))
