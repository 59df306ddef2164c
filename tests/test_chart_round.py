"""From chart file to artwork, to print, to frames, to a verdict: artwork and regions cannot disagree."""

import shutil
from pathlib import Path

import numpy as np
import pytest

from runner import acceptance
from runner.exits import Exit
from runner.measure.chart_view import look
from runner.measure.numerics.chart_pose import ChartPose
from runner.report import store
from runner.report.chart_artwork import artwork_pdf
from runner.report.verify_tools import default_tools
from runner.spec.charts import read_chart
from runner.spec.model import Camera as SpecCamera
from runner.spec.model import Chart, Optics
from tests.scenes.chart_text import write_chart
from tests.scenes.chart_views import Scene, View, edge, ring
from tests.scenes.prints import Camera, printed
from tests.scenes.spec_text import write

CHART = Path(__file__).resolve().parents[1] / "specs" / "charts" / "edges-a4.yaml"
DPI = 500
"""25.4 mm / 500 is a quarter of a px of the largest frame, and less of the others."""

SPEC = """\
probatum-spec: 1
document: {{number: RND-1, revision: A}}
unit: {{product: RND, serial: 'RND-[0-9]{{2}}'}}
camera: {{frame_size: {width} x {height} px, bit_depth: 12 bit, black_level: 64 DN, white_level: 4095 DN}}
captures:
  edges:
    target: slanted edge
    frames: 'chart-{{repeat}}.npy'
    chart: {{file: edges-a4.yaml}}
    regions:
      corners: {{feature: [upper left edge, upper right edge, lower left edge, lower right edge], size: [24 mm, 30 mm]}}
      middle: {{on: chart, position: [0 mm, 0 mm], size: [20 mm, 30 mm]}}
    limits:
      - {{characteristic: 1, quantity: mtf, frequency: 0.2 cy/px, where: corners, nominal: {edge}, tolerance: 0.04}}
      - {{characteristic: 2, quantity: mtf, frequency: 0.2 cy/px, where: middle, nominal: {edge}, tolerance: 0.04}}
  stripes:
    target: sinusoidal grating
    same_frames_as: edges
    chart: {{file: edges-a4.yaml}}
    regions:  # small ones: through a wide lens stripes have no one frequency over a large one
      coarse: {{feature: coarse stripes, size: [18 mm, 18 mm]}}
      medium: {{feature: medium stripes, size: [18 mm, 18 mm]}}
    limits:
      - {{characteristic: 3, quantity: modulation_transfer, where: coarse, nominal: {coarse}, tolerance: 0.02}}
      - {{characteristic: 4, quantity: modulation_transfer, where: medium, nominal: {medium}, tolerance: 0.02}}
"""


@pytest.fixture(scope="module")
def sheet(tmp_path_factory: pytest.TempPathFactory) -> np.ndarray:
    """Return the ready chart, printed."""
    if shutil.which("pdftoppm") is None:
        pytest.skip("pdftoppm renders the artwork; it is not installed")
    chart = read_chart(CHART)
    path = tmp_path_factory.mktemp("print") / "chart.pdf"
    path.write_bytes(artwork_pdf(chart))
    return printed(path, DPI, chart.ink, chart.ground)


def _run(folder: Path, sheet: np.ndarray, camera: Camera) -> tuple[acceptance.Outcome, dict[str, object]]:
    chart = read_chart(CHART)
    scale = camera.view.scale
    shutil.copy(CHART, folder / CHART.name)
    width, height = camera.view.size
    values = {
        "edge": f"{camera.transfer(0.2):.4f}",
        "coarse": f"{camera.transfer(1 / (4 * scale)):.4f}",
        "medium": f"{camera.transfer(1 / (2 * scale)):.4f}",
    }
    spec = folder / "spec.yaml"
    spec.write_text(SPEC.format(width=width, height=height, **values), encoding="utf-8")
    (folder / "frames" / "RND-01").mkdir(parents=True)
    np.save(folder / "frames" / "RND-01" / "chart-1.npy", camera.codes(sheet, DPI, chart.size, 1))
    order = acceptance.Order(spec, folder / "frames", folder / "out", time="2026-12-01T09:30:00Z")
    outcome = acceptance.run(order)
    document = store.read_results(folder / "out" / "RND-01")
    assert document is not None
    return outcome, document


