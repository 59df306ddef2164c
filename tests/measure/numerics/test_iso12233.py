"""The standard's own estimator: its chain, its limits of use, its uncertainty (check values: tests/published)."""

import numpy as np
import pytest

from runner.errors import MeasurementRefused
from runner.measure.numerics.iso12233 import bin_edge, derivative_correction, estimate, fit_line, transform
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian, Pupil

SCENE = EdgeScene(Gaussian(0.6), (80, 120), 5.0)


@pytest.mark.parametrize("direction", [5, -5, 85, 95, 175, 185, 265, 275])
def test_direction_and_polarity_change_nothing(direction: float) -> None:
    """All four directions and both polarities of one edge give the same response within 2e-4."""
    size = (80, 120) if abs(np.cos(np.radians(direction))) > 0.5 else (120, 80)
    one = estimate(EdgeScene(Gaussian(0.6), size, direction).signal())
    assert one.edge_angle == pytest.approx(5, abs=1e-3)
    assert one.mtf_at(0.3)[0] == pytest.approx(estimate(SCENE.signal()).mtf_at(0.3)[0], abs=2e-4)


def test_frequency_lies_along_the_normal() -> None:
    """The lines of the transform are 4/N cy/px along the rows, divided by the cosine of the edge angle."""
    one = estimate(SCENE.signal())
    n = one.esf.size
    assert one.frequency[1] == pytest.approx(4 / n / np.cos(np.radians(5)), rel=1e-6)
    assert one.modulation[0] == 1
    assert one.frequency.size == one.modulation.size == one.u.size == one.covariance.shape[0]


def test_line_fit_finds_the_line() -> None:
    """The two-pass centroid line has the scene's slope and place within 1e-3."""
    place, slope, centroids = fit_line(SCENE.signal())
    true_slope = -np.tan(np.radians(5))
    assert slope == pytest.approx(true_slope, abs=1e-4)
    assert place == pytest.approx(39.5 - true_slope * 59.5, abs=1e-2)
    assert centroids.shape == (120,)


def test_edge_spread_bins_are_plain_means() -> None:
    """Every pixel in reach enters one bin once, and a bin is the mean of its pixels."""
    rows = np.tile(np.arange(80.0), (40, 1))
    distance = np.arange(80.0)[None, :] - 40.125 - 0.1 * np.arange(40)[:, None]
    first, means, counts = bin_edge(rows, distance)
    index = np.floor(4 * distance).astype(int) - first
    assert counts.sum() == np.count_nonzero((index >= 0) & (index < means.size))
    assert means[10] == pytest.approx(rows[index == 10].mean())


def test_transform_of_a_bare_step_is_window_and_filter() -> None:
    """A step between two bins transforms into the filter's own cosine, which the correction divides out to 1/sinc."""
    esf = np.repeat([0.0, 1.0], 100)
    _, f, modulation, _ = transform(esf, np.zeros(200))
    # two equal taps of the line spread: cos(π f / 4), both under nearly equal window weights
    assert modulation == pytest.approx(np.abs(np.cos(np.pi * f / 4)) * derivative_correction(f), abs=2e-3)


def test_derivative_correction_is_clipped() -> None:
    """The correction never exceeds ten, not even where the filter has its zero."""
    assert derivative_correction(1.9) == 10
    assert derivative_correction(2.0) == 10
    assert derivative_correction(0.0) == 1


def test_first_order_covariance_is_the_exact_derivative() -> None:
    """The covariance is J V Jᵀ of the true derivative, checked by central differences of the chain."""
    rng = np.random.default_rng(3)
    esf = Gaussian(0.8).edge((np.arange(120) - 60.3) / 4, (1.0, 0.1)) + 0.01 * rng.standard_normal(120)
    variance = 1e-4 * (1 + np.arange(120) / 120)
    _, f, _, covariance = transform(esf, variance)
    columns = []
    for j in range(120):
        shift = np.zeros(120)
        shift[j] = 1e-6
        columns.append((transform(esf + shift, variance)[2] - transform(esf - shift, variance)[2]) / 2e-6)
    jacobian = np.array(columns).T
    assert covariance == pytest.approx((jacobian * variance) @ jacobian.T, rel=1e-4, abs=1e-10)
    assert f[0] == 0


