"""Figures with their uncertainty: what the chart's pitch and distance add, and what is not known beyond the points."""

from dataclasses import replace

import numpy as np
import pytest

from runner.measure.geometry_figures import Figure, Setting, curve, displacement_map, figures_of
from runner.measure.numerics.plane_view import Lens, Marks, ViewFit, fit_view
from tests.scenes import lattice_truth
from tests.scenes.lattices import LatticeScene

SCENE = LatticeScene(turn=5, tilt=(5, -4), radial=(-0.12, 0.03), centre=(4, -3), pitch=18)
SETTING = Setting(SCENE.size, SCENE.all_places(), 0.6, 5.0, 0.001, 120.0, 0.004, 0.003, (0.3, 0.9))


def _fit(terms: int = 3) -> ViewFit:
    places = SCENE.all_places()
    points = SCENE.seen(places) + np.random.default_rng(1).normal(0, 0.01, places.shape)
    return fit_view(points, places, np.full(len(points), 0.01), SCENE.size, Lens(terms), Marks())


@pytest.fixture(scope="module")
def made() -> dict[str, Figure]:
    """Figures of a noisy view."""
    return figures_of(_fit(), _fit(4), SETTING, shows=False)


def _part(figure: Figure, name: str) -> float:
    return next((c.u for c in figure.components if c.name == name), 0.0)


def test_values_are_the_scenes(made: dict[str, Figure]) -> None:
    """Every figure lies within 3.5 u of the scene's own (24 figures: one in 2000 lies beyond)."""
    truth = lattice_truth.truth(SCENE, 5.0, 120.0, 0.003)
    truth |= {"at field 0": lattice_truth.local_distortion(SCENE, 0.3)}

    for name, value in truth.items():
        assert abs(made[name].value - value) <= 3.5 * made[name].u, name


def test_the_charts_pitch_goes_into_lengths_alone(made: dict[str, Figure]) -> None:
    """0.1 % of pitch is 0.1 % of a field of view and of the magnification, and nothing of a rotation."""
    assert _part(made["field_of_view_width"], "pitch") == pytest.approx(
        0.001 * made["field_of_view_width"].value, rel=1e-3
    )
    assert _part(made["magnification"], "pitch") == pytest.approx(0.001 * made["magnification"].value, rel=1e-3)
    assert _part(made["rotation"], "pitch") == 0.0


def test_distance_goes_into_angles(made: dict[str, Figure]) -> None:
    """For tan of half the angle = w/2d: d(angle) = -sin(angle) dd/d; 0.4 % of it within 1 %."""
    angle = made["field_angle_horizontal"]
    expected = np.degrees(np.sin(np.radians(angle.value))) * 0.004

    assert _part(angle, "distance") == pytest.approx(expected, rel=0.01)


def test_beyond_the_points_another_term_counts(made: dict[str, Figure]) -> None:
    """At 0.9, where points reach 0.6, u holds what one more radial term changes; at 0.3 it does not."""
    assert _part(made["at field 1"], "radial terms") > 0
    assert _part(made["at field 0"], "radial terms") == 0.0
    shown = figures_of(_fit(), _fit(4), SETTING, shows=True)
    assert _part(shown["at field 0"], "radial terms") > 0


def test_what_a_longer_lens_does_not_know_nobody_knows() -> None:
    """Where a lens with one term more has no ideal position, a figure far out is not a number."""
    fit = _fit()
    more = replace(fit, view=replace(fit.view, radial=np.array([-0.6])))
    far = figures_of(fit, more, SETTING, shows=False)

    assert np.isnan(far["at field 1"].value)
    assert np.isfinite(far["at field 0"].value)


def test_the_curve_and_the_map_show_the_lens(made: dict[str, Figure]) -> None:
    """The curve ends where points do; the map is the radial displacement in px, negative for barrel."""
    shown = curve("grid", made, SETTING, "x")
    fit = _fit()
    area = displacement_map("grid", fit.view, SCENE.seen(SCENE.all_places()))
    corner = np.array([[area.x[0], area.y[0]]])
    ideal = SCENE.ideal(SCENE.places_at(corner))
    moved = float(np.hypot(*(corner - SCENE.middle)[0]) - np.hypot(*ideal[0]))

    assert (shown.x[0], shown.x[-1]) == (0.0, 0.6)
    assert shown.y[-1] == pytest.approx(lattice_truth.local_distortion(SCENE, 0.6), abs=4 * shown.u[-1])
    assert area.values[0][0] == pytest.approx(moved, abs=0.05)
    assert area.marks[0][2] == "centre of distortion"
