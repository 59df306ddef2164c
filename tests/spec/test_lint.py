"""What a spec asks against logic or physics, limit by limit."""

from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.spec.build import read_spec
from runner.spec.model import UncertaintyComponent
from tests.scenes.spec_text import TEXT, write

ONE = "{characteristic: 1, quantity: mtf, frequency: 0.25 cy/px, where: centre, at_least: 0.45}"


def _told(
    folder: Path, limit: str, *more: tuple[str, str], station: tuple[UncertaintyComponent, ...] = ()
) -> list[str]:
    """Return errors and warnings about one limit in the centre, marked as what they are."""
    text = TEXT.replace(ONE, f"{{characteristic: 1, where: centre, {limit}}}")
    for old, new in more:
        assert old in text
        text = text.replace(old, new)
    path = write(folder, text)
    try:
        found = read_spec(path, station).warnings
    except SpecError as refused:
        found = refused.complaints
    return [f"{complaint.severity}: {complaint.found}" for complaint in found]


PROCESSED = ("processing: none", "processing: sharpened")
MTF = "quantity: mtf, frequency: 0.25 cy/px"


def test_the_ceiling_refuses_and_for_processed_output_warns(tmp_path: Path) -> None:
    """A limit above diffraction × pixel is refused where nothing processes, and warned of where something does."""
    assert _told(tmp_path, f"{MTF}, at_least: 0.75") == []
    assert _told(tmp_path, f"{MTF}, at_least: 0.76")[0].startswith(
        "error: diffraction and pixel allow no mtf above 0.754"
    )
    assert _told(tmp_path, f"{MTF}, at_least: 0.76", PROCESSED)[0].startswith("warning: diffraction and pixel allow no")
    assert _told(tmp_path, f"{MTF}, at_most: 0.76")[0].startswith("warning: an mtf above 0.754 at 0.25 cy/px cannot be")
    assert _told(tmp_path, f"{MTF}, at_most: 0.76", PROCESSED) == []
    assert _told(tmp_path, f"{MTF}, at_least: 0.76", ("  fill: 100 %\n", "")) == []  # diffraction alone: 0.837


def test_the_ceiling_in_other_units(tmp_path: Path) -> None:
    """The ceiling is that of the frequency in cy/px, in whatever unit (0.25 cy/px = 83.33 lp/mm at 3 µm)."""
    assert _told(tmp_path, "quantity: mtf, frequency: 83.3 lp/mm, at_least: 75 %") == []
    assert "allow no mtf above" in _told(tmp_path, "quantity: mtf, frequency: 83.4 lp/mm, at_least: 76 %")[0]
    assert _told(tmp_path, "quantity: mtf, frequency: 600 LW/PH, at_least: 0.75") == []
    assert "allow no mtf50 above" in _told(tmp_path, "quantity: mtf50, at_least: 160 lp/mm")[0]


def test_a_lens_alone_has_no_pixel(tmp_path: Path) -> None:
    """Part lens is held against diffraction alone, wants the fill it divides out, and is warned of a perfect chart."""
    chart = (
        "    uses: {dark: dark}\n",
        "    uses: {dark: dark}\n    chart: {transfer: [[0 cy/px, 1], [1 cy/px, 0.9]]}\n",
    )

    assert _told(tmp_path, f"{MTF}, at_least: 0.80, part: lens", chart) == []
    assert _told(tmp_path, f"{MTF}, at_least: 0.80, part: lens") == [
        "warning: part: lens counts the chart as perfect, for it has no transfer table"
    ]
    assert _told(tmp_path, f"{MTF}, at_least: 0.84, part: lens", chart)[0].startswith(
        "error: diffraction allows no mtf"
    )
    assert _told(tmp_path, f"{MTF}, at_least: 0.80, part: lens", chart, ("  fill: 100 %\n", "")) == [
        "error: part: lens divides out the pixel aperture, but the spec does not state it"
    ]


def test_natural_ranges(tmp_path: Path) -> None:
    """A limit outside what a quantity can have is refused; one at its end cannot fail."""
    assert _told(tmp_path, "quantity: edge_angle, at_least: 46 deg") == [
        "error: edge angle cannot lie above 45 deg: no value can conform"
    ]
    assert _told(tmp_path, "quantity: edge_width, at_most: -1 px") == [
        "error: edge width cannot lie below 0 px: no value can conform"
    ]
    assert _told(tmp_path, "quantity: edge_modulation, at_most: 100 %") == [
        "warning: edge modulation never lies above 1: this limit cannot fail"
    ]
    assert _told(tmp_path, f"{MTF}, at_least: 1.1", PROCESSED)[0].startswith(
        "warning: "
    )  # sharpening may lift it there


def test_usable_if_has_natural_ranges_too(tmp_path: Path) -> None:
    """What no frame can meet makes every capture unusable, and is refused."""
    told = _told(tmp_path, f"{MTF}, at_least: 0.45", ("at most 0.01 %", "at least 101 %"))

    assert told == ["error: clipped cannot lie above 1: no value can conform"]


