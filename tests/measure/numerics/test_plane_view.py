"""Views fitted to points: lens and plane come back, marks' shifts are taken off, the covariance tells the rest."""

from dataclasses import replace

import numpy as np
import pytest

from runner.measure.numerics.plane_view import Lens, Marks, View, ViewLost, fit_view, shifts_of_marks
from tests.scenes.lattices import LatticeScene

SCENE = LatticeScene(
    turn=8, tilt=(6, -9), radial=(-0.15, 0.04, -0.01), centre=(7, -5), size=(640, 480), pitch=44, focal=700
)
TINY = 1e-5


def _fit(scene: LatticeScene, lens: Lens, noise: float = 0.0, rng: np.random.Generator | None = None):  # type: ignore[no-untyped-def]  # noqa: ANN202
    places = scene.all_places()
    points = scene.seen(places)
    if rng is not None:
        points = points + rng.normal(0, noise, points.shape)
    return fit_view(points, places, np.full(len(points), noise or TINY), scene.size, lens, Marks())


def test_lens_and_plane_come_back() -> None:
    """Without noise every term, the centre and the homography are found, to 1e-6."""
    fit = _fit(SCENE, Lens(3))

    assert fit.view.radial == pytest.approx(SCENE.radial, abs=1e-6)
    assert fit.view.centre == pytest.approx(SCENE.middle, abs=1e-4)
    truth = SCENE.plane()
    assert fit.view.plane / fit.view.plane[2, 2] == pytest.approx(truth / truth[2, 2], abs=1e-5)


def test_tangential_terms_about_a_held_centre() -> None:
    """With the centre held, p1 and p2 come back."""
    scene = replace(SCENE, centre=(0, 0), tangential=(0.003, -0.002))
    fit = _fit(scene, Lens(3, centre=False))

    assert fit.view.tangential == pytest.approx(scene.tangential, abs=1e-6)
    assert fit.view.radial == pytest.approx(scene.radial, abs=1e-5)


def test_an_independent_lens_agrees() -> None:
    """The model's positions are those of the scene's own camera at 1000 places anywhere, and undone to 1e-8."""
    h = SCENE.plane()
    view = View(h, SCENE.middle, np.array(SCENE.radial), np.array([0.001, 0.002]), SCENE.half)
    places = np.random.default_rng(1).uniform(0, 8, (1000, 2))
    seen = replace(SCENE, tangential=(0.001, 0.002)).seen(places)

    assert view.seen(places) == pytest.approx(seen, abs=1e-9)
    assert view.places(seen) == pytest.approx(places, abs=1e-8)


def test_displacements_within_a_twentieth_of_a_pixel() -> None:
    """12 MP, 39 × 29 dots, 0.01 px of noise: the predicted displacement anywhere on the chart within 0.05 px.

    Anywhere: at 2000 places between and beyond the dots, up to half a pitch off the outermost ones.
    """
    scene = LatticeScene(
        size=(4000, 3000), places=(39, 29), pitch=100, focal=4200, tilt=(2, -3), turn=2, radial=(-0.2, 0.05, -0.01)
    )
    rng = np.random.default_rng(2)
    fit = _fit(scene, Lens(3), 0.01, rng)
    places = rng.uniform([-0.5, -0.5], [38.5, 28.5], (2000, 2))
    truth = scene.distorted(scene.ideal(places)) - scene.ideal(places)
    ideal = fit.view.ideal(places)
    off = fit.view.distorted(ideal) - ideal - truth

    assert np.sqrt(np.mean(off**2)) <= 0.05
    assert np.abs(off).max() <= 0.15


def test_the_covariance_is_the_scatter() -> None:
    """Over 60 noises every parameter scatters by its stated u within 30 % (the sample's own scatter is 9 %)."""
    rng = np.random.default_rng(3)
    fits = [_fit(SCENE, Lens(3), 0.02, rng) for _ in range(60)]
    spread = np.std([f.parameters for f in fits], axis=0)
    stated = np.sqrt(np.mean([np.diag(f.covariance) for f in fits], axis=0))

    assert spread / stated == pytest.approx(1.0, abs=0.3)
    assert np.mean([f.scatter for f in fits]) == pytest.approx(1.0, abs=0.05)


