"""Round marks found in whole frames, among things that are none."""

import numpy as np
import pytest
from skimage import data

from runner.measure.numerics.ring_search import averaged, find_rings
from tests.scenes.chart_views import Patch, Scene, View, edge, ring

PLACES = [(-80.0, -50.0), (60.0, -40.0), (0.0, 0.0), (-40.0, 55.0), (85.0, 50.0)]


def _scene(view: View, *, ink: float = 0.08, ground: float = 0.8, noise: float = 20.0, blur: float = 0.8) -> Scene:
    return Scene([ring(p, 8.0, 4.0, ink, ground) for p in PLACES], ground, view, blur, 0.9, noise, 0.4)


@pytest.mark.parametrize(
    ("view", "ink", "ground"),
    [
        (View(), 0.08, 0.8),
        (View(scale=2.2), 0.08, 0.8),
        (View(keystone=(0.2, 0.1), turn=40, scale=4.5), 0.08, 0.8),
        (View(), 0.7, 0.06),
    ],
    ids=["plain", "small", "tilted", "light on dark"],
)
def test_every_mark_is_found_and_nothing_else(view: View, ink: float, ground: float) -> None:
    """Marks from 18 px on are found within half a px, in light that falls by 40 % over the frame."""
    codes = _scene(view, ink=ink, ground=ground).codes()
    found = find_rings(codes, 0.5, dark=ink < ground, longest=1600)

    assert found.holes.all()
    gaps = np.linalg.norm(view.to_frame(np.array(PLACES))[:, None] - found.centres[None], axis=2)
    assert sorted(gaps.argmin(axis=1)) == [0, 1, 2, 3, 4]
    assert gaps.min(axis=1).max() < 0.5
    assert found.radii == pytest.approx(4.0 * view.scale, rel=0.2)


def test_dots_are_no_rings() -> None:
    """A disc without a hole, a square and an edge are no marks; the disc is told as one whose hole may be lost."""
    disc = Patch((0.0, 0.0), (8.0, 8.0), lambda x, y: np.where(np.hypot(x, y) < 4, 0.08, 0.8))
    square = Patch((40.0, 0.0), (8.0, 8.0), lambda x, y: np.where(np.maximum(abs(x), abs(y)) < 4, 0.08, 0.8))
    codes = Scene([disc, square, edge((-40.0, 0.0), (15.0, 15.0), 5.0, 0.08, 0.8)], noise=10).codes()
    found = find_rings(codes, 0.5, dark=True, longest=1600)

    assert list(found.holes) == [False]
    assert found.centres[0] == pytest.approx((800, 600), abs=0.3)


@pytest.mark.parametrize("name", ["camera", "coins", "text", "brick", "clock"])
def test_photographs_hold_few(name: str) -> None:
    """In photographs hardly anything looks like a mark (pictures of scikit-image)."""
    codes = getattr(data, name)()

    assert find_rings(codes, 0.5, dark=True, longest=1400).holes.sum() <= 3


def test_averaging_keeps_the_light() -> None:
    """Squares are averaged exactly; the rest at the right and lower border is left out."""
    codes = np.arange(7 * 10, dtype=np.uint16).reshape(7, 10)
    small, side = averaged(codes, 4)

    assert (small.shape, side) == ((2, 3), 3)
    assert small[1, 2] == pytest.approx(codes[3:6, 6:9].mean())
