"""Reads the single values of a spec: numbers, amounts with their units, choices, positions, patterns.

Each leaf is a type for the shapes: it reads a scalar of the tree, refuses it in one plain sentence, writes itself back
as plain JSON data (the expanded form), and tells its form to the JSON Schema.
"""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from itertools import pairwise
from typing import Annotated, Any, NoReturn

from pydantic import PlainSerializer, PlainValidator, WithJsonSchema
from pydantic_core import PydanticCustomError

from runner.spec.model import Amount, Tone
from runner.spec.tree import Mapped, Text, nearest, number, plain_data
from runner.spec.units import UNITS, FrequencyContext, UnitsError, convert, parse_amount, spell

AXES = ("repeat", "exposure", "level", "z", "channel", "time", "distance")
"""Named parts of a file pattern."""
PROCESSING = ("sharpened", "denoised", "shading corrected", "distortion corrected", "scaled", "tone mapped")
"""Processing that a product may apply before it delivers."""
MAX_TEXT = 500
"""Characters of one text."""
_FREQUENCIES = tuple(u.symbol for u in UNITS.values() if u.kind == "spatial frequency")
_LENGTHS = ("nm", "µm", "mm")


def refuse(found: str, allowed: str = "", step: str = "") -> NoReturn:
    """Refuse a value in one sentence."""
    raise PydanticCustomError("spec", "{found}", {"found": found, "allowed": allowed, "step": step})


def shown(node: object) -> str:
    """Return a value as a complaint quotes it."""
    if isinstance(node, Mapping):
        return "a mapping"
    if isinstance(node, list | tuple):
        return "a list"
    text = str(node)
    return f"'{text}'" if len(text) <= 60 else f"'{text[:57]}…'"


def _leaf(read: Callable[[Any], Any], write: Callable[[Any], Any], schema: Mapping[str, Any]) -> tuple[Any, ...]:
    return PlainValidator(read), PlainSerializer(write), WithJsonSchema(dict(schema))


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
    return _leaf(read, _same, schema)


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

    return _leaf(read, _same, {"enum": list(words)})


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


def amount(*symbols: str, low: float | None = None, open_low: bool = False) -> Any:
    """Return the annotations of a leaf that takes an amount in one of some units (none given: any unit)."""
    example = f"for example {'0.5' if symbols[:1] == ('1',) else '10 ' + symbols[0]}" if symbols else "any unit"
    units = ", ".join("a plain number" if s == "1" else s for s in symbols)

    def read(node: Any) -> Amount:
        value = read_amount(node)
        if symbols and value.unit not in symbols:
            given = f"unit {value.unit} does not fit" if value.unit != "1" else f"{shown(node)} has no unit"
            refuse(f"{given} here", f"units: {units}", example)
        if low is not None and (value.value <= low if open_low else value.value < low):
            refuse(f"{shown(node)} lies outside what is allowed", _range_words(low, None, open_low))
        return value

    kinds: list[dict[str, Any]] = [{"type": "string", "pattern": r"^\s*[-+0-9.]"}]
    if not symbols or "1" in symbols:
        kinds.append({"type": "number"})
    return _leaf(read, write_amount, {"anyOf": kinds} if len(kinds) > 1 else kinds[0])


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


def _write_inequality(value: Inequality) -> str:
    low = spell(value.at_least) if value.at_least else ""
    high = spell(value.at_most) if value.at_most else ""
    if low and high:
        return f"from {low} to {high}"
    return f"at least {low}" if low else f"at most {high}"


# ---- camera


def read_frame_size(node: Any) -> tuple[int, int]:
    """Read `1600 x 1200 px` as (width, height)."""
    match = (
        re.fullmatch(r"([1-9][0-9]{0,5})\s*[x×]\s*([1-9][0-9]{0,5})\s*px", node.strip())
        if isinstance(node, str)
        else None
    )
    if match is None:
        refuse(f"{shown(node)} is no frame size", "width x height, for example 1600 x 1200 px")
    return int(match[1]), int(match[2])


