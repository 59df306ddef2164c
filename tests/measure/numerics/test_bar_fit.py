"""Bars' harmonics against closed-form square waves, in every direction, beyond the sampling, in noise."""

import numpy as np
import pytest

from runner.measure.numerics.bar_fit import BarFit, fit_bars
from runner.measure.numerics.grating_fit import Lattice
from tests.scenes.bars import SquareScene


def _fit(scene: SquareScene, rng: np.random.Generator | None = None) -> BarFit:
    x, y = (np.arange(n, dtype=np.float64) - (n - 1) / 2 for n in scene.size)
    return fit_bars([Lattice(scene.light(rng), x, y)], scene.frequency)


@pytest.mark.parametrize(("f", "turn"), [(0.03, 0.1), (0.1, 0.2), (0.251, 0.05), (0.3, 0.4), (0.45, 0.1)])
@pytest.mark.parametrize("sigma", [0.2, 1.0])
def test_contrast_is_the_closed_form(f: float, turn: float, sigma: float) -> None:
    """Contrast within 0.002, and the fundamental's transfer within 1e-4, from 0.03 to 0.45 cy/px (the bar is 0.005)."""
    scene = SquareScene((160, 140), (f * np.cos(turn), f * np.sin(turn)), sigma=sigma, shading=(0.1, -0.1))
    found = _fit(scene)

    assert found.contrast == pytest.approx(scene.seen_contrast(), abs=0.002)
    assert found.fundamental * np.pi / 4 / 0.6 == pytest.approx(scene.transfer(f), abs=1e-3)
    assert found.frequency == pytest.approx(f, abs=1e-5)


@pytest.mark.parametrize("f", [0.08, 0.19, 0.33, 0.47])
def test_a_pixel_alone_leaves_the_contrast(f: float) -> None:
    """Square pixels blur no bar that is wider than they are: C = 1 up to 0.5 cy/px, M = sinc f.

    Harmonics beyond the last leave steps, 1/k² in size: 1 % of 60 % is allowed, twice that where only four are fitted.
    """
    found = _fit(SquareScene((200, 160), (f * np.cos(0.07), f * np.sin(0.07)), sigma=0.02))

    assert found.contrast == pytest.approx(0.6, abs=0.006 if f < 0.3 else 0.012)
    assert found.fundamental * np.pi / 4 / 0.6 == pytest.approx(np.sinc(f), abs=0.003)


def test_folded_harmonics_are_told() -> None:
    """At a quarter of the sampling along the rows the third harmonic is the fundamental's mirror image."""
    found = _fit(SquareScene((160, 140), (0.25, 0.0), sigma=0.3))

    assert found.folded > 0.05 * found.contrast
    assert _fit(SquareScene((160, 140), (0.253, 0.03), sigma=0.3)).folded < 0.003 * found.contrast


def test_unequal_bars_show_in_the_second_harmonic() -> None:
    """Bars of 45 % of the period: second over first harmonic is cos(π 0.45) × the transfers' ratio, within 1 %.

    Fourier series of a pulse train: harmonic k is (2/πk) sin(πkd), d the bright part of a period.
    """
    scene = SquareScene((160, 140), (0.05, 0.01), duty=0.45)
    found = _fit(scene)
    ratio = abs(found.grating.amplitudes[1] / found.grating.amplitudes[0])

    assert ratio == pytest.approx(scene.term(2) / scene.term(1), rel=0.01)
    assert scene.term(2) / scene.term(1) < np.cos(np.pi * 0.45)
    assert found.contrast == pytest.approx(scene.seen_contrast(), abs=0.002)


def test_the_stated_noise_is_the_noise() -> None:
    """Over 25 noisy patches contrast and fundamental scatter as stated, 0.6 to 1.4 (25 draws leave 14 %)."""
    rng = np.random.default_rng(3)
    off = []
    for _ in range(25):
        f, turn = rng.uniform(0.1, 0.4), rng.uniform(0.05, 1.4)
        scene = SquareScene((64, 60), (f * np.cos(turn), f * np.sin(turn)), noise=0.01, phase=rng.uniform(0, 6))
        found = _fit(scene, rng)
        off.append((found.contrast - scene.seen_contrast()) / found.contrast_u)

    assert 0.6 < np.std(off) < 1.4
