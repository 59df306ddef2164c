"""The sensor that counts photons does what its closed forms say."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from tests.scenes.photons import Parts, Sensor, clipped_variance, greatest_variance

SENSOR = Sensor(shape=(300, 400), offset=Parts(2, 0.5, 0.7), response=Parts(0.01, 0.002, 0.003))


def test_frames_have_the_mean_and_variance_of_the_model() -> None:
    """Mean K (μ + dark) + black and variance over time K² (μ + dark + σ_d²) + 1/12, within 4 standard errors."""
    rng = np.random.default_rng(1)
    warm = replace(SENSOR, dark_current=100.0)
    one, two = (warm.frame(3000.0, rng, time=0.5).astype(float) for _ in range(2))
    electrons = 3000 * (1 + warm.prnu.all.mean()) + 50 + warm.dsnu.all.mean()
    variance = 0.16 * (3050 + 25) + 1 / 12

    assert (one + two).mean() / 2 == pytest.approx(0.4 * electrons + 100, abs=4 * np.sqrt(variance / 240_000))
    assert (one - two).var() / 2 == pytest.approx(variance, rel=4 * np.sqrt(2 / 120_000))


def test_patterns_are_drawn_once_for_a_unit() -> None:
    """The same seed has the same patterns, another one others; parts have the sizes asked for."""
    assert np.array_equal(SENSOR.prnu.all, replace(SENSOR, gain=1.0).prnu.all)
    assert not np.array_equal(SENSOR.prnu.all, replace(SENSOR, seed=2).prnu.all)
    assert SENSOR.dsnu.spread("pixel") == pytest.approx(2, rel=0.01)
    assert SENSOR.prnu.spread("row") == pytest.approx(0.002, rel=4 / np.sqrt(600))
    assert SENSOR.response.all == pytest.approx(np.sqrt(0.01**2 + 0.002**2 + 0.003**2))


def test_clipped_variance_is_that_of_drawn_counts() -> None:
    """Of a million counts clipped at 1000: within 4 standard errors of the sum over Poisson's probabilities."""
    rng = np.random.default_rng(2)
    for mean in (900.0, 980.0, 1010.0):
        drawn = np.minimum(rng.poisson(mean, 1_000_000), 1000)
        error = drawn.var() * np.sqrt((stats.kurtosis(drawn) + 2) / 1e6)
        assert clipped_variance(mean, 1000.0) == pytest.approx(drawn.var(), abs=4 * error)


def test_the_greatest_variance_lies_where_a_fine_search_finds_it() -> None:
    """Over light in steps of one electron, without patterns; response patterns move it down."""
    light = np.arange(1800.0, 2000.0)
    best = light[int(np.argmax([clipped_variance(m, 2000.0) for m in light]))]

    assert greatest_variance(2000.0, 0.0, 0.0) == pytest.approx(best, abs=1)
    assert greatest_variance(2000.0, 0.02, 0.0) < best - 10
