"""Holds limits against the values that a quantity can have at all, as the method that yields it says."""

from math import inf

from runner.errors import Complaint, UsageError
from runner.measure.contract import QuantityInfo
from runner.spec import units
from runner.spec.model import Limit


def against_range(limit: Limit, info: QuantityInfo, where: str, context: units.FrequencyContext) -> list[Complaint]:
    """Return complaints about limits that no value can meet, and warnings of those that no value can fail.

    Args:
        limit: With its ends in `limit.unit`.
        info: Least and greatest value in the method's own unit.
        where: Place of the limit, for messages.
        context: What the camera and optics state, for units.
    """
    if (info.least, info.most) == (-inf, inf) or limit.combine in {"ratio", "range"} or not limit.unit:
        return []
    try:
        low, high = (
            None if end is None else units.convert(end, limit.unit, info.unit, context)
            for end in (limit.at_least, limit.at_most)
        )
    except UsageError:
        return []  # complained of with the units
    unit = "" if info.unit == "1" else f" {info.unit}"
    words, found = limit.quantity.replace("_", " "), []
    if low is not None and low > info.most:
        text = f"{words} cannot lie above {info.most:g}{unit}: no value can conform"
        found.append(Complaint(where, text, "", "correct at_least"))
    if high is not None and high < info.least:
        text = f"{words} cannot lie below {info.least:g}{unit}: no value can conform"
        found.append(Complaint(where, text, "", "correct at_most"))
    if low is not None and low <= info.least and high is None:
        text = f"{words} never lies below {info.least:g}{unit}: this limit cannot fail"
        found.append(Complaint(where, text, "", "correct or drop it", "warning"))
    if high is not None and high >= info.most and low is None:
        text = f"{words} never lies above {info.most:g}{unit}: this limit cannot fail"
        found.append(Complaint(where, text, "", "correct or drop it", "warning"))
    return found
