"""Limits against readings: units, uniqueness, combinations, what is only reported."""

import math
from dataclasses import replace
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from runner.judge.checks import checks_of, not_measured
from runner.judge.unit import judge_unit
from runner.judge.verdict import Check
from runner.measure.evidence import CaptureEvidence
from runner.measure.reading import Reading
from runner.spec.model import Limit
from tests.judge.hand_made import CAMERA, FRAME, evidence, limit, reading, refused, spec


def _check(asked: Limit, *readings: Reading, at: int = 0) -> Check:
    return judge_unit(spec(asked), evidence(*readings)).checks[at]


def test_a_value_is_converted_into_the_limits_unit() -> None:
    """0.3 cy/px at a pitch of 3 µm is 100 lp/mm; u converts by the same factor."""
    check = _check(limit(unit="lp/mm", at_least=90.0), reading(0.3, 0.003))

    assert [check.value, check.u] == pytest.approx([100, 1])
    assert check.measured_in == "lp/mm"
    assert check.verdict == "conforms"


def test_a_group_is_checked_in_each_of_its_members() -> None:
    """One limit on two regions is two checks, each with its own place."""
    asked = spec(limit(where=("left", "right"), where_label="sides"))
    checks = judge_unit(asked, evidence(reading(0.3, region="left"), reading(0.1, region="right"))).checks

    assert [(c.where, c.verdict) for c in checks] == [("left", "conforms"), ("right", "does not conform")]


def test_a_sentence_without_a_region_names_its_capture() -> None:
    """The same quantity of two captures is told apart; a capture with regions is spoken of as all of them."""
    asked = spec(limit(where=()), limit("2", where=(), capture="dark"), captures=("chart", "dark"))
    bare = tuple(replace(one, regions=()) if one.name == "dark" else one for one in asked.captures)
    two = [CaptureEvidence(name, 1, "slanted edge", (FRAME,)) for name in ("chart", "dark")]
    found = evidence(reading(0.1, region=""), reading(0.1, region="", capture="dark"), captures=two)

    judged = judge_unit(replace(asked, captures=bare), found)

    assert {r.partition(": ")[0] for r in judged.reasons} == {"all regions (chart)", "whole frame (dark)"}
    assert {r.partition("; ")[2] for r in judged.reasons} == {"the unit is soft"}
    assert judged.because == "the unit is soft (chart and dark)"
    assert [c.where for c in judged.checks] == ["", ""], "what results.json holds stays as it is"


def test_places_are_unique() -> None:
    """No two checks share characteristic, place and channel."""
    asked = spec(limit("1", where=("left", "right")), limit("2"), limit("2", combine="mean", where=("left", "right")))
    checks = judge_unit(asked, evidence()).checks

    assert len({(c.characteristic, c.where, c.channel) for c in checks}) == len(checks) == 4


@pytest.mark.parametrize("combine", ["worst", "range", "mean", "ratio"])
def test_a_combination_with_a_lost_member_is_not_measured(combine: str) -> None:
    """A corner that was not measured cannot be left out of worst, range, mean or ratio."""
    asked = limit(combine=combine, where=("left", "right"), where_label="sides", against=("centre",), at_least=0.1)
    check = _check(asked, reading(0.3), reading(0.3, region="left"), refused("no edge", "right"))

    assert (check.verdict, check.at_fault, check.value) == ("not measured", "cannot tell", None)


def test_a_combination_can_be_followed_with_a_pencil() -> None:
    """The steps of a range start from its members' own range, and what is taken off leads to the value."""
    asked = limit(combine="range", where=("left", "right"), where_label="sides", at_least=None, at_most=0.1)
    check = _check(asked, reading(0.302, 0.002, region="left"), reading(0.3, 0.002, region="right"))

    assert check.value is not None
    off = 0.002 - check.value
    assert f"largest less smallest member is 0.0020 cy/px; {off:.4f} cy/px is taken off" in check.steps


def test_a_ratio_is_a_plain_number_or_percent() -> None:
    """Sides at 0.24 against a centre of 0.3 are a ratio of 0.8, or 80 %."""
    known = (reading(0.3), reading(0.24, region="left"), reading(0.24, region="right"))
    shared: dict[str, Any] = {
        "combine": "ratio",
        "where": ("left", "right"),
        "where_label": "sides",
        "against": ("centre",),
    }

    assert _check(limit(unit="1", at_least=0.7, **shared), *known).value == pytest.approx(0.8, rel=1e-3)
    assert _check(limit(unit="%", at_least=70.0, **shared), *known).value == pytest.approx(80, rel=1e-3)


