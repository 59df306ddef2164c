"""Values in plain words: digits chosen so that the reason shows."""

from math import ceil, floor, isfinite, log10

from runner.judge.meanings import meaning
from runner.judge.verdict import Check

MOST_DECIMALS = 9
MOST_BESIDE_A_LIMIT = 15
"""Decimals a value may need to show on which side of its limit it lies; what is nearer is equal to double precision."""


def show(value: float, u: float | None, unit: str, *, against: tuple[float | None, ...] = ()) -> str:
    """Return `value ± U unit`, U = 2u with two significant digits (ISO/IEC Guide 98-3, 7.2.6).

    Args:
        value: The value.
        u: Standard uncertainty, or None for a bare value.
        unit: Unit; `1` is left out.
        against: Limits; digits are added until the rounded value shows on which side of each it lies.
    """
    wide = 2 * (u or 0.0)
    places = decimals(value, wide, against)
    text = f"{value:z.{places}f}"
    if u:
        text += f" ± {wide:.{places}f}"
    elif "." in text:
        text = text.rstrip("0").rstrip(".")
    return text if unit in {"1", ""} else f"{text} {unit}"


def decimals(value: float, wide: float, against: tuple[float | None, ...] = ()) -> int:
    """Return how many decimals a value needs."""
    places = _for_two_digits(wide) if wide > 0 and isfinite(wide) else _for_digits(value, 4)
    for limit in against:
        while limit is not None and places < MOST_BESIDE_A_LIMIT and value != limit and _hides(value, limit, places):
            places += 1
    return places


def _hides(value: float, limit: float, places: int) -> bool:
    shown, edge = round(value, places), round(limit, places)
    return shown == edge or (shown < edge) != (value < limit) or (edge != limit and (shown < limit) != (value < limit))


def _for_two_digits(wide: float) -> int:
    return min(MOST_DECIMALS, max(0, 1 - floor(log10(wide) + 1e-12)))


def _for_digits(value: float, digits: int) -> int:
    if value == 0 or not isfinite(value):
        return 0
    return 0 if float(value).is_integer() else min(MOST_DECIMALS, max(0, digits - ceil(log10(abs(value)))))


def requirement(check: Check) -> str:
    """Return a check's limits in words, e.g. `at least 0.200 cy/px`."""
    unit = "" if check.measured_in in {"1", ""} else f" {check.measured_in}"
    parts = []
    if check.at_least is not None:
        parts.append(f"at least {check.at_least:g}")
    if check.at_most is not None:
        parts.append(f"at most {check.at_most:g}")
    return " and ".join(parts) + unit if parts else ""


def joined(words: "list[str] | tuple[str, ...]") -> str:
    """Return words as a list in a sentence."""
    return words[0] if len(words) == 1 else ", ".join(words[:-1]) + " and " + words[-1] if words else ""


def combination_steps(check: Check, kind: str, plain: float, excess: float) -> str:
    """Return how a combination came about, so that it can be followed from its members' values.

    Args:
        check: The judged combination.
        kind: `worst`, `range`, `mean` or `ratio`.
        plain: The arithmetic on the members' values alone.
        excess: What is taken off it, because extremes of noisy values read too far out; 0 if nothing is.
    """
    if kind == "ratio":
        return f"{check.where}: {check.label}, mean of the members over the mean they are compared with"
    if kind == "mean" or not excess:
        words = {"mean": "mean of the members", "range": "largest less smallest member", "worst": "the worst member"}
        return f"{check.where}: {check.label}, {words[kind]}"
    places = decimals(plain, 2 * (check.u or 0.0))
    unit = "" if check.measured_in in {"1", ""} else f" {check.measured_in}"
    found, off = f"{plain:.{places}f}{unit}", f"{abs(excess):.{places}f}{unit}"
    words = {"range": "largest less smallest member is", "worst": "the worst member reads"}
    way = "taken off" if excess > 0 else "added"
    because = "which is how far noise alone carries the extremes of this many values"
    return f"{check.where}: {check.label}, {words[kind]} {found}; {off} is {way}, {because}"


def consequence(check: Check) -> str:
    """Return what a check that does not conform says about the unit, `there` if it is about a region."""
    if check.where.startswith("range of"):
        return "the unit is too uneven over the field"
    side = "high" if check.at_most is not None and (check.value is None or check.value >= _middle(check)) else "low"
    return f"the unit {meaning(check.quantity, side)}{' there' if check.where else ''}"


def whole(capture: str, *, regions: bool) -> str:
    """Return the place of what has no region.

    Args:
        capture: The capture's name: two captures may be checked for the same quantity.
        regions: It has regions, of which the quantity is taken together.
    """
    return f"{extent(regions=regions)} ({capture})"


def extent(*, regions: bool) -> str:
    """Return what a quantity without a region is taken of."""
    return "all regions" if regions else "whole frame"


def _middle(check: Check) -> float:
    if check.at_least is None or check.at_most is None:
        return float("-inf")
    return (check.at_least + check.at_most) / 2