def test_beyond_nyquist_must_be_meant(tmp_path: Path) -> None:
    """A frequency above 0.5 cy/px needs the word; with it the limit stands, as far as the ceiling allows."""
    assert _told(tmp_path, "quantity: mtf, frequency: 0.6 cy/px, at_most: 0.1") == [
        "error: 0.6 cy/px lies beyond the Nyquist frequency of 0.5 cy/px"
    ]
    assert _told(tmp_path, "quantity: mtf, frequency: 200 lp/mm, at_most: 0.1") == [
        "error: 200 lp/mm (0.6 cy/px) lies beyond the Nyquist frequency of 0.5 cy/px"
    ]
    assert _told(tmp_path, "quantity: mtf, frequency: 0.6 cy/px, at_most: 0.1, beyond_nyquist: true") == []
    assert _told(tmp_path, "quantity: mtf10, at_least: 0.6 cy/px, beyond_nyquist: true") == []


def _component(u: float) -> tuple[str, str]:
    return ("captures:\n", f"uncertainty: [{{name: chart, of: mtf, absolute: {u}}}]\ncaptures:\n")


@pytest.mark.parametrize(("half", "refused"), [(0.0195, True), (0.0197, False)])
def test_a_rule_that_can_never_accept_is_refused(tmp_path: Path, half: float, refused: bool) -> None:
    """Below T/u = 1.95996 (97.5 % quantile of the normal distribution, any table) no value can reach 95 %."""
    told = _told(tmp_path, f"{MTF}, nominal: 0.45, tolerance: {half}", _component(0.01))

    assert told[0].startswith("error: no value can reach a conformance probability of 0.95") == refused
    simple = _told(tmp_path, f"{MTF}, nominal: 0.45, tolerance: {half}, rule: simple acceptance", _component(0.01))
    assert simple[0].startswith("warning: the declared uncertainty U = 0.02 exceeds a quarter")


def test_an_uncertainty_of_a_quarter_of_the_width_is_warned_of(tmp_path: Path) -> None:
    """U above a quarter of the width is warned of, a quarter itself is not; absolute and relative add in quadrature."""
    assert _told(tmp_path, f"{MTF}, at_least: 0.41, at_most: 0.49", _component(0.00999)) == []
    assert len(_told(tmp_path, f"{MTF}, at_least: 0.41, at_most: 0.49", _component(0.0101))) == 1
    both = "uncertainty: [{name: a, of: mtf, absolute: 0.008}, {name: b, of: mtf, relative: 1.5 %}]\ncaptures:\n"
    told = _told(tmp_path, f"{MTF}, at_least: 0.41, at_most: 0.49", ("captures:\n", both))
    assert told == ["warning: the declared uncertainty U = 0.0209 exceeds a quarter of the width 0.08"]


def test_the_stations_uncertainty_counts(tmp_path: Path) -> None:
    """Components of the station are looked at together with those of the spec; of other quantities, never."""
    limit = f"{MTF}, at_least: 0.41, at_most: 0.49"

    assert len(_told(tmp_path, limit, station=(UncertaintyComponent("lamp", ("mtf",), relative=0.03),))) == 1
    assert _told(tmp_path, limit, station=(UncertaintyComponent("lamp", ("mtf50",), relative=0.03),)) == []


def test_jpeg_is_processed(tmp_path: Path) -> None:
    """A product that delivers JPEG processes, and a spec that says none is asked to say what."""
    jpeg = ("  bit_depth: 12 bit\n", "  bit_depth: 8 bit\n  delivers: jpeg\n")
    told = _told(tmp_path, f"{MTF}, at_least: 0.45", jpeg, ("4095 DN", "255 DN"), ("64 DN", "0 DN"))

    assert told == ["warning: JPEG frames are processed, yet processing says none"]


def test_colour_shading_that_cannot_be(tmp_path: Path) -> None:
    """Warned of: colour shading of frames without colour, or of green; a channel that the camera lacks is refused."""
    limit = "quantity: colour_shading, at_most: 5 %"
    rgb = ("  fill: 100 %\n", "  fill: 100 %\n  colour: rgb\n")
    mono, green = (
        "warning: frames without colour have no colour shading: no unit can conform",
        "warning: colour shading of red and blue is held against green, which has none itself: no unit can conform",
    )

    assert _told(tmp_path, limit) == [mono]
    assert _told(tmp_path, f"{limit}, channel: mono") == [mono]
    assert _told(tmp_path, limit, rgb) == [green]
    assert _told(tmp_path, f"{limit}, channel: green", rgb) == [green]
    assert _told(tmp_path, f"{limit}, channel: red", rgb) == []
    assert _told(tmp_path, f"{limit}, channel: red") == ["error: channel 'red' is not in mono frames"]
