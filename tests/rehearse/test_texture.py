"""Noise on a chart against an independent picture of it."""

import numpy as np
import pytest

from runner.rehearse.optics import Transfer
from runner.rehearse.painting import Seen
from runner.rehearse.texture import NoiseTexture
from tests.scenes.random_patterns import NoiseScene, gaussian

TEXTURE = NoiseTexture(seed=5, cells=128, side_mm=80.0, slope=1.8, low=0.1, high=0.9)


def test_texture_is_seen_as_each_of_its_waves_is() -> None:
    """Against a picture that draws the same waves finely and interpolates: to 1 % of their standard deviation."""
    scene = NoiseScene(size=(110, 90), cells=128, seed=5, cells_per_px=0.8, turn=0.0, transfer=gaussian(0.6), light=1.0)
    seen = Seen(110, 90, 0.5, Transfer(0.2, 0.05, 0.0, 0.6, 1.0))

    found, truth = TEXTURE.picture(seen), scene.picture()

    assert np.abs(found - truth).max() < 0.01 * truth.std()


def test_the_spread_of_the_print_is_a_ninth_of_its_range() -> None:
    """Parseval: the mean square over one period is the sum of the waves' squares, (0.09 × 0.8)²."""
    assert np.sum(np.abs(TEXTURE.waves()) ** 2) == pytest.approx((0.09 * 0.8) ** 2, rel=1e-9)


def test_blur_takes_from_each_wave_its_share() -> None:
    """Over one period of 160 px the mean square is that of the waves through a defocused system (Parseval)."""
    system = Transfer(2.4, 0.55, 40.0, 1.2, 3.0)
    found = TEXTURE.picture(Seen(160, 160, 0.5, system))

    k = np.fft.fftfreq(128) * 128 / 160
    optics = system.along(np.hypot(k[:, None], k), 0.0) / np.sinc(np.hypot(k[:, None], k))
    left = np.abs(TEXTURE.waves() * optics * np.sinc(k[:, None]) * np.sinc(k)) ** 2
    assert found.mean() == pytest.approx(0.5, abs=1e-9)
    assert found.std() == pytest.approx(np.sqrt(left.sum()), rel=1e-3)
    assert found.std() < 0.85 * 0.09 * 0.8