def test_a_bent_chart_counts_for_more_than_its_rms() -> None:
    """Residuals that go together leave more doubt than the same rms of noise: at least twice as much."""
    places = SCENE.all_places()
    bend = 0.2 * np.sin(places[:, :1] / 1.2) * np.array([[1.0, 0.5]])
    rng, u = np.random.default_rng(4), np.full(len(places), 0.02)
    bent = fit_view(SCENE.seen(places) + bend, places, u, SCENE.size, Lens(2), Marks())
    rms = float(np.sqrt(np.mean(bent.residuals**2)))
    noisy = SCENE.seen(places) + rng.normal(0, rms, places.shape)
    plain = fit_view(noisy, places, u, SCENE.size, Lens(2), Marks())

    assert bent.excess > 2 * plain.excess


@pytest.mark.parametrize("radius", [0.15, 0.35])
def test_the_shift_of_a_disc_is_that_of_its_centre_of_area(radius: float) -> None:
    """Against sums over a fine grid of the disc, weighted with the area that each cell takes in the frame.

    (J. Heikkilä 2000 gives the same in closed form for a homography.)
    """
    scene = replace(SCENE, tilt=(25, -20), radial=(-0.3, 0.1))
    view = View(scene.plane(), scene.middle, np.array(scene.radial), np.zeros(2), scene.half)
    place = np.array([[1.0, 2.0]])
    y, x = np.mgrid[-1:1:201j, -1:1:201j]
    inside = x**2 + y**2 < 1
    cells = place + radius * np.column_stack([x[inside], y[inside]])
    e = 1e-5
    across = (scene.seen(cells + np.array([e, 0])) - scene.seen(cells - np.array([e, 0]))) / (2 * e)
    down = (scene.seen(cells + np.array([0, e])) - scene.seen(cells - np.array([0, e]))) / (2 * e)
    area = np.abs(across[:, 0] * down[:, 1] - across[:, 1] * down[:, 0])
    centre = (scene.seen(cells) * area[:, None]).sum(axis=0) / area.sum()
    (shift,) = shifts_of_marks(view, place, Marks("discs", radius))

    assert np.hypot(*shift) > 0.02
    assert shift == pytest.approx(centre - scene.seen(place)[0], abs=0.03 * float(np.hypot(*shift)))


def test_lines_stay_straight_without_a_lens() -> None:
    """A homography alone moves no crossing of two lines."""
    view = View(SCENE.plane(), SCENE.middle, np.zeros(1), np.zeros(2), SCENE.half)

    assert np.abs(shifts_of_marks(view, SCENE.all_places(), Marks("crossings", 0.3))).max() < 1e-9


def test_too_few_points() -> None:
    """Ten points do not determine 13 parameters with something left over."""
    places = SCENE.all_places()[:10]

    with pytest.raises(ViewLost, match="10 points do not determine 13 parameters"):
        fit_view(SCENE.seen(places), places, np.full(10, 0.01), SCENE.size, Lens(3), Marks())


def test_a_wide_lens_that_is_no_polynomial() -> None:
    """An equidistant lens (r = f θ) of 110° over 12 MP: six radial terms leave 0.05 px at most, and find its middle."""
    y, x = np.mgrid[0:29, 0:39]
    places = np.column_stack([x.ravel(), y.ravel()]).astype(np.float64)
    half, widest = 2500.0, np.radians(55.0)
    tangents = (places - [19, 14]) / np.hypot(19, 14) * np.tan(widest) * 0.98
    r = np.hypot(*tangents.T)
    points = tangents * (half / widest * np.arctan(r) / np.maximum(r, 1e-12))[:, None] + [2000.0, 1500.0]
    fit = fit_view(points, places, np.full(len(points), 0.01), (4000, 3000), Lens(6), Marks())

    assert np.abs(fit.residuals).max() < 0.05
    assert fit.view.centre == pytest.approx([2000, 1500], abs=0.01)
