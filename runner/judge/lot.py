"""A lot's counts from its units' results: by verdict and blame, reconciled, with the nearest misses."""

from collections import Counter
from collections.abc import Mapping, Sequence
from math import inf, isfinite
from typing import Any

from runner.errors import UsageError
from runner.exits import Exit, most_serious
from runner.judge.verdict import (
    AT_FAULT_PROGRAM,
    CANNOT_DECIDE,
    CONFORMS,
    DOES_NOT_CONFORM,
    NOT_MEASURED,
    VERDICTS,
)

EXIT_OF = {
    CONFORMS: Exit.CONFORMS,
    DOES_NOT_CONFORM: Exit.DOES_NOT_CONFORM,
    CANNOT_DECIDE: Exit.CANNOT_DECIDE,
    NOT_MEASURED: Exit.NOT_MEASURED,
}


def judge_lot(documents: Sequence[Mapping[str, Any]]) -> dict[str, Any]:
    """Return a lot's counts, units and worst margins from its units' results.

    Raises:
        UsageError: Simulated and real units are mixed.
    """
    kinds = {bool(d["simulated"]) for d in documents}
    if len(kinds) > 1:
        marked = next(d["unit"]["serial"] for d in documents if d["simulated"])
        raise UsageError(
            f"the lot mixes simulated and real units; {marked} is simulated",
            next_step="judge rehearsed frames into a folder of their own",
        )
    units = [_unit(d) for d in sorted(documents, key=lambda d: str(d["unit"]["serial"]))]
    verdicts = Counter(u["verdict"] for u in units)
    blames = Counter(u["at_fault"] for u in units if u["at_fault"])
    exits = [Exit.FAULT if u["at_fault"] == AT_FAULT_PROGRAM else EXIT_OF[u["verdict"]] for u in units]
    return {
        "simulated": kinds == {True},
        "counts": {v: verdicts.get(v, 0) for v in VERDICTS},
        "total": len(units),
        "blame": dict(sorted(blames.items())),
        "exit": int(most_serious(exits)),
        "units": units,
        "worst": _worst(documents),
    }


def _unit(document: Mapping[str, Any]) -> dict[str, Any]:
    keys = ("verdict", "at_fault", "because", "next", "reasons", "time")
    return {"serial": document["unit"]["serial"]} | {k: document[k] for k in keys}


def margin(check: Mapping[str, Any]) -> float | None:
    """Return a check's signed distance to its nearest limit in standard uncertainties; positive inside."""
    value, u = check["value"], check["u"]
    if value is None or not u:
        return None
    ends = [] if check["at_least"] is None else [value - check["at_least"]]
    ends += [] if check["at_most"] is None else [check["at_most"] - value]
    return min(ends) / u if ends else None


def distance(check: Mapping[str, Any]) -> float | None:
    """Return a check's margin; minus infinity for a count that does not conform: it is beyond by any number of u."""
    counted = check["value"] is not None and not check["u"] and check["verdict"] == DOES_NOT_CONFORM
    return -inf if counted else margin(check)


def _worst(documents: Sequence[Mapping[str, Any]]) -> list[dict[str, Any]]:
    nearest: dict[str, tuple[float, dict[str, Any]]] = {}
    for document in documents:
        for check in document["checks"]:
            away = distance(check)
            key = str(check["characteristic"])
            if away is not None and (key not in nearest or away < nearest[key][0]):
                row = {"characteristic": check["characteristic"], "serial": document["unit"]["serial"]}
                shown = away if isfinite(away) else None
                row |= {"where": check["where"], "margin": shown, "reason": check["reason"]}
                nearest[key] = away, row
    return [row for _, row in sorted(nearest.values(), key=lambda pair: pair[0])]
