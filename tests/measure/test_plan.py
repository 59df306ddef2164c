"""Every name of a spec is bound to the shelves before a frame is opened."""

from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.measure.plan import Plan, bind
from runner.spec.build import read_spec
from runner.spec.model import Station, UncertaintyComponent

SPEC = """\
probatum-spec: 1
document: {{number: WS8-ACC, revision: C}}
unit: {{product: WS8, serial: 'WS8-[0-9]{{6}}'}}
camera: {{frame_size: 800 x 600 px, bit_depth: 12 bit, black_level: 64 DN, white_level: 4095 DN, pixel_pitch: 3 um}}
captures:
  chart:
    target: {target}
    frames: 'chart-{{repeat}}.tif'
    regions: {{centre: {{position: [50 %, 50 %], size: [80 px, 120 px]}}}}
    {measure}
    usable_if: {{{usable_if}}}
    limits:
      - {{characteristic: 1, {limit}, where: centre}}
"""
GOOD = {
    "target": "slanted edge",
    "measure": "measure: {edge response: {order: 1}}",
    "usable_if": "clipped: at most 0.01 %",
    "limit": "quantity: mtf, frequency: 50 lp/mm, at_least: 0.45",
}


def _bind(folder: Path, **changes: str) -> Plan:
    path = folder / "spec.yaml"
    path.write_text(SPEC.format(**(GOOD | changes)))
    return bind(read_spec(path))


def test_a_limit_becomes_a_wanted_reading_in_the_methods_unit(tmp_path: Path) -> None:
    """A frequency asked in lp/mm reaches the method in cy/px, and the reading keeps the words of the spec."""
    methods = {m.method.NAME: m for m in _bind(tmp_path).captures[0].methods}
    (wanted,) = methods["edge response"].wanted["centre"]

    assert wanted.at["frequency"] == pytest.approx(0.15)  # 50 lp/mm × 0.003 mm
    assert (wanted.parameters["frequency"].value, wanted.parameters["frequency"].unit) == (50, "lp/mm")


def test_level_and_clipping_are_always_measured(tmp_path: Path) -> None:
    """Exposure is bound to every capture, asked or not."""
    assert [m.method.NAME for m in _bind(tmp_path).captures[0].methods] == ["edge response", "exposure"]


def test_the_targets_own_methods_run_when_none_is_named(tmp_path: Path) -> None:
    """A spec without `measure` gets what the target says."""
    names = [m.method.NAME for m in _bind(tmp_path, measure="").captures[0].methods]

    assert names == ["edge response", "exposure"]


def test_what_the_program_filled_in_is_told(tmp_path: Path) -> None:
    """The plan in the results holds every option of target and methods."""
    filled = _bind(tmp_path).defaults()["captures"]["chart"]

    assert filled["measure"]["edge response"]["estimator"] == "joint fit"
    assert "slanted edge" in filled["target"]


def test_components_of_spec_and_station_add_up(tmp_path: Path) -> None:
    """Declared components of the station come behind the spec's."""
    path = tmp_path / "spec.yaml"
    path.write_text(SPEC.format(**GOOD))
    station = Station(uncertainty=(UncertaintyComponent("drift", ("mtf",), relative=0.01),))

    assert [c.name for c in bind(read_spec(path), station).uncertainty] == ["drift"]


@pytest.mark.parametrize(
    ("changes", "complaint"),
    [
        ({"target": "slantd edge"}, "unknown target 'slantd edge'.*did you mean 'slanted edge'"),
        (
            {"measure": "measure: {edge respons: {order: 1}}"},
            "unknown method 'edge respons'.*did you mean 'edge response'",
        ),
        ({"measure": "measure: {edge response: {ordre: 2}}"}, "unknown option 'ordre'"),
        ({"measure": "measure: {edge response: {order: 9}}"}, "9"),
        ({"limit": "quantity: mtf5O, at_least: 0.2 cy/px"}, "unknown quantity 'mtf5O'.*did you mean 'mtf50'"),
        ({"limit": "quantity: mtf, at_least: 0.2"}, "mtf needs 'frequency'"),
        (
            {"limit": "quantity: mtf50, frequency: 0.2 cy/px, at_least: 0.2 cy/px"},
            "mtf50 takes no 'frequency'",
        ),
        ({"limit": "quantity: mtf50, at_least: 20 %"}, "mtf50 is measured in cy/px, its limit is given in %"),
        ({"limit": "quantity: mtf50, at_least: 3 cy/deg"}, "mtf50 is measured in cy/px.*focal"),
        ({"usable_if": "cliped: at most 1 %"}, "unknown quantity 'cliped'.*did you mean 'clipped'"),
        ({"target": "dark frame"}, "method 'edge response' needs edge; target 'dark frame' does not offer it"),
    ],
)
def test_names_that_are_not_there_are_complained_about(tmp_path: Path, changes: dict[str, str], complaint: str) -> None:
    """Each wrong name, option, parameter or unit ends in a sentence that says which and what is known."""
    with pytest.raises(SpecError, match=rf"spec\.yaml:\d+:\d+: .*{complaint}"):
        _bind(tmp_path, **changes)


