"""Centre, obliqueness and bending of a star, against closed-form scenes and the law of a centre that is off."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.special import j0

from runner.measure.numerics.star_geometry import Geometry, geometry, refine, ring_pixels
from tests.scenes.stars import StarScene


def _refined(scene: StarScene, start: tuple[float, float], stretch: tuple[float, float] = (0.0, 0.0)) -> Geometry:
    light = scene.light(np.random.default_rng(5))
    begun = geometry(scene.cycles, start, 0.95 * scene.outer, stretch)
    return refine(lambda x, y: (light[y, x], None), light.shape, begun, 0.46)[0]


def test_a_centre_that_is_off_is_found() -> None:
    """From 1 px off, 0.08 of a cycle at the border, the centre comes out within 0.003 px; its doubt is below 0.002."""
    scene = StarScene(noise=0.01)
    for dx, dy in ((1.0, 0.0), (-0.7, 0.7)):
        found = _refined(scene, (159.8 + dx, 149.3 + dy))
        assert found.centre == pytest.approx((159.8, 149.3), abs=0.003)
        assert found.doubt < 0.002


def test_an_oblique_view_and_bending_are_found() -> None:
    """A ratio of diameters of 1.098 comes out within 1e-4, a bending of 1.5 px within 0.02 px."""
    scene = StarScene(affine=((1.06, 0.03), (0.0, 0.97)))
    ratio = float(np.divide(*np.linalg.svd(np.array(scene.affine), compute_uv=False)))
    bent = _refined(StarScene(bend=1.5), (160.0, 149.0))

    assert _refined(scene, (160.0, 149.0), (-0.04, -0.02)).ratio == pytest.approx(ratio, abs=1e-4)
    assert bent.bend[1] * bent.outer == pytest.approx(1.5 * (bent.outer / 140) ** 2, abs=0.02)
    assert bent.centre == pytest.approx((159.8, 149.3), abs=0.003)


def test_reversed_contrast_is_no_error_of_the_geometry() -> None:
    """Stripes within 60 px with dark and bright exchanged, as defocus leaves them, do not move the centre."""
    scene = StarScene()
    light = scene.light()
    y, x = np.indices(light.shape) + 0.5
    inner = np.hypot(x - scene.centre[0], y - scene.centre[1]) < 60
    light[inner] = 1 - light[inner]
    found = refine(lambda c, r: (light[r, c], None), light.shape, geometry(72, (160.5, 149.0), 130.0), 0.46)[0]

    assert found.centre == pytest.approx((159.8, 149.3), abs=0.005)
    assert found.left < 0.05


@pytest.mark.parametrize(("offset", "kept"), [(0.1, 0.97548), (0.25, 0.85163), (0.5, 0.47200)])
def test_a_centre_that_is_off_costs_what_the_law_says(offset: float, kept: float) -> None:
    """Phases of a geometry that is off by ε lose J0(2π f ε) over a circle (Birch and Griffin 2015 at 0.5).

    The circle is read where f is 0.5 cy/px, without any picture; 1e-4 is the printed digits'.
    """
    true = geometry(144, (0.0, 0.0), 500.0)
    off = replace(true, centre=(offset, 0.0))
    turn = np.linspace(0, 2 * np.pi, 20_000, endpoint=False)
    r = 144 / np.pi
    lead = off.at(r * np.cos(turn), r * np.sin(turn))[0] - true.at(r * np.cos(turn), r * np.sin(turn))[0]

    assert abs(np.exp(1j * lead).mean()) == pytest.approx(kept, abs=5e-4)
    assert j0(np.pi * offset) == pytest.approx(kept, abs=1e-4)


def test_frequencies_are_the_gradient_of_the_phase() -> None:
    """Local frequency agrees with finite differences of the phase, for an oblique bent star, within 1e-5 cy/px."""
    at = replace(geometry(72, (3.0, -2.0), 200.0, (0.05, -0.03)), bend=np.array([0.004, -0.003, 0.002, 0.001]))
    x, y = np.array([40.0, -90.0, 10.0]), np.array([30.0, 20.0, -120.0])
    step = 1e-4
    gx, gy = (
        (at.at(x + step * dx, y + step * dy)[0] - at.at(x - step * dx, y - step * dy)[0]) / (2 * step)
        for dx, dy in ((1, 0), (0, 1))
    )

    assert np.hypot(gx, gy) / (2 * np.pi) == pytest.approx(at.at(x, y)[1], rel=5e-3)


def test_pixels_of_rings_are_taken_once() -> None:
    """All pixels of thin rings, an even part of large ones, none twice, none outside the picture or the rings."""
    edges = np.geomspace(10.0, 400.0, 60)
    x, y = ring_pixels((700, 900), (450.2, 350.7), edges, 800)
    r = np.hypot(x - 450.2, y - 350.7)

    assert len(set(zip(x.tolist(), y.tolist(), strict=True))) == x.size
    assert (x.min(), y.min()) >= (0, 0)
    assert x.max() < 900
    assert y.max() < 700
    assert r.min() >= 9
    assert r.max() <= 401
    inner = np.count_nonzero((r >= 10) & (r < 40))
    assert inner == pytest.approx(np.pi * (40**2 - 10**2), rel=0.02)
    counts = np.histogram(r, edges)[0][-20:-8]
    assert 500 < counts.min() <= counts.max() < 1300