VIEWS = {
    "small": View(size=(1000, 750), scale=3.1, turn=1.5, shift=(8, -5)),
    "plain": View(size=(1600, 1200), scale=5.0),
    "turned": View(size=(1600, 1200), scale=4.9, turn=-1.4, shift=(-15, 20)),
    "tilted": View(size=(1600, 1200), scale=4.9, turn=1, keystone=(0.02, -0.015)),
    "through a wide lens": View(size=(1600, 1200), scale=5.4, keystone=(0.01, 0.0), lens=(0.15, 0.03)),
}


@pytest.mark.parametrize(
    "name", [pytest.param(name, marks=() if name == "small" else pytest.mark.study) for name in VIEWS]
)
def test_printed_artwork_conforms(tmp_path: Path, sheet: np.ndarray, name: str) -> None:
    """Print and camera are known, so every limit is what they make of the chart: all of them conform.

    Marks lie within 0.02 px (rms) of where the camera has them, all places on the chart within 0.3 px. The wide lens is
    defined from the frame to the chart; two terms the other way leave up to 0.05 px of it (its corners move by 18 %).
    """
    view, chart = VIEWS[name], read_chart(CHART)
    outcome, document = _run(tmp_path, sheet, Camera(view))

    assert document["verdict"] == "conforms", document["reasons"]
    assert outcome.exit is Exit.CONFORMS
    codes = np.load(tmp_path / "frames" / "RND-01" / "chart-1.npy")
    piece = Chart(chart.name, chart.serial, file=chart, view=chart.view)
    pose = look(codes, SpecCamera(*view.size, 12, 64, 4095), Optics(), piece)
    assert isinstance(pose, ChartPose)
    marks = np.array(chart.marks.at)
    assert np.sqrt(np.mean(np.sum((pose.to_frame(marks) - view.to_frame(marks)) ** 2, axis=1))) < (
        0.05 if view.lens[0] else 0.02
    )
    places = np.array([(x, y) for x in np.linspace(-128, 128, 9) for y in np.linspace(-85, 85, 7)])
    assert np.abs(pose.to_frame(places) - view.to_frame(places)).max() < 0.3


DUE = """\
probatum-spec: 1
document: {number: DUE-1, revision: A}
unit: {product: DUE, serial: 'DUE-[0-9]{2}'}
camera: {frame_size: 640 x 480 px, bit_depth: 12 bit, black_level: 64 DN, white_level: 4095 DN}
captures:
  board:
    target: slanted edge
    frames: 'a.npy'
    chart: {file: chart.yaml}
    regions: {edge: {feature: left edge}}
    limits: [{characteristic: 1, quantity: mtf, frequency: 0.2 cy/px, where: edge, at_least: 0.3}]
"""


@pytest.mark.parametrize(
    ("time", "turn", "verdict", "reason"),
    [
        ("2027-03-01T23:00:00Z", 0.0, "conforms", "conforms"),
        ("2027-03-02T00:00:00Z", 0.0, "not measured", "is overdue for calibration: it was due on 2027-03-01"),
        ("2026-12-01T09:30:00Z", 180.0, "not measured", "lies upside down"),
    ],
    ids=["on the day", "the day after", "upside down"],
)
def test_an_unfit_chart_is_the_capture_s_fault(
    tmp_path: Path, time: str, turn: float, verdict: str, reason: str
) -> None:
    """The day is that of the run; an unfit chart leaves the unit unmeasured and blames the capture, read back alike."""
    chart = read_chart(write_chart(tmp_path))
    rings = [ring(at, chart.marks.diameter, chart.marks.hole, chart.ink, chart.ground) for at in chart.marks.at]
    picture = edge((-50.0, 0.0), (20.0, 30.0), 5.0, chart.ink, chart.ground)
    scene = Scene([*rings, picture], chart.ground, View(size=(640, 480), scale=2.8, turn=turn), noise=10)
    (tmp_path / "frames" / "DUE-01").mkdir(parents=True)
    np.save(tmp_path / "frames" / "DUE-01" / "a.npy", scene.codes())
    order = acceptance.Order(write(tmp_path, DUE), tmp_path / "frames", tmp_path / "out", time=time)
    acceptance.run(order)
    document = store.read_results(tmp_path / "out" / "DUE-01")

    assert document is not None
    assert document["verdict"] == verdict, document["reasons"]
    assert reason in document["reasons"][0]
    assert document["at_fault"] == (None if verdict == "conforms" else "capture")
    tools = default_tools()
    for again in (tools.judge_again(document), tools.measure_again(document, tmp_path / "frames")[0]):
        assert [again[key] for key in ("verdict", "at_fault", "reasons", "because")] == [
            document[key] for key in ("verdict", "at_fault", "reasons", "because")
        ]
