"""Structure of frames: what even fields of all kinds have, and what pictures have."""

import numpy as np
import pytest
from scipy import ndimage

from runner.measure.numerics.even_field import structure
from tests.scenes.flats import Shading, Values, plant, scattered, spot, wave

SIZES = [(64, 48), (161, 121), (640, 480)]


def _codes(light: Values) -> np.ndarray:
    return np.clip(np.round(light), 0, 65535).astype(np.uint16)


def test_white_noise_makes_one() -> None:
    """Both figures are in units of what white noise makes: 1, within 25 % (medians of 144 and 576 values)."""
    found = structure(_codes(np.random.default_rng(1).normal(9000, 60, (800, 900))))

    assert found.mixed == pytest.approx(1.0, rel=0.25)
    assert found.left == pytest.approx(1.0, rel=0.25)


@pytest.mark.parametrize("noise", [0.0, 150.0])
@pytest.mark.parametrize("size", SIZES)
def test_even_fields_are_told(size: tuple[int, int], noise: float) -> None:
    """Lenses down to a quarter in the corners, kinked rims, bands, hot pixels, dust and filtered noise are no picture.

    Light of 30000 DN: without noise the light's own shape is all there is.
    """
    rng = np.random.default_rng(2)
    white = rng.standard_normal(size[::-1])
    filtered = 3 * ndimage.uniform_filter(white, 3, mode="wrap")
    for left in (1.0, 0.5, 0.25):
        lens = 30000 * Shading(size, angle=float(np.degrees(np.arccos(left**0.25))), axis=(3.0, 0.0)).frame()
        rim = 30000 * Shading(size, vignette=0.7).frame()
        fields = {
            "lens": lens + noise * white,
            "filtered": lens + noise * filtered,
            "rim": rim + noise * white,
            "bands": lens + noise * white + wave(size[1], 0.03, 300.0)[:, None] + wave(size[0], 0.2, 300.0)[None, :],
            "hot": plant(lens, scattered(size, size[0] * size[1] // 1000, rng), 20000.0) + noise * white,
            "dust": lens * spot(size, (size[0] / 3, size[1] / 3), size[1] / 16, -0.2) + noise * white,
        }
        for name, light in fields.items():
            assert not structure(_codes(light)).of_a_picture(), (name, left)


@pytest.mark.parametrize("noise", [0.05, 0.3, 0.6])
def test_darks_of_few_codes_are_no_pictures(noise: float) -> None:
    """Noise below one code at any place between two, hot pixels in it, rows and columns of their own: no picture."""
    rng = np.random.default_rng(3)
    for place in np.arange(8) / 8:
        dark = (
            12 + place + rng.normal(0, 0.2, (120, 1)) + rng.normal(0, 0.2, (1, 160)) + rng.normal(0, noise, (120, 160))
        )
        hot = plant(dark, scattered((160, 120), 30, rng), 90.0)
        assert not structure(np.round(hot).astype(np.uint8)).of_a_picture(), place


def test_a_picture_is_told() -> None:
    """Patches of unlike light, 20 px wide, with 1 % noise in each, are a picture; a region too small tells nothing."""
    rng = np.random.default_rng(4)
    patches = np.kron(rng.uniform(4000, 20000, (24, 32)), np.ones((20, 20))) + rng.normal(0, 100, (480, 640))

    assert structure(_codes(patches)).of_a_picture()
    assert not structure(_codes(patches[:30])).of_a_picture()
