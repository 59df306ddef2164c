"""Transfer of a known texture: the closed form comes back, noise does not lift it, smearing shows.

The pattern is noise of known waves; each goes through the transfer function exactly (ISO/TS 19567-2: full reference).
"""

from functools import cache

import numpy as np
import pytest
from scipy.ndimage import median_filter

from runner.measure.numerics.pattern_view import Pattern, View, register, start_view
from runner.measure.numerics.random_pattern import noise
from runner.measure.numerics.texture_spectrum import cross_transfer, direct_transfer, even_light, spectra
from tests.scenes.random_patterns import NoiseScene, gaussian

F = np.array([0.05, 0.1, 0.2, 0.3, 0.4])
PATTERN = Pattern(noise(5, 384, 1.8, 0.1, 0.9))


@cache
def _clean(scene: NoiseScene) -> np.ndarray:
    return scene.picture()


def _scene(**more: object) -> NoiseScene:
    return NoiseScene(size=(300, 300), cells=384, cells_per_px=1.1, **more)  # type: ignore[arg-type]


def _view(scene: NoiseScene, picture: np.ndarray) -> View:
    return register(picture, PATTERN, start_view(scene.size, 1.1, 0.0, 384), search=True)


@pytest.mark.parametrize("sigma", [0.4, 0.7, 1.1])
def test_the_closed_form_comes_back(sigma: float) -> None:
    """Without noise every frequency up to 0.4 cy/px lies within 0.004 of the blur times the pixel."""
    scene = _scene(transfer=gaussian(sigma))
    picture = _clean(scene)
    given = spectra([picture], PATTERN, _view(scene, picture))

    for f, truth in zip(F, scene.truth(F), strict=True):
        found = cross_transfer(given, float(f))
        assert found is not None
        assert abs(found.value - truth) < 0.004


def test_noise_does_not_lift_the_transfer() -> None:
    """Cross and direct form of two frames at step over noise of 20: both within 0.02 rms, nearly all within 2u.

    The bound of the registration's and interpolation's own error is 0.003.
    """
    scene = _scene(noise=0.024)  # the range of 0.48 over 20
    clean, rng = _clean(scene), np.random.default_rng(1)
    view = _view(scene, clean)
    away, within = [], []
    for _ in range(24):
        given = spectra([scene.frame(rng, clean) for _ in range(2)], PATTERN, view)
        for f, truth in zip(F, scene.truth(F), strict=True):
            for found in (cross_transfer(given, float(f)), direct_transfer(given, float(f))):
                assert found is not None
                away.append(found.value - truth)
                within.append(abs(found.value - truth) <= 2 * np.hypot(found.u, 0.003))
    assert np.sqrt(np.mean(np.square(away[0::2]))) < 0.02
    assert np.mean(within[0::2]) >= 0.93
    assert np.mean(within[1::2]) >= 0.93


def test_smeared_texture_reads_low() -> None:
    """A median over 3 × 3 px, as noise reduction does it, lowers the transfer at 0.25 cy/px by more than a tenth."""
    scene = _scene(noise=0.02)
    picture = scene.frame(np.random.default_rng(2))
    view = _view(scene, picture)
    plain, smeared = (
        cross_transfer(spectra([one], PATTERN, view), 0.25) for one in (picture, median_filter(picture, 3))
    )
    assert plain is not None
    assert smeared is not None
    assert smeared.value < plain.value - 0.1


def test_light_over_the_pattern_is_taken_off() -> None:
    """A slope of 15 % comes back within half a per cent, and the transfer stays what it is."""
    scene = _scene(shading=0.15)
    picture = scene.picture()
    view = _view(scene, picture)
    light = even_light(picture, PATTERN, view)
    found = cross_transfer(spectra([picture / light], PATTERN, view), 0.1)

    assert light[-1].mean() / light[0].mean() == pytest.approx(1.075 / 0.925, rel=0.01)
    assert found is not None
    assert found.value == pytest.approx(float(scene.truth(np.array([0.1]))[0]), abs=0.006)


def test_too_few_waves_tell_nothing() -> None:
    """Near frequency 0 a small picture has no waves enough; a single frame has no direct form."""
    scene = _scene()
    picture = _clean(scene)
    given = spectra([picture], PATTERN, _view(scene, picture))

    assert cross_transfer(given, 0.001) is None
    assert cross_transfer(given, 0.05) is not None
    assert direct_transfer(given, 0.2) is None
