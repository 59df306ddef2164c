"""A star is found wherever it lies, with its cycles; what is no star is not taken for one."""

import numpy as np
import pytest
import skimage.data

from runner.measure.numerics.star_search import find_star
from tests.scenes.gratings import GratingScene
from tests.scenes.stars import StarScene


@pytest.mark.parametrize(("cycles", "centre"), [(36, (160.3, 149.8)), (100, (148.1, 155.6))])
def test_centre_and_cycles(cycles: int, centre: tuple[float, float]) -> None:
    """Under noise of 4 % of the level: the cycles exactly, the centre within 0.1 px (positions count from pixel 0)."""
    light = StarScene(cycles=cycles, centre=centre, noise=0.02).light(np.random.default_rng(cycles))
    star = find_star((60000 * light).clip(0, 65535).astype(np.uint16))

    assert star is not None
    assert star.cycles == cycles
    assert star.centre == pytest.approx((centre[0] - 0.5, centre[1] - 0.5), abs=0.1)
    assert 130 < star.outer < 146


def test_an_oblique_view_is_told() -> None:
    """Lengths along x 6 % short and along y 3 % long: the stretch is half their difference, within 0.003."""
    light = StarScene(affine=((1.06, 0.0), (0.0, 0.97))).light()
    star = find_star(light)

    assert star is not None
    assert star.cycles == 72
    assert star.stretch == pytest.approx((-(1.06 - 0.97) / 2 / 1.015, 0.0), abs=0.003)


def test_a_dark_frame_beside_it_does_not_draw_the_centre_away() -> None:
    """Black and white borders with gradients stronger than the stripes' leave the centre within 0.1 px."""
    light = StarScene(outer=110).light()
    light[:, :6] = 0.0
    light[290:, :] = 1.0
    star = find_star(light)

    assert star is not None
    assert star.centre == pytest.approx((159.8, 149.3), abs=0.1)


@pytest.mark.parametrize("name", ["camera", "coins", "brick", "grass", "page", "moon", "astronaut", "coffee"])
def test_photographs_hold_no_star(name: str) -> None:
    """Photographs of scikit-image are no stars, whole and cut."""
    picture = getattr(skimage.data, name)()
    grey = picture if picture.ndim == 2 else picture[..., 1]

    assert find_star(grey) is None
    assert find_star(grey[:180, :200]) is None


def test_gratings_and_rings_hold_no_star() -> None:
    """Straight stripes, noise and a picture too small give nothing; of concentric rings the stretch gives them away."""
    y, x = np.indices((300, 320))
    rings = find_star(0.5 + 0.3 * np.cos(np.hypot(x - 160, y - 150)))

    assert find_star(GratingScene((320, 300), (0.05, 0.01)).light()) is None
    assert find_star(np.random.default_rng(1).normal(0.5, 0.02, (300, 320))) is None
    assert find_star(np.ones((20, 20))) is None
    assert rings is None or np.hypot(*rings.stretch) > 0.1
