"""A lot's counts reconcile, and rehearsed units never mix with real ones."""

from typing import Any

import pytest

from runner.errors import UsageError
from runner.exits import Exit
from runner.judge.lot import distance, judge_lot, margin


def document(serial: str, verdict: str = "conforms", at_fault: str | None = None, **more: Any) -> dict[str, Any]:
    """Return a unit's results as far as a lot reads them."""
    check = {"characteristic": 1, "where": "centre", "value": 0.25, "u": 0.01, "at_least": 0.2, "at_most": None}
    check["verdict"] = "conforms"
    known = {
        "unit": {"serial": serial},
        "verdict": verdict,
        "at_fault": at_fault,
        "because": "",
        "next": "",
        "reasons": [],
        "time": "2026-12-01T09:30:00Z",
        "simulated": False,
        "checks": [check | {"reason": serial}],
    }
    return known | more


def test_counts_reconcile() -> None:
    """What went in is the sum of what came out, by serial."""
    lot = judge_lot(
        [document("B", "does not conform", "unit"), document("A"), document("C", "not measured", "capture")]
    )

    assert [u["serial"] for u in lot["units"]] == ["A", "B", "C"]
    assert sum(lot["counts"].values()) == lot["total"] == 3
    assert lot["blame"] == {"capture": 1, "unit": 1}
    assert lot["exit"] == Exit.DOES_NOT_CONFORM


@pytest.mark.parametrize(
    ("verdict", "at_fault", "code"),
    [
        ("conforms", None, 0),
        ("does not conform", "unit", 1),
        ("cannot decide", None, 3),
        ("not measured", "capture", 4),
        ("not measured", "program", 70),
    ],
)
def test_the_exit_code_follows_the_verdicts(verdict: str, at_fault: str | None, code: int) -> None:
    """A program's own fault is 70, never 4."""
    assert judge_lot([document("A", verdict, at_fault)])["exit"] == code


def test_an_empty_lot_is_not_measured() -> None:
    """A lot without units is no success."""
    assert judge_lot([])["exit"] == Exit.NOT_MEASURED


def test_simulated_and_real_units_are_not_mixed() -> None:
    """One rehearsed unit among real ones is refused and named."""
    with pytest.raises(UsageError, match="mixes simulated and real units; B is simulated"):
        judge_lot([document("A"), document("B", simulated=True)])


def test_the_nearest_miss_of_each_characteristic_is_named() -> None:
    """The worst margin is counted in standard uncertainties, negative outside."""
    near = document("A")
    near["checks"][0]["value"] = 0.19
    lot = judge_lot([near, document("B")])

    assert [(w["serial"], round(w["margin"], 6)) for w in lot["worst"]] == [("A", -1.0)]


def test_a_failing_count_is_beyond_all_others() -> None:
    """16 hot pixels of 8 have no distance in u, and still stand first; no infinite number gets into the file."""
    counted = document("A")
    count = {"value": 16.0, "u": 0.0, "at_least": None, "at_most": 8.0, "verdict": "does not conform", "where": ""}
    counted["checks"].append(counted["checks"][0] | count | {"characteristic": 2})

    first, second = judge_lot([counted])["worst"]
    assert (first["characteristic"], first["margin"]) == (2, None)
    assert second["margin"] == pytest.approx(5)
    assert distance(counted["checks"][1] | {"verdict": "conforms"}) is None


def test_a_margin_needs_a_value_and_its_uncertainty() -> None:
    """Without either there is no margin; with two limits the nearer counts."""
    check = {"value": 0.25, "u": 0.01, "at_least": 0.2, "at_most": 0.28}

    assert margin(check) == pytest.approx(3)
    assert margin(check | {"value": None}) is None
    assert margin(check | {"u": 0.0}) is None
    assert margin(check | {"at_least": None, "at_most": None}) is None
