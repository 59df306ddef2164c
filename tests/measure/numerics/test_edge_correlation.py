"""Noise that pixels share: found where it is, not where it is not, and carried exactly into the normal equations."""

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import ndimage

from runner.measure.numerics import edge_model as em
from runner.measure.numerics.edge_correlation import Correlation, correlated_information, correlation
from runner.measure.numerics.edge_geometry import EdgeLine
from runner.measure.numerics.edge_model import Linear, Noise, Parts, Pixels
from runner.measure.numerics.line_spread import lattice_for
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian

SD = 0.01
LATTICE = lattice_for(75, 0.7)
BLUR = np.outer([1, 2, 1], [1, 2, 1]) / 16
"""A usual filter of colour interpolation and denoising; its autocorrelation is [1 4 6 4 1]/6 both ways."""


def _linear(
    noise: NDArray[np.float64], direction: float = 6.0, sites: NDArray[np.bool_] | None = None
) -> tuple[Linear, Pixels]:
    rows, columns = noise.shape
    scene = EdgeScene(Gaussian(0.8), (columns, rows), direction, low=0.2, high=0.8)
    line = EdgeLine(np.radians(direction), scene.half_length, np.zeros(2))
    parts = Parts(line, 0.2, 0.6, 0.8, 0, 0, 0, 1.0, np.zeros(LATTICE.centres.size), np.zeros(2))
    pixels = Pixels(scene.signal() + noise, line, sites)
    return em.linearise(pixels, parts, LATTICE, line.sides(), Noise(SD**2, SD**2, 9000)), pixels


def _blurred(rng: np.random.Generator, kernel: NDArray[np.float64], shape: tuple[int, int]) -> NDArray[np.float64]:
    """Return noise of standard deviation SD that a kernel has gone over."""
    white = rng.standard_normal(shape)
    return np.asarray(SD * ndimage.convolve(white, kernel, mode="wrap") / np.sqrt((kernel**2).sum()))


def test_white_noise_is_white() -> None:
    """In 40 captures of two sizes chance is taken for correlation once at most (it is a 4 sigma matter)."""
    rng = np.random.default_rng(1)
    found = [
        correlation(*_linear(SD * rng.standard_normal(shape)), 1.0)
        for shape in [(120, 80), (60, 40)]
        for _ in range(20)
    ]
    assert sum(each is not None for each in found) <= 1


def test_the_blurs_own_autocorrelation_is_found() -> None:
    """Shares of the variance at each lag are those of the closed form within 0.05, and so is their sum, (16/6)²."""
    found = correlation(*_linear(_blurred(np.random.default_rng(2), BLUR, (120, 80))), 1.0)
    assert found is not None
    line = {0: 1.0, 1: 4 / 6, 2: 1 / 6}
    for (dy, dx), share in zip(found.lags.tolist(), found.shares, strict=True):
        assert share == pytest.approx(line.get(abs(dy), 0.0) * line.get(abs(dx), 0.0), abs=0.05)
    assert found.whole == pytest.approx((16 / 6) ** 2, rel=0.15)
    assert found.squared == pytest.approx(sum(v**2 for v in (1 / 6, 4 / 6, 1, 4 / 6, 1 / 6)) ** 2, rel=0.1)


def test_raised_weights_do_not_hide_it() -> None:
    """A fit that has already raised its variances finds the same correlation again."""
    linear, pixels = _linear(_blurred(np.random.default_rng(3), BLUR, (120, 80)))
    once = correlation(linear, pixels, 1.0)
    raised = Linear(**(vars(linear) | {"weights": linear.weights / 7}))
    again = correlation(raised, pixels, 7.0)
    assert once is not None
    assert again is not None
    assert again.shares == pytest.approx(once.shares)
    assert correlation(raised, pixels, 1.0) is None  # far below its expected variance it would be rounding


