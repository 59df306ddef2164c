"""Known sensors give known colours: through their own matrix, a fitted one, another white, another exposure."""

import numpy as np
import pytest

from runner.measure.numerics.colour_conversion import Way, left_of_fit, srgb_of, tristimulus
from runner.measure.numerics.colour_spaces import SRGB, SRGB_WHITE, WHITES, adaptation
from tests.scenes.colours import LAB, RAW, TO_SRGB, linear_srgb

RGB = linear_srgb(LAB)
XYZ = RGB @ np.linalg.inv(TO_SRGB).T
NEUTRAL = np.arange(24) >= 18
D50 = np.array(WHITES["D50"])


@pytest.mark.parametrize("exposure", [1.0, 0.4])
def test_srgb_and_raw(exposure: float) -> None:
    """Colours of sRGB by its own matrix, raw by a stated and by a fitted one, at any exposure once that is matched."""
    stated = np.linalg.inv(TO_SRGB) @ np.linalg.inv(RAW)
    for rgb, matrix in ((RGB, SRGB), (RGB @ RAW.T, stated), (RGB @ RAW.T, None)):
        way = Way(matrix, SRGB_WHITE, SRGB_WHITE)
        np.testing.assert_allclose(tristimulus(exposure * rgb, XYZ, NEUTRAL, way), XYZ, atol=2e-4)
    plain = tristimulus(exposure * RGB, XYZ, NEUTRAL, Way(SRGB, SRGB_WHITE, SRGB_WHITE, matched=False))
    np.testing.assert_allclose(plain, exposure * XYZ, atol=2e-4)


def test_another_white_and_the_way_back() -> None:
    """Under D50 a grey is D50's; linear sRGB of adapted colours is what the camera sent."""
    seen = tristimulus(RGB, XYZ @ adaptation(SRGB_WHITE, D50).T, NEUTRAL, Way(SRGB, SRGB_WHITE, D50))

    np.testing.assert_allclose(seen[18] / seen[18, 1], D50, atol=2e-4)
    np.testing.assert_allclose(srgb_of(seen, D50), RGB, atol=2e-4)
    kept = tristimulus(RGB, XYZ, NEUTRAL, Way(SRGB, SRGB_WHITE, D50, adapt=False))
    np.testing.assert_allclose(kept, XYZ, atol=2e-4)


def test_draws_are_converted_at_once() -> None:
    """A stack of draws gives what each gives by itself, matched and fitted."""
    rng = np.random.default_rng(2)
    draws = RGB + 0.01 * rng.standard_normal((5, 24, 3))
    references = XYZ + 0.001 * rng.standard_normal((5, 24, 3))
    for way in (Way(SRGB, SRGB_WHITE, D50), Way(None, D50, D50)):
        whole = tristimulus(draws, references, NEUTRAL, way)
        for n in range(5):
            np.testing.assert_allclose(whole[n], tristimulus(draws[n], references[n], NEUTRAL, way), rtol=1e-9)


def test_what_no_matrix_explains() -> None:
    """Of a sensor's own colours nothing is left, of others most of it; two channels alike do not break it."""
    order = np.random.default_rng(3).permutation(24)

    assert left_of_fit(RGB @ RAW.T, XYZ) < 1e-6
    assert left_of_fit(RGB[order] @ RAW.T, XYZ) > 0.5
    assert 0 < left_of_fit(RGB[:, [0, 1, 1]], XYZ) < 1
