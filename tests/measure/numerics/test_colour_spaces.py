"""L*a*b*, sRGB and adaptation give published values, and undo themselves."""

import numpy as np
import pytest
from skimage.color import lab2xyz, xyz2lab

from runner.measure.numerics.colour_spaces import (
    SRGB,
    SRGB_WHITE,
    WHITES,
    adaptation,
    chroma_of,
    lab_of,
    white_of,
    xyz_of,
)

D65 = np.array(WHITES["D65"])
D50 = np.array(WHITES["D50"])


def test_lightness_of_known_reflectances() -> None:
    """CIE 15: L* of Y = 0.184187 is 50, of 0.18 is 49.4961, of white 100, of black 0."""
    lightness = lab_of(np.array([0.184187, 0.18, 1.0, 0.0])[:, None] * D65, D65)

    np.testing.assert_allclose(lightness[:, 0], [50.0, 49.4961, 100, 0], atol=1e-4)
    np.testing.assert_allclose(lightness[:, 1:], 0, atol=1e-12)


@pytest.mark.parametrize(
    ("rgb", "lab"),
    [
        ((1, 0, 0), (53.2406, 80.0923, 67.2028)),
        ((0, 1, 0), (87.7351, -86.1830, 83.1797)),
        ((0, 0, 1), (32.2957, 79.1856, -107.8573)),
    ],
)
def test_primaries_of_srgb(rgb: tuple[int, int, int], lab: tuple[float, float, float]) -> None:
    """L*a*b* of the sRGB primaries under D65, 2° observer, as scikit-image has them; 0.03 is the matrix's rounding."""
    np.testing.assert_allclose(lab_of(SRGB @ np.array(rgb), D65), lab, atol=0.03)


def test_as_another_library_has_it_and_back() -> None:
    """Random tristimulus values under D50 as scikit-image's; the way back gives them again, below zero too."""
    xyz = np.random.default_rng(3).uniform(0, 1, (200, 3))
    np.testing.assert_allclose(lab_of(xyz, D50), xyz2lab(xyz, illuminant="D50"), atol=0.03)  # its white has 4 digits
    np.testing.assert_allclose(xyz_of(lab_of(xyz, D65), D65), lab2xyz(xyz2lab(xyz)), atol=1e-3)
    below = xyz - 0.1
    np.testing.assert_allclose(xyz_of(lab_of(below, D65), D65), below, atol=1e-12)


def test_adaptation_from_d65_to_d50() -> None:
    """The matrix that sRGB profiles state (ICC.1:2022, `chad`), with their whites, to 2e-4; white goes to white."""
    published = [[1.04788, 0.02292, -0.05022], [0.02959, 0.99048, -0.01707], [-0.00925, 0.01508, 0.75168]]
    matrix = adaptation(white_of(0.3127, 0.3290), np.array([0.9642, 1, 0.8249]))

    np.testing.assert_allclose(matrix, published, atol=2e-4)
    np.testing.assert_allclose(adaptation(SRGB_WHITE, D50) @ SRGB_WHITE, D50, atol=1e-12)


def test_whites_and_chroma() -> None:
    """CIE 15: D65 has the chromaticity 0.3127, 0.3290; chroma is the length in a* and b*."""
    np.testing.assert_allclose(white_of(0.3127, 0.3290), D65, atol=5e-4)
    assert float(chroma_of(np.array([50.0, 3, -4]))) == pytest.approx(5)
