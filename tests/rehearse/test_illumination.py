"""The lens's fall of light follows its law; the right table undoes it, a mirrored one does not."""

import numpy as np
import pytest

from runner.rehearse.illumination import Illumination, gains

LENS = Illumination(1000.0, (40.0, -25.0))


def test_light_falls_by_the_fourth_power_of_the_cosine() -> None:
    """cos⁴ of the angle at the pupil: 25 % at 45°, 56.25 % at 30°; brightest where the axis meets the sensor.

    Source: the cosine-fourth law, in any textbook of optics; the two values are its closed forms.
    """
    light = Illumination(1000.0).picture(1, 2001)[0]
    x = np.arange(2001) + 0.5 - 1000.5

    assert np.interp(1000.0 / np.sqrt(3), x, light) == pytest.approx(0.5625, abs=1e-6)
    assert light[-1] == pytest.approx(0.25, abs=1e-9)
    shifted = LENS.picture(601, 801)
    assert divmod(int(shifted.argmax()), 801) == (300 - 25, 400 + 40)


def test_right_table_makes_the_field_even() -> None:
    """Light times the table is the same everywhere, and no gain is below 1."""
    light = LENS.picture(60, 80)
    table = gains(light, "right")

    assert table is not None
    assert light * table == pytest.approx(light.max(), rel=1e-12)
    assert table.min() == 1.0


def test_mirrored_table_doubles_what_is_uneven_from_left_to_right() -> None:
    """Corrected light at a place over that at its mirror image is the square of the lens's own ratio."""
    light = LENS.picture(60, 80)
    table = gains(light, "mirrored")
    assert table is not None

    left_right = (light * table) / (light * table)[:, ::-1]

    assert left_right == pytest.approx((light / light[:, ::-1]) ** 2, rel=1e-12)
    assert left_right[0, 0] < 0.99
    assert gains(light, "none") is None
