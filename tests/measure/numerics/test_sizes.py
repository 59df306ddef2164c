"""A size that noise has made larger is told without it, and its interval holds the true one as often as stated."""

import numpy as np
import pytest

from runner.measure.numerics.sizes import DRAWS, FACTORS, normal_draws, shrunk, told


def _told(found: np.ndarray, noise: np.ndarray) -> tuple[float, float]:
    drawn = [np.abs(factor * found + noise).mean(axis=1) for factor in FACTORS]
    size = float(np.abs(found).mean())
    return told(size, size, np.array([d.mean() for d in drawn]), np.array([d.std() for d in drawn]))


@pytest.mark.parametrize(("size", "most"), [(0.0, 1.2), (1.0, 0.5), (20.0, 0.2)])
def test_what_noise_adds_is_taken_off(size: float, most: float) -> None:
    """Means of eight moduli of 0, 1 and 20 times the noise: 93 % and more within 2 u, mean off by a part of u."""
    rng = np.random.default_rng(7)
    noise = normal_draws(1, 8)
    truth = size * np.linspace(-1, 1, 8)
    scores = []
    for _ in range(300):
        value, u = _told(truth + rng.standard_normal(8), noise)
        scores.append((value - np.abs(truth).mean()) / u)

    assert np.mean(np.abs(scores) <= 2) > 0.93 - 0.029  # two binomial standard deviations of 300 draws
    assert abs(np.mean(scores)) < most
    assert np.std(scores) < 1.25


def test_a_size_below_all_noise_is_zero() -> None:
    """Where no deviations at all would read more than was read, the size is 0; its u is half a spread at least."""
    value, u = told(0.1, 0.1, 0.8 + FACTORS, np.full(FACTORS.size, 0.2))

    assert value == 0
    assert u == pytest.approx(0.1)
    value, u = told(0.7, 0.7, 0.8 + FACTORS, np.full(FACTORS.size, 0.2))
    assert value == 0
    assert u == pytest.approx(0.3 * 0.7 / 2)


def test_draws_are_the_same_every_time_and_centred() -> None:
    """Same seed, same draws; their mean is exactly zero and their spread 1 within sampling."""
    one = normal_draws(3, 2, 5)

    assert one.shape == (DRAWS, 2, 5)
    np.testing.assert_array_equal(one, normal_draws(3, 2, 5))
    np.testing.assert_allclose(one.mean(axis=0), 0, atol=1e-15)
    assert one.std() == pytest.approx(1, abs=0.02)


def test_parts_that_noise_explains_do_not_count() -> None:
    """Found sizes 5 and 1 with noise of mean square 1 keep √(1 - 1/25) and nothing; √2 keeps √½."""
    noise = np.array([[1.0, 1.0, 1.0], [-1.0, 1.0, -1.0]])

    np.testing.assert_allclose(shrunk(np.array([5.0, 1.0, np.sqrt(2)]), noise), [np.sqrt(0.96), 0, np.sqrt(0.5)])
    assert shrunk(np.zeros(1), noise[:, :1])[0] == 0
