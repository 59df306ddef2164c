"""Colour patches are found in any view of their chart, and what is none is refused with the sentence why."""

from typing import Any

import numpy as np
import pytest
from skimage import data

from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Found, NotFound
from runner.measure.methods import colour
from runner.measure.patch_finding import boxes_of
from runner.measure.targets import colour_patches
from tests.measure.patch_samples import camera_of, located, sample_of
from tests.scenes.colours import LAB, linear_srgb
from tests.scenes.patches import PatchChart, Recorder, Values

LIGHTS = tuple((float(a), float(b), float(c)) for a, b, c in 0.9 * linear_srgb(LAB))
GRID = {"layout": "6 x 4", "lab": LAB.tolist()}


def _chart(**more: Any) -> PatchChart:
    known: dict[str, Any] = {"columns": 6, "size": (480, 340), "pitch": (72, 72), "gap": 0.1, "ground": (0.04,) * 3}
    return PatchChart(more.pop("lights", LIGHTS), **(known | more))


def _seen(light: Values, options: dict[str, Any] | None = None, **recorder: Any) -> Found | NotFound:
    made = Recorder(**({"read": 0.001} | recorder))
    chart = _chart(size=(light.shape[1], light.shape[0]))
    codes = made.codes(light, np.random.default_rng(1))[0]
    return located(colour_patches, codes, camera_of(chart, made), options or GRID)


@pytest.mark.parametrize("mosaic", ["none", "RGGB"])
@pytest.mark.parametrize(
    "chart",
    [
        _chart(),
        _chart(turned=-6, keystone=(0.02, 0.02)),
        _chart(gap=0.0, ground=(0.8,) * 3),
        _chart(gap=0.2, middle=(250, 160), slope=0.2),
    ],
    ids=["plain", "turned", "white frame", "shaded"],
)
def test_every_clear_middle_lies_in_its_patch(chart: PatchChart, mosaic: str) -> None:
    """In each view, of RGB frames and mosaics, all clear middles lie within their own patches."""
    found = _seen(chart.light(), mosaic=mosaic)

    assert isinstance(found, Found), getattr(found, "because", "")
    reach = (1 - chart.gap) / 2
    for n, box in enumerate(boxes_of(found.points["patches"])):
        i, j = divmod(n, 6)
        low = chart.at(np.array([[j + 0.5 - reach, i + 0.5 - reach]]))[0]
        high = chart.at(np.array([[j + 0.5 + reach, i + 0.5 + reach]]))[0]
        middle = chart.centres()[n]
        assert abs((box.x0 + box.x1) / 2 - middle[0]) < 8, n
        assert abs((box.y0 + box.y1) / 2 - middle[1]) < 8, n
        assert box.x1 - box.x0 < high[0] - low[0], n
    assert found.geometry == {"columns": 6.0, "rows": 4.0}


@pytest.mark.parametrize(
    ("light", "options", "cause", "said"),
    [
        (0 * _chart().light(), GRID, "too dark", "of the range over the black level"),
        (60 * _chart().light() + 2, GRID, "too bright", "of the region's pixels lie at the white level"),
        (np.full((340, 480, 3), 0.4), GRID, "no modulation", "the region is even"),
        (_chart().light(), {"layout": "4 x 6", "lab": LAB.tolist()}, "another scene", "lightness does not follow"),
        (_chart(lights=LIGHTS[:20], columns=5).light(), GRID, "another scene", "lightness does not follow that of lab"),
        (_chart().light()[::-1, ::-1], GRID, "another scene", "as if the chart were turned by 180°"),
        (_chart().light()[:, ::-1], GRID, "another scene", "as if the chart were mirrored left to right"),
        (_chart(pitch=(30, 30)).light(), GRID, "no modulation", "no grid of 6 × 4 even patches"),
        (_chart(middle=(400, 170)).light(), GRID, "another scene", "lightness does not follow"),
        (_chart(size=(80, 60), pitch=(12, 12)).light(), GRID, "outside the estimator's limits", "8 × 8 px is needed"),
        (_chart(turned=25).light(), GRID, "another scene", "no grid of 6 × 4 even patches"),
    ],
    ids=[
        "lamp off",
        "overexposed",
        "no chart",
        "on its side",
        "wrong chart",
        "upside down",
        "mirrored",
        "too far",
        "moved",
        "too small",
        "turned",
    ],
)
def test_staged_bad_captures(light: Values, options: dict[str, Any], cause: str, said: str) -> None:
    """Each staged bad capture is no chart, with its cause and the sentence that says why."""
    found = _seen(light, options)

    assert isinstance(found, NotFound)
    assert found.cause == cause
    assert said in found.because


def test_a_covered_chart_and_a_defocused_one() -> None:
    """A hand over a third of the chart is told by its colours at the latest; blur of half a patch blames nobody."""
    from scipy import ndimage

    covered = _chart().light()
    covered[:, :180] = (0.5, 0.35, 0.3)
    found = _seen(covered)
    if isinstance(found, Found):
        made = Recorder(read=0.001)
        codes, camera = made.codes(covered, np.random.default_rng(1)), camera_of(_chart(), made)
        options = colour.read_options({"lab": LAB.tolist(), "illuminant": "D65"})
        with pytest.raises(MeasurementRefused, match=r"not those of lab:|is not even: its quarters"):
            colour.measure(sample_of(found, codes, camera, channel="green"), options)
    else:
        assert found.cause == "another scene"
    blurred = _seen(ndimage.gaussian_filter(_chart().light(), (36, 36, 0)))
    assert getattr(blurred, "cause", "") == "no modulation"


@pytest.mark.parametrize("name", ["astronaut", "coffee", "chelsea", "rocket"])
def test_photographs_are_refused(name: str) -> None:
    """No photograph passes for a chart of colours."""
    picture = getattr(data, name)().astype(np.uint16)
    chart = _chart(size=(picture.shape[1], picture.shape[0]))
    camera = camera_of(chart, Recorder(bits=8, black=0, white=255))

    assert isinstance(located(colour_patches, picture, camera, GRID), NotFound)


def test_options_are_held_to_their_meaning() -> None:
    """References must be as many as patches, and colours."""
    with pytest.raises(UsageError, match="lab names 24 patches, the chart has 20"):
        colour_patches.read_options({"layout": "5 x 4", "lab": LAB.tolist()})
    with pytest.raises(UsageError, match=r"lab 2 is \[500, 0, 0\]; allowed is \[L\*, a\*, b\*\]"):
        colour_patches.read_options({"layout": "2 x 1", "lab": [[50, 0, 0], [500, 0, 0]]})
