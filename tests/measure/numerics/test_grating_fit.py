"""The grating's least-squares fit against closed forms, the bound, and its own stated uncertainty."""

import numpy as np
import pytest

from runner.measure.numerics.grating_fit import GratingLost, Lattice, fit_grating
from tests.scenes.gratings import GratingScene


def _lattices(scene: GratingScene, rng: np.random.Generator | None = None) -> list[Lattice]:
    x, y = scene.axes()
    return [Lattice(scene.light(rng), x, y)]


@pytest.mark.parametrize("periods", [3.0, 3.37, 7.5, 19.81, 60.0])
@pytest.mark.parametrize("direction", [0.0, 0.7, 26.57, 45.0, 90.0, 133.0])
def test_noiseless_gratings(periods: float, direction: float) -> None:
    """Any number of periods at any orientation under 20 % shading: rounding is all that is left.

    The model holds the scene exactly, so 1e-9 (a thousand times the rounding of sums of 2e4 pixels) is the tolerance.
    """
    f, turn = periods / 130, np.radians(direction)
    u = (f * np.cos(turn), f * np.sin(turn))
    scene = GratingScene((130, 140), u, phase=0.4, shading=(0.2, -0.1), fill=1.0)
    fit = fit_grating(_lattices(scene), (u[0] + 0.4 / 130, u[1] - 0.3 / 140))

    assert fit.frequency == pytest.approx(u, abs=1e-9)
    assert abs(fit.amplitudes[0]) / fit.level == pytest.approx(scene.seen_modulation, rel=1e-9)
    assert np.angle(fit.amplitudes[0]) == pytest.approx(0.4, abs=1e-9)


def test_harmonics_of_a_cubic_tone() -> None:
    """Fundamental and third harmonic follow cos³ = (3 cos + cos 3)/4; there is no second."""
    scene = GratingScene((100, 120), (0.061, 0.023), cubic=-0.8)
    fit = fit_grating(_lattices(scene), scene.frequency)
    first, third = scene.harmonics

    assert abs(fit.amplitudes) == pytest.approx([first, 0.0, -third], abs=1e-9)


def test_a_harmonic_that_folds_onto_the_fundamental_is_left_out() -> None:
    """At a quarter of the sampling frequency the third harmonic is the fundamental's mirror image: it has no value."""
    scene = GratingScene((64, 64), (0.25, 0.0))
    fit = fit_grating(_lattices(scene), scene.frequency)

    assert np.isnan(fit.amplitudes[2])
    assert abs(fit.amplitudes[0]) == pytest.approx(0.3, rel=1e-9)


def test_a_shift_turns_the_phase() -> None:
    """Shift theorem: 0.25 px along the normal at 0.25 cy/px is 22.5°, at 0.1 cy/px 9°."""
    for f, degrees in ((0.2501, 22.509), (0.1, 9.0)):
        still = GratingScene((90, 70), (f, 0.0))
        moved = GratingScene((90, 70), (f, 0.0), phase=-2 * np.pi * f * 0.25)
        turned = [np.angle(fit_grating(_lattices(s), (f, 0.0)).amplitudes[0], deg=True) for s in (still, moved)]
        assert turned[0] - turned[1] == pytest.approx(degrees, abs=1e-6)


def test_energy_in_the_fit_and_in_the_pixels_agree() -> None:
    """Parseval: over whole periods the variance of the pixels is half the sum of the squared amplitudes."""
    scene = GratingScene((100, 100), (0.05, 0.03), cubic=0.9)
    fit = fit_grating(_lattices(scene), scene.frequency)

    assert np.var(scene.light()) == pytest.approx(float(np.sum(np.abs(fit.amplitudes) ** 2)) / 2, rel=1e-9)


def test_two_lattices_are_one_grating() -> None:
    """Green sites of a mosaic, two interleaved lattices, give what a plain frame gives, beyond each one's Nyquist."""
    scene = GratingScene((120, 100), (0.3, 0.11), fill=1.0)
    x, y = scene.axes()
    light = scene.light()
    green = [Lattice(light[i::2, 1 - i :: 2], x[1 - i :: 2], y[i::2]) for i in (0, 1)]
    fit = fit_grating(green, (0.301, 0.109))

    assert fit.frequency == pytest.approx(scene.frequency, abs=1e-9)
    assert abs(fit.amplitudes[0]) / fit.level == pytest.approx(scene.seen_modulation, rel=1e-9)


