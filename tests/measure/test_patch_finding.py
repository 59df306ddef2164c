"""What targets of patches share: options in words, clear middles as whole pixels, and what a region shows at all."""

from typing import Any

import numpy as np
import pytest

from runner.capture.frame import Box, Frame
from runner.errors import MeasurementRefused
from runner.measure.patch_finding import PatchOptions, boxes_of, candidates
from runner.spec.model import Camera
from tests.scenes.patches import PatchChart, Recorder, grey

CAMERA = Camera(400, 300, 12, 64, 4095)
BOX = Box(0, 0, 400, 300)
CHART = PatchChart(
    grey(np.random.default_rng(4).uniform(0.05, 0.9, 12).tolist()), 4, (400, 300), pitch=(84, 84), gap=0.1, turned=4
)


def _frame(light: np.ndarray) -> Frame:
    return Frame("a.tif", "", "", Recorder(read=0.001).codes(light, np.random.default_rng(1))[0])


@pytest.mark.parametrize("margin", [0.1, "20 %", 0.35])
def test_clear_middles_keep_their_margin(margin: float | str) -> None:
    """Of patches turned by 4° the clear middle is upright, inside its patch, and as large as the margin lets it be.

    An upright square in one that is turned by t has the side 1 / (cos t + sin t) of it; whole px and the place of the
    patch take up to 7 px more off.
    """
    (first, *_) = candidates(_frame(CHART.light()), BOX, CAMERA, PatchOptions(layout="4 x 3", margin=margin))
    share = 1 - 2 * (0.2 if margin == "20 %" else float(margin))
    side = 84 * 0.9 * share / (np.cos(np.radians(4)) + np.sin(np.radians(4)))
    for box, centre in zip(first.boxes, CHART.centres(), strict=True):
        assert (box.x0 + box.x1) / 2 == pytest.approx(centre[0], abs=7)
        assert (box.y0 + box.y1) / 2 == pytest.approx(centre[1], abs=7)
        assert box.x1 - box.x0 == pytest.approx(side, abs=7)
    assert boxes_of(first.points) == first.boxes
    assert first.layout == (4, 3)


@pytest.mark.parametrize(
    ("light", "cause", "said"),
    [
        (np.full((300, 400, 1), 1e-4), "too dark", "of the range over the black level"),
        (np.full((300, 400, 1), 2.0), "too bright", "100 % of the region's pixels lie at the white level"),
        (np.full((300, 400, 1), 0.4), "no modulation", "the region is even: its light scatters by"),
    ],
)
def test_what_shows_nothing_is_refused(light: np.ndarray, cause: str, said: str) -> None:
    """Dark, white and even regions each have their own cause."""
    with pytest.raises(MeasurementRefused, match=said) as refused:
        candidates(_frame(light), BOX, CAMERA, PatchOptions(layout=(4, 3)))
    assert refused.value.cause == cause


def test_named_places_stay_inside() -> None:
    """A named patch that is too small, or reaches over the region's border, is refused with its place."""
    frame = _frame(CHART.light())
    with pytest.raises(MeasurementRefused, match=r"the clear middle of a patch is 6 × 6 px; 8 × 8 px is needed"):
        candidates(frame, BOX, CAMERA, PatchOptions(places=[(0.3, 0.3), (0.6, 0.6)], patch=(0.028, 0.038)))
    with pytest.raises(MeasurementRefused, match=r"the patch at 2 %, 30 % reaches over the region's border"):
        candidates(frame, BOX, CAMERA, PatchOptions(places=[(0.02, 0.3), (0.6, 0.6)], patch=(0.1, 0.1)))


@pytest.mark.parametrize(
    ("asked", "said"),
    [
        ({}, "the patches' places are not known"),
        ({"layout": "1 x 1"}, "layout is 1 x 1; allowed are 2 to 400 patches"),
        ({"layout": "6 x 4", "places": [[0.5, 0.5]]}, "not both"),
        ({"layout": "6 x 4", "margin": "60 %"}, "margin is '60 %'; allowed is 5 % to 40 %"),
        ({"places": ["a", "b"], "patch": [0.1, 0.1]}, "place 1 is 'a'; allowed is a pair"),
        ({"places": [[0.5, 0.5]], "patch": [0.1, 0.1]}, "places names 1 patches; allowed are 2 to 400"),
    ],
)
def test_options_are_held_to_their_meaning(asked: dict[str, Any], said: str) -> None:
    """Each wrong option is told with what is allowed."""
    with pytest.raises(ValueError, match=said):
        PatchOptions(**asked)
