"""Steps are found in any view of their chart, and a chart that does not lie as stated ends with the sentence why."""

from typing import Any

import numpy as np
import pytest
from skimage import data

from runner.errors import UsageError
from runner.measure.contract import Found, NotFound
from runner.measure.patch_finding import boxes_of
from runner.measure.targets import grey_steps
from tests.measure.patch_samples import camera_of, located
from tests.scenes.patches import PatchChart, Recorder, grey, wedge

STEPS = wedge(20, 0.1)
GRID = {"layout": "5 x 4", "reflectance": list(STEPS)}
ROW = {"layout": [20, 1], "density": [round(float(-np.log10(light)), 6) for light in STEPS]}


def _chart(**more: Any) -> PatchChart:
    known: dict[str, Any] = {"columns": 5, "size": (480, 340), "pitch": (76, 64), "gap": 0.1, "ground": (0.3,)}
    return PatchChart(grey(more.pop("lights", STEPS)), **(known | more))


def _seen(
    chart: PatchChart, options: dict[str, Any] | None = None, recorder: Recorder | None = None, gain: float = 1.0
) -> Found | NotFound:
    recorder = recorder or Recorder()
    codes = recorder.codes(gain * chart.light(), np.random.default_rng(1))[0]
    return located(grey_steps, codes, camera_of(chart, recorder), options or GRID)


@pytest.mark.parametrize(
    "chart",
    [
        _chart(),
        _chart(turned=6, keystone=(0.02, -0.02)),
        _chart(middle=(255, 160), ground=(0.9,), gap=0.0),
        _chart(slope=0.2, ground=(0.02,), gap=0.2),
        PatchChart(grey(STEPS), 20, size=(800, 130), turned=3, ground=(0.9,)),
    ],
    ids=["plain", "turned", "white paper", "shaded", "row"],
)
@pytest.mark.parametrize("recorder", [Recorder(), Recorder(tone="srgb", bits=8, black=0, white=255, read=0.004)])
def test_every_clear_middle_lies_in_its_patch(chart: PatchChart, recorder: Recorder) -> None:
    """In each view, linear or in sRGB, all corners of the clear middles lie within their own patches."""
    found = _seen(chart, ROW if chart.columns == 20 else GRID, recorder)

    assert isinstance(found, Found), getattr(found, "because", "")
    reach = (1 - chart.gap) / 2
    for n, box in enumerate(boxes_of(found.points["patches"])):
        i, j = divmod(n, chart.columns)
        corners = np.array([(j + a, i + b) for a in (0.5 - reach, 0.5 + reach) for b in (0.5 - reach, 0.5 + reach)])
        low, high = chart.at(corners)[[0, 3]]
        assert box.x0 > min(low[0], high[0]) - 2, n
        assert box.x1 < max(low[0], high[0]) + 2, n
        assert box.y0 > min(low[1], high[1]) - 2, n
        assert box.y1 < max(low[1], high[1]) + 2, n
    assert found.geometry["light 1"] == pytest.approx(STEPS[0], rel=1e-4)


def test_a_mosaics_steps_and_named_places() -> None:
    """A mosaic's chart is found as well; patches at named places are taken from there, a fifth kept clear."""
    colour = PatchChart(tuple((light,) * 3 for light in STEPS), 5, (480, 340), pitch=(76, 64), ground=(0.3, 0.3, 0.3))
    assert isinstance(_seen(colour, GRID, Recorder(mosaic="GRBG")), Found)
    places = [[f"{25 + 50 * (n % 2)} %", f"{25 + 50 * (n // 2)} %"] for n in range(4)]
    asked = {"places": places, "patch": ["30 %", "40 %"], "reflectance": [0.8, 0.4, 0.2, 0.1]}
    chart = _chart(lights=(0.8, 0.4, 0.2, 0.1), columns=2, pitch=(240, 170), gap=0.3)
    found = _seen(chart, asked)

    assert isinstance(found, Found)
    first = boxes_of(found.points["patches"])[0]
    assert (first.x0, first.y0, first.x1, first.y1) == (77, 45, 163, 125)


DISORDER = (*STEPS[:7], STEPS[12], *STEPS[8:12], STEPS[7], *STEPS[13:])


