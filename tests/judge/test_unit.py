"""A unit's roll-up, blame and attempts."""

from dataclasses import replace
from itertools import combinations_with_replacement

import pytest

from runner.capture.formats.contract import COPY_AGAIN as COPY_FILE
from runner.capture.manifest import COPY_AGAIN as COPY_UNIT
from runner.judge.unit import judge_unit, roll_up
from runner.measure.evidence import CaptureEvidence
from runner.measure.reading import CAUSES
from tests.judge.hand_made import FRAME, evidence, limit, reading, refused, spec

WORDS = ("conforms", "does not conform", "cannot decide", "not measured", "report only")


@pytest.mark.parametrize(
    "verdicts",
    [v for n in range(4) for v in combinations_with_replacement(WORDS, n)],
    ids=lambda v: "+".join(v) or "none",
)
def test_the_roll_up(verdicts: tuple[str, ...]) -> None:
    """Any failure fails; else anything not measured; else anything undecided; only then it conforms; none is none."""
    judged = set(verdicts) - {"report only"}
    order = ("does not conform", "not measured", "cannot decide", "conforms")

    assert roll_up(verdicts) == next((word for word in order if word in judged), "not measured")


def test_a_good_unit() -> None:
    """A unit far inside its limit conforms, nobody is at fault, and the operator releases it."""
    judged = judge_unit(spec(limit()), evidence(reading(0.3)))

    assert (judged.verdict, judged.at_fault, judged.next) == ("conforms", None, "Release the unit.")
    assert judged.reasons[0].startswith("The one check conforms; nearest to its limit: centre: mtf50 0.3000 ± 0.0020")


def test_a_soft_unit_is_named_with_its_places() -> None:
    """A unit that fails is at fault itself, and the sentence names what and where."""
    limits = limit(where=("left", "right"), where_label="sides")
    judged = judge_unit(spec(limits), evidence(reading(0.15, region="left"), reading(0.16, region="right")))

    assert (judged.verdict, judged.at_fault) == ("does not conform", "unit")
    assert judged.because == "the unit is soft (left and right)"


def test_a_unit_on_its_limit_is_held() -> None:
    """A value that straddles its limit leads to more frames, not to a verdict."""
    judged = judge_unit(spec(limit()), evidence(reading(0.2)))

    assert (judged.verdict, judged.at_fault) == ("cannot decide", None)
    assert judged.next.startswith("Hold the unit; take more frames for characteristic 1")


@pytest.mark.parametrize("cause", CAUSES)
def test_every_refusal_ends_as_not_measured_with_its_blame(cause: str) -> None:
    """No cause of a missing value ever conforms or fails the unit, and each has someone or nobody to blame."""
    judged = judge_unit(spec(limit()), evidence(refused(cause)))

    assert judged.verdict == "not measured"
    assert judged.at_fault in {"capture", "cannot tell", "program"}
    assert judged.because
    assert f"because of {cause}" in judged.reasons[0]


@pytest.mark.parametrize("cause", ["no edge", "no modulation", "no picture", "too noisy"])
def test_what_a_bad_unit_could_cause_names_the_frame_that_settles_it(cause: str) -> None:
    """A wholly defocused or dead unit is not a dark lamp: nobody is blamed, and the settling frame is named."""
    judged = judge_unit(spec(limit()), evidence(refused(cause)))

    assert judged.at_fault == "cannot tell"
    assert "a frame of a unit known to be good" in judged.because


def test_a_dark_lamp_is_the_captures_fault() -> None:
    """The level against dark blames the capture."""
    judged = judge_unit(spec(limit()), evidence(refused("too dark")))

    assert (judged.at_fault, judged.next[:14]) == ("capture", "Capture again:")


def test_a_missing_reading_is_the_programs_fault() -> None:
    """A limit without any reading can never pass in silence."""
    judged = judge_unit(spec(limit()), evidence())

    assert (judged.verdict, judged.at_fault) == ("not measured", "program")