def test_the_bound_is_met_and_told() -> None:
    """At step/noise 50 errors stay within 1.3 × the Cramér-Rao bound, and ±2u holds the truth.

    Bounds of a tone in white noise s over n pixels (Rife and Boorstyn 1974, two dimensions): amplitude s √(2/n),
    frequency along x s √(6/n) / (π A X), X the width. 200 draws leave 5 % in a standard deviation.
    """
    rng = np.random.default_rng(11)
    noise, amplitude, (w, h) = 0.012, 0.3, (90, 80)
    errors, stated = [], []
    for _ in range(200):
        u = (0.05 + 0.1 * rng.random(), 0.02 + 0.1 * rng.random())
        scene = GratingScene((w, h), u, phase=float(rng.uniform(-3, 3)), noise=noise)
        fit = fit_grating(_lattices(scene, rng), u)
        errors.append([abs(fit.amplitudes[0]) - amplitude, fit.frequency[0] - u[0]])
        stated.append([fit.amplitude_u[0], np.sqrt(fit.frequency_cov[0, 0])])
    spread = np.sqrt(np.mean(np.square(errors), axis=0))
    bound = [noise * np.sqrt(2 / (w * h)), noise * np.sqrt(6 / (w * h)) / (np.pi * amplitude * w)]

    assert np.all(spread < 1.3 * np.array(bound))
    held = np.mean(np.abs(errors) <= 2 * np.array(stated), axis=0)
    assert np.all(held >= 0.93 - 2 * np.sqrt(0.93 * 0.07 / 200))


def test_noise_that_is_not_white_widens_the_uncertainty() -> None:
    """Noise smoothed over 3 × 3 px has up to nine times the power at low frequencies, and u must follow."""
    rng = np.random.default_rng(3)
    errors, stated = [], []
    for _ in range(60):
        scene = GratingScene((96, 96), (0.04, 0.01))
        white = rng.normal(0, 0.02, (98, 98))
        smooth = sum(white[i : i + 96, j : j + 96] for i in range(3) for j in range(3)) / 3
        x, y = scene.axes()
        fit = fit_grating([Lattice(scene.light() + smooth, x, y)], scene.frequency)
        errors.append(abs(fit.amplitudes[0]) - 0.3)
        stated.append(fit.amplitude_u[0])

    assert 0.8 < np.std(errors) / np.sqrt(np.mean(np.square(stated))) < 1.25


def test_noise_alone_settles_nowhere_or_on_nothing() -> None:
    """Without a grating the fit gives up or finds an amplitude of the size of its uncertainty (under 5 u)."""
    rng = np.random.default_rng(5)
    x = np.arange(-31.5, 32)
    try:
        fit = fit_grating([Lattice(rng.normal(0.5, 0.02, (64, 64)), x, x)], (0.1, 0.1))
    except GratingLost:
        return
    assert abs(fit.amplitudes[0]) < 5 * fit.amplitude_u[0]


def test_a_start_far_off_is_told() -> None:
    """A constant patch has no grating to settle on."""
    x = np.arange(-19.5, 20)
    with pytest.raises(GratingLost, match=r"did not settle near 0\.1000, 0\.1000 cy/px"):
        fit_grating([Lattice(np.full((40, 40), 0.5), x, x)], (0.1, 0.1))


@pytest.mark.parametrize(("chirp", "bow"), [(0.02, 0.0), (-0.04, 0.0), (0.0, 0.2), (0.02, -0.2)])
def test_bent_stripes_lose_nothing_that_is_not_put_back(chirp: float, bow: float) -> None:
    """A scale that changes over the patch, or stripes that bow: the amplitude lies within a tenth of what was lost."""
    x, y = np.arange(-99.5, 100), np.arange(-79.5, 80)
    across, down = np.meshgrid(x, y)
    phase = 2 * np.pi * 0.06 * (across * (1 + chirp * across / 200) + bow * down**2 / 640)
    fit = fit_grating([Lattice(0.5 + 0.3 * np.cos(phase), x, y)], (0.06, 0.0001))

    assert fit.bend > 0.05
    assert abs(abs(fit.amplitudes[0]) / 0.3 - 1) < 0.1 * fit.lost + 2e-4


def test_noise_does_not_bend_straight_stripes() -> None:
    """Of 100 straight gratings in noise none is taken for bent."""
    rng = np.random.default_rng(6)
    x = np.arange(-39.5, 40)
    turn = 2 * np.pi * (0.07 * x[None, :] + 0.03 * x[:, None])
    fits = [
        fit_grating([Lattice(0.5 + 0.2 * np.cos(turn) + rng.normal(0, 0.02, (80, 80)), x, x)], (0.07, 0.03))
        for _ in range(100)
    ]

    assert max(fit.bend for fit in fits) == 0.0
