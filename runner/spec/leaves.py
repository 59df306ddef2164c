"""Leaves of a spec, the single values: texts, numbers, choices, amounts with their units.

Each leaf is a type for the shapes: it reads a scalar of the tree, refuses it in one plain sentence, writes itself back
as plain JSON data (the expanded form), and tells its form to the JSON Schema.
"""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Annotated, Any, NoReturn

from pydantic import PlainSerializer, PlainValidator, WithJsonSchema
from pydantic_core import PydanticCustomError

from runner.spec.model import Amount
from runner.spec.tree import Text, nearest, number
from runner.spec.units import UNITS, FrequencyContext, UnitsError, convert, parse_amount, spell

MAX_TEXT = 500
"""Characters of one text."""
_FREQUENCIES = tuple(u.symbol for u in UNITS.values() if u.kind == "spatial frequency")
_LENGTHS = ("nm", "µm", "mm")


def refuse(found: str, allowed: str = "", step: str = "", inside: tuple[str | int, ...] = ()) -> NoReturn:
    """Refuse a value, or what lies at a path inside it, in one sentence."""
    raise PydanticCustomError("spec", "{found}", {"found": found, "allowed": allowed, "step": step, "inside": inside})


def shown(node: object) -> str:
    """Return a value as a complaint quotes it."""
    if isinstance(node, Mapping):
        return "a mapping"
    if isinstance(node, list | tuple):
        return "a list"
    text = str(node)
    return f"'{text}'" if len(text) <= 60 else f"'{text[:57]}…'"


def leaf(read: Callable[[Any], Any], write: Callable[[Any], Any], schema: Mapping[str, Any]) -> tuple[Any, ...]:
    """Return the annotations of a leaf: how it is read, written back, and told to the JSON Schema."""

    def read_given(node: Any) -> Any:
        if _empty(node):
            raise PydanticCustomError("told", "empty, complained of when the file was read")
        return read(node)

    return PlainValidator(read_given), PlainSerializer(write), WithJsonSchema(dict(schema))


def _empty(node: Any) -> bool:
    values = node.values() if isinstance(node, Mapping) else node if isinstance(node, list) else ()
    return node is None or any(_empty(value) for value in values)


def _same(value: Any) -> Any:
    return value


# ---- text, numbers, truth, choices


def read_text(node: Any) -> str:
    """Read a text of one line."""
    if not isinstance(node, str):
        refuse(
            f"{shown(node)} stands where a text is meant", "", "put quotes around a text that looks like something else"
        )
    text = str(node).strip()
    if not text:
        refuse("the text is empty", "", "write it or leave the key out")
    if len(text) > MAX_TEXT or not text.replace("\n", " ").isprintable():
        refuse(f"the text is longer than {MAX_TEXT} characters or holds control characters", "", "shorten it")
    return " ".join(text.split("\n"))


def read_texts(node: Any) -> tuple[str, ...]:
    """Read one text or a list of texts, each once."""
    texts = tuple(read_text(item) for item in (node if isinstance(node, list) else [node]))
    if not texts:
        refuse("the list is empty", "", "name at least one or leave the key out")
    for text in texts:
        if texts.count(text) > 1:
            refuse(f"'{text}' stands in the list twice", "", "keep one of them")
    return texts


def read_truth(node: Any) -> bool:
    """Read true or false."""
    if isinstance(node, bool):
        return node
    if isinstance(node, Text) and node.plain and node in {"true", "false"}:
        return node == "true"
    refuse(f"{shown(node)} is neither true nor false", "true or false")


def _number(low: float | None, high: float | None, *, open_low: bool = False, whole: bool = False) -> Any:
    def read(node: Any) -> float | int:
        value = number(node)
        kind = "whole number" if whole else "number"
        if value is None:
            hint = "leave the quotes out" if isinstance(node, Text) and not node.plain else ""
            refuse(f"{shown(node)} is no {kind}", words, hint)
        if whole and int(value) != value:
            refuse(f"{value:g} is no whole number", words)
        if (low is not None and (value <= low if open_low else value < low)) or (high is not None and value > high):
            refuse(f"{value:g} lies outside what is allowed", words)
        return int(value) if whole else float(value)

    words = _range_words(low, high, open_low)
    schema: dict[str, Any] = {"type": "integer" if whole else "number"}
    if low is not None:
        schema["exclusiveMinimum" if open_low else "minimum"] = low
    if high is not None:
        schema["maximum"] = high
    return leaf(read, _same, schema)


def whole_number(low: int, high: int) -> Any:
    """Return the annotations of a leaf that takes a whole number between two ends."""
    return _number(low, high, whole=True)


def _range_words(low: float | None, high: float | None, open_low: bool) -> str:
    parts = []
    if low is not None:
        parts.append(f"above {low:g}" if open_low else f"at least {low:g}")
    if high is not None:
        parts.append(f"at most {high:g}")
    return "a number " + " and ".join(parts) if parts else "a number"


def choice(*words: str) -> Any:
    """Return the annotations of a leaf that takes one of some words."""

    def read(node: Any) -> str:
        text = str(node) if isinstance(node, str) else ""
        if text not in words:
            refuse(f"{shown(node)} is not allowed here", f"one of: {', '.join(words)}", nearest(text, words))
        return text

    return leaf(read, _same, {"enum": list(words)})


# ---- amounts


def read_amount(node: Any) -> Amount:
    """Read a number with its unit; a bare number is a plain ratio."""
    value = number(node)
    if value is not None:
        return Amount(float(value), "1")
    if not isinstance(node, str):
        refuse(f"{shown(node)} is no number with a unit", "for example 0.25 cy/px")
    try:
        return parse_amount(node)
    except UnitsError as error:
        refuse(error.found, error.allowed, error.next_step)


