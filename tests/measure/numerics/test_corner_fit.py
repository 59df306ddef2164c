"""Corners of boards: accuracy, uncertainty, and a general fitter beside it."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import least_squares
from scipy.special import erf

from runner.measure.numerics.corner_fit import CornerFits, fit_corners
from runner.measure.numerics.mark_pixels import Pixels
from tests.scenes.lattices import LatticeScene, Values, noisy

FLAT = LatticeScene(shift=(0.31, -0.17))
RNG = np.random.default_rng(51)


def _fit(scene: LatticeScene, light: Values) -> tuple[CornerFits, Values]:
    places = scene.all_places()
    truth, e = scene.seen(places), 1e-3
    steps = np.stack([(scene.seen(places + d) - truth) / e for d in np.eye(2) * e], axis=2)
    start = truth + RNG.uniform(-0.7, 0.7, truth.shape)
    return fit_corners(Pixels(light, lambda some: some.astype(np.float64)), start, steps), truth


def test_step_to_noise_50() -> None:
    """22 px squares, step/noise 50: rms within 0.015 px, worst within 3 times that, and u tells it.

    A corner has 13 px of border each way inside its window where an 11 px dot has 35 px all around.
    """
    fits, truth = _fit(FLAT, noisy(FLAT.board(), 0.7 / 50, RNG))
    off = fits.centres - truth
    u = np.sqrt(np.einsum("nii->ni", fits.covariance))

    assert fits.settled.all()
    assert np.sqrt(np.mean(off**2)) <= 0.015
    assert np.abs(off).max() <= 0.045
    assert 0.8 < np.std(off / u) < 1.25


@pytest.mark.parametrize(
    "scene",
    [
        replace(FLAT, shading=(0.3, 0.3)),
        replace(FLAT, blur=1.8),
        replace(FLAT, blur=0.45),
        replace(FLAT, turn=12.0, tilt=(12, -14), pitch=19.0),
    ],
    ids=["shading", "blur", "sharp", "tilted"],
)
def test_what_must_not_move_a_corner(scene: LatticeScene) -> None:
    """Light that falls off by 60 %, blur and tilt: corners stay within 0.004 px without noise."""
    fits, truth = _fit(scene, scene.board())

    assert fits.settled.all()
    assert np.abs(fits.centres - truth).max() < 0.004


def test_a_general_fitter_agrees() -> None:
    """One corner fitted by scipy with crossed erfs and a ground that slopes: the same place within 1.5 u."""
    light = noisy(FLAT.board(), 0.7 / 50, np.random.default_rng(8))
    fits, truth = _fit(FLAT, light)
    x0, y0 = truth[58]
    rows, columns = np.mgrid[int(y0) - 6 : int(y0) + 7, int(x0) - 6 : int(x0) + 7]
    x, y = columns + 0.5, rows + 0.5

    def rest(p: Values) -> Values:
        one, two = ((x - p[0]) + p[2] * (y - p[1])) / p[4], ((y - p[1]) + p[3] * (x - p[0])) / p[4]
        model = p[5] + p[6] * erf(one / np.sqrt(2)) * erf(two / np.sqrt(2)) + p[7] * (x - x0) + p[8] * (y - y0)
        return np.asarray(model - light[rows, columns]).ravel()

    sign = 1.0 if light[int(y0) + 4, int(x0) + 4] > 0.5 else -1.0
    found = least_squares(rest, [x0, y0, 0.0, 0.0, 0.8, 0.45, 0.35 * sign, 0.0, 0.0]).x
    u = np.sqrt(np.einsum("ii->i", fits.covariance[58]))
    assert np.abs(found[:2] - fits.centres[58]).max() < 1.5 * u.max()


def test_colours_of_squares_alternate() -> None:
    """The swing changes its sign from each corner to its neighbours and is half the step."""
    fits, _ = _fit(FLAT, FLAT.board())
    colour = (-1.0) ** FLAT.all_places().sum(axis=1)

    assert np.abs(fits.swing) == pytest.approx(0.35, rel=0.02)
    assert len(set(np.sign(fits.swing * colour))) == 1


def test_no_corners_are_no_error() -> None:
    """An empty list gives an empty list."""
    fits = fit_corners(
        Pixels(np.ones((9, 9)), lambda some: some.astype(np.float64)), np.zeros((0, 2)), np.zeros((0, 2, 2))
    )

    assert len(fits.centres) == 0
