"""Regions on a chart become boxes in the frame: within what was asked for, or around features looked at whole."""

import numpy as np
import pytest

from runner.measure.chart_placing import in_frame, own_transfer
from runner.measure.contract import Found
from runner.measure.numerics.chart_pose import ChartPose, solve_pose
from runner.spec.chart_model import ChartFile, Feature, Marks
from runner.spec.chart_model import View as Asked
from runner.spec.model import Amount, Camera, Capture, Chart, Optics, Region
from tests.scenes.chart_views import View

MARKS = np.array(
    [(-92, -56), (49, -66), (91, -28), (92, 43), (57, 65), (-52, 64), (-90, 54), (-91, 0), (10, 20)], float
)
FEATURES = {
    "patch": Feature("patch", "flat field", (-40.0, 10.0), (30.0, 20.0), {}, {}, ((0.5, 1.0), (2.0, 0.9)), 0.01),
    "dots": Feature("dots", "dot grid", (40.0, -10.0), (40.0, 60.0), {}),
}
CHART = Chart(file=ChartFile("a", "1", (200, 150), 0.8, 0.1, Marks(8, 4, ()), FEATURES, Asked(), "sha256:"))


def _pose(view: View) -> ChartPose:
    return solve_pose(MARKS, view.to_frame(MARKS), view.size)


def _region(name: str) -> Region:
    one = FEATURES[name]
    position, size = ((Amount(a, "mm"), Amount(b, "mm")) for a, b in (one.position, one.size))
    return Region(name, position, size, None, "chart", name)


def _rim(one: Feature) -> np.ndarray:
    t = np.linspace(-0.5, 0.5, 41)
    sides = [np.column_stack([t, t * 0 + s]) for s in (-0.5, 0.5)]
    rim: np.ndarray = np.asarray(one.position) + np.concatenate([*sides, *[s[:, ::-1] for s in sides]]) * np.asarray(
        one.size
    )
    return rim


@pytest.mark.parametrize("turn", [0.0, 3.0, -20.0, 90.0, 178.0])
@pytest.mark.parametrize("lens", [(0.0, 0.0), (0.2, 0.05)])
def test_a_region_holds_nothing_beyond_it(turn: float, lens: tuple[float, float]) -> None:
    """The box of a patch lies within the patch; upright without distortion it is the patch to a hundredth of a px."""
    view = View(turn=turn, lens=lens, scale=5.0, keystone=(0.02, 0.01))
    (placed,) = in_frame([_region("patch")], _pose(view), CHART)

    (x, y), (w, h) = ([part.value for part in pair] for pair in (placed.position, placed.size))
    t = np.linspace(-0.5, 0.5, 41)
    box = np.array([(x + a * w, y + b * h) for a in t for b in t])
    inside = np.abs(view.to_chart(box) - FEATURES["patch"].position) / np.array(FEATURES["patch"].size)
    assert inside.max() < 0.5 + 0.3 / 100  # 0.3 px of 100 px
    assert (placed.on, placed.position[0].unit) == ("frame", "px")
    assert view.to_frame(np.array([[-40.0, 10.0]]))[0] == pytest.approx((x, y), abs=0.3)
    if turn == 0:
        assert w == pytest.approx(150, rel=0.05)


def test_a_whole_feature_is_all_there() -> None:
    """The box of a dot grid holds all of its rim, however it is turned."""
    view = View(turn=12.0, scale=5.0, lens=(0.1, 0.0))
    (placed,) = in_frame([_region("dots")], _pose(view), CHART)

    (x, y), (w, h) = ([part.value for part in pair] for pair in (placed.position, placed.size))
    rim = view.to_frame(_rim(FEATURES["dots"]))
    assert (x - w / 2, y - h / 2) == pytest.approx(rim.min(axis=0), abs=0.3)
    assert (x + w / 2, y + h / 2) == pytest.approx(rim.max(axis=0), abs=0.3)


def test_sizes_in_px_and_regions_in_the_frame_stay() -> None:
    """A size in px stays in px; what is given in the frame is not touched, nor is anything without a pose."""
    pose = _pose(View(scale=5.0, turn=30))
    px = (Amount(60.0, "px"), Amount(80.0, "px"))
    spot = Region("spot", (Amount(0.0, "mm"), Amount(0.0, "mm")), px, None, "chart")
    plain = Region("plain", px, px)
    placed = in_frame([spot, plain], pose, CHART)

    assert placed[0].size == px
    assert [part.value for part in placed[0].position] == pytest.approx([800, 600], abs=0.01)
    assert placed[1] is plain
    assert in_frame([plain], None, Chart()) == (plain,)
    with pytest.raises(ValueError, match="is no place in a frame before the chart was found"):
        spot.centre_px(1600, 1200)


def test_a_feature_lends_its_transfer_function_at_its_scale() -> None:
    """2 lp/mm on a chart seen at 5 px/mm are 0.4 cy/px; what the spec says itself goes first."""
    region = _region("patch")
    capture = Capture(
        "c", "flat field", None, None, {}, Camera(1600, 1200, 12, 64, 4095), Optics(), CHART, (region,), {}, {}, (), ()
    )
    found = Found("patch", None, pose=_pose(View(scale=5.0)))  # type: ignore[arg-type]

    lent = own_transfer(capture, found)
    assert np.array(lent.transfer) == pytest.approx(np.array([(0.1, 1.0), (0.4, 0.9)]), abs=1e-6)
    assert lent.transfer_u == 0.01
    assert own_transfer(capture, Found("other", None)) is CHART  # type: ignore[arg-type]