def write_amount(amount: Amount) -> Any:
    """Write an amount as the expanded form has it: a plain ratio as a number, else text."""
    return amount.value if amount.unit == "1" else spell(amount)


def amount(*symbols: str, low: float | None = None, open_low: bool = False, example: str = "") -> Any:
    """Return the annotations of a leaf that takes an amount in one of some units (none given: any unit)."""
    hint = f"for example {example}" if example else ""
    units = ", ".join("a plain number" if s == "1" else s for s in symbols)

    def read(node: Any) -> Amount:
        value = read_amount(node)
        if symbols and value.unit not in symbols:
            given = f"unit {value.unit} does not fit" if value.unit != "1" else f"{shown(node)} has no unit"
            refuse(f"{given} here", f"units: {units}", hint)
        if low is not None and (value.value <= low if open_low else value.value < low):
            refuse(f"{shown(node)} lies outside what is allowed", _range_words(low, None, open_low))
        return value

    kinds: list[dict[str, Any]] = [{"type": "string", "pattern": r"^\s*[-+0-9.]"}]
    if not symbols or "1" in symbols:
        kinds.append({"type": "number"})
    return leaf(read, write_amount, {"anyOf": kinds} if len(kinds) > 1 else kinds[0])


def read_tolerance(node: Any) -> tuple[Amount, Amount]:
    """Read a symmetric tolerance, or [minus, plus] as two sizes."""
    items = list(node) if isinstance(node, list) else [node, node]
    if len(items) != 2:
        refuse("a tolerance is one amount or [minus, plus]", "for example 0.02 px or [0.01 px, 0.03 px]")
    minus, plus = (read_amount(item) for item in items)
    if minus.value < 0 or plus.value < 0 or minus.value + plus.value == 0:
        refuse("a tolerance is a size, not below zero", "for example 0.02 px or [0.01 px, 0.03 px]")
    return minus, plus


def _write_tolerance(value: tuple[Amount, Amount]) -> Any:
    return write_amount(value[0]) if value[0] == value[1] else [write_amount(part) for part in value]


@dataclass(frozen=True)
class Inequality:
    """`at least A`, `at most B` or `from A to B`."""

    at_least: Amount | None
    """Lower bound."""
    at_most: Amount | None
    """Upper bound, in the lower bound's unit where both stand."""


_INEQUALITY = re.compile(r"at least (?P<low>.+)|at most (?P<high>.+)|from (?P<a>.+?) to (?P<b>.+)")


def read_inequality(node: Any) -> Inequality:
    """Read `at most 0.01 %`, `at least 20 %` or `from 20 % to 80 %`."""
    example = "for example at most 0.01 %, at least 20 %, from 20 % to 80 %"
    match = _INEQUALITY.fullmatch(" ".join(node.split())) if isinstance(node, str) else None
    if match is None:
        refuse(f"{shown(node)} is no inequality", example)
    parts = {k: read_amount(Text.at(v, node.place, plain=True)) for k, v in match.groupdict().items() if v is not None}
    low, high = parts.get("low", parts.get("a")), parts.get("high", parts.get("b"))
    if low is not None and high is not None:
        low = Amount(low.value, high.unit) if low.unit == "1" else low
        if low.unit != high.unit:
            refuse(f"{shown(node)} has two units", "one unit", example)
        if low.value > high.value:
            refuse(f"{shown(node)} ends below its begin", "", "exchange the two")
    return Inequality(low, high)


def write_inequality(value: Inequality) -> str:
    """Write an inequality as it is read."""
    low = spell(value.at_least) if value.at_least else ""
    high = spell(value.at_most) if value.at_most else ""
    if low and high:
        return f"from {low} to {high}"
    return f"at least {low}" if low else f"at most {high}"


def share(value: Amount) -> float:
    """Return a ratio in %, ppm or as a plain number, as a fraction."""
    return convert(value.value, value.unit, "1", FrequencyContext())


TEXT_SCHEMA = {"type": "string", "minLength": 1}
NAMES_SCHEMA = {"anyOf": [TEXT_SCHEMA, {"type": "array", "items": TEXT_SCHEMA, "minItems": 1}]}
TextLeaf = Annotated[str, *leaf(read_text, _same, {"type": ["string", "number"]})]
Texts = Annotated[tuple[str, ...], *leaf(read_texts, list, NAMES_SCHEMA)]
Truth = Annotated[bool, *leaf(read_truth, _same, {"type": "boolean"})]
Positive = Annotated[float, *_number(0, None, open_low=True)]
RefractiveIndex = Annotated[float, *_number(1, 3)]
Level = Annotated[Amount, *amount("DN", low=0, example="64 DN")]
Count = Annotated[int, *_number(1, 100_000, whole=True)]
GridCount = Annotated[int, *_number(1, 200, whole=True)]
Share = Annotated[Amount, *amount("%", "1", low=0, open_low=True, example="95 %")]
ShareFromZero = Annotated[Amount, *amount("1", "%", low=0, example="0.005")]
Length = Annotated[Amount, *amount(*_LENGTHS, low=0, open_low=True, example="3.0 um")]
Frequency = Annotated[Amount, *amount(*_FREQUENCIES, low=0, open_low=True, example="0.25 cy/px")]
AnyAmount = Annotated[Amount, *amount()]
AnyPositive = Annotated[Amount, *amount(low=0, open_low=True)]
Tolerance = Annotated[
    tuple[Amount, Amount], *leaf(read_tolerance, _write_tolerance, {"type": ["string", "number", "array"]})
]
InequalityLeaf = Annotated[
    Inequality, *leaf(read_inequality, write_inequality, {"type": "string", "pattern": "^(at least|at most|from) "})
]
