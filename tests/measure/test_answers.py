"""Whatever a method does, everything that was wanted of it is answered: by a value, a reason, or its own fault."""

from types import SimpleNamespace
from typing import Any, cast

import pytest

from runner.errors import MeasurementRefused
from runner.measure.answers import attempted
from runner.measure.contract import Measurement, Method, QuantityInfo, Wanted
from runner.measure.plan import MethodPlan
from runner.measure.reading import Reading
from runner.spec.model import Amount

KNOWN = {"mean": QuantityInfo("DN", "Mean."), "mtf": QuantityInfo("1", "Mtf.", {"frequency": "cy/px"})}
PLAN = MethodPlan(cast("Method", SimpleNamespace(NAME="m", quantities=lambda: KNOWN, quantity=KNOWN.get)), None, {})
MTF = Wanted("mtf", {"frequency": Amount(0.25, "cy/px")}, {"frequency": 0.25})


def _try(result: Any, *wanted: Wanted) -> tuple[Measurement, list[str]]:
    def measure() -> Measurement:
        if isinstance(result, Exception):
            raise result
        return cast("Measurement", result)

    tracebacks: list[str] = []
    return attempted(measure, PLAN, "centre", wanted, "a.tif, centre", tracebacks), tracebacks


def test_what_was_wanted_and_did_not_come_is_a_fault() -> None:
    """A reading of the same quantity at another frequency answers nothing."""
    other = Reading("centre", "mtf", "1", 0.5, 0.1, parameters={"frequency": Amount(0.1, "cy/px")})
    made, _ = _try(Measurement((other,)), MTF)

    assert made.readings[0] == other
    assert made.readings[1].refusal is not None
    assert made.readings[1].refusal.cause == "fault"
    assert made.readings[1].parameters == MTF.parameters


@pytest.mark.parametrize(
    ("error", "cause", "told"), [(MeasurementRefused("clipped", "bright"), "clipped", 0), (KeyError("x"), "fault", 1)]
)
def test_a_refusal_keeps_its_reason_and_a_fault_its_traceback(error: Exception, cause: str, told: int) -> None:
    """Refusing is ordinary; anything else a method raises is a fault, whose traceback names frame and method."""
    made, tracebacks = _try(error, MTF)
    plain, _ = _try(error)

    assert [r.refusal.cause for r in made.readings if r.refusal] == [cause]
    assert [r.quantity for r in plain.readings] == ["mean"]
    assert len(tracebacks) == told
    assert all(text.startswith("a.tif, centre, m\n") for text in tracebacks)
