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
