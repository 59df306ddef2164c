"""Chart files: read strictly, laid into specs, with what must hold between their parts."""

from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.spec.build import from_expanded, read_spec
from runner.spec.charts import read_chart
from runner.spec.revision import digest
from tests.scenes.chart_text import CHART, changed, write_chart
from tests.scenes.spec_text import TEXT, write

CAPTURE = """\
  board:
    target: slanted edge
    frames: {names: 'board-{repeat}.tif', count: 2}
    chart: {file: chart.yaml, view: {scale: at least 3 px/mm}}
    regions:
      edge: {feature: left edge}
      spot: {on: chart, position: [-50 mm, 5 mm], size: [20 mm, 60 mm]}
    limits: [{characteristic: 9, quantity: mtf50, where: edge, at_least: 0.1 cy/px}]
"""


def _spec(folder: Path, chart: str = CHART, capture: str = CAPTURE) -> Path:
    write_chart(folder, chart)
    return write(folder, TEXT.replace("  chart:\n", f"{capture}  chart:\n"))


def test_everything_that_a_file_states_is_read(tmp_path: Path) -> None:
    """Values come in mm and as fractions; calibrated values go before nominal ones when they are measured with."""
    chart = read_chart(write_chart(tmp_path))

    assert (chart.name, chart.serial, chart.size, chart.ground, chart.ink) == (
        "Small board",
        "SB-01",
        (200, 150),
        0.8,
        0.08,
    )
    assert (chart.marks.diameter, chart.marks.hole, len(chart.marks.at)) == (8, 4, 9)
    assert (chart.calibrated, chart.due, chart.uses, chart.most_uses) == ("2026-03-01", "2027-03-01", 12, 400)
    assert (chart.view.least_scale, chart.view.most_keystone, chart.view.turned) == (2, 0.1, None)
    stripes = chart.features["right stripes"]
    assert (stripes.data["target_modulation"], stripes.values["target_modulation"]) == ("70 %", "68.4 %")
    assert stripes.transfer == ((0.5, 1.0), (2.0, 0.9))
    assert chart.within((-45, 10)) is chart.features["left edge"]
    assert chart.within((0, 60)) is None


def test_the_digest_is_of_the_contents(tmp_path: Path) -> None:
    """Comments and other spellings of a unit change nothing; a value does."""
    plain = read_chart(write_chart(tmp_path)).digest

    assert (
        read_chart(write_chart(tmp_path, "# Ours.\n" + changed("diameter: 8 mm", "diameter: 8.0 mm"))).digest == plain
    )
    assert read_chart(write_chart(tmp_path, changed("diameter: 8 mm", "diameter: 8.1 mm"))).digest != plain


@pytest.mark.parametrize(
    ("old", "new", "told"),
    [
        ("ink: 8 %", "ink: 60 %", r"4:\d+.*do not stand out from each other"),
        ("diameter: 8 mm", "diameter: 8 mm\n  hole: 7 mm", r"hole of 7 mm in marks of 8 mm"),
        ("    - [-91 mm, 0 mm]\n    - [10 mm, 20 mm]\n", "", r"there are 7 marks; at least 8"),
        ("[92 mm, 43 mm]", "[96 mm, 43 mm]", r"11:7.*mark 4 at 96 mm, 43 mm lies less than 0.75 diameters inside"),
        ("[-52 mm, 64 mm]", "[66 mm, 58 mm]", r"marks 5 and 6 lie less than 2 diameters apart"),
        ("[10 mm, 20 mm]", "[-34 mm, 0 mm]", r"'left edge' lies less than 0.75 diameters from the centre of mark 9"),
        ("[55 mm, 10 mm]", "[85 mm, 10 mm]", r"'right stripes' reaches over the sheet"),
        ("[55 mm, 10 mm]", "[-25 mm, 10 mm]", r"features 'left edge' and 'right stripes' overlap"),
        ("due: 2027-03-01", "due: 2025-03-01", r"due on 2025-03-01, before it was calibrated"),
        ("due: 2027-03-01", "due: 2027-02-30", r"'2027-02-30' is no day"),
        ("scale: at least 2 px/mm", "scale: at least 2 px", r"scale is given in px"),
        ("keystone: at most 10 %", "keystone: at least 10 %", r"lower bound of the keystone has no meaning"),
        ("[0.5 lp/mm, 1.0]", "[0.5 cy/px, 1.0]", r"the wrong units"),
        ("kind: sinusoidal grating", "kin: sinusoidal grating", r"unknown key 'kin' in feature.*did you mean 'kind'"),
        ("[-92 mm, -56 mm]", "[-92, -56 mm]", r"8:8.*-92 has no unit"),
    ],
)
def test_what_cannot_be_is_told_with_its_place(tmp_path: Path, old: str, new: str, told: str) -> None:
    """What no chart can be, or what hides its marks, is refused in one sentence each."""
    with pytest.raises(SpecError, match=told):
        read_chart(write_chart(tmp_path, changed(old, new)))


