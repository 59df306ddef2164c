"""Grids of patches are found where they lie: turned, at a slant, with gaps, on any ground; photographs hold none."""

import numpy as np
import pytest
from skimage import data

from runner.measure.numerics.patch_grid import find_grids
from tests.scenes.patches import PatchChart, Recorder, grey, wedge


def _picture(chart: PatchChart, rng: np.random.Generator) -> np.ndarray:
    codes = Recorder().codes(chart.light(), rng)[0].astype(float)
    return np.asarray(np.sqrt(np.clip((codes - 64) / 4031, 0, None)))


def _off(chart: PatchChart, centres: np.ndarray) -> float:
    return float(np.abs((centres - chart.centres()) / np.array(chart.pitch)).max())


def test_charts_in_many_views() -> None:
    """Of 12 random views (8° turned, 3 % slant, four grounds, gaps to 20 %) every patch's centre lies within 0.2 patch.

    A clear middle that keeps a fifth of the patch free at each border stays within the patch then. Of values in no
    order the best grid is the right one.
    """
    rng = np.random.default_rng(21)
    for draw in range(12):
        lights = grey(rng.uniform(0.03, 0.9, 24).tolist())
        chart = PatchChart(
            lights,
            6,
            size=(480, 340),
            pitch=(64, 64),
            gap=float(rng.choice([0, 0.05, 0.1, 0.2])),
            turned=float(rng.uniform(-8, 8)),
            keystone=(float(rng.uniform(-0.03, 0.03)), float(rng.uniform(-0.03, 0.03))),
            ground=(float(rng.choice([0.02, 0.2, 0.5, 0.9])),),
            middle=(240 + float(rng.uniform(-15, 15)), 170 + float(rng.uniform(-15, 15))),
        )
        best = find_grids(_picture(chart, rng), 6, 4)[0]
        assert _off(chart, best.places(np.zeros((1, 2)))[:, 0]) < 0.2, draw
        assert best.uneven < 0.01, draw


def test_a_wedge_whose_end_melts_into_the_ground() -> None:
    """White beside white paper: a grid one step off explains nearly as much, and the right one is among those given."""
    rng = np.random.default_rng(5)
    chart = PatchChart(grey(wedge(20, 0.1)), 20, size=(800, 170), turned=-6, ground=(0.9,))
    found = find_grids(_picture(chart, rng), 20, 1)

    assert min(_off(chart, one.places(np.zeros((1, 2)))[:, 0]) for one in found) < 0.2


def test_patches_leave_their_gaps_out() -> None:
    """The corners of patches with gaps of 20 % lie within 5 % of the pitch of the planted ones."""
    chart = PatchChart(
        grey(np.linspace(0.05, 0.9, 12).tolist()), 4, size=(420, 330), pitch=(90, 90), gap=0.2, ground=(0.02,)
    )
    best = find_grids(_picture(chart, np.random.default_rng(2)), 4, 3)[0]
    first = best.patches()[0]

    assert best.gap == pytest.approx(0.2)
    np.testing.assert_allclose(first[0], chart.at(np.array([[0.1, 0.1]]))[0], atol=4.5)
    np.testing.assert_allclose(first[2], chart.at(np.array([[0.9, 0.9]]))[0], atol=4.5)


@pytest.mark.parametrize("name", ["camera", "coins", "moon", "text", "brick", "grass", "clock"])
def test_photographs_are_no_charts(name: str) -> None:
    """In no photograph do 24 patches, or 12 steps, explain what is seen as a chart does."""
    picture = np.sqrt(getattr(data, name)().astype(float) / 255)
    for layout in ((6, 4), (12, 1)):
        assert all(one.uneven > 0.01 or one.left > 0.6 for one in find_grids(picture, *layout)), layout


def test_nothing_is_found_in_nothing() -> None:
    """An even picture, and one of a few pixels, hold no grid."""
    assert find_grids(np.full((90, 120), 0.4), 6, 4) == []
    assert find_grids(np.eye(3), 2, 2) == []