def read_bits(node: Any) -> int:
    """Read `12 bit`."""
    match = re.fullmatch(r"([0-9]{1,2})\s*bit", node.strip()) if isinstance(node, str) else None
    if match is None or not 1 <= int(match[1]) <= 16:
        refuse(f"{shown(node)} is no bit depth", "1 bit to 16 bit, for example 12 bit")
    return int(match[1])


def read_tone(node: Any) -> Tone:
    """Read `linear`, `srgb`, `gamma 2.2` or `{table: [[0, 0], …, [1, 1]]}`."""
    allowed = "linear, srgb, gamma 2.2, or {table: [[0, 0], [0.5, 0.2], [1, 1]]}"
    if isinstance(node, Mapped) and list(node) == ["table"]:
        return Tone("table", table=_tone_table(node["table"]))
    text = " ".join(node.split()) if isinstance(node, str) else ""
    if text in {"linear", "srgb"}:
        return Tone(text)
    match = re.fullmatch(r"gamma ([0-9.]+)", text)
    value = number(Text.at(match[1], node.place, plain=True)) if match else None
    if value is None or not 0.1 <= value <= 10:
        refuse(f"{shown(node)} is no tone curve", allowed)
    return Tone("gamma", gamma=float(value))


def _tone_table(node: Any) -> tuple[tuple[float, float], ...]:
    rows = _pairs(node, "1", "1", "code fraction, light fraction")
    table = tuple((a.value, b.value) for a, b in rows)
    rising = all(p[0] < q[0] and p[1] < q[1] for p, q in pairwise(table))
    if not rising or table[0] != (0.0, 0.0) or table[-1] != (1.0, 1.0):
        refuse("the tone table does not rise from [0, 0] to [1, 1]", "both columns rise strictly")
    return table


def _write_tone(tone: Tone) -> Any:
    if tone.kind == "table":
        return {"table": [list(row) for row in tone.table]}
    return f"gamma {tone.gamma!r}".removesuffix(".0") if tone.kind == "gamma" else tone.kind


def _pairs(node: Any, first: str, second: str, words: str) -> tuple[tuple[Amount, Amount], ...]:
    if not isinstance(node, list) or len(node) < 2 or any(not isinstance(row, list) or len(row) != 2 for row in node):
        refuse("a table is a list of two or more pairs", f"pairs of {words}")
    rows = tuple((read_amount(row[0]), read_amount(row[1])) for row in node)
    for a, b in rows:
        kinds = UNITS[a.unit].kind, UNITS[b.unit].kind
        if kinds != (UNITS[first].kind, UNITS[second].kind):
            refuse(f"the pair [{spell(a)}, {spell(b)}] has the wrong units", f"pairs of {words}")
    return tuple((_plain_ratio(a), _plain_ratio(b)) for a, b in rows)


def _plain_ratio(value: Amount) -> Amount:
    return Amount(share(value), "1") if UNITS[value.unit].kind == "ratio" else value


def read_processing(node: Any) -> tuple[str, ...]:
    """Read `none`, one word of `PROCESSING` or a list of them."""
    words = read_texts(node)
    for word in words:
        if word not in PROCESSING and words != ("none",):
            refuse(f"'{word}' is no known processing", f"none, or: {', '.join(PROCESSING)}", nearest(word, PROCESSING))
    return () if words == ("none",) else words


def read_transfer(node: Any) -> tuple[tuple[Amount, Amount], ...]:
    """Read a chart's transfer table: pairs of frequency and modulation, both with their units."""
    rows = _pairs(node, "cy/px", "1", "frequency and modulation, for example [0.25 cy/px, 0.98]")
    frequencies = [a for a, _ in rows]
    if len({a.unit for a in frequencies}) > 1:
        refuse("the frequencies of the table have different units", "one unit")
    if any(p.value >= q.value for p, q in pairwise(frequencies)) or frequencies[0].value < 0:
        refuse("the frequencies of the table do not rise", "from low to high, each once")
    if any(not 0 < m.value <= 1.05 for _, m in rows):
        refuse("a modulation of the table lies outside (0, 1.05]", "fractions of the modulation at zero frequency")
    return rows


