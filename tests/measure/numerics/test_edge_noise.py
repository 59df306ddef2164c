"""Noise and defect pixels planted on an edge that the model draws exactly come back, and nothing else."""

from dataclasses import replace

import numpy as np
import pytest

from runner.errors import MeasurementRefused
from runner.measure.numerics import edge_model as em
from runner.measure.numerics.edge_geometry import EdgeLine
from runner.measure.numerics.edge_noise import defects, misfit, noise_of
from runner.measure.numerics.line_spread import Array, lattice_for
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian

SCENE = EdgeScene(Gaussian(0.6), size=(80, 120), direction=5.0, low=0.2, high=0.7)
IDEAL = SCENE.signal()
BRIGHT = (IDEAL - 0.2) / 0.5
LATTICE = lattice_for(50, 0.7).without_kernels()
FLOOR = 5e-4


def _parts(scene: EdgeScene = SCENE, sigma: float = 0.6) -> em.Parts:
    line = EdgeLine(float(np.radians(scene.direction)), scene.half_length, np.array([scene.offset, 0.0]))
    return em.Parts(line, 0.2, 0.5, sigma, 0.0, 0.0, 0.0, 1.0, np.zeros(0), np.zeros(2))


def _found(signal: Array, parts: em.Parts | None = None) -> tuple[em.Residuals, em.Pixels]:
    parts = parts or _parts()
    pixels = em.Pixels(signal, parts.line)
    return em.residuals(pixels, parts, LATTICE, SCENE.sides), pixels


def _noisy(seed: int, low: float = 0.004, high: float = 0.010) -> Array:
    """The ideal edge with noise whose variance is linear in level, as that of light is."""
    draw = np.random.default_rng(seed).standard_normal(IDEAL.shape)
    return np.asarray(IDEAL + np.sqrt(low**2 + (high**2 - low**2) * BRIGHT) * draw)


@pytest.mark.parametrize("sigma", [0.6, 1.0])
def test_planted_noise_comes_back_at_either_level(sigma: float) -> None:
    """Both variances within 4 deviations of a χ² variable's mean, √(2/dof); also with a line spread that is wrong.

    A Gaussian of 1.0 px for one of 0.6 px leaves a tenth of the step, five to twelve times the noise. 2 % are added
    for what that leaves within bins of 0.05 px, and for the other level's noise in the one pixel of 40 on the flank.
    """
    runs = [noise_of(_found(_noisy(seed), _parts(sigma=sigma))[0], FLOOR) for seed in range(5)]
    dof = sum(noise.dof for noise in runs)
    allowed = 4 * np.sqrt(2 / (dof / 2)) + 0.02

    assert np.mean([noise.low for noise in runs]) == pytest.approx(0.004**2, rel=allowed)
    assert np.mean([noise.high for noise in runs]) == pytest.approx(0.010**2, rel=allowed)
    assert runs[0].dof == pytest.approx(IDEAL.size, rel=0.2)


def test_few_pixels_to_a_bin_do_not_hide_their_noise() -> None:
    """Where a bin holds two pixels only, each bin's mean takes one degree of freedom: else a third would be missing.

    60 regions of 40 × 24 px: 4 deviations of a χ² mean, and 4 % for the flank, twice as much of such a region.
    """
    scene = replace(SCENE, size=(40, 24))
    parts, rng = _parts(scene), np.random.default_rng(8)
    runs = [noise_of(_found(scene.signal() + rng.normal(0, 0.01, (24, 40)), parts)[0], FLOOR) for _ in range(60)]

    assert runs[0].dof < 0.8 * 40 * 24
    allowed = 4 * np.sqrt(2 / sum(noise.dof / 2 for noise in runs)) + 0.04
    assert np.mean([(noise.low, noise.high) for noise in runs], axis=0) == pytest.approx([1e-4, 1e-4], rel=allowed)


def test_no_noise_is_taken_for_less_than_the_floor() -> None:
    """Without noise the floor's variance stands at both levels."""
    noise = noise_of(_found(IDEAL)[0], FLOOR)

    assert (noise.low, noise.high) == pytest.approx((FLOOR**2, FLOOR**2))


