"""Views of a flat chart: solved, turned round, and held to what lenses are like."""

import numpy as np
import pytest

from runner.measure.numerics.chart_pose import plane_view, projected, solve_pose
from tests.scenes.chart_views import View

MARKS = np.array(
    [(-92, -56), (49, -66), (91, -28), (92, 43), (57, 65), (-52, 64), (-90, 54), (-91, 0), (10, 20)], float
)
GRID = np.array([(x, y) for x in np.linspace(-85, 85, 8) for y in np.linspace(-60, 60, 6)])


def test_four_points_give_their_view() -> None:
    """The square of Hartley and Zisserman's ch. 4 problem: four points determine the eight numbers of a view."""
    true = np.array([[2.0, 0.3, 5.0], [-0.2, 1.7, -3.0], [0.01, -0.02, 1.0]])
    corners = np.array([(0, 0), (9, 0), (9, 7), (0, 7)], float)

    assert plane_view(corners, projected(true, corners)) == pytest.approx(true, abs=1e-9)


@pytest.mark.parametrize(
    "view",
    [
        View(turn=33, shift=(20, -13), scale=5),
        View(turn=-4, keystone=(0.1, 0.05)),
        View(mirrored=True, turn=170, keystone=(0.05, -0.1)),
        View(size=(640, 480), scale=2.6, lens=(0.1, 0.0)),
        View(turn=2, keystone=(-0.03, 0.05), lens=(0.3, 0.1), scale=5.5),
    ],
    ids=["turned", "tilted", "mirrored", "barrel", "strong barrel"],
)
def test_places_between_marks_are_known(view: View) -> None:
    """Nine exact marks place everything between them within 0.3 px, through lenses that no model fits exactly.

    A barrel of a = 0.3 and b = 0.1 pulls corners in by a quarter of their distance from the centre.
    """
    pose = solve_pose(MARKS, view.to_frame(MARKS), view.size)

    assert np.abs(pose.to_frame(GRID) - view.to_frame(GRID)).max() < (0.3 if view.lens[0] else 1e-3)
    assert pose.to_chart(pose.to_frame(GRID)) == pytest.approx(GRID, abs=1e-6)
    assert pose.rms == pytest.approx(
        float(np.sqrt(np.mean(np.sum((pose.to_frame(MARKS) - view.to_frame(MARKS)) ** 2, axis=1)))), abs=1e-9
    )


def test_few_marks_do_not_invent_a_lens() -> None:
    """With noise of 0.02 px on five marks, or nine, places between them stay within 0.1 px of a view without lens."""
    view, random = View(turn=5, keystone=(0.05, 0.02)), np.random.default_rng(3)
    for marks in (MARKS[[0, 2, 3, 5, 8]], MARKS):
        seen = view.to_frame(marks) + random.normal(0, 0.02, marks.shape)
        assert np.abs(solve_pose(marks, seen, view.size).to_frame(GRID) - view.to_frame(GRID)).max() < 0.1


def test_scales_follow_the_tilt_alone() -> None:
    """Without tilt the plain scale is the same everywhere, whatever the lens does to the picture."""
    view = View(lens=(0.2, 0.0), scale=5.5)
    scales = solve_pose(MARKS, view.to_frame(MARKS), view.size).plain_scales(GRID)

    assert scales.max() / scales.min() < 1.003
    tilted = View(keystone=(0.1, 0.0))
    scales = solve_pose(MARKS, tilted.to_frame(MARKS), tilted.size).plain_scales(np.array([(-90.0, 0), (90.0, 0)]))
    # scale of a plane under w = 1 + t u goes as w**-1.5; u is 90 mm * 6 px/mm of a half diagonal of 1000 px
    assert scales[0] / scales[1] == pytest.approx(((1 + 0.1 * 0.54) / (1 - 0.1 * 0.54)) ** 1.5, rel=1e-3)


def test_points_in_a_line_give_no_view() -> None:
    """Marks that determine no view are told by numpy's own error, and never by a wrong pose."""
    line = np.array([(x, 2.0 * x) for x in range(6)], float)
    try:
        pose = solve_pose(line, line * 3 + 100, (640, 480))
    except np.linalg.LinAlgError:
        return
    assert np.abs(pose.to_frame(line) - (line * 3 + 100)).max() < 1e-3
