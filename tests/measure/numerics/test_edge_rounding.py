"""Rounding to whole codes: its mean error against the normal distribution, its part of u against captures."""

import numpy as np
import pytest
from scipy.stats import norm

from runner.errors import MeasurementRefused
from runner.measure.numerics.edge_rounding import level_error, mean_error, rounding
from tests.measure.edge_samples import fitted, measure, value_of
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian

CODE = 1 / 255


@pytest.mark.parametrize("noise", [0.05, 0.15, 0.3, 0.6])
def test_mean_error_is_the_distributions(noise: float) -> None:
    """The mean of a rounded normal variable, summed over all codes, within 0.002 codes."""
    x = np.linspace(3, 5, 81)
    codes = np.arange(-2, 12)
    share = norm.cdf((codes + 0.5 - x[:, None]) / noise) - norm.cdf((codes - 0.5 - x[:, None]) / noise)
    assert mean_error(x, noise) == pytest.approx(share @ codes - x, abs=2e-3)


def test_without_noise_it_is_plain_rounding() -> None:
    """Without noise the error is that of rounding, with an rms of 1/√12 of a code; half a code leaves 0.2 %."""
    assert mean_error(np.array([2.2, 2.5, 2.8, -0.3]), 0.0) == pytest.approx([-0.2, -0.5, 0.2, 0.3])
    assert level_error(0.0) == pytest.approx(1 / np.sqrt(12), abs=1e-4)
    assert level_error(0.5) == pytest.approx(np.exp(-2 * np.pi**2 / 4) / np.pi / np.sqrt(2), rel=1e-2)


def test_enough_noise_leaves_nothing() -> None:
    """With noise of more than a code rounding adds nothing to u, and nothing is computed."""
    scene = EdgeScene(bits=12, white=4095, low=400, high=2400, read_noise=3)
    curves = fitted(scene, scene.render(np.random.default_rng(1)))
    assert rounding(curves.fit, (1 / 4095, 1 / 4095)).shape == (0, curves.fit.covariance.shape[0])


def test_levels_between_codes_move_as_told() -> None:
    """Of a noiseless 8-bit edge, the dark level's deviation is 1/√12 of a code and the step's √2 times that."""
    scene = EdgeScene(bits=8, white=255, low=40.3, high=160.8)
    fit = fitted(scene, noise_floor=CODE / np.sqrt(12)).fit
    moved = rounding(fit, (CODE, CODE))
    from runner.measure.numerics import edge_model as em

    assert np.linalg.norm(moved[:, em.LEVEL]) == pytest.approx(CODE / np.sqrt(12), rel=0.1)
    rise = moved[:, em.STEP] + moved[:, em.TAIL] + moved[:, fit.linear.head :].sum(axis=1)
    assert np.linalg.norm(rise) == pytest.approx(CODE / np.sqrt(6), rel=0.1)


def test_too_few_codes_are_refused() -> None:
    """Twenty codes without noise leave 2 % of the step open: refused, with the figures."""
    scene = EdgeScene(bits=8, white=255, low=40, high=60)
    with pytest.raises(
        MeasurementRefused, match=r"step is 20 codes high .*: 2\.\d % of it stays open; at most 1 %"
    ) as no:
        measure(scene)
    assert no.value.cause == "no modulation"


def test_u_covers_quiet_captures() -> None:
    """In 60 captures of 120 codes and noise of 0.15 codes, ± 2u holds the truth of mtf50 in nine of ten or more.

    The errors are of rounding: without their part u would be three times too small.
    """
    rng = np.random.default_rng(2)
    scores, parts = [], []
    for _ in range(60):
        scene = EdgeScene(
            Gaussian(rng.uniform(0.5, 1)), (60, 80), rng.uniform(3, 40), bits=8, white=255,
            low=40 + rng.uniform(), high=160 + rng.uniform(), read_noise=0.15,
        )  # fmt: skip
        reading = measure(scene, scene.render(rng))["mtf50"]
        scores.append((value_of(reading) - scene.mtf50()) / (reading.u or 0))
        parts.append(next(part.u for part in reading.components if part.name == "rounding") / (reading.u or 1))
    assert np.mean(np.abs(scores) <= 2) >= 0.9
    assert np.mean(parts) > 0.5
