"""Captures and limits: names resolved, ends joined in one unit, companions without circles."""

from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.spec.build import from_expanded, read_spec
from runner.spec.files import Agreed, Sidecar
from runner.spec.model import SIMPLE_ACCEPTANCE, Bound, Limit
from tests.scenes.spec_text import TEXT, write

ONE = "{characteristic: 1, quantity: mtf, frequency: 0.25 cy/px, where: centre, at_least: 0.45}"


def _limit(folder: Path, line: str) -> Limit:
    return read_spec(write(folder, TEXT.replace(ONE, f"{{{line}}}"))).capture("chart").limits[0]


def test_ends_are_joined_in_the_first_ones_unit(tmp_path: Path) -> None:
    """Lower and upper limit may have different units of one kind; the check has the lower one's."""
    limit = _limit(tmp_path, "characteristic: 1, quantity: lsf_fwhm, where: centre, at_least: 1.5 px, at_most: 12 um")

    assert (limit.unit, limit.at_least) == ("px", 1.5)
    assert limit.at_most == pytest.approx(4.0, rel=1e-12)


def test_a_nominal_value_with_tolerance(tmp_path: Path) -> None:
    """Nominal with tolerance becomes two limits in the nominal's unit, and the nominal is kept."""
    limit = _limit(
        tmp_path, "characteristic: 1, quantity: edge_width, where: centre, nominal: 3 px, tolerance: [1 px, 6 um]"
    )

    assert (limit.at_least, limit.nominal, limit.unit) == (2.0, 3.0, "px")
    assert limit.at_most == pytest.approx(5.0, rel=1e-12)
    limit = _limit(
        tmp_path, "characteristic: 1, quantity: mtf50, where: centre, nominal: 0.30 cy/px, tolerance: 0.02 cy/px"
    )
    assert (limit.at_least, limit.at_most) == (0.28, 0.32)  # in decimals; 0.30 - 0.02 is not 0.28 in binary


def test_a_limit_may_differ_from_the_decision(tmp_path: Path) -> None:
    """Rule, probability, estimator, method, part, channel and bound of a limit are its own."""
    limit = _limit(
        tmp_path,
        "characteristic: 4a, quantity: mtf, frequency: 100 lp/mm, where: centre, at_least: 40 %, part: lens, "
        "rule: simple acceptance, conformance_probability: 90 %, estimator: e, method: m, channel: mono, "
        "bound: binomial",
    )

    assert (limit.characteristic, limit.unit, limit.at_least, limit.part) == ("4a", "%", 40.0, "lens")
    assert (limit.rule, limit.conformance_probability) == (SIMPLE_ACCEPTANCE, 0.9)
    assert (limit.estimator, limit.method, limit.channel, limit.count_bound) == ("e", "m", "mono", "binomial")
    assert limit.parameters["frequency"].unit == "lp/mm"


def test_a_ratio_has_its_denominator(tmp_path: Path) -> None:
    """`against` is resolved like `where`; both keep the spec's words for the report."""
    limit = _limit(
        tmp_path,
        "characteristic: 1, quantity: mtf50, where: corners, combine: ratio, against: [centre], at_least: 70 %",
    )

    assert (limit.where_label, limit.against_label) == ("corners", "centre")
    assert limit.against == ("centre",)
    assert len(limit.where) == 2


def test_a_value_that_is_only_reported(tmp_path: Path) -> None:
    """Without measured_in it keeps its own unit, with it the unit asked for."""
    line = "characteristic: 1, quantity: edge_width, where: centre, report_only: true"

    assert _limit(tmp_path, line).unit == ""
    assert _limit(tmp_path, f"{line}, measured_in: um").unit == "µm"
    with pytest.raises(SpecError, match="unknown unit 'inch'"):
        _limit(tmp_path, f"{line}, measured_in: inch")


def test_a_capture_without_regions_needs_no_where(tmp_path: Path) -> None:
    """Limits on a capture without regions are on the whole frame; naming a region there is refused."""
    dark = "dark: {target: dark frame, frames: {names: 'dark-{repeat}.tif', count: 4}"
    assert dark in TEXT
    line = "limits: [{characteristic: 9, quantity: level, at_most: 1 %}]"
    spec = read_spec(write(tmp_path, TEXT.replace(dark, f"{dark}, {line}")))
    assert spec.capture("dark").limits[0].where == ()

    with pytest.raises(SpecError, match="there is no region 'centre'; the capture has no regions"):
        read_spec(write(tmp_path, TEXT.replace(dark, f"{dark}, {line.replace('at_most', 'where: centre, at_most')}")))


