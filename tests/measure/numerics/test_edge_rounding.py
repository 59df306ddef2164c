"""Mean error of rounding against the exact expectation of whole codes, and against edges rounded at many phases."""

import numpy as np
import pytest
from scipy.special import ndtr

from runner.errors import MeasurementRefused
from runner.measure.numerics import edge_model as em
from runner.measure.numerics.edge_fit import EdgeFit, fit_edge
from runner.measure.numerics.edge_rounding import level_error, mean_error, rounding
from runner.measure.numerics.line_spread import Array
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian

CODES = 1000.0
"""Codes in the range."""


def _expected(signal: Array, noise: float) -> Array:
    """Σ k P(round(signal + n) = k) - signal, every code that a normal variable reaches counted."""
    code = np.arange(-20, 30)
    upper = ndtr((code + 0.5 - signal[:, None]) / noise)
    lower = ndtr((code - 0.5 - signal[:, None]) / noise)
    return np.asarray((upper - lower) @ code - signal)


def _fit(step: float, noise: float, phases: tuple[float, float] = (0.3, 0.1), seed: int = 0) -> EdgeFit:
    """An edge of so many codes' height and so much noise (codes), its levels at these fractions of a code."""
    low = 200 + phases[0]
    scene = EdgeScene(Gaussian(0.6), size=(50, 70), low=low, high=200 + step + phases[1])
    codes = np.rint(scene.signal() + noise * np.random.default_rng(seed).standard_normal((70, 50)))
    return fit_edge(codes / CODES, noise_floor=float(np.sqrt(1 / 12)) / CODES)


@pytest.mark.parametrize("noise", [0.03, 0.05, 0.12, 0.2, 0.29, 0.31, 0.5, 0.7, 3.0])
def test_mean_error_is_the_expectation(noise: float) -> None:
    """At any fraction of a code the series is the exact mean of the codes, to the thousandth that it promises."""
    signal = np.linspace(-1.2, 2.2, 681)

    assert np.abs(mean_error(signal, noise) - _expected(signal, noise)).max() < 1e-3


def test_mean_error_of_drawn_codes() -> None:
    """The mean of 10⁶ rounded normal variables, within 4.5 of its standard deviations, √(s² + 1/4)/10³ at most."""
    draw = np.random.default_rng(5).standard_normal(1_000_000)
    for noise, at in ((0.01, 7.3), (0.1, 7.4), (0.25, -3.2), (0.4, 0.75)):
        mean = float(np.mean(np.rint(at + noise * draw))) - at
        assert float(mean_error(np.array([at]), noise)[0]) == pytest.approx(mean, abs=4.5e-3 * np.hypot(noise, 0.5))


def test_level_error_from_none_to_much_noise() -> None:
    """Without noise 1/√12 of a code; at half a code and more only the first term, exp(-2π²s²)/(π√2), which vanishes."""
    assert level_error(0.0) == pytest.approx(1 / np.sqrt(12), rel=1e-4)
    assert level_error(0.5) == pytest.approx(np.exp(-2 * (np.pi * 0.5) ** 2) / (np.pi * np.sqrt(2)), rel=1e-3)
    assert level_error(2.0) < 1e-30
    assert np.all(np.diff([level_error(s) for s in np.linspace(0.03, 1.0, 60)]) <= 0)


def test_much_noise_adds_nothing_and_none_refuses_a_low_step() -> None:
    """At one code of noise nothing is added; a step of 12 codes without noise is refused with its height and share.

    Without noise both levels are open by 1/√12 code: √2/√12/12 = 3.4 % of the step.
    """
    codes = (1 / CODES, 1 / CODES)
    noisy = _fit(100, 1.0)
    assert rounding(noisy, codes).shape == (0, noisy.covariance.shape[0])

    with pytest.raises(MeasurementRefused, match=r"the step is 12 codes high .* 3\.[34] % of it stays open") as refused:
        rounding(_fit(12, 0.0), codes)
    assert refused.value.cause == "no modulation"


def test_deviations_are_the_scatter_over_phases() -> None:
    """Levels and step of an edge of 100 codes, fitted at 64 pairs of phases, scatter about truth as the deviations say.

    Both levels' errors are sine-like in the phase, an rms of 64 equidistant pairs is exact to a few per cent; noise of
    0.1 code over 1700 pixels adds 0.0024 code to 0.2. The noise is read from the fit, where 1/12 of a code's variance
    stands for rounding that may be less: u may come out larger by up to the noiseless level's 0.29 to 0.2.
    """
    fractions = (np.arange(8) + 0.5) / 8
    missed, stated = [], []
    for k, (dark, bright) in enumerate((d, b) for d in fractions for b in fractions):
        fit = _fit(100, 0.1, (float(dark), float(bright)), seed=k)
        at = fit.shape_index
        levels = np.array([fit.parts.low, fit.parts.low + fit.parts.rise]) * CODES
        missed.append([*(levels - [200 + dark, 300 + bright]), fit.parts.rise * CODES - (100 + bright - dark)])
        moved = rounding(fit, (1 / CODES, 1 / CODES)) * CODES
        low, rise = moved[:, em.LEVEL], moved[:, at] @ np.concatenate([em.AREAS, np.ones(at.size - 4)])
        stated.append([np.sum(low**2), np.sum((low + rise) ** 2), np.sum(rise**2)])

    scatter, u = np.sqrt(np.mean(np.square(missed), axis=0)), np.sqrt(np.mean(stated, axis=0))
    assert scatter == pytest.approx(level_error(0.1) * np.sqrt([1, 1, 2]), rel=0.1)
    assert np.all(u > 0.9 * scatter)
    assert np.all(u < 1.1 * 0.29 * np.sqrt([1, 1, 2]))
