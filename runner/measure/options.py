"""Reads a module's options record from the spec's plain keys, for target and method modules alike."""

import difflib
from collections.abc import Callable, Mapping
from dataclasses import fields
from typing import Any, TypeVar

from runner.errors import UsageError
from runner.measure.contract import QuantityInfo
from runner.spec.units import parse_amount

Record = TypeVar("Record")


def read_record(record: type[Record], asked: Mapping[str, Any]) -> Record:
    """Build a frozen options record from the keys that a spec gives; what is not given keeps its default.

    Args:
        record: A frozen dataclass whose `__post_init__` raises ValueError for values that are not allowed.
        asked: Keys and values as written.

    Raises:
        UsageError: An unknown key (with the nearest known one), or a value that the record refuses.
    """
    known = [f.name for f in fields(record)]  # type: ignore[arg-type]
    for key in asked:
        if key not in known:
            near = difflib.get_close_matches(str(key), known, n=1)
            hint = f"did you mean '{near[0]}'?" if near else ""
            raise UsageError(f"unknown option '{key}'", allowed=f"known are: {', '.join(known)}", next_step=hint)
    try:
        return record(**asked)
    except (TypeError, ValueError) as error:
        raise UsageError(str(error)) from error


def reader(record: type[Record]) -> Callable[[Mapping[str, Any]], Record]:
    """Return the `read_options` of a module whose options are this record."""

    def read_options(asked: Mapping[str, Any]) -> Record:
        """Read the options from a spec's keys.

        Raises:
            UsageError: A key or value is not allowed.
        """
        return read_record(record, asked)

    return read_options


def lookups(
    known: Mapping[str, QuantityInfo],
) -> tuple[Callable[[str], QuantityInfo | None], Callable[[], Mapping[str, QuantityInfo]]]:
    """Return the `quantity` and the `quantities` of a method that yields just these."""

    def quantity(name: str) -> QuantityInfo | None:
        """Return what a quantity name means, or None."""
        return known.get(name)

    def quantities() -> Mapping[str, QuantityInfo]:
        """Return the quantities."""
        return known

    return quantity, quantities


def number(name: str, asked: object, unit: str, low: float, high: float) -> float:
    """Turn an option that is a plain number or an amount with its unit into a number.

    Args:
        name: The option, for the message.
        asked: As written.
        unit: Unit that may stand behind it; `%` is turned into a share.
        low: Least that is allowed.
        high: Most that is allowed.

    Raises:
        ValueError: It is neither, has another unit, or lies outside.
    """
    value = asked
    if isinstance(asked, str):
        try:
            amount = parse_amount(asked)
        except UsageError as error:
            raise ValueError(f"{name} is {asked!r}: {error.found}") from error
        if amount.unit in {unit, "1"}:
            value = amount.value / 100 if amount.unit == "%" else amount.value
    if isinstance(value, bool) or not isinstance(value, (int, float)) or not low <= value <= high:
        ends = [f"{100 * end:g} %" if unit == "%" else f"{end:g} {unit}".strip() for end in (low, high)]
        raise ValueError(f"{name} is {asked!r}; allowed is {ends[0]} to {ends[1]}")
    return float(value)


def describe(options: Any) -> dict[str, Any]:
    """Return an options record as plain JSON data, for the plan in the results."""
    return {f.name: _plain(getattr(options, f.name)) for f in fields(options)}


def _plain(value: Any) -> Any:
    if isinstance(value, (tuple, list)):
        return [_plain(v) for v in value]
    if isinstance(value, Mapping):
        return {str(k): _plain(v) for k, v in value.items()}
    return value if isinstance(value, (str, int, float, bool, type(None))) else str(value)
