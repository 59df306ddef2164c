"""A chart over all frames of a capture."""

from dataclasses import replace

import numpy as np

from runner.capture.frame import Frame
from runner.measure.chart_frames import poses
from runner.measure.numerics.chart_pose import ChartPose
from runner.spec.chart_model import ChartFile, Marks
from runner.spec.chart_model import View as Asked
from runner.spec.model import Camera, Capture, Chart, Optics
from tests.scenes.chart_views import Scene, View, ring

PLACES = ((-92, -56), (49, -66), (91, -28), (92, 43), (57, 65), (-52, 64), (-90, 54), (-91, 0), (10, 20))
MARKS = Marks(8.0, 4.0, tuple((float(x), float(y)) for x, y in PLACES))
FILE = ChartFile("Small board", "SB-01", (200.0, 150.0), 0.8, 0.08, MARKS, {}, Asked(), "sha256:")
VIEW = View(size=(640, 480), scale=2.8)
CAPTURE = Capture(
    "c", "slanted edge", None, None, {}, Camera(640, 480, 12, 64, 4095), Optics(), Chart(file=FILE), (), {}, {}, (), ()
)


def _frame(name: str, view: View = VIEW, exposure: float = 0.9) -> Frame:
    scene = Scene([ring(p, 8.0, 4.0, 0.08, 0.8) for p in MARKS.at], 0.8, view, exposure=exposure, noise=10.0)
    return Frame(name, "", "", scene.codes())


def test_every_frame_has_its_own_pose() -> None:
    """Frames are looked at one by one: a chart that moved between repeats is followed."""
    moved = replace(VIEW, shift=(11.0, -7.0))
    found, faults = poses([_frame("a-1.npy"), _frame("a-2.npy", moved)], CAPTURE, fixed=False)

    assert faults == ()
    places = [one.to_frame(np.zeros((1, 2)))[0] for one in found if isinstance(one, ChartPose)]
    assert np.abs(places[1] - places[0] - (11, -7)).max() < 0.05


def test_one_bad_frame_makes_the_capture_unfit() -> None:
    """A fault names its file where there are several."""
    _, faults = poses([_frame("a-1.npy"), _frame("a-2.npy", replace(VIEW, turn=180))], CAPTURE, fixed=False)

    assert len(faults) == 1
    assert faults[0].endswith("either way (a-2.npy)")


def test_along_an_axis_the_chart_stays() -> None:
    """A frame of a series too dark to show the chart takes the pose of its neighbour; a turned one does not."""
    dark, turned = _frame("z-2.npy", exposure=0.002), _frame("z-3.npy", replace(VIEW, turn=180))
    found, faults = poses([_frame("z-1.npy"), dark], CAPTURE, fixed=True)
    assert (found[1] is found[0], faults) == (True, ())
    assert poses([_frame("z-1.npy"), dark], CAPTURE, fixed=False)[1][0].startswith("the chart got no light")
    assert "upside down" in poses([_frame("z-1.npy"), turned], CAPTURE, fixed=True)[1][0]


def test_without_a_chart_file_nothing_is_looked_for() -> None:
    """Captures without a chart file have neither poses nor faults."""
    plain = replace(CAPTURE, chart=Chart(name="plain"))

    assert poses([_frame("a.npy")], plain, fixed=False) == ((None,), ())
