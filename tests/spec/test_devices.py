"""Camera, optics and chart from their shapes."""

from dataclasses import replace
from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.spec.build import read_spec
from runner.spec.model import Camera, Tone
from tests.scenes.spec_text import TEXT, write

DARK = "dark: {target: dark frame, "


def test_a_camera_is_read_with_its_units(tmp_path: Path) -> None:
    """Lengths arrive in µm, ratios as fractions, codes in DN; what is not stated has its default."""
    text = TEXT.replace("3.0 um", "3000 nm").replace("fill: 100 %", "fill: 0.5\n  tone: gamma 2.2")

    assert read_spec(write(tmp_path, text)).camera == Camera(
        1600, 1200, 12, 64.0, 4095.0, pixel_pitch_um=3.0, fill=0.5, tone=Tone("gamma", 2.2)
    )


def test_a_capture_overrides_its_camera_and_optics(tmp_path: Path) -> None:
    """What a capture states holds for it alone; the rest is the spec's."""
    text = TEXT.replace(DARK, DARK + "camera: {black_level: 60 DN}, optics: {f_number: 4}, ")
    spec = read_spec(write(tmp_path, text))

    dark, chart = spec.captures
    assert (dark.camera.black_level, chart.camera.black_level) == (60.0, 64.0)
    assert dark.camera.pixel_pitch_um == 3.0
    assert dark.optics == replace(chart.optics, f_number=4.0)
    assert chart.optics.f_number == 2.8


def test_an_override_that_cannot_be_is_told_at_its_line(tmp_path: Path) -> None:
    """An override is looked at together with the rest of the camera, and told where it stands."""
    text = TEXT.replace(DARK, DARK + "camera: {black_level: 5000 DN}, ")

    with pytest.raises(SpecError, match=r":15:52: the black level of 5000 DN is not below the white level"):
        read_spec(write(tmp_path, text))


def test_a_chart_has_its_table_in_cycles_per_pixel(tmp_path: Path) -> None:
    """100 lp/mm at 3 µm pixels are 0.3 cy/px; modulations and their uncertainty are fractions."""
    line = "    chart: {name: A, transfer: [[0 lp/mm, 1], [100 lp/mm, 90 %]], transfer_uncertainty: 0.5 %}\n"
    text = TEXT.replace("    uses: {dark: dark}\n", "    uses: {dark: dark}\n" + line)

    chart = read_spec(write(tmp_path, text)).capture("chart").chart

    assert (chart.name, chart.transfer_u, chart.transfer[0], chart.transfer[1][1]) == ("A", 0.005, (0.0, 1.0), 0.9)
    assert chart.transfer[1][0] == pytest.approx(0.3, rel=1e-12)


def test_a_table_that_cannot_be_converted_is_told(tmp_path: Path) -> None:
    """A table in the object without a magnification names the key that is missing."""
    line = "    chart: {transfer: [[0 lp/mm object, 1], [100 lp/mm object, 90 %]]}\n"
    text = TEXT.replace("    uses: {dark: dark}\n", line)

    with pytest.raises(SpecError, match="lp/mm object cannot be converted without optics, magnification"):
        read_spec(write(tmp_path, text))
