"""Painted charts are seen as closed forms say: edges, distortion, colours of a lens, and charts seen from behind."""

import numpy as np
import pytest

from runner.rehearse.optics import Transfer
from runner.rehearse.painting import Lens, Seen, blurred, picture, round_transfer
from runner.rehearse.scene import Picture
from tests.scenes.black_areas import BlackScene

SHARP = 0.2
"""A lens so fast that diffraction leaves 98 % at half a cycle per px: a Gaussian alone is left to compare with."""


def gaussian(sigma_px: float) -> Transfer:
    """Return a system of a Gaussian and a full pixel, diffraction away."""
    return Transfer(SHARP, 0.05, 0.0, sigma_px, 1.0)


def black(left: float, top: float, right: float, bottom: float) -> "Hole":
    """Return the painter of a black rectangle."""
    return Hole(left, top, right, bottom)


class Hole:
    """A black rectangle in a bright field."""

    def __init__(self, left: float, top: float, right: float, bottom: float) -> None:
        """Keep its borders, mm."""
        self.sides = left, top, right, bottom

    def __call__(self, x: Picture, y: Picture, side: float) -> Picture:
        """Return the mean light of cells."""
        left, top, right, bottom = self.sides
        across = np.clip(0.5 + np.minimum(x - left, right - x) / side, 0, 1)
        down = np.clip(0.5 + np.minimum(y - top, bottom - y) / side, 0, 1)
        return np.asarray(1 - across * down)


def test_a_rectangle_is_seen_as_its_closed_form_says() -> None:
    """Blur and pixels of a black area: error functions (Abramowitz and Stegun 7.1), to a thousandth of the step."""
    scene = BlackScene(size=(60, 50), area=(20.3, 15.7, 40.1, 34.2), white=1.0, own=0.0, glare=0.0, sigma=0.8)
    seen = Seen(60, 50, 1.0, gaussian(0.8))

    found = picture(black(20.3 - 30, 15.7 - 25, 40.1 - 30, 34.2 - 25), seen, cells=5)

    assert found.shape == (50, 60)
    assert np.abs(found - scene.light()).max() < 2e-3


def test_distortion_is_undone_where_it_is_done() -> None:
    """Heights seen are the ideal ones × (1 + k1 · height²): the model written out, for barrel and pincushion."""
    ideal = np.linspace(0, 310, 200)
    for k1 in (-0.08, -0.01, 0.0, 0.08):
        lens = Lens(k1, 300.0, (1.004, 1.0, 0.997))
        for colour, scale in enumerate(lens.colours):
            seen = scale * ideal * (1 + k1 * (ideal / 300) ** 2)
            assert np.allclose(lens.ideal(seen, colour), ideal, atol=1e-9)


def test_a_chart_from_behind_is_the_picture_mirrored() -> None:
    """Left and right change places, up and down do not."""
    paint = black(4.0, -9.0, 14.0, -3.0)
    plain, turned = (picture(paint, Seen(48, 40, 1.0, gaussian(0.6), mirrored=m)) for m in (False, True))

    assert np.allclose(turned, plain[:, ::-1], atol=1e-9)
    assert not np.allclose(turned, plain[::-1], atol=0.1)


def test_a_colours_magnification_moves_edges_outwards() -> None:
    """A border 15 px from the middle lies 15 × 0.01 px farther out in a colour magnified by 1.01: by its light."""
    seen = Seen(48, 40, 1.0, gaussian(0.6), Lens(0.0, 30.0, (1.01, 1.0, 1.0)))
    paint = black(-60.0, -60.0, 15.0, 60.0)

    red, green = (picture(paint, seen, colour=colour, cells=5)[20].sum() for colour in (0, 1))

    assert green - red == pytest.approx(0.15, abs=2e-3)


def test_light_is_kept() -> None:
    """Blur moves light about and makes none: the mean over the torus stays, whatever the system."""
    fine = np.random.default_rng(1).random((96, 84))

    soft = blurred(fine, Transfer(2.4, 0.55, 12.0, 1.2, 3.0), 3)

    assert soft.mean() == pytest.approx(fine.mean(), rel=1e-12)
    assert soft.std() < 0.5 * fine.std()


def test_the_round_part_is_the_system_along_a_row_without_its_pixel() -> None:
    """The two forms of one transfer function agree, the one by its table to 1e-5."""
    system = Transfer(2.4, 0.55, 8.0, 1.2, 3.0)
    f = np.linspace(0.01, 0.9, 50)

    assert np.allclose(round_transfer(system, f) * np.sinc(f), system.along(f, 0.0), atol=1e-5)
