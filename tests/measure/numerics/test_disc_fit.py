"""Centres of discs: the accuracy that is promised, its uncertainty, and what must not move them."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import least_squares
from scipy.special import erf

from runner.measure.numerics.disc_fit import DiscFits, fit_discs
from runner.measure.numerics.mark_pixels import Pixels
from tests.scenes.lattices import LatticeScene, Values, noisy

FLAT = LatticeScene(shift=(0.31, -0.17))
RNG = np.random.default_rng(50)


def _fit(scene: LatticeScene, light: Values) -> tuple[DiscFits, Values]:
    """Fit every dot from a start that is off by up to 0.3 px, a shape 4 % too small; return the truth too."""
    places = scene.all_places()
    truth, e = scene.seen(places), 1e-3
    steps = np.stack([(scene.seen(places + d) - truth) / e for d in np.eye(2) * e], axis=2)
    start = truth + RNG.uniform(-0.3, 0.3, truth.shape)
    pixels = Pixels(light, lambda some: some.astype(np.float64))
    return fit_discs(pixels, start, steps * scene.radius * 0.96, np.full(len(truth), 0.5 / scene.radius)), truth


def test_step_to_noise_50() -> None:
    """11 px dots, step/noise 50: rms within 0.01 px, worst within 0.03 px, mean within 0.003 px, and u tells it."""
    fits, truth = _fit(FLAT, noisy(FLAT.dots(), 0.7 / 50, RNG))
    off = fits.centres - truth
    u = np.sqrt(np.einsum("nii->ni", fits.covariance))

    assert fits.settled.all()
    assert np.sqrt(np.mean(off**2)) <= 0.01
    assert np.abs(off).max() <= 0.03
    assert np.abs(off.mean(axis=0)).max() < 0.003
    assert 0.8 < np.std(off / u) < 1.25


@pytest.mark.parametrize(
    "scene",
    [
        replace(FLAT, shading=(0.3, 0.3)),
        replace(FLAT, blur=2.0),
        replace(FLAT, blur=0.35),
        replace(FLAT, bright=0.1, dark=0.8),
        replace(FLAT, turn=12.0, pitch=19.0),
    ],
    ids=["shading", "blur", "sharp", "bright dots", "turned"],
)
def test_what_must_not_move_a_centre(scene: LatticeScene) -> None:
    """Light that falls off by 60 %, blur, polarity: centres stay within 0.004 px without noise."""
    fits, truth = _fit(scene, scene.dots())

    assert fits.settled.all()
    assert np.abs(fits.centres - truth).max() < 0.004


def test_size_and_blur_are_found() -> None:
    """The size within 1.5 % (blur draws the half-level in by σ²/2r), the blur as the Gaussian and the pixel give."""
    fits, _ = _fit(FLAT, FLAT.dots())

    assert np.median(fits.size) * 0.96 == pytest.approx(1.0, rel=0.015)
    assert np.median(fits.blur) == pytest.approx(np.hypot(FLAT.blur, 12**-0.5), rel=0.02)
    assert np.median(fits.ground) == pytest.approx(0.8, abs=0.005)
    assert np.median(fits.step) == pytest.approx(-0.7, abs=0.01)


def test_a_general_fitter_agrees() -> None:
    """One dot fitted by scipy with a plain erf of the distance from a circle: the same centre within a third of u."""
    light = noisy(FLAT.dots(), 0.7 / 50, np.random.default_rng(8))
    fits, truth = _fit(FLAT, light)
    n = 58
    x0, y0 = truth[n]
    rows, columns = np.mgrid[int(y0) - 9 : int(y0) + 10, int(x0) - 9 : int(x0) + 10]
    x, y = columns + 0.5, rows + 0.5
    near = np.hypot(x - x0, y - y0) < 9.5

    def rest(p: Values) -> Values:
        t = (np.hypot(x - p[0], y - p[1]) - p[2]) / p[3]
        model = (p[4] + p[6] * (x - x0) + p[7] * (y - y0)) - p[5] * (1 - erf(t / np.sqrt(2))) / 2
        return np.asarray((model - light[rows, columns])[near])

    found = least_squares(rest, [x0, y0, 5.4, 0.8, 0.8, 0.7, 0.0, 0.0]).x
    u = np.sqrt(np.einsum("ii->i", fits.covariance[n]))
    assert np.abs(found[:2] - fits.centres[n]).max() < u.max() / 3


def test_nothing_there_does_not_settle_as_a_disc() -> None:
    """On noise alone a fit either does not settle or leaves more than it explains."""
    light = RNG.normal(0.5, 0.02, (240, 320))
    fits, _ = _fit(FLAT, light)

    assert not (fits.settled & (fits.misfit < 0.25 * np.abs(fits.step))).any()
