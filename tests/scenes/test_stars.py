"""The star scenes against their own definition: a numerical Hankel transform and finely sampled pixels."""

import numpy as np
import pytest
from scipy.special import jv

from tests.scenes.stars import StarScene


@pytest.mark.parametrize("radius", [14.0, 25.0, 60.0])
def test_a_blurred_stars_amplitude_is_its_hankel_transform(radius: float) -> None:
    """A(r) = g ∫ J_g(2π f r) M(f) / f df, by the trapezium rule in steps of 1e-4 cy/px, within 1e-8."""
    scene = StarScene(cycles=36, sigma=0.7)
    f = np.arange(1e-4, 2.5, 1e-4)
    integrand = 36 * jv(36, 2 * np.pi * f * radius) * np.exp(-2 * (np.pi * scene.sigma * f) ** 2) / f

    assert scene.amplitude(np.array([radius]))[0] == pytest.approx(np.trapezoid(integrand, f), abs=1e-8)


def test_a_pixel_holds_the_mean_over_its_area() -> None:
    """Quadrature agrees with 40 × 40 points in each of some pixels beside the centre, within 2e-5 of the light."""
    scene = StarScene()
    light = scene.light()
    fine = (np.arange(40) + 0.5) / 40 - 0.5
    for column, row in ((180, 150), (160, 172), (176, 163)):
        x, y = np.meshgrid(column + 0.5 - scene.centre[0] + fine, row + 0.5 - scene.centre[1] + fine)
        assert light[row, column] == pytest.approx(float(scene._point(x, y).mean()), abs=2e-5)
