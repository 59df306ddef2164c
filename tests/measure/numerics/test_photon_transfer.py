"""The model's formulas against worked values, fits against closed forms and draws."""

import numpy as np
import pytest

from runner.measure.numerics import photon_transfer as law

GAIN, DARK, FULL, EFFICIENCY = 0.1, 20.0, 10_000.0, 0.5
"""A sensor with K 0.1 DN/e-, σ_d 20 e-, saturation 10000 e-, quantum efficiency 50 %."""


def test_worked_values_of_the_linear_model() -> None:
    """EMVA 1288 Release 4.0 Linear, equations of sensitivity, dynamic range and SNR (formulas from memory).

    σ_y.dark² = K² σ_d² + 1/12 = 4.083333 DN²; threshold 20.713444 e- (41.426887 photons); range 482.7782 = 53.6750 dB
    = 8.9152 bit; the SNR at 100, 1000, 10000, 20000 photons; the total with DSNU 5 e-, PRNU 1 % at 20000.
    """
    variance = (GAIN * DARK) ** 2 + 1 / 12
    assert variance == pytest.approx(4.083333, abs=1e-6)
    assert law.dark_noise(variance, GAIN) == pytest.approx(DARK)
    least = law.threshold(DARK, GAIN)
    assert least == pytest.approx(20.713444, abs=1e-6)
    assert least / EFFICIENCY == pytest.approx(41.426887, abs=1e-5)
    assert FULL / least == pytest.approx(482.7782, abs=1e-3)
    assert law.decibels(FULL / least) == pytest.approx(53.6750, abs=1e-4)
    assert law.bits(FULL / least) == pytest.approx(8.9152, abs=1e-4)
    electrons = EFFICIENCY * np.array([100, 1000, 10_000, 20_000.0])
    ratios = law.signal_to_noise(electrons, DARK, GAIN)
    np.testing.assert_allclose(ratios, [2.335497, 16.590037, 67.988941, 98.018805], atol=1e-5)
    total = law.signal_to_noise(electrons[-1:], DARK, GAIN, pattern=5.0, response=0.01)
    assert total[0] == pytest.approx(69.956872, abs=1e-5)
    assert law.signal_to_noise(np.array([least]), DARK, GAIN)[0] == pytest.approx(1)  # the threshold's own meaning


def test_rounding_hides_dark_noise_below_its_limit() -> None:
    """EMVA 1288: at 0.24 DN² the dark noise is at most √(0.24 - 1/12) = 0.39581 codes over the gain."""
    assert law.dark_noise(law.LEAST_VARIANCE, 1.0) == pytest.approx(0.39581, abs=1e-5)


def test_a_line_through_the_origin_covers_its_slope() -> None:
    """Of 1000 draws ±2 u holds the slope in 93 to 97 %; a common change of ordinates or abscissae moves it as told."""
    rng = np.random.default_rng(1)
    x = np.linspace(100, 3000, 11)
    u = 0.01 * x + 1
    z = []
    for _ in range(1000):
        found = law.slope(x, 0.4 * x + u * rng.standard_normal(11), u)
        z.append((found.value - 0.4) / found.noise)
    assert 0.93 <= np.mean(np.abs(z) <= 2) <= 0.97
    exact = law.slope(x, 0.4 * x, u)
    assert law.slope(x, 0.4 * x + 1e-3, u).value - 0.4 == pytest.approx(1e-3 * exact.offset, rel=1e-6)
    assert law.slope(x + 1e-3, 0.4 * x, u).value - 0.4 == pytest.approx(1e-3 * exact.shift, rel=1e-3)


def test_scatter_beyond_chance_widens_a_slope() -> None:
    """Ordinates that scatter ten times as far as said make the uncertainty about ten times as large (Birge)."""
    rng = np.random.default_rng(2)
    x = np.linspace(1, 20, 20)
    y = 0.4 * x + 10 * rng.standard_normal(20)
    assert law.slope(x, y, np.ones(20)).noise == pytest.approx(10 / np.sqrt(np.sum(x**2)), rel=0.4)
    assert law.line(x, y, np.ones(20))[1] == pytest.approx(10 / np.sqrt(np.sum((x - x.mean()) ** 2)), rel=0.4)


def test_a_line_is_the_weighted_least_squares_line() -> None:
    """Slope and ordinate at 0 equal NumPy's polynomial fit with the same weights."""
    rng = np.random.default_rng(3)
    x, u = np.array([0.01, 0.2, 0.4, 0.6, 1.0]), np.array([1, 2, 1, 3, 1.0])
    y = 100 + 40 * x + u * rng.standard_normal(5)
    slope, start = np.polyfit(x, y, 1, w=1 / u)

    assert (law.line(x, y, u)[0], law.line(x, y, u)[2]) == pytest.approx((slope, start))
    with pytest.raises(ValueError, match="two abscissae that differ"):
        law.line(np.ones(3), y[:3], u[:3])


def test_linearity_is_the_mean_size_of_relative_departures() -> None:
    """Release 4.0: the line of least relative squares is NumPy's with weights 1/y; a straight response has error 0."""
    x = np.linspace(1, 19, 10)
    y = 200 * x * (1 - 0.002 * x)
    slope, start = np.polyfit(x, y, 1, w=1 / y)
    found = law.linearity(x, y, 1e-6 * y)

    np.testing.assert_allclose(found.deviations, 100 * (y / (start + slope * x) - 1), atol=1e-9)
    assert found.error == pytest.approx(float(np.mean(np.abs(found.deviations))))
    assert found.told
    assert law.linearity(x, 200 * x + 3, 1e-3 * y).error < 1e-9


def test_noise_of_a_straight_response_is_told_from_an_error() -> None:
    """Of 500 straight responses whose lamp drifts, at most 5 % are told to have an error, and the bound holds 0.

    A bent one's error is held by ± 2 times noise and what noise adds, in 93 % or more of 500.
    """
    rng = np.random.default_rng(4)
    x = np.linspace(1, 19, 10)
    told, held = [], []
    for _ in range(500):
        y = 200 * x * (1 + 0.001 * rng.standard_normal(10))
        told.append(law.linearity(x, y, 0.001 * y).told)
        bent = 200 * x * (1 - 0.002 * x)
        truth = law.linearity(x, bent, 1e-9 * bent).error
        found = law.linearity(x, bent * (1 + 0.001 * rng.standard_normal(10)), 0.001 * bent)
        held.append(abs(found.error - truth) <= 2 * np.hypot(found.noise, found.folding))
    assert np.mean(told) <= 0.05
    assert np.mean(held) >= 0.93


def test_what_cannot_be_fitted_says_so() -> None:
    """No points away from 0 make no slope, two levels no departures from a line."""
    with pytest.raises(ValueError, match="needs a point away from it"):
        law.slope(np.zeros(2), np.ones(2), np.ones(2))
    with pytest.raises(ValueError, match="2 levels; a line and departures from it need 3"):
        law.linearity(np.arange(2.0), np.ones(2), np.ones(2))


def test_inputs_are_propagated_by_their_differences() -> None:
    """Of a product each input's part is the other times its u (JCGM 100:2008, 5.1.3)."""
    assert law.spread_by(lambda a, b: a * b, (2.0, 3.0), (0.1, 0.2)) == pytest.approx((0.3, 0.4))