@pytest.mark.parametrize(
    ("chart", "options", "gain", "cause", "said"),
    [
        (_chart(lights=STEPS[::-1]), GRID, 1, "another scene", "as if the chart were turned by 180°"),
        (
            _chart(lights=[STEPS[5 * (n // 5) + 4 - n % 5] for n in range(20)]),
            GRID,
            1,
            "another scene",
            "as if the chart were mirrored left to right",
        ),
        (
            PatchChart(grey(STEPS[::-1]), 20, size=(800, 130)),
            ROW,
            1,
            "another scene",
            "as if the chart were turned by 180° or mirrored",
        ),
        (_chart(lights=DISORDER), GRID, 1, "another scene", "patch 8 must be brighter than patch"),
        (_chart(), {"layout": "4 x 5", "reflectance": list(STEPS)}, 1, "another scene", "lies on its side: 5 × 4"),
        (_chart(lights=STEPS[:16], columns=4), GRID, 1, "another scene", "not in the order that the spec states"),
        (_chart(middle=(350, 170)), GRID, 1, "another scene", "not in the order"),
        (_chart(), GRID, 0.0, "too dark", "of the range over the black level; 0.2 % is needed"),
        (_chart(), GRID, 100.0, "too bright", "100 % of the region's pixels lie at the white level"),
        (_chart(lights=(0.5,) * 20, ground=(0.5,)), GRID, 1, "no modulation", "the region is even"),
        (_chart(pitch=(38, 32)), GRID, 1, "another scene", "no grid of 5 × 4"),
        (
            _chart(size=(70, 50), pitch=(13, 11), gap=0.0),
            GRID,
            1,
            "outside the estimator's limits",
            "the clear middle of a patch is",
        ),
    ],
    ids=[
        "upside down",
        "mirrored",
        "row turned",
        "wrong order",
        "on its side",
        "wrong chart",
        "moved",
        "lamp off",
        "overexposed",
        "no chart",
        "too far",
        "too small",
    ],
)
def test_staged_bad_captures(chart: PatchChart, options: dict[str, Any], gain: float, cause: str, said: str) -> None:
    """Each staged bad capture is no chart, with its cause and the sentence that says why."""
    found = _seen(chart, options, Recorder(read=0.001), gain)

    assert isinstance(found, NotFound)
    assert found.cause == cause
    assert said in found.because


def test_a_covered_chart_and_a_blurred_one() -> None:
    """A sheet over a third of the chart is another scene; blur of half a patch blames nobody: no sharp border."""
    from scipy import ndimage

    chart = _chart()
    covered = chart.light()
    covered[:, 300:] = 0.6
    blurred = ndimage.gaussian_filter(chart.light(), (40, 40, 0))
    rng, recorder = np.random.default_rng(3), Recorder()
    found = [
        located(grey_steps, recorder.codes(light, rng)[0], camera_of(chart, recorder), GRID)
        for light in (covered, blurred)
    ]

    assert [getattr(one, "cause", "") for one in found] == ["another scene", "no modulation"]
    assert "no sharp border is in it" in getattr(found[1], "because", "")


@pytest.mark.parametrize("name", ["camera", "moon", "page", "clock"])
def test_photographs_are_refused(name: str) -> None:
    """No photograph passes for a chart of steps."""
    codes = getattr(data, name)().astype(np.uint16)
    camera = camera_of(_chart(size=(codes.shape[1], codes.shape[0])), Recorder(bits=8, black=0, white=255))

    assert isinstance(located(grey_steps, codes, camera, GRID), NotFound)


@pytest.mark.parametrize(
    ("asked", "said"),
    [
        ({"reflectance": [0.5, 0.1]}, "the patches' places are not known: write layout"),
        ({"layout": "2 x 1"}, "the patches' light is not known: write density: or reflectance:, not both"),
        ({"layout": "2 x 1", "density": [0.1, 0.2, 0.3]}, "density names 3 patches, the chart has 2"),
        ({"layout": "2 by 1", "density": [0.1, 0.2]}, "layout is '2 by 1'; allowed is columns x rows"),
        ({"layout": "2 x 1", "density": [0.1, 9]}, r"density 2 is 9; allowed is -0.3 to 6"),
        ({"places": [[0.1, 0.1], [0.5, 0.5]], "density": [0.1, 0.2]}, "places: needs patch: too"),
    ],
)
def test_options_are_held_to_their_meaning(asked: dict[str, Any], said: str) -> None:
    """What is missing, too much or outside is told with what is allowed."""
    with pytest.raises(UsageError, match=said):
        grey_steps.read_options(asked)
