"""Reads a module's options record from the spec's plain keys, for target and method modules alike."""

import difflib
from collections.abc import Mapping
from dataclasses import fields
from typing import Any, TypeVar

from runner.errors import UsageError

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


def describe(options: Any) -> dict[str, Any]:
    """Return an options record as plain JSON data, for the plan in the results."""
    return {f.name: _plain(getattr(options, f.name)) for f in fields(options)}


def _plain(value: Any) -> Any:
    if isinstance(value, (tuple, list)):
        return [_plain(v) for v in value]
    if isinstance(value, Mapping):
        return {str(k): _plain(v) for k, v in value.items()}
    return value if isinstance(value, (str, int, float, bool, type(None))) else str(value)
