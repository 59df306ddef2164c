"""A wedge is found whichever way it points; another number of lines and the border are told."""

import numpy as np
import pytest

from runner.capture.frame import Frame
from runner.measure.contract import Found, NotFound
from runner.measure.targets import hyperbolic_wedge as target
from runner.spec.model import Amount, Camera, Region
from tests.scenes.wedges import Values, WedgeScene

CAMERA = Camera(width=760, height=760, bit_depth=12, black_level=64, white_level=4095)


def _region(x: float, y: float, w: float, h: float) -> Region:
    return Region("wedge", (Amount(x, "px"), Amount(y, "px")), (Amount(w, "px"), Amount(h, "px")))


def _frame(light: Values) -> Frame:
    return Frame("w.tif", "", "", np.round(64 + 4031 * light).clip(0, 4095).astype(np.uint16))


@pytest.mark.parametrize("towards", range(4))
def test_it_is_found_whichever_way_it_points(towards: int) -> None:
    """In a wider frame, its fine end to the right, left, down or up, and turned back the same picture comes out."""
    wedge = WedgeScene(noise=0.005).light(np.random.default_rng(2))
    shown = {0: wedge, 1: wedge[:, ::-1], 2: wedge.T, 3: wedge.T[::-1]}[towards]
    light = np.full((760, 760), 0.7)
    rows, columns = shown.shape
    light[20 : 20 + rows, 30 : 30 + columns] = shown
    region = _region(30 + columns / 2, 20 + rows / 2, columns, rows)
    (found,) = target.locate([_frame(light)], [region], CAMERA, target.Options())

    assert isinstance(found, Found)
    assert found.geometry["towards"] == towards
    assert np.array_equal(target.turned(shown, towards), wedge)


def test_another_wedge_and_the_border_are_told() -> None:
    """Nine lines where five are stated are no wedge of five; a region over the border is off the frame."""
    light = np.full((760, 760), 0.7)
    light[20:130, 30:730] = WedgeScene(lines=9, ends=(0.12, 0.55)).light()
    regions = [_region(380, 75, 700, 110), _region(700, 75, 700, 110)]
    another, off = target.locate([_frame(light)], regions, CAMERA, target.Options())

    assert isinstance(another, NotFound)
    assert another.cause == "another scene"
    assert isinstance(off, NotFound)
    assert off.cause == "off the frame"
    (nine,) = target.locate([_frame(light)], regions[:1], CAMERA, target.Options(lines=9))
    assert isinstance(nine, Found)
