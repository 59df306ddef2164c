"""Saturation from clipped levels against exact sums over Poisson's probabilities."""

import numpy as np
import pytest
from scipy import stats

from runner.measure.numerics.saturation import End, Saturation, saturation
from tests.scenes.photons import clipped_variance, greatest_variance

GAIN, DARK = 0.3, 2.25
"""DN/e-; DN²: 5 electrons."""


def _series(well: float, levels: np.ndarray, *, response: float = 0.0) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return means and variances in codes of a sharp well, by exact sums, and the patterns' standard deviations."""
    nodes, weights = np.polynomial.hermite_e.hermegauss(15)
    weights = weights / weights.sum()
    mean, variance = np.zeros(levels.size), np.zeros(levels.size)
    for n, light in enumerate(levels):
        for x, w in zip(nodes, weights, strict=True):
            own = light * (1 + response * x)
            mean[n] += w * _clipped_mean(own, well)
            variance[n] += w * clipped_variance(own, well)
    pattern = np.where(mean < 0.9 * well, response * mean, 0.0)
    return GAIN * mean, GAIN**2 * variance + DARK, GAIN * pattern


def _clipped_mean(mean: float, well: float) -> float:
    reach = int(12 * np.sqrt(mean)) + 12
    n = np.arange(max(0, int(mean) - reach), int(mean) + reach)
    return float(stats.poisson.pmf(n, mean) @ np.minimum(n, well))


def _found(
    signal: np.ndarray, variance: np.ndarray, pattern: np.ndarray, linear: np.ndarray | None = None
) -> Saturation:
    u = 0.003 * variance + 1e-9
    light = signal if linear is None else linear
    return saturation(signal, light, variance, u, pattern, gain=GAIN, dark=DARK)


@pytest.mark.parametrize(("well", "response"), [(500, 0.0), (2000, 0.0), (10_000, 0.0), (10_000, 0.01), (30_000, 0.01)])
def test_a_sharp_end_gives_the_greatest_variance_between_levels(well: float, response: float) -> None:
    """Sixteen levels, 7 % apart, give the light of greatest variance within 0.3 %, and within 2 u.

    Truth: the exact sum over Poisson's probabilities of a clipped count, averaged over the response pattern.
    """
    signal, variance, pattern = _series(well, 1.15 * well * np.arange(1, 17) / 16, response=response)
    found = _found(signal, variance, pattern)
    truth = GAIN * greatest_variance(well, response, 0.0)

    assert found.sharp
    assert found.value == pytest.approx(truth, rel=0.003)
    assert abs(float(found.value or 0) - truth) < 2 * np.hypot.reduce([u for _, u in found.parts])


def test_mean_and_variance_of_clipped_pixels() -> None:
    """From far below to beyond the end, within 0.5 % of the exact sums: a normal for a Poisson variable of 2000."""
    end = End(GAIN * 2000, 0.0, 0.0, GAIN, 0.0)
    for light in (1000.0, 1800.0, 1950.0, 2000.0, 2050.0):
        mean, variance = end.moments(GAIN * light)
        assert mean == pytest.approx(GAIN * _clipped_mean(light, 2000), rel=5e-4)
        assert variance == pytest.approx(GAIN**2 * clipped_variance(light, 2000), abs=0.005 * GAIN**2 * 2000)


def test_a_series_that_ends_below_saturation_bounds_it() -> None:
    """Without a falling variance there is no value, only the highest level."""
    signal, variance, pattern = _series(10_000, 8000 * np.arange(1, 9) / 8)
    found = _found(signal, variance, pattern)

    assert found.value is None
    assert found.at_least == pytest.approx(GAIN * 8000, rel=1e-6)


def test_a_soft_end_is_the_highest_level_within_its_neighbours() -> None:
    """Where the variance falls slowly, the standard's own estimate stands, and the levels' distance is its u.

    A response that gives s = x/(1 + (x/a)^4)^(1/4), noise with it: no common end, so that a sharp one must not be seen.
    """
    light = 5000 * np.arange(1, 26) / 16
    bend = (1 + (light / 4000) ** 4) ** -0.25
    signal, slope = light * bend, bend**5
    variance = DARK + GAIN * light * slope**2
    found = _found(signal, variance, np.zeros(25), linear=light)
    fine = np.linspace(100, 5000, 4901)
    truth = float(fine[np.argmax(fine * (1 + (fine / 4000) ** 4) ** -2.5)])

    assert not found.sharp
    assert abs(float(found.value or 0) - truth) <= 2 * found.parts[0][1]
    assert [name for name, _ in found.parts] == ["distance of levels"]


def test_levels_that_disagree_with_a_sharp_end_unmake_it() -> None:
    """A level near the end with half the variance of a sharp one leaves only the highest level."""
    signal, variance, pattern = _series(10_000, 11_500 * np.arange(1, 33) / 32)
    near = int(np.argmin(np.abs(signal - 0.9 * GAIN * 10_000)))
    assert _found(signal, variance, pattern).sharp
    variance[near] *= 0.5

    assert not _found(signal, variance, pattern).sharp
