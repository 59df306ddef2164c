"""Figures read off a view against worked examples and the scene's own camera."""

import numpy as np
import pytest

from runner.measure.numerics import view_figures as figures
from runner.measure.numerics.plane_view import View
from tests.scenes import lattice_truth
from tests.scenes.lattices import LatticeScene

FRAME = (1600, 1200)


def _lens(*radial: float) -> View:
    """Return a lens over a 4:3 frame of half diagonal 1000 px, its plane in px."""
    return View(np.eye(3), np.array([800.0, 600.0]), np.array(radial), np.zeros(2), 1000.0)


@pytest.mark.parametrize(("k1", "smia"), [(-0.05, -3.25866), (0.05, 3.14342)])
def test_both_percentages_of_the_pictures_height(k1: float, smia: float) -> None:
    """4:3 frame, half diagonal 1, k1 = ±0.05: sides 0.6 (1 + k1) against 0.6 (1 + 0.36 k1); EBU's is half SMIA's.

    EBU Tech 3249 (sag over picture height) and SMIA 1.0 Part 5 (heights of the sides against the middle's); both
    figures follow from the formulas by hand.
    """
    sag, sides = figures.picture_height(_lens(k1), FRAME)

    assert sides == pytest.approx(smia, abs=1e-5)
    assert sag == pytest.approx(smia / 2, abs=1e-5)
    if k1 < 0:
        assert sag == pytest.approx(-1.62933, abs=1e-5)


def test_local_distortion_is_that_of_iso_17850() -> None:
    """D = 100 (H' - H)/H: an ideal height of 1 with k1 = -0.05 shows at 0.95: D there is -5 %; none in the middle."""
    assert figures.distortion(_lens(-0.05), [0.95, 0.0]) == pytest.approx([-5.0, 0.0], abs=1e-9)


def test_a_height_that_no_ideal_one_shows() -> None:
    """R - 0.4 r³ is 0.61 at most: at 0.7 there is nothing."""
    assert np.isnan(figures.distortion(_lens(-0.4), [0.7])).all()


@pytest.mark.parametrize("turn", [0.0, 17.0])
def test_all_figures_of_a_tilted_chart(turn: float) -> None:
    """Scale, rotation, keystone, fields and bows agree with the scene's camera to 1e-5 of their size."""
    scene = LatticeScene(turn=turn, tilt=(7, -5), radial=(-0.12, 0.02), centre=(6, -4), pitch=17)
    view = View(scene.plane(), scene.middle, np.array(scene.radial), np.zeros(2), scene.half)
    truth = lattice_truth.truth(scene, 5.0, 100.0, 0.003)
    at = figures.outlook(view, scene.size)
    scale, rotation, ratio = figures.axes_of(view, at)
    wide, high, diagonal = figures.reach(at)
    across, down = figures.keystone(view, scene.size)
    places = scene.all_places()

    assert scale * 0.003 / 5 == pytest.approx(truth["magnification"], rel=1e-5)
    assert rotation == pytest.approx(truth["rotation"], abs=1e-4)
    assert ratio == pytest.approx(truth["scale_ratio"], rel=1e-5)
    assert 5 * wide == pytest.approx(truth["field_of_view_width"], rel=1e-6)
    assert 5 * high == pytest.approx(truth["field_of_view_height"], rel=1e-6)
    assert 5 * diagonal == pytest.approx(truth["field_of_view_diagonal"], rel=1e-6)
    assert (across, down) == pytest.approx((truth["keystone_horizontal"], truth["keystone_vertical"]), rel=1e-6)
    assert figures.largest_bow(view, places, 1) == pytest.approx(truth["row_bow"], rel=1e-6)
    assert figures.largest_bow(view, places, 0) == pytest.approx(truth["column_bow"], rel=1e-6)


def test_arms_reach_from_the_middle() -> None:
    """Without distortion or tilt they are half the frame's sides and diagonal, in places."""
    assert figures.arms(figures.outlook(_lens(0.0), FRAME)) == pytest.approx([800, 800, 600, 600, 1000, 1000], abs=1e-6)