def test_one_characteristic_may_hold_in_several_places(tmp_path: Path) -> None:
    """A number is unique with its place: the same number may stand at other regions, not twice at one."""
    more = TEXT + "      - {characteristic: 1, quantity: mtf, frequency: 0.25 cy/px, where: corners, at_least: 0.3}\n"
    assert len(read_spec(write(tmp_path, more)).capture("chart").limits) == 4

    with pytest.raises(SpecError, match=r"characteristic 1 at 'centre' stands twice; first in .*spec\.yaml:28:26"):
        read_spec(write(tmp_path, more.replace("where: corners, at_least: 0.3", "where: centre, at_least: 0.3")))


def test_what_makes_a_capture_usable(tmp_path: Path) -> None:
    """Inequalities become bounds with one unit, sorted by quantity."""
    text = TEXT.replace("{clipped: at most 0.01 %}", "{level: from 20 to 80 %, clipped: at most 0.01 %}")

    assert read_spec(write(tmp_path, text)).capture("chart").usable_if == (
        Bound("clipped", None, 0.01, "%"),
        Bound("level", 20.0, 80.0, "%"),
    )


def test_frames_of_another_capture(tmp_path: Path) -> None:
    """`same_frames_as` names a capture with frames of its own, not one that borrows in turn."""
    limits = "limits: [{characteristic: 7, quantity: level, at_least: 1 %}]"
    text = f"{TEXT}  again:\n    target: slanted edge\n    same_frames_as: chart\n    {limits}\n"
    spec = read_spec(write(tmp_path, text))
    assert (spec.capture("again").frames, spec.capture("again").same_frames_as) == (None, "chart")

    with pytest.raises(SpecError, match="capture 'again' has no frames of its own"):
        read_spec(write(tmp_path, text + "  third:\n    target: slanted edge\n    same_frames_as: again\n"))


def test_names_are_checked_even_where_the_camera_is_broken(tmp_path: Path) -> None:
    """A fault in the camera does not hide unknown regions and captures: all is told at once."""
    text = TEXT.replace("12 bit", "12").replace("where: centre", "where: center").replace("{dark: dark}", "{dark: drk}")

    with pytest.raises(SpecError, match="no region 'center'") as caught:
        read_spec(write(tmp_path, text))

    assert [complaint.found for complaint in caught.value.complaints] == [
        "'12' is no bit depth",
        "there is no capture 'drk'",
        "there is no region 'center'",
    ]


RGB = ("  processing: none", "  processing: sharpened\n  colour: rgb")


def test_a_limit_without_a_channel_holds_in_each(tmp_path: Path) -> None:
    """In colour frames a limit may name a channel; one without stands for all."""
    text = TEXT.replace(*RGB)
    line = "characteristic: 1, quantity: mtf, frequency: 0.25 cy/px, where: centre, at_least: 0.3"
    more = f"{text}      - {{{line.replace('centre', 'corners')}, channel: red}}\n"

    assert read_spec(write(tmp_path, more)).capture("chart").limits[3].channel == "red"
    both = more + f"      - {{{line.replace('centre', 'corners')}, channel: blue}}\n"
    assert len(read_spec(write(tmp_path, both)).capture("chart").limits) == 5
    with pytest.raises(SpecError, match="channel 'gren' is not in colour frames; one of: red, green, blue; leave"):
        read_spec(write(tmp_path, more.replace("channel: red", "channel: gren")))
    with pytest.raises(SpecError, match="characteristic 1 at 'corners upper left' in red stands twice"):
        read_spec(write(tmp_path, more + f"      - {{{line.replace('centre', 'corners')}}}\n"))


def test_what_sidecars_must_say(tmp_path: Path) -> None:
    """Equal ends stand for one value; fields come in a fixed order; nothing is asked where nothing is written."""
    line = "sidecar: {temperature: from 20 to 30 degC, require: [time, serial], exposure: 2 ms, counter: consecutive}"
    spec = read_spec(write(tmp_path, TEXT.replace("count: 4}", f"count: 4}}, {line}")))

    assert spec.capture("dark").sidecar == Sidecar(
        ("serial", "time"),
        (Agreed("exposure", 2.0, 2.0, "ms"), Agreed("temperature", 20.0, 30.0, "°C")),
        consecutive=True,
    )
    assert spec.capture("chart").sidecar == Sidecar()
    assert from_expanded(spec.expanded).capture("dark").sidecar == spec.capture("dark").sidecar
