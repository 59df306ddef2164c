"""Noise from what a fit leaves over: by level, misfit told from chance, defects told from structure."""

import numpy as np
import pytest
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure.numerics import edge_model as em
from runner.measure.numerics.edge_geometry import EdgeLine
from runner.measure.numerics.edge_model import Linear, Noise, Parts, Pixels
from runner.measure.numerics.edge_noise import defects, misfit, noise_of
from runner.measure.numerics.line_spread import lattice_for
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian

SCENE = EdgeScene(Gaussian(0.6), (80, 120), 6.0, low=0.2, high=0.8)
LATTICE = lattice_for(75, 0.7)
LOW, HIGH = 0.004, 0.012


def _parts(sigma: float = 0.6) -> Parts:
    line = EdgeLine(np.radians(6), SCENE.half_length, np.zeros(2))
    return Parts(line, 0.2, 0.6, sigma, 0, 0, 0, 1.0, np.zeros(LATTICE.centres.size), np.zeros(2))


def _noisy(seed: int) -> NDArray[np.float64]:
    """Return the scene with noise whose variance grows linearly from the dark to the bright level."""
    clean = SCENE.signal()
    bright = (clean - 0.2) / 0.6
    sd = np.sqrt(LOW**2 + (HIGH**2 - LOW**2) * bright)
    return np.asarray(clean + sd * np.random.default_rng(seed).standard_normal(clean.shape))


def _linear(signal: NDArray[np.float64], parts: Parts | None = None) -> tuple[Linear, Pixels]:
    parts = parts if parts is not None else _parts()
    pixels = Pixels(signal, parts.line)
    noise = Noise(LOW**2, HIGH**2, 9000)
    return em.linearise(pixels, parts, LATTICE, parts.line.sides(), noise), pixels


def test_noise_of_both_levels() -> None:
    """Each level's own noise is found within 4 % (4 000 pixels a side know it to 1.1 %), whatever the model's shape."""
    for parts in (_parts(), _parts(2.0)):
        found = noise_of(_linear(_noisy(1), parts)[0], 0.0)
        # pixels between 0 and 0.3 and between 0.7 and 1 of the step count for their sides
        assert np.sqrt([found.low, found.high]) == pytest.approx([LOW, HIGH], rel=0.04)
        assert 8000 < found.dof < 9600


def test_noise_never_falls_below_its_floor() -> None:
    """A noiseless region has the noise of rounding that is told."""
    found = noise_of(_linear(SCENE.signal())[0], 2e-4)
    assert (found.low, found.high) == pytest.approx((4e-8, 4e-8))


def test_one_side_only() -> None:
    """With hardly a pixel on one side there is no noise to be had, and the sentence says what to do."""
    scene = EdgeScene(Gaussian(0.6), (20, 30), 6.0, offset=10.3, low=0.2, high=0.8)
    line = EdgeLine(np.radians(6), scene.half_length, np.array([10.3, 0.0]))
    parts = Parts(line, 0.2, 0.6, 0.6, 0, 0, 0, 1.0, np.zeros(LATTICE.centres.size), np.zeros(2))
    pixels = Pixels(scene.signal(), line)
    with pytest.raises(MeasurementRefused, match=r"too few pixels lie on one side of the edge; .*centre it") as refused:
        noise_of(em.residuals(pixels, parts, LATTICE, line.sides()), 0.0)
    assert refused.value.cause == "outside the estimator's limits"


def test_misfit_is_one_by_chance_and_grows_with_a_wrong_shape() -> None:
    """The true model leaves chance only in 10 of 10 captures; a Gaussian wider by a third leaves many times more."""
    for seed in range(10):
        assert misfit(_linear(_noisy(seed))[0], 10) == pytest.approx(1, abs=0.2)
    assert misfit(_linear(_noisy(1), _parts(0.8))[0], 10) > 3


def test_defects_are_found_and_nothing_else() -> None:
    """Dead and hot pixels are found one and all; without them none is, in 10 of 10 captures."""
    for seed in range(10):
        linear, pixels = _linear(_noisy(seed))
        assert not defects(linear, pixels, 1e-4).any()
    spoilt = _noisy(3)
    spoilt[[10, 60, 100], [70, 5, 33]] = [0.0, 1.0, 0.5]
    found = defects(*_linear(spoilt), 1e-4)
    assert np.flatnonzero(found).tolist() == [10 * 80 + 70, 60 * 80 + 5, 100 * 80 + 33]


def test_a_dead_column_is_one_defect() -> None:
    """A stuck column is left out as a whole, also where its value equals the edge's; a stuck row likewise."""
    for spoil in (np.s_[:, 30], np.s_[77, :]):
        spoilt = _noisy(4)
        spoilt[spoil] = 0.5
        true = np.zeros((120, 80), dtype=bool)
        true[spoil] = True
        assert np.array_equal(defects(*_linear(spoilt), 1e-4), true.ravel())


def test_structure_is_no_defect() -> None:
    """A patch of a hundred pixels of another level is something on the chart: nothing is left out."""
    spoilt = _noisy(5)
    spoilt[20:30, 60:70] = 0.3
    assert not defects(*_linear(spoilt), 1e-4).any()


def test_few_codes_are_no_defects() -> None:
    """Noise of half a code makes whole codes of residuals, no defects."""
    code = 0.02
    signal = np.rint((SCENE.signal() + 0.5 * code * np.random.default_rng(6).standard_normal((120, 80))) / code) * code
    assert not defects(*_linear(signal), code / np.sqrt(12)).any()