def test_a_refused_file_makes_every_check_of_its_capture_not_measured() -> None:
    """One bad file blames the capture, whatever readings there are."""
    bad = CaptureEvidence("chart", 1, "slanted edge", (FRAME,), ("chart-1.tif: it is truncated",))
    judged = judge_unit(spec(limit("1"), limit("2", where=("left",))), evidence(reading(0.3), captures=[bad]))

    assert [(c.verdict, c.at_fault) for c in judged.checks] == [("not measured", "capture")] * 2
    assert "it is truncated" in judged.checks[0].reason


@pytest.mark.parametrize(
    ("faults", "step"),
    [
        ([f"a.tif: it is truncated; {COPY_FILE}"], "Copy again from the station: 'chart'."),
        ([f"manifest.json: a.tif is another; {COPY_UNIT}"], "Copy again from the station: 'chart'."),
        (
            [f"a.tif: half of it is zero; {COPY_FILE}; if it stays so, capture again"],
            "Copy again from the station: 'chart'; if the reason stays, capture 'chart' again.",
        ),
        (
            [f"a.tif: it is truncated; {COPY_FILE}", "a.tif: no sidecar says its serial; capture again"],
            "Copy again from the station: 'chart'. Capture again: 'chart'. First mend what the reason says.",
        ),
        (["a.tif: counter 3 as in b.tif; capture again"], "Capture again: 'chart'. First mend what the reason says."),
    ],
)
def test_a_half_copied_file_is_copied_again(faults: list[str], step: str) -> None:
    """What only the copy lacks is copied, not captured, again; both stand where faults ask for both."""
    bad = CaptureEvidence("chart", 1, "slanted edge", (FRAME,), tuple(faults))

    assert judge_unit(spec(limit()), evidence(captures=[bad])).next == step


def test_a_capture_that_only_lacks_its_companion_is_not_made_again() -> None:
    """The dark's file is copied again; the chart, whose frames are good, is left alone."""
    bad = CaptureEvidence("dark", 1, "dark frame", (FRAME,), (f"dark-1.tif: it is truncated; {COPY_FILE}",))
    good = CaptureEvidence("chart", 1, "slanted edge", (FRAME,))
    asked = spec(limit(), limit("2", capture="dark"), captures=("chart", "dark"))

    judged = judge_unit(asked, evidence(refused("missing companion"), captures=[bad, good]))

    assert judged.next == "Copy again from the station: 'dark'."


def test_none_of_what_there_must_be_none_is_not_near_its_limit() -> None:
    """No stuck pixel where none is allowed could not be better; two of two is on its limit, and said."""
    none = {"at_least": None, "unit": "1", "rule": "simple acceptance"}
    limits = (limit(), limit("2", quantity="stuck_pixels", at_most=0.0, **none))
    two = limit("3", quantity="dead_pixels", at_most=2.0, **none)
    sharp = reading(0.3)
    counts = [
        reading(n, 0.0, quantity=q, measured_in="1", count=True)
        for q, n in (("stuck_pixels", 0.0), ("dead_pixels", 2.0))
    ]

    assert "nearest to its limit: centre: mtf50" in judge_unit(spec(*limits), evidence(sharp, *counts)).reasons[0]
    assert "centre: dead pixels 2, at most 2" in judge_unit(spec(*limits, two), evidence(sharp, *counts)).reasons[0]
    assert judge_unit(spec(limits[1]), evidence(*counts)).reasons == ("The one check conforms.",)


def test_two_valid_attempts_need_a_rule() -> None:
    """Without a retest rule two usable attempts are not judged: the better one is never picked."""
    two = [CaptureEvidence("chart", n, "slanted edge", (FRAME,)) for n in (1, 2)]
    judged = judge_unit(spec(limit()), evidence(reading(0.1), replace(reading(0.3), attempt=2), captures=two))

    assert judged.verdict == "not measured"
    assert "two valid attempts, no rule" in judged.reasons[0]


