"""What rounding leaves in a grating: against a rounded sine in closed form, and against gratings that are rounded."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.special import j0, j1

from runner.measure.numerics.grating_fit import GratingFit, Lattice, fit_grating
from runner.measure.numerics.grating_rounding import Rounding, rounding
from tests.scenes.gratings import GratingScene

CODES = np.arange(257.0)


def _fit(scene: GratingScene, noise: float = 0.0, *, whole: bool = True) -> tuple[GratingFit, list[Lattice]]:
    x, y = scene.axes()
    light = scene.light() + np.random.default_rng(3).normal(0, noise, (len(y), len(x)))
    lattices = [Lattice(np.rint(light) if whole else light, x, y)]
    return fit_grating(lattices, scene.frequency), lattices


def _rounding(scene: GratingScene, noise: float = 0.0) -> Rounding:
    fit, lattices = _fit(scene, noise)
    return rounding(fit, lattices, CODES, CODES)


def _off(level: float, amplitude: float) -> float:
    """Return the relative error of a rounded sine's modulation, Σ_m (-1)^m of Jacobi and Anger's expansion.

    Abramowitz and Stegun (1964) 9.1.42, 9.1.43: sin(z cos θ + φ) holds 2 J1(z) cos φ of cos θ and J0(z) sin φ of 1.
    """
    m = np.arange(1, 4000)
    sign, z = (-1.0) ** m / (np.pi * m), 2 * np.pi * m * amplitude
    first = np.sum(sign * 2 * j1(z) * np.cos(2 * np.pi * m * level))
    mean = np.sum(sign * j0(z) * np.sin(2 * np.pi * m * level))
    return float((1 + first / amplitude) / (1 + mean / level) - 1)


@pytest.mark.parametrize("codes", [1.2, 3.7, 20.3])
def test_the_size_is_the_closed_forms(codes: float) -> None:
    """Over all places between two codes and amplitudes a third of a code about, u is the closed form's rms error.

    Within 15 %: only 8 terms are summed, and the amplitude is read off the rounded pixels.
    """
    places, swings = np.linspace(0, 1, 9)[:-1], np.linspace(-1 / 3, 1 / 3, 9)
    errors = [_off(100 + place, codes + swing) for place in places for swing in swings]
    stated = [
        _rounding(GratingScene((160, 150), (0.0713, 0.0291), level=100 + place, modulation=codes / (100 + place)))
        for place in places
    ]
    mean = float(np.sqrt(np.mean([one.modulation**2 for one in stated])))

    assert mean == pytest.approx(float(np.sqrt(np.mean(np.square(errors)))), rel=0.15)


def test_stripes_that_repeat_on_the_pixels_grid_cost_more() -> None:
    """With 4 pixels to a period only two values tell the amplitude: rounding leaves 0.2 codes, not 0.014.

    Each value is off by 1/√12 codes; the amplitude is half the difference of two: 1/√24 = 0.204 codes, 0.41 % of 50.
    """
    scene = GratingScene((80, 90), (0.25, 0.0), level=100.3, modulation=50 / 100.3, phase=0.37)
    other = replace(scene, frequency=(0.2513, 0.061))

    assert _rounding(scene).modulation == pytest.approx(0.2041 / 50, rel=0.25)
    assert _rounding(other).modulation < 0.05 * 0.2041


def test_noise_averages_rounding_out() -> None:
    """Noise of 0.3 codes leaves 0.17 of it, exp(-2π² 0.09), within a third; noise of 0.7 codes nothing at all."""
    scene = GratingScene((160, 150), (0.0713, 0.0291), level=100.25, modulation=0.05)
    still, some, much = (_rounding(scene, noise) for noise in (0.0, 0.3, 0.7))

    assert some.modulation == pytest.approx(0.169 * still.modulation, rel=1 / 3)
    assert much.modulation == 0
    assert not np.any(much.frequency)
    assert not np.any(much.harmonics)


def test_phase_and_frequency_of_rounded_gratings() -> None:
    """Over 60 gratings of 3 codes phase and frequency depart by no more than the fit's own u and this one together.

    Compared with fits of the same pixels before they were rounded: nothing else differs. The fit takes what rounding
    leaves for noise of no order, which it is not: a fifth of its u is the least.
    """
    rng = np.random.default_rng(8)
    ratios = []
    for _ in range(60):
        turn = rng.uniform(0, np.pi)
        u = 0.09 * np.cos(turn), 0.09 * np.sin(turn)
        level = 100 + rng.uniform()
        scene = GratingScene((60, 50), u, level=level, modulation=3 / level, phase=rng.uniform(-3, 3))
        (seen, lattices), (true, _) = _fit(scene), _fit(scene, whole=False)
        stated = rounding(seen, lattices, CODES, CODES)
        off = np.subtract(seen.frequency, true.frequency)
        turned = np.angle(seen.amplitudes[0] / true.amplitudes[0])
        u_frequency = np.sqrt(np.diag(stated.frequency + seen.frequency_cov))
        ratios.append((turned / np.hypot(stated.phase, seen.phase_u), *(off / u_frequency)))
    rms = np.sqrt(np.mean(np.square(ratios), axis=0))

    assert np.all((rms > 0.2) & (rms < 1.1)), rms