def test_a_ratio_to_nothing_is_refused() -> None:
    """A denominator that cannot be told from 0 gives no ratio."""
    shared: dict[str, Any] = {"combine": "ratio", "where": ("left",), "where_label": "left", "against": ("centre",)}
    check = _check(limit(unit="1", at_least=0.7, **shared), reading(0.001, 0.001), reading(0.3, region="left"))

    assert (check.verdict, "cannot be told from 0" in check.reason) == ("not measured", True)


def test_what_is_only_reported_has_no_verdict() -> None:
    """A reported value keeps its own unit and never enters the roll-up."""
    check = _check(limit(report_only=True, at_least=None, unit=""), reading(0.3))

    assert (check.verdict, check.measured_in, check.probability) == ("report only", "cy/px", None)


def test_a_bound_is_judged_as_a_bound() -> None:
    """A reading above the measured band conforms to a lower limit inside it, and says so."""
    check = _check(limit(), reading(None, None, bound=("above", 0.8)))

    assert (check.verdict, check.bound, "above 0.8" in check.reason) == ("conforms", ("above", 0.8), True)


def test_the_worst_of_valued_and_bounded_members_is_the_valued_one() -> None:
    """A member above the band cannot be the smallest when another has a value below it."""
    asked = limit(combine="worst", where=("left", "right"), where_label="sides")
    check = _check(asked, reading(None, None, "left", bound=("above", 0.8)), reading(0.3, region="right"))

    assert check.value == pytest.approx(0.3)


def test_each_colour_channel_is_checked_unless_one_is_named() -> None:
    """A limit without channel holds in red, green and blue; a lost channel is not measured, never left out."""
    asked, green = limit("1"), limit("2", channel="green")
    colour = replace(spec(asked, green).captures[0], camera=replace(CAMERA, mosaic="RGGB"))
    readings = {"centre": [reading(0.3, channel="red"), reading(0.25, channel="green")]}
    checks = checks_of(colour, asked, readings, 1) + checks_of(colour, green, readings, 1)

    assert [(c.characteristic, c.channel, c.verdict) for c in checks] == [
        ("1", "red", "conforms"),
        ("1", "green", "conforms"),
        ("1", "blue", "not measured"),
        ("2", "green", "conforms"),
    ]
    assert checks[0].reason.startswith("centre red: mtf50")


def test_another_estimators_reading_does_not_answer() -> None:
    """A limit that names an estimator is answered by that one only."""
    check = _check(limit(estimator="iso 12233:2014"), reading(0.3))

    assert (check.verdict, check.at_fault) == ("not measured", "program")


def test_a_capture_that_cannot_be_used_yields_all_its_checks() -> None:
    """Every limit yields its checks always."""
    asked = limit(where=("left", "right"))
    checks = not_measured(spec(asked).captures[0], asked, 1, "gone", "capture", "file")

    assert [(c.where, c.verdict, c.at_fault) for c in checks] == [("left", "not measured", "capture")] * 1 + [
        ("right", "not measured", "capture")
    ]


@given(
    value=st.one_of(st.none(), st.just(math.nan), st.just(math.inf), st.just(-math.inf)),
    u=st.one_of(st.none(), st.just(math.nan), st.just(math.inf), st.floats(0, 1)),
    combine=st.sampled_from([None, "worst", "range", "mean", "ratio"]),
)
def test_what_is_no_number_never_conforms(value: float | None, u: float | None, combine: str | None) -> None:
    """Whatever stands in a reading in place of a number, no check of it conforms."""
    shared: dict[str, Any] = {"where": ("left", "centre"), "where_label": "both", "against": ("centre",)}
    asked = limit(combine=combine, at_least=-1e9, at_most=1e9, **shared)
    bad = reading(value, u, "left", components=())
    capture = spec(asked).captures[0]

    checks = checks_of(capture, asked, {"left": [bad], "centre": [reading(0.3)]}, 1)

    assert [c.verdict for c in checks if c.where != "centre"] == ["not measured"]
