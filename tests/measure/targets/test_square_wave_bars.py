"""Bar groups are found where they are; what holds no bars is told."""

import numpy as np
import pytest

from runner.capture.frame import Frame
from runner.measure.contract import Found, NotFound
from runner.measure.targets import square_wave_bars as target
from runner.spec.model import Amount, Camera, Region
from tests.scenes.bars import SquareScene, Values

CAMERA = Camera(width=300, height=200, bit_depth=12, black_level=64, white_level=4095)


def _region(x: float, y: float, w: float, h: float, name: str = "group") -> Region:
    return Region(name, (Amount(x, "px"), Amount(y, "px")), (Amount(w, "px"), Amount(h, "px")))


def _frame(light: Values) -> Frame:
    return Frame("s.tif", "", "", np.round(64 + 4031 * light).clip(0, 4095).astype(np.uint16))


def test_each_region_has_its_own_bars() -> None:
    """Two groups of one frame, each found within half a period over its region, though harmonics are strong."""
    light = np.full((200, 300), 0.5)
    light[20:120, 20:140] = SquareScene((120, 100), (0.04, 0.01), sigma=0.3).light()
    light[50:150, 160:280] = SquareScene((120, 100), (-0.03, 0.31)).light()
    regions = [_region(80, 70, 120, 100, "coarse"), _region(220, 100, 120, 100, "fine")]
    coarse, fine = target.locate([_frame(light)], regions, CAMERA, target.Options())

    assert isinstance(coarse, Found)
    assert isinstance(fine, Found)
    assert coarse.geometry["frequency_x"] == pytest.approx(0.04, abs=0.5 / 120)
    assert fine.geometry["frequency_y"] == pytest.approx(0.31, abs=0.5 / 100)


@pytest.mark.parametrize(
    ("light", "cause", "words"),
    [
        (lambda r: r.normal(0, 1e-4, (200, 300)), "too dark", "of the range over the black level"),
        (lambda _: np.full((200, 300), 0.5), "no picture", "same value"),
        (lambda r: r.normal(0.5, 0.01, (200, 300)), "no modulation", "no line stands out"),
    ],
)
def test_where_there_are_no_bars(light: object, cause: str, words: str) -> None:
    """A dark, a constant and a merely noisy region are told apart; one over the border is off the frame."""
    assert callable(light)
    frame = _frame(light(np.random.default_rng(1)))
    lost, off = target.locate(
        [frame], [_region(150, 100, 120, 100), _region(290, 100, 60, 40)], CAMERA, target.Options()
    )

    assert isinstance(lost, NotFound)
    assert (lost.cause, words in lost.because) == (cause, True)
    assert isinstance(off, NotFound)
    assert off.cause == "off the frame"
