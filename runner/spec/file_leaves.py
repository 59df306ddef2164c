"""Leaves of what a spec states about files: sizes in bytes, paths inside a file, values of sidecars."""

import re
from typing import Annotated, Any

from runner.spec.files import FIELDS
from runner.spec.leaves import (
    TEXT_SCHEMA,
    Inequality,
    leaf,
    read_amount,
    read_inequality,
    read_text,
    read_texts,
    refuse,
    shown,
    write_amount,
    write_inequality,
)
from runner.spec.tree import nearest, number
from runner.spec.units import UNITS

MOST_BYTES = 2**30
"""Of a header or a row's padding."""


def read_bytes(node: Any) -> int:
    """Read `512 bytes`, `1 byte`, or a plain 0."""
    match = re.fullmatch(r"([0-9]{1,10})\s*bytes?", node.strip()) if isinstance(node, str) else None
    size = int(match[1]) if match else number(node)
    if size is None or (match is None and size != 0) or size > MOST_BYTES:
        refuse(f"{shown(node)} is no number of bytes", "for example 512 bytes, or 0")
    return int(size)


def read_path(node: Any) -> str:
    """Read the path of a dataset inside a file."""
    text = read_text(node).strip("/")
    if not text or any(part in {"", ".", ".."} for part in text.split("/")):
        refuse(f"{shown(node)} is no path of a dataset", "names with / between them, for example entry/frames")
    return text


def read_fields(node: Any) -> tuple[str, ...]:
    """Read the names of fields that sidecars must have."""
    names = read_texts(node)
    for name in names:
        if name not in FIELDS:
            refuse(f"'{name}' is no known field of a sidecar", f"known are: {', '.join(FIELDS)}", nearest(name, FIELDS))
    return tuple(name for name in FIELDS if name in names)


def agreed(kinds: tuple[str, ...], example: str) -> Any:
    """Return the annotations of a leaf that takes one value or an inequality, in units of some kinds (none: any)."""
    units = ", ".join("a plain number" if u.symbol == "1" else u.symbol for u in UNITS.values() if u.kind in kinds)

    def read(node: Any) -> Inequality:
        if isinstance(node, str) and re.match(r"\s*(at least|at most|from)\s", node):
            value = read_inequality(node)
        else:
            one = read_amount(node)
            value = Inequality(one, one)
        unit = next(end.unit for end in (value.at_least, value.at_most) if end is not None)
        if kinds and UNITS[unit].kind not in kinds:
            given = f"unit {unit} does not fit" if unit != "1" else f"{shown(node)} has no unit"
            refuse(f"{given} here", f"units: {units}", f"for example {example}")
        return value

    def write(value: Inequality) -> Any:
        same = value.at_least is not None and value.at_least == value.at_most
        return write_amount(value.at_least) if same and value.at_least is not None else write_inequality(value)

    return leaf(read, write, {"type": ["string", "number"]})


Bytes = Annotated[
    int,
    *leaf(
        read_bytes,
        lambda size: f"{size} bytes",
        {"anyOf": [{"type": "string", "pattern": "^[0-9]+ ?bytes?$"}, {"enum": [0]}]},
    ),
]
DatasetPath = Annotated[str, *leaf(read_path, str, TEXT_SCHEMA)]
Fields = Annotated[
    tuple[str, ...],
    *leaf(read_fields, list, {"anyOf": [{"enum": list(FIELDS)}, {"type": "array", "items": {"enum": list(FIELDS)}}]}),
]
Exposure = Annotated[Inequality, *agreed(("time",), "2 ms")]
Gain = Annotated[Inequality, *agreed(("decibel", "ratio"), "6 dB, or 4 as a plain factor")]
Position = Annotated[Inequality, *agreed(("length",), "1.25 mm")]
Temperature = Annotated[Inequality, *agreed(("temperature",), "from 20 degC to 30 degC")]
AnyValue = Annotated[Inequality, *agreed((), "50 %")]
