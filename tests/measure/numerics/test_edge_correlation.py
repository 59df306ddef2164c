"""Noise that neighbouring pixels share, against the known power spectrum of smoothed white noise."""

import numpy as np
import pytest
from scipy import ndimage

from runner.measure.numerics import edge_model as em
from runner.measure.numerics.edge_correlation import Correlation, correlated_information, correlation
from runner.measure.numerics.edge_geometry import EdgeLine
from runner.measure.numerics.line_spread import Array, lattice_for
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian

SCENE = EdgeScene(Gaussian(0.6), size=(80, 120), direction=5.0, low=0.2, high=0.7)
LATTICE = lattice_for(50, 0.7).without_kernels()
LINE = EdgeLine(float(np.radians(5.0)), SCENE.half_length, np.zeros(2))
PARTS = em.Parts(LINE, 0.2, 0.5, 0.6, 0.0, 0.0, 0.0, 1.0, np.zeros(0), np.zeros(2))
SD = 0.01


def _fitted(
    noise: Array, sites: "np.ndarray[tuple[int, ...], np.dtype[np.bool_]] | None" = None
) -> tuple[em.Linear, em.Pixels]:
    """The ideal edge under this noise (unit variance), weighed as noise of that size."""
    pixels = em.Pixels(SCENE.signal() + SD * noise, LINE, sites)
    return em.linearise(pixels, PARTS, LATTICE, SCENE.sides, em.Noise(SD**2, SD**2, 1e4)), pixels


def _smoothed(seed: int, size: int = 3) -> Array:
    """White noise through a box of size × size, brought back to unit variance."""
    white = np.random.default_rng(seed).standard_normal((140, 100))
    return np.asarray(size * ndimage.uniform_filter(white, size)[10:130, 10:90])


def _box_power(f: Array, normal: float) -> Array:
    """Noise power of the 3 × 3 box along a direction, over that of white noise of the same variance."""
    across, down = (1 + 2 * np.cos(2 * np.pi * f * c) for c in (np.cos(normal), np.sin(normal)))
    return np.asarray(across**2 * down**2 / 9)


def test_white_noise_is_left_to_chance() -> None:
    """Of 60 regions of white noise at most one is taken for correlated, of a mosaic's sites as well.

    χ² of 12 lags exceeds its mean by 4 deviations in 0.16 % of all cases: two of 60 would be one case in 200.
    """
    rng = np.random.default_rng(1)
    sites = np.zeros((120, 80), dtype=bool)
    sites[::2, 1::2] = sites[1::2, ::2] = True
    for used in (None, sites):
        runs = [correlation(*_fitted(rng.standard_normal((120, 80)), used), 1.0) for _ in range(60)]
        assert sum(found is not None for found in runs) <= 1


def test_box_smoothed_noise_has_nine_times_the_power_at_zero() -> None:
    """Autocorrelation (1 - |i|/3)(1 - |j|/3): the power at frequency 0 is 9 times white noise's, ten regions' mean.

    A power summed over 25 lags scatters by √(2 · 25 / 9600) = 7 % in one region at most, so by 2.3 % in the mean of
    ten (four times that is allowed); taking the mean off lowers it by 24 · 9 / 9600.
    """
    runs = [correlation(*_fitted(_smoothed(seed)), 1.0) for seed in range(10)]
    found = [each for each in runs if each is not None]
    assert len(found) == 10

    assert np.mean([each.whole for each in found]) == pytest.approx(9 - 24 * 9 / 9600, rel=4 * 0.023)
    triangle = np.array([1 / 3, 2 / 3, 1, 2 / 3, 1 / 3])
    assert np.mean([each.squared for each in found]) == pytest.approx(float((triangle**2).sum() ** 2), rel=4 * 0.023)
    share = {tuple(lag): value for lag, value in zip(found[0].lags.tolist(), found[0].shares, strict=True)}
    for (dy, dx), value in share.items():
        truth = max(0, 1 - abs(dy) / 3) * max(0, 1 - abs(dx) / 3)
        # Bartlett: an autocorrelation's own variance is at most 2 Σρ² / n
        assert value == pytest.approx(truth, abs=4.5 * np.sqrt(2 * 4.46 / 9600))
        assert share[-dy, -dx] == value