# ---- units, files, targets


def read_serial(node: Any) -> str:
    """Read the regular expression of a serial."""
    text = read_text(node)
    try:
        pattern = re.compile(text)
    except re.error as error:
        refuse(f"'{text}' is no regular expression: {error}", "", "put single quotes around it")
    if pattern.fullmatch(""):
        refuse(
            "the serial's pattern matches an empty serial",
            "",
            "write what a serial looks like, for example 'WS8-[0-9]{6}'",
        )
    return text


def read_names(node: Any) -> str:
    """Read a file pattern: `*` and named parts in braces, inside the unit's folder."""
    text = read_text(node)
    if text.startswith("/") or "\\" in text or re.match(r"[A-Za-z]:", text) or ".." in text.split("/"):
        refuse(f"the pattern '{text}' leaves the unit's folder", "a path inside it, with /", "leave the folder out")
    if any(mark in text for mark in '?[]<>|"') or "**" in text:
        refuse(f"the pattern '{text}' holds a character with no meaning here", "* and named parts such as {repeat}")
    parts = re.findall(r"\{([^{}]*)\}", text)
    if re.search(r"[{}]", re.sub(r"\{[^{}]*\}", "", text)):
        refuse(f"the pattern '{text}' has a brace without its partner", "", "close the braces, put quotes around it")
    for part in parts:
        if part not in AXES:
            refuse(f"'{{{part}}}' is no known part of a pattern", f"known are: {', '.join(AXES)}", nearest(part, AXES))
        if parts.count(part) > 1:
            refuse(f"'{{{part}}}' stands in the pattern twice", "", "keep one of them")
    return text


@dataclass(frozen=True)
class Chosen:
    """Names of modules with their options as asked."""

    options: Mapping[str, Mapping[str, Any]]
    """Plain options by name, sorted by name."""


def read_chosen(node: Any) -> Chosen:
    """Read a name, a list of names, or a mapping of names to their options."""
    if isinstance(node, Mapping):
        found: dict[str, Mapping[str, Any]] = {}
        for name, options in node.items():
            if not isinstance(options, Mapping):
                refuse(f"the options of '{name}' are {shown(options)}", "a mapping, for example {search: 10 px}, or {}")
            found[name] = plain_data(options)
        if not found:
            refuse("the mapping is empty", "", "name at least one or leave the key out")
        return Chosen(dict(sorted(found.items())))
    return Chosen({name: {} for name in sorted(read_texts(node))})


def read_target(node: Any) -> Chosen:
    """Read a target's name, or its name with its options."""
    chosen = read_chosen(node)
    if len(chosen.options) != 1:
        refuse("a capture has one target", "one name")
    return chosen


def _write_chosen(value: Chosen) -> Any:
    return {name: dict(options) for name, options in value.options.items()}


def _write_target(value: Chosen) -> Any:
    name, options = next(iter(value.options.items()))
    return {name: dict(options)} if options else name


# ---- positions

LENGTHS_IN_FRAME = ("%", "px")


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
    for part in (first, second):
        if part.unit not in LENGTHS_IN_FRAME:
            given = "no unit" if part.unit == "1" else f"unit {part.unit}"
            refuse(f"{part.value:g} has {given}", "% of the frame, or px", f"for example {part.value:g} px")
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


_TEXT = {"type": "string", "minLength": 1}
_PAIR = {"type": "array", "prefixItems": [{"type": "string"}, {"type": "string"}], "minItems": 2, "maxItems": 2}
_POINT = {"anyOf": [_PAIR, {"type": "object", "required": ["field", "azimuth"]}]}
_TABLE = {"type": "array", "minItems": 2, "items": {"type": "array", "minItems": 2, "maxItems": 2}}
_NAMES = {"anyOf": [_TEXT, {"type": "array", "items": _TEXT, "minItems": 1}]}
_OPTIONS = {"type": "object", "additionalProperties": {"type": "object"}, "minProperties": 1}

