"""Coltman's series against published signs, the closed form of a round pupil, and its own stated uncertainty."""

import numpy as np
import pytest
from numpy.typing import NDArray

from runner.measure.numerics.coltman import ContrastCurve, factors

Values = NDArray[np.float64]


def _pupil(s: Values) -> Values:
    """Return the transfer function of a round pupil (Goodman, Introduction to Fourier Optics, ch. 6)."""
    inside = np.clip(s, 0, 1)
    return np.asarray(2 / np.pi * (np.arccos(inside) - inside * np.sqrt(1 - inside**2)))


def _contrast(f: Values, cut: float, sigma: float = 0.0) -> Values:
    """Return (4/π) Σ (-1)^((k-1)/2) M(kf)/k of a round pupil that ends at a frequency, blurred by a Gaussian."""
    k = np.arange(1, 2001, 2)
    at = f[:, None] * k
    m = _pupil(at / cut) * np.exp(-2 * (np.pi * sigma * at) ** 2)
    return np.asarray(4 / np.pi * (m * (-1.0) ** ((k - 1) // 2) / k).sum(axis=1))


def test_signs_are_coltmans() -> None:
    """M = π/4 [C + C3/3 - C5/5 + C7/7 + C11/11 - C13/13 - C15/15 - C17/17 + C19/19 + C21/21 + C23/23 - C29/29 + …].

    Coltman, J. Opt. Soc. Am. 44 (1954) 468, as quoted in the handbooks (from memory; checked by the series below).
    """
    signs = dict(factors(39))

    assert 9 not in signs
    assert 25 not in signs
    assert 27 not in signs
    assert [k for k, sign in signs.items() if sign > 0] == [1, 3, 7, 11, 19, 21, 23, 31, 33]
    assert [k for k, sign in signs.items() if sign < 0] == [5, 13, 15, 17, 29, 35, 37, 39]


def test_the_series_undoes_a_round_pupils_square_wave_response() -> None:
    """C of a round pupil at s = 0.05 to 0.7 (closed form) converts back to its M within 1e-6."""
    s = np.array([0.05, 0.1, 0.2, 0.3, 0.5, 0.7])
    printed = [0.959716, 0.917271, 0.830332, 0.778428, 0.497839, 0.239522]
    points = np.linspace(0.01, 1.0, 100)
    curve = ContrastCurve(points, _contrast(points, 1.0), np.zeros(100), {})

    assert _contrast(s, 1.0) == pytest.approx(printed, abs=1e-6)
    assert curve.converted(s)[0] == pytest.approx(_pupil(s), abs=1e-6)


def test_beyond_a_third_of_the_end_it_is_four_over_pi() -> None:
    """Only the first term is left for s > 1/3: C/M = 4/π exactly."""
    s = np.array([0.34, 0.5, 0.9])

    assert _contrast(s, 1.0) / _pupil(s) == pytest.approx(np.full(3, 4 / np.pi), abs=1e-6)


def test_parts_of_the_uncertainty() -> None:
    """A contrast that all groups share moves the transfer in proportion; a last group at 0 leaves nothing open."""
    points = 0.5 / 2 ** (np.arange(10) / 2)[::-1]
    contrast = _contrast(points, 0.45)
    curve = ContrastCurve(points, contrast, np.zeros(10), {"target's contrast": 0.01 * contrast})
    value, parts = curve.converted(np.array([0.1, 0.2, 0.4]))

    assert parts["target's contrast"][1:] == pytest.approx(0.01 * value[1:], rel=0.35)
    assert parts["beyond the last group"].max() < 1e-6
    assert curve.u() == pytest.approx(0.01 * contrast)


def test_the_stated_uncertainty_covers() -> None:
    """Groups in steps of 2^(1/3) and √2 over five octaves, pupils and blurs of all sizes: ±2u holds M in 93 %."""
    rng = np.random.default_rng(2)
    z = []
    for _ in range(15):
        cut, sigma = rng.uniform(0.45, 1.2), rng.uniform(0, 0.8)
        points = rng.uniform(0.25, 0.45) / 2 ** np.arange(0, 5.1, rng.choice([1 / 3, 1 / 2]))[::-1]
        contrast = _contrast(points, cut, sigma) + rng.normal(0, 0.001, points.size)
        f = np.exp(rng.uniform(np.log(points[0]), np.log(points[-1]), 6))
        value, parts = ContrastCurve(points, contrast, np.full(points.size, 0.001), {}).converted(f)
        true = _pupil(f / cut) * np.exp(-2 * (np.pi * sigma * f) ** 2)
        z += list((value - true) / np.sqrt(sum(part**2 for part in parts.values())))

    assert np.mean(np.abs(z) <= 2) >= 0.93
    assert abs(np.mean(z)) < 0.3


def test_a_last_group_that_is_hardly_weakened_leaves_the_end_open() -> None:
    """With contrast left beyond the last group, its fall may lie far out: the truth stays within 2u all the same."""
    f = np.array([0.03, 0.06, 0.09, 0.125])
    contrast = _contrast(f, 1.1, 0.4)
    curve = ContrastCurve(f, contrast, np.full(4, 1e-3), {})
    value, parts = curve.converted(np.array([0.06, 0.083]))
    truth = _pupil(np.array([0.06, 0.083]) / 1.1) * np.exp(-2 * (np.pi * 0.4 * np.array([0.06, 0.083])) ** 2)
    u = np.sqrt(sum(part**2 for part in parts.values()))

    assert contrast[-1] > 0.85
    assert np.all(np.abs(value - truth) <= 2 * u)