def test_sharpening_takes_noise_away_at_low_frequencies() -> None:
    """Negative neighbours make the sum less than 1; it never falls below a tenth."""
    kernel = np.array([[0, -0.2, 0], [-0.2, 1, -0.2], [0, -0.2, 0]])
    found = correlation(*_linear(_blurred(np.random.default_rng(4), kernel, (120, 80))), 1.0)
    assert found is not None
    assert found.whole == pytest.approx(0.1, abs=0.05)
    assert found.within_band(0.0) > found.whole


def test_power_within_the_band_is_the_mean_of_the_spectrum() -> None:
    """For [1 2 1]/4 along x the mean of its noise power over 0 to 0.5 cy/px is 1 along x, its sum (16/6) along y.

    The spectrum (6 + 8 cos + 2 cos)/6 averages to 1 over the whole band; along y nothing varies.
    """
    lags = np.array([[0, -2], [0, -1], [0, 1], [0, 2]])
    found = Correlation(lags, np.array([1 / 6, 4 / 6, 4 / 6, 1 / 6]))
    assert found.within_band(0.0) == pytest.approx(1)
    assert found.within_band(np.pi / 2) == pytest.approx(16 / 6)


def test_pixels_of_a_mosaic_are_compared_with_their_own() -> None:
    """On a quarter of the pixels only lags of two exist; white noise stays white, what others hold is not seen."""
    sites = np.zeros((120, 80), dtype=bool)
    sites[::2, ::2] = True
    rng = np.random.default_rng(5)
    assert correlation(*_linear(SD * rng.standard_normal((120, 80)), sites=sites), 1.0) is None
    found = correlation(*_linear(_blurred(rng, np.ones((5, 5)), (120, 80)), sites=sites), 1.0)
    assert found is not None
    # boxes of five leave 3/5 at a lag of two
    share = {tuple(lag): value for lag, value in zip(found.lags.tolist(), found.shares, strict=True)}
    assert share[0, 2] == pytest.approx(0.6, abs=0.1)
    assert share[0, 1] == 0


@pytest.mark.parametrize("direction", [6.0, 40.0])
def test_information_of_correlated_noise(direction: float) -> None:
    """Jᵀ W½ R W½ J from node to node is that from pixel to pixel by brute force, within 5 % of its largest entries."""
    shape = (40, 30)
    linear, pixels = _linear(np.zeros(shape), direction)
    line = {0: 1.0, 1: 4 / 6, 2: 1 / 6}
    lags = np.array([(a, b) for a in range(-2, 3) for b in range(-2, 3) if (a, b) != (0, 0)])
    found = Correlation(lags, np.array([line[abs(a)] * line[abs(b)] for a, b in lags]))
    mine = correlated_information(linear, pixels, LATTICE, found, np.radians(direction))
    fixed = linear.model.columns[linear.index] * np.sqrt(linear.weights[linear.index])[:, None]
    some = [em.LEVEL, em.STEP, em.WIDENING, em.SHIFT, *(em.FIXED + np.flatnonzero(np.abs(LATTICE.centres) < 3))]
    columns = fixed[:, some]
    blurred = np.column_stack(
        [ndimage.convolve(c.reshape(shape), _autocorrelation(), mode="constant").ravel() for c in columns.T]
    )
    true = columns.T @ blurred
    place = np.array([k if k < em.FIXED else linear.head + k - em.FIXED for k in some])
    unit = np.sqrt(np.diag(true))
    # the region's border, where neighbours are missing, is a tenth of it
    assert mine[np.ix_(place, place)] / np.outer(unit, unit) == pytest.approx(true / np.outer(unit, unit), abs=0.12)
    core = np.flatnonzero(np.array(some) >= em.FIXED)
    ratio = np.diag(mine)[place][core] / np.diag(true)[core]
    assert ratio == pytest.approx(np.ones_like(ratio), abs=0.12)


def _autocorrelation() -> NDArray[np.float64]:
    return np.outer([1, 4, 6, 4, 1], [1, 4, 6, 4, 1]) / 36
