"""The rendered stripes: a sine of the stated frequency, direction, place and transfer, and nothing but grey around."""

import numpy as np
import pytest

from runner.rehearse.gratings import Patch, StripeChart, frequency_of, picture, transfer_of
from runner.rehearse.optics import Transfer
from runner.rehearse.scene import View

VIEW = View(300, 240, 0.45, shift_px=(3.3, -2.1), turn=0.4)
SYSTEM = Transfer(4.0, 0.55, 12.0, 1.5, 4.5)
PATCH = Patch(5.0, -4.0, 70.0, 1.8, 30.0)
CHART = StripeChart(0.5, 0.6, {"only": PATCH})


def _inside(light: np.ndarray, reach: int = 40) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return the middle of the patch with its pixels' places from the patch's centre, px."""
    x, y = VIEW.place(PATCH.square)
    rows, columns = np.mgrid[: VIEW.rows, : VIEW.columns]
    dx, dy = columns + 0.5 - VIEW.columns / 2 - x, rows + 0.5 - VIEW.rows / 2 - y
    near = (np.abs(dx) < reach) & (np.abs(dy) < reach)
    return light[near], dx[near], dy[near]


def test_stripes_are_the_sine_that_the_transfer_function_leaves() -> None:
    """Inside the patch the light is level × (1 + modulation × T cos(2π f·r)), a bright stripe at the centre."""
    light, dx, dy = _inside(picture(CHART, VIEW, lambda _x, _y: SYSTEM))
    f, turn = 0.25, np.deg2rad(30.4)
    across = dx * np.cos(turn) + dy * np.sin(turn)
    swing = 0.3 * float(SYSTEM.along(f, 30.4))

    assert light == pytest.approx(0.5 + swing * np.cos(2 * np.pi * f * across), abs=1e-9)


def test_frequency_and_transfer_are_those_of_period_and_direction() -> None:
    """1.8 mm seen by pixels of 0.45 mm are 0.25 cy/px; the pixel's aperture counts in the stripes' own direction.

    At 45° a square pixel's aperture is sinc²(f/√2), along the rows sinc(f): closed forms.
    """
    assert frequency_of(PATCH, VIEW) == pytest.approx(0.25)
    view = View(300, 240, 0.45)
    steep, level = (Patch(0, 0, 70.0, 1.8, angle) for angle in (45.0, 0.0))

    ratio = transfer_of(steep, view, lambda _x, _y: SYSTEM) / transfer_of(level, view, lambda _x, _y: SYSTEM)

    assert ratio == pytest.approx(np.sinc(0.25 / np.sqrt(2)) ** 2 / np.sinc(0.25), rel=1e-9)


def test_ground_is_grey_and_patches_may_hang_over_the_border() -> None:
    """Away from patches there is the stated level; what lies off the sensor is cut off there."""
    chart = StripeChart(0.4, 0.6, {"over": Patch(-67.5, 0.0, 40.0, 4.5, 0.0)})

    light = picture(chart, View(300, 240, 0.45), lambda _x, _y: SYSTEM)

    assert light[:, 200:] == pytest.approx(0.4, abs=1e-4)
    assert np.ptp(light[110:130, :10]) > 0.4 * 0.6 * 1.5  # full swing is twice 0.24, of which 0.9 comes through


def test_beyond_the_cut_off_nothing_is_left() -> None:
    """Stripes finer than diffraction allows leave grey."""
    slow = Transfer(40.0, 0.55, 0.0, 0.0, 4.5)  # cut-off 0.2 cy/px

    light = picture(CHART, VIEW, lambda _x, _y: slow)

    assert light == pytest.approx(0.5, abs=1e-12)
