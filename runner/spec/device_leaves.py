"""Leaves of camera, chart, unit and files: sizes, tone curves, tables, patterns, names of modules."""

import re
from collections.abc import Mapping
from dataclasses import dataclass
from itertools import pairwise
from typing import Annotated, Any

from runner.spec.leaves import (
    NAMES_SCHEMA,
    TEXT_SCHEMA,
    leaf,
    read_amount,
    read_text,
    read_texts,
    refuse,
    share,
    shown,
    write_amount,
)
from runner.spec.model import Amount, Tone
from runner.spec.serials import pattern_fault
from runner.spec.tree import Mapped, Text, nearest, number, plain_data
from runner.spec.units import UNITS, spell

AXES = ("repeat", "exposure", "level", "z", "channel", "time", "distance")
"""Named parts of a file pattern."""
PROCESSING = ("sharpened", "denoised", "shading corrected", "distortion corrected", "scaled", "tone mapped")
"""Processing that a product may apply before it delivers."""


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


def read_serial(node: Any) -> str:
    """Read the regular expression of a serial."""
    text = read_text(node)
    fault, step = pattern_fault(text)
    if fault:
        refuse(fault, "", step)
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


_TABLE = {"type": "array", "minItems": 2, "items": {"type": "array", "minItems": 2, "maxItems": 2}}
_OPTIONS = {"type": "object", "additionalProperties": {"type": "object"}, "minProperties": 1}

FrameSize = Annotated[
    tuple[int, int],
    *leaf(
        read_frame_size, lambda s: f"{s[0]} x {s[1]} px", {"type": "string", "pattern": "^[0-9]+ ?[x×] ?[0-9]+ ?px$"}
    ),
]
Bits = Annotated[int, *leaf(read_bits, lambda bits: f"{bits} bit", {"type": "string", "pattern": "^[0-9]+ ?bit$"})]
ToneLeaf = Annotated[
    Tone,
    *leaf(
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
    *leaf(
        read_processing,
        lambda p: list(p) or "none",
        {"anyOf": [{"enum": ["none", *PROCESSING]}, {"type": "array", "items": {"enum": list(PROCESSING)}}]},
    ),
]
Transfer = Annotated[
    tuple[tuple[Amount, Amount], ...],
    *leaf(read_transfer, lambda rows: [[write_amount(part) for part in row] for row in rows], _TABLE),
]
Serial = Annotated[str, *leaf(read_serial, str, {**TEXT_SCHEMA, "format": "regex"})]
Names = Annotated[str, *leaf(read_names, str, TEXT_SCHEMA)]
Methods = Annotated[Chosen, *leaf(read_chosen, _write_chosen, {"anyOf": [_OPTIONS, *NAMES_SCHEMA["anyOf"]]})]
TargetLeaf = Annotated[
    Chosen, *leaf(read_target, _write_target, {"anyOf": [TEXT_SCHEMA, {**_OPTIONS, "maxProperties": 1}]})
]
