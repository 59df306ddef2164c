"""Measured again: the same files, the same values within u/100, the same curves, verdicts and pictures.

The measuring is a stand-in here, so that each kind of difference comes alone; `tests/commands/test_verify.py` measures
real frames again.
"""

from collections.abc import Mapping
from copy import deepcopy
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from runner.errors import VerificationRefused
from runner.report import verify, verify_frames
from runner.report.verify_record import PICTURES, Check
from tests.report import signed_world as world

CURVE: dict[str, Any] = {
    "name": "mtf",
    "region": "lower left",
    "capture": "chart",
    "attempt": 1,
    "channel": "mono",
    "estimator": "joint fit",
    "x": [0.0, 0.25],
    "y": [1.0, 0.4],
    "u": [0.0, 0.003],
    "x_in": "cy/px",
    "y_in": "1",
}


def _document(**more: Any) -> dict[str, Any]:
    return world.results() | {"curves": [deepcopy(CURVE)]} | more


def _checks(
    again: Mapping[str, Any], pictures: Mapping[str, bytes] = world.PICTURES, stated: Mapping[str, Any] | None = None
) -> dict[str, Check]:
    """Check a report against what measuring again is said to give."""
    tools = replace(world.TOOLS, measure_again=lambda _document, _frames: (dict(again), dict(pictures)))
    terms = verify.terms_of(tools=tools)
    return {c.name: c for c in verify_frames.check_frames(stated or _document(), Path("frames"), terms)}


def _with_reading(**changed: Any) -> dict[str, Any]:
    document = _document()
    document["readings"][0] |= changed
    return document


def test_the_same_again_holds() -> None:
    """Frames, values, curves, verdicts and pictures are all told."""
    checks = _checks(_document())

    assert list(checks) == ["frames", "values", "curves", "verdicts from frames", "pictures"]
    assert all(check.held for check in checks.values())


@pytest.mark.parametrize(("share", "held"), [(0.009, True), (-0.009, True), (0.011, False), (-0.011, False)])
def test_a_value_may_differ_by_a_hundredth_of_u(share: float, held: bool) -> None:
    """With u = 0.003 here: u/100 decides nothing that u does not decide."""
    found = _checks(_with_reading(value=0.1874 + share * 0.003))["values"]

    assert found.held is held
    assert held or "chart 1, lower left, mtf50: 0.1874 stated, 0.187" in found.sentence


@pytest.mark.parametrize(("u", "held"), [(0.003 * 1.009, True), (0.003 * 1.011, False), (0.0, False)])
def test_so_may_u(u: float, held: bool) -> None:
    """A smaller u would make any verdict firmer than it is."""
    assert _checks(_with_reading(u=u))["values"].held is held


@pytest.mark.parametrize(
    ("changed", "words"),
    [
        ({"value": None, "u": None, "refusal": {"cause": "no edge", "because": ""}}, "measured on one side only"),
        ({"measured_in": "lp/mm"}, "measured on one side only"),
        ({"bound": ["above", 0.1874]}, "bound None stated"),
        ({"quantity": "mtf10"}, "other readings come out"),
        ({"parameters": {"frequency": [0.25, "cy/px"]}}, "other readings come out"),
    ],
)
def test_another_kind_of_reading_is_refused(changed: Mapping[str, Any], words: str) -> None:
    """Refused on one side, in another unit, bounded, or of something else."""
    found = _checks(_with_reading(**changed))["values"]

    assert found.held is False
    assert words in found.sentence


def test_another_cause_of_refusal_is_told() -> None:
    """Both refuse to give a value, for other reasons."""
    one, other = ({"value": None, "u": None, "refusal": {"cause": c, "because": ""}} for c in ("no edge", "clipped"))
    found = _checks(_with_reading(**one), stated=_with_reading(**other))["values"]

    assert found.held is False
    assert "'clipped' stated, 'no edge' found" in found.sentence


def test_a_reading_listed_twice_is_refused() -> None:
    """Of two readings of one name a reader would not know which one was judged."""
    stated = _document()
    stated["readings"] *= 2

    assert _checks(_document(), stated=stated)["values"].held is False


@pytest.mark.parametrize(
    "changed",
    [{"y": [1.0, 0.41]}, {"x": [0.0, 0.26]}, {"u": [0.0, 0.004]}, {"y": [1.0]}, {"y_in": "%"}, {"region": "centre"}],
)
def test_another_curve_is_refused(changed: Mapping[str, Any]) -> None:
    """What is drawn follows from the frames as well as what is judged."""
    again = _document(curves=[{**CURVE, **changed}])

    assert _checks(again)["curves"].held is False


def test_a_curve_may_differ_by_less_than_its_line() -> None:
    """A ten-thousandth of the largest value is far thinner than a drawn line."""
    assert _checks(_document(curves=[CURVE | {"y": [1.0, 0.40009]}]))["curves"].held is True


def test_other_frames_end_the_comparison() -> None:
    """Of other frames nothing more is compared: another digest, a lost frame, a fault of a file."""
    changes: tuple[dict[str, Any], ...] = (
        {"frames": []},
        {"file_faults": ["chart-02.tif: it is empty"]},
        {"attempt": 2},
    )
    for change in changes:
        again = _document()
        again["captures"][0] |= change
        checks = _checks(again)
        assert list(checks) == ["frames"]
        assert checks["frames"].held is False
        assert "these are not the frames of the report" in checks["frames"].sentence


def test_a_verdict_that_changes_is_refused() -> None:
    """Even where the value hardly does."""
    found = _checks(_document(**world.judged(0.1874, "conforms")))["verdicts from frames"]

    assert found.held is False
    assert "'does not conform' stated, 'conforms' found" in found.sentence


def test_another_picture_is_refused_by_the_same_versions_only() -> None:
    """The same versions paint the same bytes; others may not, and then it is told and left open."""
    other = {"chart-overview.png": world.picture(129)}
    later = _document(program=world.other_version().program())

    assert _checks(_document(), other)["pictures"].held is False
    assert _checks(later, {})["pictures"].held is False
    found = _checks(later, other)["pictures"]
    assert (found.held, found.accept) == (None, PICTURES)
    assert "chart-overview.png" in found.sentence


@pytest.mark.parametrize("error", [VerificationRefused("there are no frames of unit WS8-000101"), ZeroDivisionError()])
def test_what_cannot_be_measured_again_is_refused(error: Exception) -> None:
    """Whatever goes wrong, the report is not confirmed."""

    def measure(_document: Mapping[str, Any], _frames: Path) -> Any:
        raise error

    terms = verify.terms_of(tools=replace(world.TOOLS, measure_again=measure))
    (found,) = verify_frames.check_frames(_document(), Path("frames"), terms)

    assert found.held is False
    assert "the unit cannot be measured again: " in found.sentence
