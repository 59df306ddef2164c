"""Circumstances are told as stated; what was not stated is left out."""

from dataclasses import replace

from runner.measure.evidence import CaptureEvidence, FrameFact, UnitEvidence
from runner.measure.plan import bind
from runner.report.conditions import conditions, deviations, methods
from runner.resources import folder
from runner.spec.build import read_spec
from runner.spec.files import Layout
from runner.spec.model import Camera, Chart, Optics, Tone

CAMERA = Camera(width=1600, height=1200, bit_depth=12, black_level=64, white_level=4095)


def test_what_was_not_stated_is_left_out() -> None:
    """No row says `None`."""
    rows = dict(conditions(CAMERA, Optics(f_number=2.8), Chart()))

    assert rows["frame size"] == "1600 × 1200 px"
    assert (rows["f-number"], rows["tone"]) == ("2.8", "linear")
    assert not {"wavelength", "chart", "pixel pitch"} & set(rows)


def test_colour_mosaic_and_layout_are_told() -> None:
    """What the files hold stands among the conditions; a plain mono camera has no such rows."""
    layout = Layout("16 bit", "little", 8, 512, 3, "bottom", "")
    rows = dict(conditions(replace(CAMERA, mosaic="GRBG", layout=layout), Optics(), Chart()))

    assert rows["mosaic"] == "GRBG"
    told = "16 bit, little byte order, header 512 bytes, row padding 8 bytes, 3 frames a file, first row at the bottom"
    assert rows["file layout"] == told
    assert dict(conditions(replace(CAMERA, colour="rgb"), Optics(), Chart()))["colour"] == "red, green and blue planes"
    assert not {"mosaic", "colour", "file layout"} & set(dict(conditions(CAMERA, Optics(), Chart())))


def test_a_tone_curve_is_named() -> None:
    """The reader sees which curve was undone."""
    rows = dict(conditions(replace(CAMERA, tone=Tone("gamma", 2.2)), Optics(), Chart()))

    assert rows["tone"] == "gamma 2.2"


def test_methods_are_told_with_references_and_options() -> None:
    """Every module that took part stands there with its sources."""
    rows = methods(bind(read_spec(folder("specs") / "board-camera.yaml")))

    assert {"edge response", "exposure", "slanted edge"} <= {row["name"] for row in rows}
    assert all(row["references"] for row in rows)


def test_departures_are_told() -> None:
    """JPEG, processing and rehearsed frames are deviations; a plain raw camera has none."""
    plan = bind(read_spec(folder("specs") / "board-camera.yaml"))
    plain = UnitEvidence("S", (), (), ())
    frame = FrameFact("a.tif", "", (1, 1), "uint8", simulated=True)
    rehearsed = UnitEvidence("S", (CaptureEvidence("c", 1, "t", (frame,)),), (), ())
    jpeg = replace(plan, spec=replace(plan.spec, camera=replace(CAMERA, delivers="jpeg", processing=("sharpened",))))

    assert deviations(plan, plain) == []
    assert deviations(plan, replace(plain, remarks=("It was only inferred.",))) == ["It was only inferred."]
    assert len(deviations(plan, rehearsed)) == 1
    assert len(deviations(jpeg, plain)) == 2


def test_a_magnification_is_readable() -> None:
    """Below one it is the fraction that people think of, where it is one; above it stays a factor."""
    for value, words in ((1 / 120, "1/120 ×"), (0.05, "1/20 ×"), (0.4, "1/2.5 ×"), (0.0123, "0.0123 ×")):
        assert dict(conditions(CAMERA, Optics(magnification=value), Chart()))["magnification"] == words
    for value, words in ((1.0, "1 ×"), (20.0, "20 ×"), (62.5, "62.5 ×")):
        assert dict(conditions(CAMERA, Optics(magnification=value), Chart()))["magnification"] == words


def test_a_lost_companion_does_not_look_like_none() -> None:
    """A capture that names a companion which was refused or is not there says so, with the reason; a good one not."""
    plan = bind(read_spec(folder("specs") / "board-camera.yaml"))
    frame = FrameFact("a.tif", "", (1, 1), "uint16")
    chart, dark = (CaptureEvidence(name, 1, "t", (frame,)) for name in ("chart", "dark"))
    refused = CaptureEvidence("dark", 1, "t", (), ("dark-1.tif: the frame is lit",))

    def told(*captures: CaptureEvidence) -> list[str]:
        return deviations(plan, UnitEvidence("S", captures, (), ()))

    assert plan.spec.capture("chart").uses == {"dark": "dark"}
    assert told(dark, chart) == []
    (sentence,) = told(refused, chart)
    assert sentence.startswith(
        "'chart' was measured without its companion 'dark' (dark): dark-1.tif: the frame is lit."
    )
    assert "it has no frames" in told(chart)[0]
    assert "in attempt 2" in told(dark, chart, replace(chart, attempt=2), replace(refused, attempt=2))[0]
    assert told(refused, replace(chart, frames=(), faults=("gone",))) == []
