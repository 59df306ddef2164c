"""Frames that are no pictures of the chart as it must be are told, each with its sentence; good ones are not."""

import re
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from skimage import data

from runner.measure.chart_view import BEGINS, Unfit, look, tilt_of, worn
from runner.measure.numerics.chart_pose import ChartPose, solve_pose
from runner.spec.chart_model import ChartFile, Feature, Marks
from runner.spec.chart_model import View as Asked
from runner.spec.model import Camera, Chart, Optics
from tests.scenes.chart_views import Patch, Scene, View, edge, ring

PLACES = ((-92, -56), (49, -66), (91, -28), (92, 43), (57, 65), (-52, 64), (-90, 54), (-91, 0), (10, 20))
FILE = ChartFile(
    "Small board",
    "SB-01",
    (200.0, 150.0),
    0.8,
    0.08,
    Marks(8.0, 4.0, tuple((float(x), float(y)) for x, y in PLACES)),
    {"edge": Feature("edge", "slanted edge", (-50.0, 0.0), (40.0, 60.0), {})},
    Asked(),
    "sha256:",
)
OPTICS = Optics(focal_length_mm=8.0)


def _chart(asked: Asked | None = None, **changes: Any) -> Chart:
    return Chart(file=replace(FILE, **changes), view=asked or Asked())


def _look(scene: Scene, chart: Chart | None = None) -> ChartPose | Unfit | None:
    camera = Camera(*scene.view.size, 12, 64, 4095, pixel_pitch_um=3.0)
    return look(scene.codes(seed=2), camera, OPTICS, chart or _chart())


def _board(view: View, hidden: tuple[int, ...] = (), **more: Any) -> Scene:
    rings = [ring((float(x), float(y)), 8.0, 4.0, 0.08, 0.8) for n, (x, y) in enumerate(PLACES) if n not in hidden]
    patches = [*rings, edge((-50.0, 0.0), (20.0, 30.0), 5.0, 0.08, 0.8)]
    return Scene(patches, 0.8, view, **({"noise": 20.0} | more))


SMALL = View(size=(1000, 750), scale=4.2)


@pytest.mark.parametrize(
    ("view", "more"),
    [
        (View(size=(1000, 750), scale=4.4, turn=3), {"noise": 60.0}),
        (View(size=(1000, 750), scale=3.6, turn=-38), {"shading": 0.6}),
        (View(size=(1000, 750), scale=4.2, keystone=(0.06, -0.05)), {"blur": 2.5}),
        (View(size=(1000, 750), scale=4.2, lens=(0.2, 0.05)), {}),
        (View(size=(1000, 750), scale=1.5), {}),
        (SMALL, {"exposure": 0.06, "noise": 8.0}),
        (SMALL, {"exposure": 1.5}),
        (SMALL, {"blur": 6.0}),
    ],
    ids=["noise", "turned, uneven", "tilted, blurred", "wide lens", "far", "dim", "ground clipped", "defocused"],
)
def test_good_frames_are_not_refused(view: View, more: dict[str, float]) -> None:
    """Whatever a camera or a bench may do within reason, the chart is found, places on it within 0.5 px."""
    pose = _look(_board(view, (), **more))

    assert isinstance(pose, ChartPose), pose
    places = np.array([(x, y) for x in (-80.0, 0.0, 80.0) for y in (-50.0, 0.0, 50.0)])
    assert np.abs(pose.to_frame(places) - view.to_frame(places)).max() < 0.5


