"""Leaves of regions: positions in the frame, sizes, names."""

import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Annotated, Any

from runner.spec.leaves import leaf, read_amount, refuse, share, shown, write_amount
from runner.spec.model import Amount
from runner.spec.units import UNITS, spell

LENGTHS = ("%", "px", "mm", "µm")
"""In the frame the first two; the others on a chart."""


@dataclass(frozen=True)
class FieldPoint:
    """A position by field height: share of the half diagonal from the frame's centre, and azimuth."""

    field: float
    """0 in the centre, 1 in the corner."""
    azimuth_deg: float
    """From the right, clockwise as seen on the frame (x right, y down)."""


Point = tuple[Amount, Amount] | FieldPoint


def read_pair(node: Any) -> tuple[Amount, Amount]:
    """Read `[50 %, 120 px]`."""
    if not isinstance(node, list) or len(node) != 2:
        refuse(f"{shown(node)} is no pair", "two lengths in % or px, for example [50 %, 50 %]")
    first, second = (read_amount(item) for item in node)
    for index, part in enumerate((first, second)):
        if part.unit not in LENGTHS:
            given = "no unit" if part.unit == "1" else f"unit {part.unit}"
            refuse(
                f"{part.value:g} has {given}",
                "% of the frame or px; mm on: chart",
                f"for example {part.value:g} px",
                (index,),
            )
    return first, second


def read_size(node: Any) -> tuple[Amount, Amount]:
    """Read a width and a height."""
    pair = read_pair(node)
    if min(part.value for part in pair) <= 0:
        refuse("a region's width and height lie above zero", "for example [80 px, 120 px]")
    return pair


def read_point(node: Any) -> Point:
    """Read `[50 %, 50 %]` or `{field: 0.8, azimuth: 45 deg}`."""
    if not isinstance(node, Mapping):
        return read_pair(node)
    if set(node) != {"field", "azimuth"}:
        refuse("a field position has the keys field and azimuth", "for example {field: 0.8, azimuth: 45 deg}")
    field, azimuth = read_amount(node["field"]), read_amount(node["azimuth"])
    if UNITS[field.unit].kind != "ratio" or not 0 <= share(field) <= 1:
        refuse(f"{spell(field)} is no field height", "0 in the centre to 1 in the corner")
    if azimuth.unit != "deg":
        refuse(f"{spell(azimuth)} is no azimuth", "an angle, for example 45 deg")
    return FieldPoint(share(field), azimuth.value)


def read_position(node: Any) -> "Point | dict[str, Point]":
    """Read one position, or named positions of a group."""
    if isinstance(node, list) and node and all(isinstance(item, Mapping) and len(item) == 1 for item in node):
        return {name: read_point(value) for item in node for name, value in item.items()}
    if isinstance(node, Mapping) and not {"field", "azimuth"} & set(node):
        if not node:
            refuse("the group has no positions", "", "name at least one")
        return {read_name(name): read_point(value) for name, value in node.items()}
    return read_point(node)


def read_name(text: str) -> str:
    """Check the name of a capture, region or member."""
    if not re.fullmatch(r"[^\W_](?:[\w .()+-]{0,58}[\w)+])?", text):
        refuse(f"'{text}' is no name", "1 to 60 letters, digits, spaces, - . _ ( ) +, beginning with a letter or digit")
    return text


def _write_pair(pair: tuple[Amount, Amount]) -> Any:
    return [write_amount(part) for part in pair]


def _write_point(point: Point) -> Any:
    if isinstance(point, FieldPoint):
        return {"field": point.field, "azimuth": spell(Amount(point.azimuth_deg, "deg"))}
    return _write_pair(point)


def _write_position(position: Any) -> Any:
    if isinstance(position, dict):
        return [{name: _write_point(point)} for name, point in position.items()]
    return _write_point(position)


_PAIR = {"type": "array", "prefixItems": [{"type": "string"}, {"type": "string"}], "minItems": 2, "maxItems": 2}
_POINT = {"anyOf": [_PAIR, {"type": "object", "required": ["field", "azimuth"]}]}
Pair = Annotated[tuple[Amount, Amount], *leaf(read_pair, _write_pair, _PAIR)]
Size = Annotated[tuple[Amount, Amount], *leaf(read_size, _write_pair, _PAIR)]
Position = Annotated[
    Point | dict[str, Point],
    *leaf(
        read_position,
        _write_position,
        {"anyOf": [*_POINT["anyOf"], {"type": "object", "additionalProperties": _POINT}]},
    ),
]