def test_a_search_distance_written_under_the_method_reaches_the_target(tmp_path: Path) -> None:
    """An option that method and target share need be written only once."""
    filled = _bind(tmp_path, measure="measure: {edge response: {search: 4 px}}").defaults()["captures"]["chart"]

    assert filled["target"]["slanted edge"]["search"] == 4
    assert filled["measure"]["edge response"]["search"] == 4


def test_a_ratios_limit_is_a_plain_number(tmp_path: Path) -> None:
    """The ratio of two frequencies is judged in % whatever unit they have."""
    limit = "quantity: mtf50, combine: ratio, against: centre, at_least: 70 %"

    assert _bind(tmp_path, limit=limit).spec.captures[0].limits[0].unit == "%"


def test_frames_along_other_axes_are_not_averaged(tmp_path: Path) -> None:
    """A pattern with a focus axis is refused while no method knows what to do with it."""
    path = tmp_path / "spec.yaml"
    path.write_text(SPEC.format(**GOOD).replace("chart-{repeat}.tif", "chart-{z}.tif"))

    with pytest.raises(SpecError, match="takes frames along 'z'"):
        bind(read_spec(path))


def test_the_decision_rule_that_was_filled_in_is_told(tmp_path: Path) -> None:
    """The plan tells the rule and the probability that the spec left out, and nothing that it states."""
    assert _bind(tmp_path).defaults()["decision"] == {"rule": "proof either way", "conformance_probability": 0.95}
    path = tmp_path / "other.yaml"
    path.write_text(SPEC.format(**GOOD) + "decision: {rule: guarded acceptance}\n")

    assert bind(read_spec(path)).defaults()["decision"] == {"conformance_probability": 0.95}


STRIPES = """\
probatum-spec: 1
document: {number: WS8-ACC, revision: C}
unit: {product: WS8, serial: 'WS8-[0-9]{6}'}
camera: {frame_size: 800 x 600 px, bit_depth: 12 bit, black_level: 64 DN, white_level: 4095 DN}
captures:
  stripes:
    target: sinusoidal grating
    frames: 'stripes-{repeat}.tif'
    regions:
      upright: {position: {coarse: [25 %, 50 %], fine: [75 %, 50 %]}, size: [80 px, 120 px]}
      level: {position: [50 %, 50 %], size: [80 px, 120 px]}
    measure: {grating response: {target_modulation: 80 %}, transfer curve: {}}
    limits:
      - {characteristic: 1, LIMIT}
"""


def _bind_stripes(folder: Path, limit: str) -> Plan:
    path = folder / "stripes.yaml"
    path.write_text(STRIPES.replace("LIMIT", limit))
    return bind(read_spec(path))


def test_a_whole_quantity_is_wanted_once_for_its_group(tmp_path: Path) -> None:
    """A group's curve is one reading under the group's name, for measuring and for judging alike."""
    plan = _bind_stripes(tmp_path, "quantity: mtf, frequency: 0.1 cy/px, where: upright, at_least: 0.4")
    curve = next(m for m in plan.captures[0].methods if m.method.NAME == "transfer curve")

    assert list(curve.wanted) == ["upright"]
    assert curve.groups == {"upright": ("upright coarse", "upright fine")}
    assert plan.spec.captures[0].limits[0].where == ("upright",)


def test_what_another_process_binds_again_is_the_same_plan(tmp_path: Path) -> None:
    """Bound once more from what was asked, groups and warnings are the same; a bound spec has lost the members."""
    plan = _bind_stripes(tmp_path, "quantity: mtf, frequency: 0.1 cy/px, where: upright, at_least: 0.4")
    assert plan.asked is not None

    again = bind(plan.asked)

    assert again.spec == plan.spec
    assert [m.groups for m in again.captures[0].methods] == [m.groups for m in plan.captures[0].methods]


def test_a_whole_quantity_may_leave_where_out(tmp_path: Path) -> None:
    """Then it stands for all regions of the capture."""
    plan = _bind_stripes(tmp_path, "quantity: mtf50, at_least: 0.1 cy/px")
    curve = next(m for m in plan.captures[0].methods if m.method.NAME == "transfer curve")

    assert list(curve.wanted) == [""]


@pytest.mark.parametrize(
    ("limit", "words"),
    [
        ("quantity: modulation, at_least: 40 %", "limit 1 does not say where"),
        ("quantity: mtf50, where: upright, combine: range, at_most: 0.1 cy/px", "one value of all its regions already"),
    ],
)
def test_a_place_that_does_not_fit_is_refused(tmp_path: Path, limit: str, words: str) -> None:
    """A region's quantity needs its region; a value of many regions takes no combination."""
    with pytest.raises(SpecError, match=words):
        _bind_stripes(tmp_path, limit)