def test_a_second_attempt_after_an_unusable_one_is_judged() -> None:
    """An attempt that could not be used does not count against the next."""
    bad = CaptureEvidence("chart", 1, "slanted edge", (), ("chart-1.tif: it is empty",))
    good = CaptureEvidence("chart", 2, "slanted edge", (FRAME,))
    judged = judge_unit(spec(limit()), evidence(replace(reading(0.3), attempt=2), captures=[bad, good]))

    assert (judged.verdict, judged.checks[0].attempt) == ("conforms", 2)


def test_a_failure_outweighs_what_was_not_measured() -> None:
    """A unit that fails one limit does not conform though another was not measured."""
    judged = judge_unit(
        spec(limit("1"), limit("2", where=("left",))), evidence(reading(0.1), refused("no edge", "left"))
    )

    assert (judged.verdict, judged.at_fault) == ("does not conform", "unit")


def test_a_spec_without_limits_judges_nothing() -> None:
    """No checks at all is not measured, and so is a spec that only reports."""
    assert judge_unit(spec(), evidence()).verdict == "not measured"
    assert judge_unit(spec(limit(report_only=True, at_least=None)), evidence(reading(0.3))).verdict == "not measured"


def test_judging_again_gives_the_same() -> None:
    """A judgement depends on nothing but spec and evidence."""
    asked, found = (
        spec(limit(combine="range", where=("left", "right"), where_label="sides", at_least=None, at_most=0.1)),
        (evidence(reading(0.21, 0.01, "left"), reading(0.29, 0.02, "right"))),
    )

    assert judge_unit(asked, found) == judge_unit(asked, found)


def test_the_gravest_reason_comes_first() -> None:
    """A failure comes before what was not measured, and of failures the one most U beyond its limit, in any order."""
    limits = (
        limit("1", where=("left",), where_label="left"),
        limit("2"),
        limit("3", where=("right",), where_label="right"),
        limit("4", quantity="edge_width", unit="px", at_least=None, at_most=2.0),
    )
    wide = reading(3.0, 0.3, quantity="edge_width", measured_in="px")  # 1.0 over its limit is 1.7 U, and does not count
    found = (refused("no edge", "left"), reading(0.195, 0.004), reading(0.15, 0.002, "right"), wide)

    judged = judge_unit(spec(*limits), evidence(*found))
    turned = judge_unit(spec(*reversed(limits)), evidence(*reversed(found)))

    places = ["right: mtf50 0.1500", "centre: edge width 3", "left: mtf50 not measured", "centre: mtf50 0.195"]
    assert [reason[: len(place)] for reason, place in zip(judged.reasons, places, strict=True)] == places
    assert judged.reasons == turned.reasons
    assert judged.because.startswith("the unit is soft (right")


def test_of_what_was_not_measured_the_blamed_comes_first() -> None:
    """The first reason is the one that the unit's blame is taken from, then by number: 2 comes before 10."""
    limits = [limit(n, where=(place,), where_label=place) for n, place in (("10", "left"), ("2", "right"), ("1", "x"))]
    found = (refused("too dark", "left"), refused("too dark", "right"), refused("no edge", "x"))

    judged = judge_unit(spec(*limits), evidence(*found))

    assert judged.at_fault == "capture"
    assert [reason.partition(":")[0] for reason in judged.reasons] == ["right", "left", "x"]


def test_a_value_without_uncertainty_is_beyond_by_any_number_of_u() -> None:
    """A count beyond its limit outweighs a value that lies some U beyond its own; among such, the larger excess."""
    at_most = {"at_least": None, "at_most": 3.0, "rule": "simple acceptance", "unit": "1"}
    limits = (limit("1"), limit("2", quantity="clusters", **at_most), limit("3", quantity="hot_pixels", **at_most))
    counts = {"clusters": 5.0, "hot_pixels": 9.0}
    found = [reading(n, 0.0, quantity=q, measured_in="1", count=True) for q, n in counts.items()]

    judged = judge_unit(spec(*limits), evidence(reading(0.1), *found))

    assert [r.split()[1] for r in judged.reasons] == ["hot", "clusters", "mtf50"]
