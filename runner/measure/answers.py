"""Holds what a method yields against what was wanted of it: silence must never look like a pass."""

from collections.abc import Callable, Sequence
from dataclasses import replace
from traceback import format_exc

from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Wanted
from runner.measure.plan import MethodPlan
from runner.measure.reading import Reading, Refusal


def attempted(
    measure: Callable[[], Measurement],
    plan: MethodPlan,
    region: str,
    wanted: Sequence[Wanted],
    place: str,
    tracebacks: list[str],
) -> Measurement:
    """Let a method measure; whatever it does not give, it has refused, with the reason.

    Args:
        measure: Calls the method.
        plan: The method as bound.
        region: What its readings are called by.
        wanted: Readings that limits ask for.
        place: Frame and region, for the traceback of a fault.
        tracebacks: Takes the text of a fault of the program.
    """
    try:
        measured = measure()
    except MeasurementRefused as error:
        return refused(plan, region, wanted, Refusal(error.cause, str(error)))
    except Exception as error:  # noqa: BLE001 - one method's fault must not take the unit's other readings along
        tracebacks.append(f"{place}, {plan.method.NAME}\n{format_exc()}")
        because = f"the program failed in '{plan.method.NAME}': {type(error).__name__}: {error}"
        return refused(plan, region, wanted, Refusal("fault", because))
    missing = [one for one in wanted if not any(_answers(reading, one) for reading in measured.readings)]
    if not missing:
        return measured
    lost = refused(plan, region, missing, Refusal("fault", f"'{plan.method.NAME}' gave no value for it"))
    return replace(measured, readings=(*measured.readings, *lost.readings))


def refused(plan: MethodPlan, region: str, wanted: Sequence[Wanted], refusal: Refusal) -> Measurement:
    """Give every reading that was wanted, or the method's plain ones where nothing was, its reason."""
    plain = [Wanted(name, {}, {}) for name, info in plan.method.quantities().items() if not info.parameters]
    return Measurement(
        tuple(
            Reading(
                region,
                one.quantity,
                _unit(plan.method.quantity(one.quantity)),
                None,
                None,
                parameters=one.parameters,
                part=one.part,
                estimator=one.estimator or "",
                refusal=refusal,
            )
            for one in wanted or plain
        )
    )


def _answers(reading: Reading, wanted: Wanted) -> bool:
    return (reading.quantity, reading.part) == (wanted.quantity, wanted.part) and (
        dict(reading.parameters) == dict(wanted.parameters) and wanted.estimator in {None, reading.estimator}
    )


def _unit(info: QuantityInfo | None) -> str:
    return info.unit if info is not None else "1"