@pytest.mark.parametrize(
    ("scene", "chart", "told"),
    [
        (_board(replace(SMALL, mirrored=True)), None, "is seen mirrored"),
        (_board(SMALL), _chart(mirrored=True), "is not seen mirrored, as its file says"),
        (_board(replace(SMALL, turn=178)), None, "lies upside down: it is turned by 178°, asked for is upright"),
        (_board(replace(SMALL, turn=-88, scale=3.4)), None, "lies on its side: it is turned by -88°"),
        (_board(SMALL), _chart(Asked(turned=180.0)), "lies upside down: it is turned by -?0°, asked for is 180°"),
        (_board(SMALL), _chart(Asked(least_scale=5.0)), "is too far: it has 4.2 px/mm at its smallest, at least 5 px"),
        (_board(SMALL), _chart(Asked(most_scale=4.0)), "is too near: it has 4.2 px/mm at its largest, at most 4 px"),
        (
            _board(replace(SMALL, keystone=(0.08, 0.0))),
            _chart(Asked(most_keystone=0.05)),
            "is tilted: its scale changes by [0-9.]+ % over it, at most 5 %",
        ),
        (
            _board(replace(SMALL, keystone=(0.08, 0.0))),
            _chart(Asked(most_tilt=5.0)),
            "is tilted by [0-9.]+°, at most 5° is asked for",
        ),
        (_board(replace(SMALL, shift=(160, 0))), None, "is partly out of the frame: marks 3, 4 lie up to .* its right"),
        (_board(SMALL, hidden=(0, 2, 5, 8)), None, "5 round marks are seen.*another chart, or marks are covered"),
        (_board(SMALL, exposure=0.004, noise=3.0), None, "got no light: its brightest part reaches 0.* %"),
        (_board(SMALL, exposure=40.0), None, "got too much light: its darkest part lies at 100.0 %"),
        (
            _board(View(size=(500, 375), scale=2.1), blur=10.0),
            None,
            "is not seen: .* a wholly defocused unit look alike",
        ),
        (Scene([], 0.8, SMALL, noise=20.0), None, "is not seen: 0 round marks are seen, 'Small board' has 9"),
    ],
)
def test_staged_bad_captures_are_told(scene: Scene, chart: Chart | None, told: str) -> None:
    """Mirrored, upside down, on its side, far, near, tilted, cut off, covered, dark, white, defocused, absent."""
    found = _look(scene, chart)

    assert isinstance(found, Unfit)
    assert found.because.startswith(BEGINS)
    assert re.search(told, found.because), found.because


def test_another_chart_is_told() -> None:
    """A chart with as many marks in another arrangement is another one; dots of a grid are no marks of it."""
    random = np.random.default_rng(4)
    others = [(float(x), float(y)) for x in (-80, -30, 20, 75) for y in (-50, 45)]
    others = [(x + float(random.uniform(-9, 9)), y + float(random.uniform(-9, 9))) for x, y in others]
    found = _look(Scene([ring(p, 8.0, 4.0, 0.08, 0.8) for p in others], 0.8, SMALL, noise=20))
    assert isinstance(found, Unfit)
    assert "is not 'Small board': 8 round marks are seen" in found.because

    dots = [(20.0 * i, 20.0 * j) for i in range(-4, 5) for j in range(-3, 4)]
    discs = [Patch(p, (6.0, 6.0), lambda x, y: np.where(np.hypot(x, y) < 4, 0.08, 0.8)) for p in dots]
    assert isinstance(_look(Scene(discs, 0.8, SMALL, noise=20)), Unfit)


@pytest.mark.parametrize("name", ["camera", "coins", "page", "brick", "grass", "text"])
def test_photographs_are_no_charts(name: str) -> None:
    """No photograph (pictures of scikit-image) is taken for the chart."""
    codes = getattr(data, name)()

    assert isinstance(look(codes, Camera(codes.shape[1], codes.shape[0], 8, 0, 255), Optics(), _chart()), Unfit)


def test_a_chart_without_a_file_is_not_looked_for() -> None:
    """Without a chart file there is no pose and no complaint."""
    assert look(np.zeros((4, 4)), Camera(4, 4, 8, 0, 255), Optics(), Chart(name="plain")) is None


@pytest.mark.parametrize("tilt", [0.0, 4.0, 12.0])
def test_the_tilt_is_the_angle_of_the_normal(tilt: float) -> None:
    """A pinhole of 2000 px focal length sees a board turned about its vertical axis: geometry."""
    focal, distance = 2000.0, 500.0
    marks = np.array(FILE.marks.at)
    x, depth = marks[:, 0] * np.cos(np.radians(tilt)), distance + marks[:, 0] * np.sin(np.radians(tilt))
    seen = np.column_stack([x, marks[:, 1]]) / depth[:, None] * focal + (500, 375)

    assert tilt_of(solve_pose(marks, seen, (1000, 750)), focal) == pytest.approx(tilt, abs=0.05)


def test_days_and_uses_end() -> None:
    """The due day still serves, the next one does not; nor do more uses than allowed. Without a time all pass."""
    chart = _chart(due="2026-11-30", uses=401, most_uses=400)

    assert [one.split("is ")[1].split(":")[0] for one in worn(chart, "2026-12-01T00:00:00Z")] == [
        "overdue for calibration",
        "worn",
    ]
    assert worn(_chart(due="2026-11-30", uses=400, most_uses=400), "2026-11-30T23:59:59Z") == ()
    assert worn(chart, "") == ()
    assert worn(Chart(due="2020-01-01"), "2026-12-01T00:00:00Z") == ()
