"""Camera, optics and chart from their shapes."""

import re
from dataclasses import replace
from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.spec.build import from_expanded, read_spec
from runner.spec.files import Layout
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


@pytest.mark.parametrize(
    ("layout", "told"),
    [
        ("{packing: 12 bit low bits first, row_padding: 8 bytes, header: 0}", ""),
        ("{packing: 16 bit, byte_order: big, frames_per_file: 3}", ""),
        ("{packing: MIPI RAW10}", "the packing MIPI RAW10 does not hold 12 bit; 16 bit, 12 bit low bits first"),
        ("{packing: 12 bit, byte_order: big}", "'12 bit' is not allowed here"),
    ],
)
def test_a_layout_must_hold_the_cameras_frames(layout: str, told: str, tmp_path: Path) -> None:
    """The depth fits into the packing and the width into its groups; colour frames are never headerless."""
    text = TEXT.replace("processing: none", f"processing: none\n  layout: {layout}")
    if told:
        with pytest.raises(SpecError, match=re.escape(told)):
            read_spec(write(tmp_path, text))
        return
    camera = read_spec(write(tmp_path, text)).camera
    assert camera.layout.file_bytes(1600, 1200) == (3 * 1600 * 1200 * 2 if "16" in layout else (2400 + 8) * 1200)
    assert from_expanded(read_spec(write(tmp_path, text)).expanded).camera == camera
    with pytest.raises(SpecError, match="headerless files hold one number a pixel, colour rgb three"):
        read_spec(write(tmp_path, text.replace("processing: none", "processing: none\n  colour: rgb")))
    odd = text.replace("1600 x 1200 px", "1601 x 1200 px")
    if "16 bit" not in layout:
        with pytest.raises(SpecError, match="rows of 1601 px do not fill whole groups of 2 px"):
            read_spec(write(tmp_path, odd))


def test_a_jpeg_holds_no_mosaic(tmp_path: Path) -> None:
    """A product that delivers JPEG delivers finished pixels."""
    text = TEXT.replace("12 bit", "8 bit").replace("4095 DN", "255 DN")
    text = text.replace("processing: none", "processing: sharpened\n  delivers: jpeg\n  mosaic: RGGB")

    with pytest.raises(SpecError, match="a JPEG holds no mosaic; colour: rgb, or delivers: raw"):
        read_spec(write(tmp_path, text))


def test_a_capture_may_have_a_layout_of_its_own(tmp_path: Path) -> None:
    """A layout in a capture takes the place of the camera's, whole; mosaic and colour are the camera's."""
    own = "camera: {layout: {packing: 16 bit, byte_order: little}}, "
    text = TEXT.replace(
        "processing: none", "processing: none\n  mosaic: GRBG\n  layout: {packing: 12 bit high bits first}"
    )

    dark, chart = read_spec(write(tmp_path, text.replace(DARK, DARK + own))).captures

    assert (dark.camera.layout, dark.camera.mosaic) == (Layout("16 bit", "little"), "GRBG")
    assert chart.camera.layout == Layout("12 bit high bits first")
    assert chart.camera.channels == ("red", "green", "blue")
