"""Deviations from a line are those of a library's fit; their sizes are told without what noise adds."""

import numpy as np
import pytest

from runner.measure.numerics.line_deviations import deviation_sizes, deviations

X = np.linspace(0.06, 0.9, 12)


def test_deviations_are_those_of_a_weighted_fit() -> None:
    """EMVA 1288: the line with weights 1/y², by `numpy.polyfit`; of a straight line there are none."""
    y = X + 0.02 * X**2
    line = np.polyval(np.polyfit(X, y, 1, w=1 / y), X)

    np.testing.assert_allclose(deviations(X, y), y / line - 1, atol=1e-12)
    np.testing.assert_allclose(deviations(X, 3 * X + 0.1), 0, atol=1e-12)


def test_without_noise_the_size_is_the_size() -> None:
    """Mean and largest size of known deviations, with no uncertainty."""
    y = X + 0.02 * X**2
    off = np.abs(deviations(X, y))
    mean, largest = deviation_sizes(X, y, np.zeros(12), 0.0)

    assert mean.value == pytest.approx(off.mean())
    assert largest.value == pytest.approx(off.max())
    assert mean.noise == largest.light == 0


@pytest.mark.parametrize("bend", [0.0, 0.05, 0.4])
def test_noise_is_taken_off_on_the_average(bend: float) -> None:
    """Over 60 draws the mean size lies within a third of its u of the true one, or of u itself where that is zero."""
    rng = np.random.default_rng(4)
    y = X + bend * X**2
    truth = np.abs(deviations(X, y)).mean()
    u = 0.004 * np.ones(12)
    found = [deviation_sizes(X, y + u * rng.standard_normal(12), u, 0.0)[0] for _ in range(60)]
    plain = [np.abs(deviations(X, y + u * rng.standard_normal(12))).mean() for _ in range(60)]
    off = np.mean([one.value for one in found]) - truth

    assert abs(off) < (1.0 if bend == 0 else 0.35) * np.mean([one.noise for one in found])
    assert abs(off) < 0.6 * abs(np.mean(plain) - truth) or bend > 0.3
