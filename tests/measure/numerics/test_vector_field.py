"""Smooth fields of displacements: radial ones come back, and the largest of many is not pulled up by noise."""

import numpy as np
import pytest

from runner.measure.numerics.vector_field import fit_field

FRAME = (400, 300)


def _grid(columns: int = 13, rows: int = 9) -> np.ndarray:
    y, x = np.mgrid[20 : 280 : rows * 1j, 20 : 380 : columns * 1j]
    return np.column_stack([x.ravel(), y.ravel()])


def test_a_lens_errors_field_comes_back() -> None:
    """D = 0.001 r + 2e-8 r³ outwards and a shift: the field to 1e-9, half the divergence in the middle 0.001."""
    points = _grid()
    r = points - np.array(FRAME) / 2
    vectors = 1e-3 * r + 2e-8 * (r**2).sum(axis=1, keepdims=True) * r + np.array([0.1, -0.2])
    field = fit_field(points, vectors, np.full(len(points), 0.01), FRAME)

    assert field.at(points)[0] == pytest.approx(vectors, abs=1e-9)
    assert field.divergence()[0] == pytest.approx(1e-3, abs=1e-9)
    outwards = r[:1] / np.hypot(*r[0])
    length = np.hypot(*r[0])
    assert field.mean_along(points[:1], outwards)[0] == pytest.approx(
        1e-3 * length + 2e-8 * length**3 + float(outwards[0] @ [0.1, -0.2]), abs=1e-9
    )


def test_one_per_mille_of_magnification_is_a_pixel_at_a_thousand() -> None:
    """+0.1 % of magnification displaces by 1.000 px at 1000 px from the middle; the fit gives 1.0010 within 0.0001.

    Geometry; 0.02 px of noise on 130 points.
    """
    frame = (1600, 1400)
    y, x = np.mgrid[50:1350:10j, 50:1550:13j]
    points = np.column_stack([x.ravel(), y.ravel()])
    r = points - np.array(frame) / 2
    vectors = 1e-3 * r + np.random.default_rng(1).normal(0, 0.02, r.shape)
    field = fit_field(points, vectors, np.full(len(points), 0.02), frame)
    ratio, u = field.divergence()

    assert 1 + ratio == pytest.approx(1.0010, abs=1e-4)
    assert u < 5e-5


@pytest.mark.parametrize("size", [0.0, 0.02, 0.3])
def test_the_largest_is_covered(size: float) -> None:
    """The largest length of all lies within 2u of the truth in 93 % of 100 noises, less 2 standard deviations."""
    points, rng = _grid(), np.random.default_rng(2)
    r = (points - np.array(FRAME) / 2) / 250
    truth = size * r
    most = float(np.hypot(*truth.T).max())
    within = 0
    for _ in range(100):
        vectors = truth + rng.normal(0, 0.02, truth.shape)
        value, u, _ = fit_field(points, vectors, np.full(len(points), 0.02), FRAME).largest(points)
        within += abs(value - most) <= 2 * u
    assert within / 100 >= 0.88


def test_more_scatter_than_stated_is_counted() -> None:
    """Residuals four times as large as stated make u four times as large, within a fifth."""
    points, rng = _grid(), np.random.default_rng(3)
    vectors = rng.normal(0, 0.04, points.shape)
    plain = fit_field(points, vectors, np.full(len(points), 0.04), FRAME).at(points)[1]
    wrong = fit_field(points, vectors, np.full(len(points), 0.01), FRAME).at(points)[1]

    assert wrong / plain == pytest.approx(1.0, abs=0.2)
