"""Stripes are found where they are, and real photographs are not taken for stripes."""

import numpy as np
import pytest

from runner.capture.frame import Frame
from runner.measure.contract import Found, NotFound
from runner.measure.targets import sinusoidal_grating as target
from runner.spec.model import Amount, Camera, Region
from tests.scenes.gratings import GratingScene

CAMERA = Camera(width=300, height=200, bit_depth=12, black_level=64, white_level=4095)


def _region(x: float, y: float, w: float, h: float, name: str = "patch") -> Region:
    return Region(name, (Amount(x, "px"), Amount(y, "px")), (Amount(w, "px"), Amount(h, "px")))


def _frame(light: np.ndarray) -> Frame:
    return Frame("s.tif", "", "", np.round(64 + 4031 * light).astype(np.uint16))


def test_each_region_has_its_own_stripes() -> None:
    """Two patches of one frame, different in frequency and orientation, each give a start within half a period."""
    light = np.full((200, 300), 0.5)
    light[20:120, 20:140] = GratingScene((120, 100), (0.11, 0.02)).light()
    light[50:150, 160:280] = GratingScene((120, 100), (-0.03, 0.21)).light()
    regions = [_region(80, 70, 120, 100, "left"), _region(220, 100, 120, 100, "right")]
    left, right = target.locate([_frame(light)], regions, CAMERA, target.Options())

    assert isinstance(left, Found)
    assert isinstance(right, Found)
    assert left.geometry["frequency_x"] == pytest.approx(0.11, abs=0.5 / 120)
    assert right.geometry["frequency_y"] == pytest.approx(0.21, abs=0.5 / 100)
    assert right.outline[0] == (160.0, 50.0)


def test_a_region_over_the_border_is_not_there() -> None:
    """The sentence says where it reaches; what is left of it stays as its box for the picture."""
    (lost,) = target.locate([_frame(np.full((200, 300), 0.5))], [_region(290, 100, 60, 40)], CAMERA, target.Options())

    assert isinstance(lost, NotFound)
    assert (lost.cause, lost.box is not None) == ("off the frame", True)
    assert "to column 320, row 120 of a frame of 300 × 200 px" in lost.because


def test_faint_stripes_in_noise_are_found() -> None:
    """2 % modulation under noise of 2 % of the level stands out of a patch of 120 × 100 px."""
    scene = GratingScene((300, 200), (0.08, 0.01), modulation=0.02, noise=0.01)
    light = scene.light(np.random.default_rng(8))

    (found,) = target.locate([_frame(light)], [_region(150, 100, 120, 100)], CAMERA, target.Options())
    assert isinstance(found, Found)
