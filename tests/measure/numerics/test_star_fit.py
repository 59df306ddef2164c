"""The star's segments against closed forms: modulation, phases, shading, noise and harmonics."""

from dataclasses import replace

import numpy as np
import pytest

from runner.measure.numerics import star_fit
from runner.measure.numerics.star_fit import StarFit, TooFewPixels, fit_star, rings
from runner.measure.numerics.star_geometry import geometry, refine, ring_pixels
from tests.scenes.stars import StarScene, Values

F = np.array([0.1, 0.2, 0.3, 0.4, 0.45])


def _fit(scene: StarScene, light: Values, finest: float = 0.51) -> StarFit:
    """Fit a star whose place is known to a tenth of a pixel."""
    begun = geometry(scene.cycles, (scene.centre[0] - 0.4, scene.centre[1] - 0.5), 0.95 * scene.outer)
    at, waves = refine(lambda x, y: (light[y, x], None), light.shape, begun, 0.46)
    x, y = ring_pixels(light.shape, at.centre, rings(at, finest), star_fit.PER_RING)
    return fit_star(at, waves, x.astype(np.float64), y.astype(np.float64), light[y, x], finest=finest)


@pytest.mark.parametrize(
    ("scene", "within"),
    [
        (StarScene(), 0.0015),
        (StarScene(cycles=36, outer=130, sigma=1.0, shading=(0.2, -0.1)), 0.0015),
        (StarScene(blur_y=1.0), 0.003),
    ],
    ids=["sharp", "few cycles, shaded", "astigmatic"],
)
def test_segments_follow_the_closed_form(scene: StarScene, within: float) -> None:
    """Blur and pixel in every segment within 0.0015, their mean within 0.0006 (16 bit would leave 1e-5).

    Where blur changes the modulation by a third from one side of a segment to the other, 1 % of that is allowed.
    """
    fit = _fit(scene, scene.light())
    true = np.array([[scene.mtf(f, k * np.pi / 4, np.pi / 4) for f in F] for k in range(8)]) * scene.modulation

    assert np.abs(fit.segment(F)[0] - true).max() < within
    assert np.abs(fit.mean(F)[0] - true.mean(axis=0)).max() < 0.0006


def test_reversed_contrast_is_modulation_again() -> None:
    """Where stripes come out with dark and bright exchanged the modulus is what it is: |M| of a blur that overshoots.

    The star is drawn with the factor M(f) = 1 - (f/0.25)² at each place, which is what a star blurred so shows up to
    M''' f³ / 6 g² = 0 (see scenes.stars); the pixel's own factor is left out.
    """
    scene = replace(StarScene(), cycles=72)
    y, x = np.indices((300, 320)) + 0.5
    r = np.hypot(x - scene.centre[0], y - scene.centre[1])
    turn = 72 * np.arctan2(y - scene.centre[1], x - scene.centre[0])
    f = 72 / (2 * np.pi * np.maximum(r, 10))
    light = 0.5 + 0.3 * np.maximum(1 - (f / 0.25) ** 2, -0.9) * np.cos(turn)
    at = np.array([0.12, 0.2, 0.3])

    assert _fit(scene, light, 0.33).mean(at)[0] == pytest.approx(0.6 * np.abs(1 - (at / 0.25) ** 2), abs=0.004)


def test_the_stated_noise_is_the_noise() -> None:
    """Over 12 noisy stars the mean over segments scatters as stated, and single segments too: 0.7 to 1.35 pooled."""
    scene = StarScene(size=(240, 230), centre=(120.2, 114.7), outer=108, noise=0.02)
    quiet, rng = scene.light(), np.random.default_rng(4)
    true = np.array([[scene.mtf(f, k * np.pi / 4, np.pi / 4) for f in F[1:]] for k in range(8)]) * scene.modulation
    off, segments = [], []
    for _ in range(12):
        fit = _fit(scene, quiet + rng.normal(0, scene.noise, quiet.shape))
        mean, u = fit.mean(F[1:])
        off.append((mean - true.mean(axis=0)) / u)
        size, su = fit.segment(F[1:])
        segments.append((size - true) / su)

    assert 0.7 < np.std(off) < 1.35
    assert 0.7 < np.std(segments) < 1.35
    assert abs(np.mean(off)) < 0.35


def test_harmonics_of_a_cubic_tone() -> None:
    """The outermost stripes' third harmonic follows cos³ = (3 cos + cos 3)/4 within 3 % of it, and there is no second.

    Their amplitude there: 0.35 of the light times blur and pixel.
    """
    scene = StarScene(cubic=-1.0, outer=145)
    low = 1.2 * 72 / (2 * np.pi * 137)
    a = 0.35 * scene.mtf(low)
    fit = _fit(scene, scene.light())

    assert fit.harmonics[1] == pytest.approx((a**3 / 4) / (a - 3 * a**3 / 4), rel=0.1)
    assert fit.harmonics[0] < 5e-4


def test_too_few_pixels_are_told() -> None:
    """A star of 20 px has no eight segments to fit."""
    scene = StarScene(cycles=16, outer=14.0)
    with pytest.raises(TooFewPixels, match="the light can be told in"):
        _fit(scene, scene.light(), 0.3)
