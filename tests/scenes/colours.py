"""An invented chart of 24 colours, and what cameras make of it: sRGB frames and raw colours through a known matrix.

Shares nothing with the program under test: conversions are scikit-image's and own arithmetic.
"""

import numpy as np
from numpy.typing import NDArray
from skimage.color import lab2xyz

Values = NDArray[np.float64]

TURNS = np.arange(18) * 20.0
LAB: Values = np.concatenate(
    [
        np.column_stack(
            [
                np.array([45, 60, 70, 52, 38, 64] * 3, dtype=float),
                24 * np.cos(np.radians(TURNS)),
                24 * np.sin(np.radians(TURNS)),
            ]
        )[[0, 7, 14, 3, 10, 17, 6, 13, 2, 9, 16, 5, 12, 1, 8, 15, 4, 11]],
        np.column_stack([[94.0, 80, 65, 50, 35, 22], np.zeros(6), np.zeros(6)]),
    ]
)
"""L*, a*, b* under D65, 18 hues of chroma 24 in mixed order, then a row of six neutral ones."""
TO_SRGB = np.linalg.inv(np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]]))
"""X, Y, Z to linear sRGB (IEC 61966-2-1)."""
RAW: Values = np.array([[0.65, 0.28, 0.12], [0.25, 0.80, 0.10], [0.04, 0.15, 0.75]])
"""Linear sRGB to an invented sensor's raw R, G, B: neighbouring filters overlap."""


def linear_srgb(lab: Values) -> Values:
    """Return linear sRGB of colours under D65, (n, 3)."""
    return np.asarray(lab2xyz(lab, illuminant="D65") @ TO_SRGB.T)
