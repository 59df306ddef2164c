"""Edge spread, line spread and transfer function of one fit: they belong together, and so do their derivatives."""

from dataclasses import replace

import numpy as np
import pytest

from runner.measure.numerics.edge_curves import Curves, Gradient
from runner.measure.numerics.edge_fit import EdgeFit, fit_edge
from runner.measure.numerics.line_spread import GRID, Array
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian, Pupil, Sharpened

F = np.array([0.05, 0.1, 0.25, 0.4])


def fitted(scene: EdgeScene, seed: int = 3) -> EdgeFit:
    """Return the fit of one capture of a scene."""
    noise = scene.read_noise * np.random.default_rng(seed).standard_normal((scene.size[1], scene.size[0]))
    return fit_edge((scene.signal() + noise) / 65535)


@pytest.fixture(scope="module")
def coma() -> Curves:
    """Return the curves of a noisy edge seen through coma, whose transfer function is complex."""
    return Curves(fitted(EdgeScene(Pupil(0.7, coma=0.4), (80, 120), 7.0, read_noise=320)))


def moved(curves: Curves, by: Array) -> Curves:
    """Return the curves with the shape's parts changed by these amounts."""
    parts = curves.fit.parts
    step, widening, shift, tail = (float(v) for v in by[:4])
    return Curves(
        replace(
            curves.fit,
            parts=replace(
                parts,
                step=parts.step + step,
                widening=parts.widening + widening,
                shift=parts.shift + shift,
                tail=parts.tail + tail,
                kernels=parts.kernels + by[4:],
            ),
        )
    )


def test_three_curves_of_one_line_spread(coma: Curves) -> None:
    """H is 1 at zero and the transform of the line spread, which is the slope of an edge spread from 0 to 1.

    Trapezoids of 0.04 px to ±400 px: the tail's 1/x² beyond leaves less than 1e-3 at 0 and 1e-5 elsewhere.
    """
    x = np.linspace(-400, 400, 20001)
    spread, _, line, _ = coma.at(x)
    numeric = np.trapezoid(line * np.exp(-2j * np.pi * F[:, None] * x), x, axis=1)
    assert coma.transfer(F)[0] == pytest.approx(numeric, abs=2e-5)
    assert coma.transfer(np.zeros(1))[0][0] == pytest.approx(1, abs=1e-12)
    assert np.trapezoid(line, x) == pytest.approx(1, abs=1e-3)
    assert spread[[0, -1]] == pytest.approx([0, 1], abs=1e-3)
    assert np.gradient(spread, x)[1:-1] == pytest.approx(line[1:-1], abs=1e-3)
    grid, h = coma.on_grid[0], coma.modulus(F)[0]
    assert np.interp(F, GRID, grid) == pytest.approx(h, abs=1e-9)


@pytest.mark.parametrize("optics", [Gaussian(0.6), Sharpened(Gaussian(0.7), 0.5, 1.2), Pupil(0.8, defocus=0.3)])
def test_curves_are_the_scenes_own(optics: Gaussian | Sharpened | Pupil) -> None:
    """A noiseless scene's edge spread comes back within 0.3 % of the step, the line spread within 2 % of its peak.

    0.3 % is the bound that the method promises for modulation; a kink of the line spread is rounded off by 1.5 %.
    """
    scene = EdgeScene(optics, (80, 120), 7.0)
    x = np.linspace(-5, 5, 201)
    spread, _, line, _ = Curves(fitted(scene)).at(x)
    assert np.abs(spread - scene.esf(x)).max() < 0.003
    assert np.abs(line - scene.lsf(x)).max() < 0.02 * scene.lsf(x).max()


def test_derivatives_by_finite_differences(coma: Curves) -> None:
    """Derivatives of E, L and H to the shape, and of |H| at one frequency, are those of finite differences.

    Everything is a quotient of sums: a central difference of 1e-5 of the rise is good to 1e-9.
    """
    rng = np.random.default_rng(4)
    x = np.array([-1.3, 0.0, 0.4, 2.5])
    size = coma.shape.size
    for way in rng.standard_normal((4, size)):
        h = 1e-5 * coma.rise
        up, down = moved(coma, h * way), moved(coma, -h * way)
        spread, by_spread, line, by_line = coma.at(x)
        assert by_spread @ way == pytest.approx((up.at(x)[0] - down.at(x)[0]) / (2 * h), rel=1e-6, abs=1e-6)
        assert by_line @ way == pytest.approx((up.at(x)[2] - down.at(x)[2]) / (2 * h), rel=1e-6, abs=1e-6)
        assert (spread.size, line.size) == (x.size, x.size)
        slope = (up.transfer(F)[0] - down.transfer(F)[0]) / (2 * h)
        assert coma.transfer(F)[1] @ way == pytest.approx(slope, rel=1e-6, abs=1e-6)
        size_up, size_down = (np.abs(c.transfer(F[2:3])[0][0]) for c in (up, down))
        gradient = coma.modulus_at(0.25)
        assert gradient.by[coma.index] @ way == pytest.approx((size_up - size_down) / (2 * h), rel=1e-6, abs=1e-6)


def test_draws_have_the_posterior_covariance(coma: Curves) -> None:
    """400 draws scatter about the fit like the posterior: modulation's deviation within 15 %, its mean within 0.2 u.

    400 draws know a deviation to 3.5 % and a mean to 0.05 u: four of their own deviations.
    """
    drawn = coma.draws
    assert drawn is Curves(coma.fit).draws or np.array_equal(drawn, Curves(coma.fit).draws)
    for frequency in F:
        gradient = coma.modulus_at(float(frequency))
        along = (drawn - coma.shape) @ gradient.by[coma.index]
        u = gradient.u(coma.fit.covariance)
        assert float(along.std()) == pytest.approx(u, rel=0.15)
        assert abs(float(along.mean())) < 0.2 * u
        assert gradient.least_u == pytest.approx(u, rel=1e-9)


def test_noise_is_taken_off_where_nothing_passes() -> None:
    """Beyond a diffraction cutoff, |H| of noisy captures reads 0 within 3 u, and u never vanishes there.

    Cutoff 0.4 cy/px, so H is exactly 0 at 0.45. The squared size of a complex normal number lies below its mean with
    probability 1 - 1/e, so most readings are 0 once that mean is taken off: 4 of 16 at the very least (0.2 %).
    """
    scene = EdgeScene(Pupil(0.4), (80, 120), 7.0, read_noise=640)
    beyond = nothing = 0
    for seed in range(8):
        value, u = Curves(fitted(scene, seed)).modulus(np.array([0.45, 0.48]))
        assert (u > 0).all()
        assert (value >= 0).all()
        beyond += int(np.sum(value > 3 * u))
        nothing += int(np.sum(value == 0))
    assert beyond <= 1
    assert nothing >= 4


def test_gradient_propagates_uncertainty() -> None:
    """u² = c² u1² + … with covariance (JCGM 100:2008 5.2.2), e.g. 3a - 4b gives 5, 1 or 7.

    For unit variances: 5 uncorrelated, |3 - 4| = 1 with correlation +1, 7 with -1 (5.2.2 note 1).
    """
    gradient = Gradient(0.0, np.array([3.0, -4.0]))
    for correlation, u in ((0.0, 5.0), (1.0, 1.0), (-1.0, 7.0)):
        covariance = np.array([[1.0, correlation], [correlation, 1.0]])
        assert gradient.u(covariance) == pytest.approx(u, rel=1e-12)
