"""Centres of round marks to a hundredth of a px."""

import numpy as np
import pytest

from runner.capture.frame import linearise
from runner.measure.numerics.chart_pose import ChartPose, solve_pose
from runner.measure.numerics.ring_fit import fit_ring
from runner.spec.model import Camera
from tests.scenes.chart_views import Scene, View, ring

PLACES = [
    (x + 3.3 * n % 2, y - 1.7 * n % 3)
    for n, (x, y) in enumerate((a, b) for a in (-75, -25, 25, 75) for b in (-45, 0, 45))
]


def _pose(view: View, off: float = 0.0) -> ChartPose:
    places = np.array(PLACES)
    return solve_pose(places, view.to_frame(places) + off, view.size)


def _errors(view: View, blur: float, noise: float, off: float = 1.5) -> tuple[np.ndarray, np.ndarray]:
    codes = Scene([ring(p, 8.0, 4.0, 0.08, 0.8) for p in PLACES], 0.8, view, blur, 0.9, noise, 0.3).codes(seed=1)
    camera = Camera(*view.size, 12, 64, 4095)
    pose = _pose(view, off)
    found = [fit_ring(codes, lambda part: linearise(part, camera), pose, p, (4.0, 2.0)) for p in PLACES]
    assert all(one is not None for one in found)
    seen = np.array([(one.x, one.y) for one in found if one is not None])
    return seen - view.to_frame(np.array(PLACES)), np.array([one.u for one in found if one is not None])


@pytest.mark.parametrize(
    ("view", "blur"),
    [
        (View(), 0.8),
        (View(scale=2.5, turn=10), 0.5),
        (View(keystone=(0.15, -0.1), turn=20), 0.8),
        (View(lens=(0.2, 0.05), scale=5.5), 1.5),
        (View(turn=5), 3.0),
    ],
    ids=["plain", "small", "tilted", "barrel", "blurred"],
)
def test_centres_without_noise(view: View, blur: float) -> None:
    """Centres lie within 0.02 px rms (the bar of the placing), from a start 1.5 px off, under a falling light."""
    errors, _ = _errors(view, blur, 0.0)

    assert np.sqrt(np.mean(np.sum(errors**2, axis=1))) < 0.02


def test_the_stated_uncertainty_is_the_scatter() -> None:
    """Over twelve marks in noise of 2 % of the step, errors over their stated u scatter by 0.7 to 1.3 (24 values)."""
    errors, u = _errors(View(scale=4), 0.8, 60.0)

    assert 0.7 < np.sqrt(np.mean((errors / u[:, None]) ** 2)) < 1.3


def test_where_no_mark_lies_there_is_none() -> None:
    """Bare ground, a mark over the frame's border and something else give no centre."""
    view = View()
    codes = Scene([ring((0.0, 0.0), 8.0, 4.0, 0.08, 0.8)], 0.8, view, noise=20).codes()
    camera = Camera(*view.size, 12, 64, 4095)
    pose = _pose(view)

    for place in ((50.0, 0.0), (132.0, 0.0)):
        assert fit_ring(codes, lambda part: linearise(part, camera), pose, place, (4.0, 2.0)) is None
