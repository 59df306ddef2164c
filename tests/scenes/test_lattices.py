"""The drawn lattices themselves: discs lie where their closed form says, and the lens can be undone."""

import numpy as np
import pytest

from tests.scenes.lattices import LatticeScene


def test_a_discs_centre_of_area_is_its_closed_form() -> None:
    """Upright discs of a flat chart: the light that each takes away has its centre within 0.001 px of the place."""
    scene = LatticeScene(pitch=24.3, shift=(0.37, -0.21))
    taken = scene.bright - scene.dots()
    for x, y in scene.seen(scene.all_places())[[0, 40, 116]]:
        rows, columns = slice(int(y) - 12, int(y) + 13), slice(int(x) - 12, int(x) + 13)
        part = taken[rows, columns]
        at_y, at_x = (np.arange(s.start, s.stop) + 0.5 for s in (rows, columns))
        centre = (part.sum(axis=0) @ at_x / part.sum(), part.sum(axis=1) @ at_y / part.sum())
        assert centre == pytest.approx((x, y), abs=1e-3)
        area = part.sum() / (scene.bright - scene.dark)
        assert area == pytest.approx(np.pi * (scene.radius * scene.pitch) ** 2, rel=1e-3)


@pytest.mark.parametrize("radial", [(-0.1, 0.02), (0.2,)])
def test_the_lens_can_be_undone(radial: tuple[float, ...]) -> None:
    """Places go into the frame and come back within 1e-6 of a pitch, with tangential terms too."""
    scene = LatticeScene(radial=radial, tangential=(0.002, -0.003), tilt=(5, 8), turn=20, centre=(7, -5))
    places = scene.all_places()

    assert scene.places_at(scene.seen(places)) == pytest.approx(places, abs=1e-6)
