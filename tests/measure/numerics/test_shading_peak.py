"""The top of the light against closed forms, and its stated uncertainty."""

import numpy as np
import pytest

from runner.measure.numerics.shading_peak import Peak, find_peak
from tests.scenes.flats import Shading, Values

SIZE = (220, 165)
X: Values = np.arange(11, dtype=np.float64) * 20 + 10
Y: Values = np.arange(11, dtype=np.float64) * 15 + 7.5


def _peak(light: Values, u: float = 0.0) -> Peak | None:
    return find_peak(X, Y, light, np.full(light.shape, u), SIZE)


def _light(scene: Shading) -> Values:
    return scene.at(X[None, :], Y[:, None])


def test_a_quadratic_is_exact() -> None:
    """A turned quadratic has its top where its gradient vanishes, to rounding (1e-9 px)."""
    scene = Shading(SIZE, axis=(23.0, -14.0), powers=((2, 0, -0.3), (1, 1, 0.1), (0, 2, -0.2)))
    peak = _peak(_light(scene))

    assert peak is not None
    assert (peak.x, peak.y) == pytest.approx((133.0, 68.5), abs=1e-9)


@pytest.mark.parametrize(
    "scene",
    [
        Shading(SIZE, angle=35, axis=(21.0, -17.0)),
        Shading(SIZE, angle=20, vignette=0.5, axis=(-13.0, 6.0)),
        Shading(SIZE, vignette=0.6, pupil=1.0, axis=(8.0, 11.0)),
    ],
    ids=["cos⁴", "cos⁴ and rim", "cone"],
)
def test_any_law_that_falls_alike_to_both_sides(scene: Shading) -> None:
    """The window about its top makes a quadratic find the axis of any even law within 1 % of a block and 2 u."""
    peak = _peak(_light(scene))

    assert peak is not None
    away = np.array([peak.x - SIZE[0] / 2 - scene.axis[0], peak.y - SIZE[1] / 2 - scene.axis[1]])
    assert np.all(np.abs(away) < 0.01 * 20)
    assert np.all(np.abs(away) <= 2 * np.sqrt(np.diag(peak.covariance)) + 1e-9)


def test_the_forms_of_offset_and_centring() -> None:
    """ISO 21073 4.2: centring 1 - 2 √((x - X/2)² + (y - Y/2)²)/√(X² + Y²): 30, 40 px of 600 × 800 is 0.9."""
    peak = Peak(330.0, 440.0, np.diag([4.0, 4.0]), (600, 800))
    seen = np.sqrt(50**2 - 8)  # the mean square that noise adds, off

    assert peak.offset == pytest.approx((seen, np.hypot(2.0, 50 - seen)))
    assert peak.centring == pytest.approx((1 - seen / 500, peak.offset[1] / 500))
    assert Peak(330.0, 440.0, np.zeros((2, 2)), (600, 800)).centring[0] == pytest.approx(0.9)


@pytest.mark.parametrize(
    "scene",
    [
        Shading(SIZE),
        Shading(SIZE, powers=((1, 0, 0.2),)),
        Shading(SIZE, powers=((2, 0, -0.3),)),
        Shading(SIZE, powers=((2, 0, 0.3), (0, 2, 0.3))),
        Shading(SIZE, axis=(100.0, 70.0), angle=35),
    ],
    ids=["even", "slope", "ridge", "bowl", "in the corner"],
)
def test_where_there_is_no_top_none_is_given(scene: Shading) -> None:
    """No top inside the frame, or none that noise lets be told: None and no number, in 60 draws of noise."""
    rng = np.random.default_rng(1)
    found = [_peak(_light(scene) + rng.normal(0, 1e-3, (11, 11)), 1e-3) for _ in range(60)]

    assert found == [None] * 60


def test_a_skewed_field_says_so() -> None:
    """Light with a cubic term has its closed-form top within 2 u, and u is far above noise."""
    scene = Shading(SIZE, powers=((1, 0, 0.05), (2, 0, -0.3), (0, 2, -0.2), (3, 0, 0.1)))
    top = scene.half_diagonal * (0.6 - np.sqrt(0.6**2 - 4 * 0.3 * 0.05)) / 0.6  # 0.05 - 0.6 x + 0.3 x² = 0
    peak = _peak(_light(scene))

    assert peak is not None
    u = float(np.sqrt(peak.covariance[0, 0]))
    assert abs(peak.x - SIZE[0] / 2 - top) <= 2 * u
    assert u > 0.5


def test_the_uncertainty_holds() -> None:
    """±2 u holds x, y and the offset in 93 % or more of 300 draws (less 2 × 1.5 %): a bias bound only adds."""
    rng = np.random.default_rng(6)
    held = []
    for n in range(300):
        scene = Shading(SIZE, angle=30, axis=(0.0, 0.0) if n % 2 else (15.0, -9.0))
        peak = _peak(_light(scene) + rng.normal(0, 2e-3, (11, 11)), 2e-3)
        assert peak is not None
        u = np.sqrt(np.diag(peak.covariance))
        offset, offset_u = peak.offset
        held.append(
            [
                abs(peak.x - 110 - scene.axis[0]) <= 2 * u[0],
                abs(peak.y - 82.5 - scene.axis[1]) <= 2 * u[1],
                abs(offset - np.hypot(*scene.axis)) <= 2 * offset_u,
            ]
        )

    assert np.all(np.mean(held, axis=0) >= 0.93 - 0.03)