@pytest.mark.parametrize("degrees", [0.0, 5.0, 30.0, 45.0])
def test_power_in_the_band_is_the_spectrums_mean(degrees: float) -> None:
    """The exact correlation of a 3 × 3 box gives the mean of its power spectrum from 0 to 0.5 cy/px along a normal."""
    lags = np.array([(j, i) for j in range(-2, 3) for i in range(-2, 3) if (j, i) != (0, 0)])
    exact = Correlation(lags, np.prod(1 - np.abs(lags) / 3, axis=1))
    normal, f = float(np.radians(degrees)), (np.arange(2000) + 0.5) / 4000

    assert exact.whole == pytest.approx(9)
    row = Correlation(np.array([(0, i) for i in (-2, -1, 1, 2)]), np.array([1, 2, 2, 1]) / 3)
    power = (1 + 2 * np.cos(2 * np.pi * f * np.cos(normal))) ** 2 / 3  # a box of three pixels side by side in a row
    assert row.within_band(normal) == pytest.approx(float(power.mean()), rel=1e-6)
    assert exact.within_band(normal) == pytest.approx(float(_box_power(f, normal).mean()), rel=1e-6)


def test_the_noise_of_fitted_numbers_grows_with_its_correlation() -> None:
    """Jᵀ W½ R W½ J is the scatter of Jᵀ W n over 300 drawings of the smoothed noise n itself.

    A variance of 300 drawings is known to √(2/300) = 8 %; 4 deviations of it, and 5 % for pairs that the region's
    border cuts (2/80 + 2/120), which the sum along the normal does not know. Level: nearly 9 times the white one.
    """
    lags = np.array([(j, i) for j in range(-2, 3) for i in range(-2, 3) if (j, i) != (0, 0)])
    exact = Correlation(lags, np.prod(1 - np.abs(lags) / 3, axis=1))
    linear, pixels = _fitted(_smoothed(0))
    found = correlated_information(linear, pixels, LATTICE, exact, LINE.normal)
    drawn = np.array([em.response(pixels, linear, SD * _smoothed(seed)) for seed in range(300)])

    used = [em.LEVEL, em.STEP, em.WIDENING, em.SHIFT, em.TAIL, em.FIXED, em.FIXED + 1]
    ratio = drawn.var(axis=0)[used] / np.diag(found)[used]
    assert ratio == pytest.approx(np.ones(len(used)), abs=4 * 0.082 + 0.05)
    assert found[em.LEVEL, em.LEVEL] / linear.matrix[em.LEVEL, em.LEVEL] == pytest.approx(9, rel=0.05)
    none = Correlation(lags, np.zeros(len(lags)))
    unit = np.sqrt(np.diag(linear.matrix))[: em.SHADE]
    white = correlated_information(linear, pixels, LATTICE, none, LINE.normal)
    off = (white - linear.matrix)[: em.SHADE, : em.SHADE] / unit[:, None] / unit[None, :]
    assert np.abs(off).max() < 1e-6


def test_rounding_alone_is_no_correlation() -> None:
    """Residuals far below the noise that was assumed are the floor's, not noise: nothing is said of them.

    Unless the weights had been lowered by that factor on purpose.
    """
    assert correlation(*_fitted(0.5 * _smoothed(2)), 4.0) is not None
    assert correlation(*_fitted(0.5 * _smoothed(2)), 1.0) is None
    assert correlation(*_fitted(0.9 * _smoothed(2)), 1.0) is not None


def test_no_noise_power_is_negative() -> None:
    """Sharpening takes noise away at low frequencies: no estimate says less than a tenth of white noise's is left.

    [0 -0.2 0, -0.2 1 -0.2, 0 -0.2 0] leaves (1 - 0.8)² / 1.16 = 3 % at frequency zero.
    """
    kernel = np.array([[0, -0.2, 0], [-0.2, 1, -0.2], [0, -0.2, 0]])
    white = np.random.default_rng(4).standard_normal((140, 100))
    sharp = (ndimage.convolve(white, kernel) / np.sqrt(1.16))[10:130, 10:90]
    found = correlation(*_fitted(sharp), 1.0)
    assert found is not None

    assert found.whole == pytest.approx(0.1, abs=0.05)
    f = np.linspace(0, 0.5, 51)
    for normal in (0.0, np.pi / 4, np.pi / 2):
        power = 1 + np.cos(2 * np.pi * np.outer(f, found.along(normal))) @ found.shares
        assert power.min() > 0
    # along a row the power is (0.6 - 0.4 cos 2πf)² / 1.16, 0.379 in the mean
    assert found.within_band(0.0) == pytest.approx(0.379, abs=0.08)
