"""Whether a capture may be judged at all."""

import math
from collections.abc import Sequence

import pytest

from runner.capture.fitness import UNDECIDED
from runner.judge.usability import judge_capture
from runner.judge.verdict import CaptureState
from runner.measure.evidence import CaptureEvidence
from runner.measure.reading import Reading
from runner.spec.model import Bound
from tests.judge.hand_made import FRAME, reading, refused, spec

CLIPPED = Bound("clipped", None, 0.01, "%")
GOOD = CaptureEvidence("chart", 1, "slanted edge", (FRAME,))


def _clipped(value: float | None) -> Reading:
    return reading(value, 0.0, quantity="clipped", measured_in="%")


def _state(*readings: Reading, bounds: Sequence[Bound] = (CLIPPED,), capture: CaptureEvidence = GOOD) -> CaptureState:
    return judge_capture(spec(usable_if=bounds).captures[0], capture, readings)


def test_a_bound_that_holds_leaves_the_capture_usable() -> None:
    """On its end a bound still holds."""
    assert _state(_clipped(0.01)).usable


def test_a_broken_bound_names_place_value_and_bound() -> None:
    """Clipping beyond the bound makes the capture unusable and blames it."""
    state = _state(_clipped(0.5))

    assert (state.usable, state.at_fault) == (False, "capture")
    assert state.faults == ("centre: clipped 0.5 %, at most 0.01 % makes the capture usable",)


def test_a_bound_is_judged_in_its_own_unit() -> None:
    """A share in % is compared with a bound given as a plain number."""
    assert not _state(_clipped(0.5), bounds=(Bound("clipped", None, 0.001, "1"),)).usable
    assert _state(_clipped(0.05), bounds=(Bound("clipped", None, 0.001, "1"),)).usable


def test_what_was_never_measured_makes_the_capture_unusable() -> None:
    """A bound on a quantity without any reading cannot be passed in silence."""
    assert "was not measured" in _state(reading(0.3)).faults[0]


@pytest.mark.parametrize("value", [math.nan, math.inf, None])
def test_what_is_no_number_makes_the_capture_unusable(value: float | None) -> None:
    """NaN never satisfies a bound."""
    assert not _state(_clipped(value)).usable


def test_a_refused_region_speaks_for_itself() -> None:
    """A region that gave no value leaves the capture to its other regions; its own checks tell why."""
    assert _state(refused("no edge", quantity="clipped", measured_in="%"), _clipped(0.0)).usable


def test_files_come_before_readings() -> None:
    """A refused file makes the capture unusable whatever was read."""
    state = _state(_clipped(0.0), capture=CaptureEvidence("chart", 1, "slanted edge", (FRAME,), ("a.tif: empty",)))

    assert (state.usable, state.at_fault, state.faults) == (False, "capture", ("a.tif: empty",))


def test_a_quantity_that_the_unit_could_spoil_blames_nobody() -> None:
    """Low edge modulation may be stray light or a bad unit."""
    state = _state(
        reading(5.0, 0.1, quantity="edge_modulation", measured_in="%"),
        bounds=(Bound("edge_modulation", 20.0, None, "%"),),
    )

    assert (state.usable, state.at_fault) == (False, "cannot tell")


def test_a_frame_that_unit_or_light_may_have_spoilt_blames_nobody() -> None:
    """A sentence that leaves open what the frame shows blames nobody; a plain fault of a file beside it counts."""
    open_ = f"dark-1.tif: the frame is lit; light and a unit's own dark signal {UNDECIDED}"
    plain = "dark-2.tif: the file is truncated"

    def state(*faults: str) -> CaptureState:
        return _state(capture=CaptureEvidence("chart", 1, "dark frame", (), faults))

    assert (state(open_).usable, state(open_).at_fault) == (False, "cannot tell")
    assert "known to be good" in (state(open_).because or "")
    assert state(plain).at_fault == state(open_, plain).at_fault == "capture"
    assert state(open_, plain).faults == (open_, plain)
