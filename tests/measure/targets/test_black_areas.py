"""Black areas are offered where they lie; staged bad captures are refused with the sentence that says why."""

import numpy as np
import pytest
from skimage import data

from runner.capture.frame import Frame
from runner.errors import UsageError
from runner.measure.contract import Found, NotFound
from runner.measure.targets import black_areas
from runner.spec.model import Amount, Camera, Region
from tests.scenes.black_areas import BlackScene

CAMERA = Camera(width=120, height=100, bit_depth=12, black_level=64, white_level=4095)
WHOLE = Region("hole", (Amount(60, "px"), Amount(50, "px")), (Amount(120, "px"), Amount(100, "px")))

PHOTOGRAPHS = [
    np.asarray(picture, dtype=np.float64)[100:200, 100:220] / 255
    for picture in (data.camera(), data.coins())  # type: ignore[no-untyped-call]
]


def _frame(light: np.ndarray) -> Frame:
    return Frame("a.tif", "", "", np.clip(np.round(64 + 4031 * light), 0, 4095).astype(np.uint16))


def _locate(light: np.ndarray, region: Region = WHOLE) -> Found | NotFound:
    return black_areas.locate([_frame(light)], (region,), CAMERA, black_areas.read_options({}))[0]


def test_an_area_is_offered_with_its_outline() -> None:
    """Width, height and corners of the area are those of the scene, to a pixel."""
    found = _locate(BlackScene().light())

    assert isinstance(found, Found)
    assert found.offers == frozenset({"black area"})
    assert found.geometry["width"] == pytest.approx(39.8, abs=1.5)
    assert found.outline[0] == pytest.approx((40.3, 30.7), abs=1.0)


@pytest.mark.parametrize(
    ("light", "cause", "words"),
    [
        (np.zeros((100, 120)), "no picture", "every pixel"),
        (BlackScene(white=0.005).light(np.random.default_rng(0)), "too dark", "of the range over black"),
        (BlackScene(white=1.5).light() * 0 + 1.2, "no picture", "every pixel"),
        (BlackScene(glare=0.95).light(), "another scene", "no black area"),
        (BlackScene(area=(-20, 30, 30, 70)).light(), "another scene", "reaches the region's border"),
        (BlackScene(area=(55, 45, 63, 53)).light(), "another scene", "inner part has"),
        (1.0 - BlackScene().light(), "another scene", ""),
        (PHOTOGRAPHS[0], "another scene", ""),
        (PHOTOGRAPHS[1], "another scene", ""),
    ],
)
def test_staged_bad_captures(light: np.ndarray, cause: str, words: str) -> None:
    """Dead, dark, clipped, grey, moved, too small, inverted chart and photographs give no area, each with its cause."""
    found = _locate(light)

    assert isinstance(found, NotFound), found
    assert found.cause == cause
    assert words in found.because


def test_a_region_off_the_frame() -> None:
    """What reaches over the border is said to."""
    region = Region("hole", (Amount(100, "px"), Amount(50, "px")), (Amount(120, "px"), Amount(100, "px")))
    found = _locate(BlackScene().light(), region)

    assert isinstance(found, NotFound)
    assert found.cause == "off the frame"


def test_the_margin_is_kept_inside_its_meaning() -> None:
    """At most four tenths of the shorter side may be kept clear."""
    with pytest.raises(UsageError, match="margin"):
        black_areas.read_options({"margin": "60 %"})
