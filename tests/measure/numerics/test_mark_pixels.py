"""Own pixels about places: never another colour's, and small systems solved whatever their scale."""

import numpy as np
import pytest
from scipy.special import ndtr

from runner.measure.numerics.mark_pixels import Pixels, covered, inverses, solved

ORIGINS = {"red": ((0, 1),), "green": ((0, 0), (1, 1)), "blue": ((1, 0),)}
"""Of GRBG."""


@pytest.mark.parametrize("channel", ["red", "green", "blue"])
def test_only_own_pixels_are_met(channel: str) -> None:
    """Every pixel that is given belongs to the colour, none is met twice, and none nearby is left out."""
    codes = np.zeros((40, 50))
    for row, column in ORIGINS[channel]:
        codes[row::2, column::2] = 1.0
    pixels = Pixels(codes, lambda some: some.astype(float), 2, ORIGINS[channel])
    centres = np.random.default_rng(1).uniform(12, 28, (30, 2))
    light, x, y, there = pixels.around(pixels.bases(centres), pixels.offsets((6.0, 6.0)))

    assert there.all()
    assert light.min() == 1.0
    for n, (cx, cy) in enumerate(centres):
        met = set(zip(x[n].tolist(), y[n].tolist(), strict=True))
        assert len(met) == x.shape[1]
        rows, columns = np.nonzero(codes)
        near = (np.abs(columns + 0.5 - cx) < 6) & (np.abs(rows + 0.5 - cy) < 6)
        assert set(zip((columns[near] + 0.5).tolist(), (rows[near] + 0.5).tolist(), strict=True)) <= met


def test_what_lies_beyond_the_border_is_told() -> None:
    """About a corner pixel three quarters of a square of offsets do not exist."""
    pixels = Pixels(np.ones((30, 30)), lambda some: some.astype(float))
    *_, there = pixels.around(np.array([[0, 0]]), pixels.offsets((3.0, 3.0)))

    assert there.sum() == 5 * 5
    assert there.size == 9 * 9


def test_small_systems_of_any_scale() -> None:
    """Solutions and inverses agree with a general solver to 1e-9 though the unknowns differ by 1e6 in size."""
    rng = np.random.default_rng(2)
    root = rng.normal(size=(5, 4, 9)) * np.array([1e3, 1.0, 1e-3, 1.0])[:, None]
    normal, right = root @ root.swapaxes(1, 2), rng.normal(size=(5, 4))

    expected = np.stack([np.linalg.solve(a, b) for a, b in zip(normal, right, strict=True)])
    assert solved(normal, right) == pytest.approx(expected, rel=1e-6)
    assert inverses(normal) == pytest.approx(np.linalg.inv(normal), rel=1e-6)


def test_a_singular_system_moves_nothing_without_end() -> None:
    """A parameter that no pixel tells of stays finite."""
    normal = np.diag([1.0, 0.0])[None]

    assert np.isfinite(solved(normal, np.array([[1.0, 0.0]]))).all()


def test_the_normal_distribution_in_short() -> None:
    """Φ(-t) within 4e-7, three steps of float32, of scipy's (Abramowitz and Stegun 26.2.17 promises 7.5e-8)."""
    t = np.linspace(-6, 6, 2001).astype(np.float32)

    assert covered(t, np.exp(-0.5 * t * t)) == pytest.approx(ndtr(-t.astype(float)), abs=4e-7)


def test_light_between_pixels() -> None:
    """On a plane of light it is the plane, pixel centres at +0.5, and goes no farther than the outermost pixels."""
    y, x = np.mgrid[0:20, 0:30] + 0.5
    pixels = Pixels(2 * x + 3 * y, lambda some: some.astype(float))
    points = np.array([[0.5, 0.5], [12.25, 7.75], [29.5, 19.5], [0.0, 10.5]])

    assert pixels.between(points) == pytest.approx([2.5, 47.75, 117.5, 32.5])