def test_all_complaints_come_at_once(tmp_path: Path) -> None:
    """Faults of spec and chart file are told together, each under its own file."""
    chart = changed("period: 2 mm", "period: 2 mm, period: 3 mm").replace("size: [200 mm", "size: [200 px")
    with pytest.raises(SpecError, match="unknown key") as caught:
        read_spec(_spec(tmp_path, chart, CAPTURE.replace("    target: slanted", "    targt: slanted")))

    told = [complaint.where.rsplit("/", 1)[-1] for complaint in caught.value.complaints]
    assert {place.split(":")[0] for place in told} == {"chart.yaml", "spec.yaml"}
    assert "chart.yaml:3:8" in told
    assert "spec.yaml:21:23" not in told


def test_a_spec_carries_its_charts(tmp_path: Path) -> None:
    """The expanded form holds the chart's data: read back without any file it is the same spec, with its digest."""
    spec = read_spec(_spec(tmp_path))
    (tmp_path / "chart.yaml").unlink()
    again = from_expanded(spec.expanded)

    assert again.digest == spec.digest == digest(spec.expanded)
    assert again.capture("board").chart == spec.capture("board").chart
    chart = spec.capture("board").chart
    assert (chart.name, chart.serial, chart.due) == ("Small board", "SB-01", "2027-03-01")
    assert (chart.view.least_scale, chart.view.most_keystone) == (3, 0.1)


def test_a_changed_chart_is_a_changed_spec(tmp_path: Path) -> None:
    """The digest of a spec covers the charts that it names."""
    one = read_spec(_spec(tmp_path)).digest

    assert read_spec(_spec(tmp_path, changed("68.4 %", "68.5 %"))).digest != one


@pytest.mark.parametrize(
    ("old", "new", "told"),
    [
        ("file: chart.yaml", "file: ../chart.yaml", "lies outside the spec's folder"),
        ("file: chart.yaml", "file: missing.yaml", "'missing.yaml' cannot be read"),
        ("file: chart.yaml, ", "file: chart.yaml, serial: X, ", "the serial stands in the chart file"),
        ("chart: {file: chart.yaml, view: {scale: at least 3 px/mm}}", "uses: {dark: dark}", "has no chart file"),
        ("feature: left edge", "feature: left edges", "no feature 'left edges'.*did you mean 'left edge'"),
        ("[-50 mm, 5 mm]", "[-95 mm, 5 mm]", "region 'spot' reaches 5 mm over the chart's border"),
        ("scale: at least 3 px/mm", "tilt: at most 3 m", "unknown unit 'm'"),
    ],
)
def test_what_a_spec_may_not_ask_of_a_chart(tmp_path: Path, old: str, new: str, told: str) -> None:
    """Charts lie beside the spec, what their files say is said once, and regions lie on them."""
    assert CAPTURE.count(old) == 1
    with pytest.raises(SpecError, match=told):
        read_spec(_spec(tmp_path, capture=CAPTURE.replace(old, new)))


def test_a_tilt_needs_the_focal_length(tmp_path: Path) -> None:
    """Degrees of tilt cannot be told from a frame without focal length and pixel pitch: the spec is refused."""
    tilted = CAPTURE.replace("scale: at least 3 px/mm", "tilt: at most 3 deg")
    assert read_spec(_spec(tmp_path, capture=tilted)).capture("board").chart.view.most_tilt == 3
    path = _spec(tmp_path, capture=tilted)
    path.write_text(path.read_text("utf-8").replace(", focal_length: 4.2 mm", ""), "utf-8")
    with pytest.raises(SpecError, match="needs the camera's pixel_pitch and the optics' focal_length"):
        read_spec(path)


def test_the_ready_charts_are_sound() -> None:
    """Every chart beside the ready specs reads without a complaint."""
    ready = sorted((Path(__file__).resolve().parents[2] / "specs" / "charts").glob("*.yaml"))

    assert ready
    assert all(read_chart(path).features for path in ready)