def test_an_edge_at_the_border_is_refused() -> None:
    """Fewer than eleven pixels on a side tell nothing of its noise."""
    scene = replace(SCENE, offset=44.0)
    found, _ = _found(scene.signal(), _parts(scene))

    with pytest.raises(MeasurementRefused, match="too few pixels lie on one side of the edge") as refused:
        noise_of(found, FLOOR)
    assert refused.value.cause == "outside the estimator's limits"


def test_misfit_is_one_by_chance_and_grows_with_the_wrong_model() -> None:
    """χ² of bins is 1 in 29 of 30 runs or more (3 deviations miss 0.3 to 1 %), and tells a Gaussian 7 % too wide.

    The wrong model's χ² is that of the difference of two scenes over the noise, bin by bin, plus 1.
    """
    level = em.Noise(0.006**2, 0.006**2, 1e4)
    calm = [_noisy(seed, 0.006, 0.006) for seed in range(30)]

    def of(signal: Array, sigma: float) -> float:
        parts = _parts(sigma=sigma)
        return misfit(em.linearise(em.Pixels(signal, parts.line), parts, LATTICE, SCENE.sides, level), 0.0)

    assert sum(of(signal, 0.6) != 1.0 for signal in calm) <= 1
    found, _ = _found(calm[0])
    for sigma, least in ((0.64, 1.3), (0.7, 2.0)):  # 3 deviations are 0.2 with 500 bins
        wide = replace(SCENE, optics=Gaussian(sigma)).signal() - IDEAL
        truth = 1 + float((wide**2).sum()) / 0.006**2 / np.count_nonzero(found.counts)
        assert truth > least
        assert of(calm[0], sigma) == pytest.approx(truth, rel=0.2)


def test_no_defects_in_noise_alone() -> None:
    """Six deviations are passed by 2 pixels in 10^9: none in 20 regions of 9600, nor where the fit is slightly off."""
    for seed in range(20):
        found, pixels = _found(_noisy(seed), _parts(sigma=0.6 if seed % 2 else 0.62))
        assert not defects(found, pixels, FLOOR).any()


@pytest.mark.parametrize("seed", range(5))
def test_planted_defects_are_found_and_no_others(seed: int) -> None:
    """Twenty pixels off by 12 deviations of their own level are the defects, wherever they lie, dark or bright."""
    rng = np.random.default_rng(100 + seed)
    signal = _noisy(seed)
    planted = np.zeros(IDEAL.size, dtype=bool)
    plateaus = np.flatnonzero(np.abs(SCENE.distance().ravel()) > 3)
    planted[rng.choice(plateaus, 20, replace=False)] = True
    away = 12 * np.where(BRIGHT.ravel() > 0.5, 0.010, 0.004) * rng.choice([-1, 1], IDEAL.size)
    signal.ravel()[planted] = (IDEAL.ravel() + away)[planted]
    found, pixels = _found(signal)

    assert np.flatnonzero(defects(found, pixels, FLOOR)).tolist() == np.flatnonzero(planted).tolist()


@pytest.mark.parametrize("axis", [0, 1])
def test_a_dead_line_goes_as_a_whole(axis: int) -> None:
    """A row or column at one level between both is left out whole, its crossing with the edge included; two as well."""
    for lost in ([31], [31, 50]):
        signal = _noisy(9)
        planted = np.zeros(IDEAL.shape, dtype=bool)
        planted[(lost, slice(None)) if axis == 0 else (slice(None), lost)] = True
        signal[planted] = 0.45
        found, pixels = _found(signal)

        assert (defects(found, pixels, FLOOR) == planted.ravel()).all()


def test_many_outliers_are_structure() -> None:
    """Above 0.5 % of the pixels nothing is left out: a pattern on the chart is no defect of the sensor."""
    signal = _noisy(4)
    signal[10:20, 5:13] += 0.2  # 80 of 9600 pixels
    found, pixels = _found(signal)

    assert not defects(found, pixels, FLOOR).any()


@pytest.mark.parametrize("noise", [0.2, 0.5])
def test_few_codes_are_no_defects(noise: float) -> None:
    """A step of 20 codes under noise of less than one leaves whole codes, of which none is out of the ordinary."""
    code = 0.5 / 20
    for seed in range(10):
        draw = np.random.default_rng(seed).standard_normal(IDEAL.shape)
        found, pixels = _found(np.asarray(code * np.rint(IDEAL / code + noise * draw)))

        assert not defects(found, pixels, code / float(np.sqrt(12))).any()