TextLeaf = Annotated[str, *_leaf(read_text, _same, {"type": ["string", "number"]})]
Texts = Annotated[tuple[str, ...], *_leaf(read_texts, list, _NAMES)]
Truth = Annotated[bool, *_leaf(read_truth, _same, {"type": "boolean"})]
Positive = Annotated[float, *_number(0, None, open_low=True)]
RefractiveIndex = Annotated[float, *_number(1, 3)]
Level = Annotated[Amount, *amount("DN", low=0)]
Count = Annotated[int, *_number(1, 100_000, whole=True)]
GridCount = Annotated[int, *_number(1, 200, whole=True)]
Share = Annotated[Amount, *amount("%", "1", low=0, open_low=True)]
ShareFromZero = Annotated[Amount, *amount("1", "%", low=0)]
Length = Annotated[Amount, *amount(*_LENGTHS, low=0, open_low=True)]
Frequency = Annotated[Amount, *amount(*_FREQUENCIES, low=0, open_low=True)]
AnyAmount = Annotated[Amount, *amount()]
AnyPositive = Annotated[Amount, *amount(low=0, open_low=True)]
Tolerance = Annotated[
    tuple[Amount, Amount], *_leaf(read_tolerance, _write_tolerance, {"type": ["string", "number", "array"]})
]
InequalityLeaf = Annotated[
    Inequality, *_leaf(read_inequality, _write_inequality, {"type": "string", "pattern": "^(at least|at most|from) "})
]
FrameSize = Annotated[
    tuple[int, int],
    *_leaf(
        read_frame_size, lambda s: f"{s[0]} x {s[1]} px", {"type": "string", "pattern": "^[0-9]+ ?[x×] ?[0-9]+ ?px$"}
    ),
]
Bits = Annotated[int, *_leaf(read_bits, lambda bits: f"{bits} bit", {"type": "string", "pattern": "^[0-9]+ ?bit$"})]
ToneLeaf = Annotated[
    Tone,
    *_leaf(
        read_tone,
        _write_tone,
        {
            "anyOf": [
                {"type": "string", "pattern": "^(linear|srgb|gamma [0-9.]+)$"},
                {"type": "object", "properties": {"table": _TABLE}, "required": ["table"]},
            ]
        },
    ),
]
Processing = Annotated[
    tuple[str, ...],
    *_leaf(
        read_processing,
        lambda p: list(p) or "none",
        {"anyOf": [{"enum": ["none", *PROCESSING]}, {"type": "array", "items": {"enum": list(PROCESSING)}}]},
    ),
]
Transfer = Annotated[
    tuple[tuple[Amount, Amount], ...], *_leaf(read_transfer, lambda rows: [_write_pair(row) for row in rows], _TABLE)
]
Serial = Annotated[str, *_leaf(read_serial, _same, {**_TEXT, "format": "regex"})]
Names = Annotated[str, *_leaf(read_names, _same, _TEXT)]
Methods = Annotated[Chosen, *_leaf(read_chosen, _write_chosen, {"anyOf": [_OPTIONS, *_NAMES["anyOf"]]})]
TargetLeaf = Annotated[Chosen, *_leaf(read_target, _write_target, {"anyOf": [_TEXT, {**_OPTIONS, "maxProperties": 1}]})]
Pair = Annotated[tuple[Amount, Amount], *_leaf(read_pair, _write_pair, _PAIR)]
Size = Annotated[tuple[Amount, Amount], *_leaf(read_size, _write_pair, _PAIR)]
Position = Annotated[
    Point | dict[str, Point],
    *_leaf(
        read_position,
        _write_position,
        {"anyOf": [*_POINT["anyOf"], {"type": "object", "additionalProperties": _POINT}]},
    ),
]


def share(value: Amount) -> float:
    """Return a ratio in %, ppm or as a plain number, as a fraction."""
    return convert(value.value, value.unit, "1", FrequencyContext())