def test_stated_uncertainty_covers_its_own_noiseless_value() -> None:
    """Over 250 noisy captures, ±2u holds the noiseless value in 93-98 % and spread/u lies in 0.85-1.15.

    Pooled over mtf50 and mtf at 0.1 and 0.25 cy/px; 250 draws leave ± 1.4 % on each coverage.
    """
    rng = np.random.default_rng(11)
    clean = estimate(SCENE.signal())
    true = [clean.mtf_crossing(0.5)[0], clean.mtf_at(0.1)[0], clean.mtf_at(0.25)[0]]  # type: ignore[index]
    scores = []
    for _ in range(250):
        one = estimate(SCENE.signal() + 320 * rng.standard_normal((120, 80)))
        values = [one.mtf_crossing(0.5), one.mtf_at(0.1), one.mtf_at(0.25)]
        scores.append([(v[0] - t) / v[1] for v, t in zip(values, true, strict=True) if v is not None])
    z = np.array(scores)
    assert 0.93 <= np.mean(np.abs(z) < 2) <= 0.98
    assert 0.85 <= np.sqrt(np.mean(z**2)) <= 1.15


def test_crossings_uncertainty_is_first_order_in_little_noise() -> None:
    """With noise of 0.2 % of the step the crossing's u is the curve's u over the true slope, within 10 % on average."""
    rng = np.random.default_rng(21)
    ratios = []
    for _ in range(6):
        one = estimate(SCENE.signal() + 60 * rng.standard_normal(SCENE.signal().shape))
        crossing = one.mtf_crossing(0.5)
        assert crossing is not None
        slope = np.gradient(SCENE.mtf(one.frequency), one.frequency)
        ratios.append(crossing[1] * abs(np.interp(crossing[0], one.frequency, slope)) / one.mtf_at(crossing[0])[1])
    assert np.mean(ratios) == pytest.approx(1, abs=0.1)


def test_noise_may_be_told() -> None:
    """A noise told from outside replaces the estimate; twice the noise is twice the uncertainty."""
    one, two = (estimate(SCENE.signal(), noise=n) for n in (100.0, (200.0, 200.0)))
    assert two.u == pytest.approx(2 * one.u)
    own = estimate(SCENE.signal() + 320 * np.random.default_rng(1).standard_normal((120, 80)))
    assert own.noise == pytest.approx((320, 320), rel=0.05)


def test_diffraction_tail_reads_high() -> None:
    """The window loses the tail of a diffraction-limited line spread: the response reads high by 1 % or more.

    This offset from the true transfer function belongs to the method and is printed apart from its uncertainty.
    """
    scene = EdgeScene(Pupil(0.5), (40, 60), 5.0)
    crossing = estimate(scene.signal()).mtf_crossing(0.5)
    assert crossing is not None
    assert 1.005 < crossing[0] / scene.mtf50() < 1.06


def test_level_that_is_never_reached() -> None:
    """A response that never falls to the level has no crossing; a frequency beyond the lines is refused."""
    one = estimate(SCENE.signal())
    assert one.mtf_crossing(-0.1) is None
    with pytest.raises(MeasurementRefused, match=r"1.2 cy/px lies outside the estimator's lines, 0 to"):
        one.mtf_at(1.2)


def _noisy(scene: EdgeScene, sigma: float = 100.0) -> np.ndarray:
    return np.asarray(scene.signal() + sigma * np.random.default_rng(6).standard_normal(scene.signal().shape))


@pytest.mark.parametrize(
    ("signal", "words"),
    [
        (_noisy(EdgeScene(size=(80, 120), direction=2.2)), r"2.20° from the axis; .*2.5° to 10°"),
        (_noisy(EdgeScene(size=(80, 120), direction=14)), r"14.0\d° from the axis"),
        (_noisy(EdgeScene(size=(80, 120), direction=45)), r"from the axis"),
        (_noisy(EdgeScene(size=(80, 50))), r"50 px along the edge and 80 px across; .*60 × 20 px"),
        (_noisy(EdgeScene(size=(18, 120), direction=3)), r"120 px along the edge and 18 px across"),
        (_noisy(EdgeScene(size=(80, 120)), 2500), r"the step is 1[23].\d times the noise; .*20 times at least"),
        (_noisy(EdgeScene(size=(80, 120), curve=(2.5,))), r"departs from a straight line by 0.7\d px rms; .*0.25 px"),
        (_noisy(EdgeScene(size=(80, 120), shading=(0.2, 0, 0))), r"illumination changes by \d+ % over a plateau"),
        (_noisy(EdgeScene(size=(24, 120), direction=9)), r"bins of the edge spread stay empty; .*none, of 64"),
    ],
)
def test_limits_of_use_are_refused_with_figures(signal: np.ndarray, words: str) -> None:
    """Each limit of use of the 2014 edition ends in a sentence with the figure found and the figure allowed."""
    with pytest.raises(MeasurementRefused, match=words) as refused:
        estimate(signal)
    assert refused.value.cause == "outside the estimator's limits"


def test_noise_alone_does_not_bend_the_edge() -> None:
    """At a step of 22 times the noise a straight edge is not taken for a bent one, in 20 of 20 draws."""
    rng = np.random.default_rng(2)
    for _ in range(20):
        estimate(SCENE.signal() + 32000 / 22 * rng.standard_normal((120, 80)))
