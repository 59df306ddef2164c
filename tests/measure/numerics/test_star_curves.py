"""Read-outs of star curves against curves known in closed form."""

import numpy as np
import pytest

from runner.measure.numerics.star_curves import Curves, crossing, lowest


def _curves() -> Curves:
    """Return segments 1 - k f, k rising from 1 to 1.7."""
    f = np.linspace(0.02, 0.5, 193)
    size = 1 - (1 + 0.1 * np.arange(8))[:, None] * f[None, :]
    return Curves(f, size, np.full_like(size, 0.004))


def test_families_mean_their_segments() -> None:
    """All eight, those along and those across the line from the frame's centre, and the worst of all."""
    curves = _curves()

    assert curves.value("", 0.3)[0] == pytest.approx(1 - 1.35 * 0.3)
    assert curves.value("sagittal_", 0.3)[0] == pytest.approx(1 - 1.2 * 0.3)  # segments 0 and 4
    assert curves.value("tangential_", 0.3)[0] == pytest.approx(1 - 1.4 * 0.3)  # segments 2 and 6
    assert curves.value("", 0.3)[1] == pytest.approx(0.004 / np.sqrt(8))
    assert curves.value("worst_", 0.3)[0] == pytest.approx(1 - 1.7 * 0.3, abs=0.001)


def test_crossings_and_their_uncertainty() -> None:
    """1 - k f falls to 0.5 at 0.5/k, with u over k; the worst is the earliest; none within the band is none."""
    curves = _curves()
    at, u, slope = curves.crossing("", 0.5) or (0.0, 0.0, 0.0)

    assert (at, slope) == pytest.approx((0.5 / 1.35, -1.35))
    assert u == pytest.approx(0.004 / np.sqrt(8) / 1.35)
    assert (curves.crossing("worst_", 0.5) or (0.0,))[0] == pytest.approx(0.5 / 1.7, abs=0.002)
    assert curves.crossing("", 0.2) is None
    assert crossing(curves.f, curves.size[0], curves.u[0], 0.99) is None  # it begins below


def test_the_lowest_of_equal_values_is_not_lower_than_they_are() -> None:
    """Eight segments of one true value: the lowest reads 1.42 deviations too low, and that is taken off.

    The expected lowest of eight normal deviates is -1.4236 (Teichroew, Ann. Math. Stat. 27 (1956) 410). Means of 400
    draws leave 0.05; what is left of the correction's own doubt is told by its u, which must cover.
    """
    rng = np.random.default_rng(2)
    draws = rng.standard_normal((400, 8))
    read = np.array([lowest(row, np.ones(8)) for row in draws])

    assert draws.min(axis=1).mean() == pytest.approx(-1.4236, abs=0.1)
    assert abs(read[:, 0].mean()) < 0.5
    assert np.mean(np.abs(read[:, 0]) <= 2 * read[:, 1]) > 0.93


def test_a_segment_that_is_clearly_the_worst_is_left_as_it_is() -> None:
    """Ten deviations below the others nothing is taken off."""
    values = np.array([1.0, 1.0, 0.9, 1.0, 1.0, 1.0, 1.0, 1.0])
    value, u = lowest(values, np.full(8, 0.01))

    assert value == pytest.approx(0.9, abs=0.001)
    assert u == pytest.approx(0.01, rel=0.1)
