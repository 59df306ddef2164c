"""Leaves of chart files: places and sizes in mm, a feature's data, transfer functions on the chart."""

from collections.abc import Mapping
from itertools import pairwise
from typing import Annotated, Any

from runner.spec.leaves import leaf, read_amount, refuse, share, shown, write_amount
from runner.spec.model import Amount
from runner.spec.tree import plain_data
from runner.spec.units import UNITS, FrequencyContext, convert, spell

LENGTHS = ("mm", "µm", "nm")


def in_mm(length: Amount) -> float:
    """Return a length on the chart in mm."""
    return convert(length.value, length.unit, "mm", FrequencyContext())


def read_place(node: Any, inside: tuple[int, ...] = ()) -> tuple[Amount, Amount]:
    """Read `[-60 mm, 30 mm]`."""
    if not isinstance(node, list) or len(node) != 2:
        refuse(
            f"{shown(node)} is no place on the chart",
            "two lengths from its centre, for example [-60 mm, 30 mm]",
            "",
            inside,
        )
    first, second = (read_amount(item) for item in node)
    for index, part in enumerate((first, second)):
        if part.unit not in LENGTHS and part != Amount(0.0, "1"):
            given = "no unit" if part.unit == "1" else f"unit {part.unit}"
            refuse(f"{part.value:g} has {given}", "mm or µm", f"for example {part.value:g} mm", (*inside, index))
    return tuple(part if part.unit in LENGTHS else Amount(0.0, "mm") for part in (first, second))  # type: ignore[return-value]


def read_size(node: Any) -> tuple[Amount, Amount]:
    """Read a width and a height."""
    pair = read_place(node)
    if min(part.value for part in pair) <= 0:
        refuse("a width and a height lie above zero", "for example [30 mm, 40 mm]")
    return pair


def read_places(node: Any) -> tuple[tuple[Amount, Amount], ...]:
    """Read a list of places."""
    if not isinstance(node, list) or not node:
        refuse(f"{shown(node)} stands where places are meant", "a list such as [[-60 mm, 30 mm], [55 mm, 41 mm]]")
    return tuple(read_place(item, (n,)) for n, item in enumerate(node))


def read_data(node: Any) -> dict[str, Any]:
    """Read a feature's data: values, texts with units, lists of them."""
    if not isinstance(node, Mapping):
        refuse(f"{shown(node)} stands where data are meant", "a mapping, for example {period: 2 mm}")
    data: dict[str, Any] = plain_data(node)
    return data


def read_transfer(node: Any) -> tuple[tuple[Amount, Amount], ...]:
    """Read a transfer function on the chart: pairs of frequency there and modulation."""
    words = "pairs of frequency on the chart and modulation, for example [2 lp/mm, 0.98]"
    if not isinstance(node, list) or len(node) < 2 or any(not isinstance(row, list) or len(row) != 2 for row in node):
        refuse("a transfer function is a list of two or more pairs", words)
    rows = tuple((read_amount(row[0]), read_amount(row[1])) for row in node)
    for frequency, modulation in rows:
        if frequency.unit != "lp/mm" or UNITS[modulation.unit].kind != "ratio":
            refuse(f"the pair [{spell(frequency)}, {spell(modulation)}] has the wrong units", words)
        if not 0 < share(modulation) <= 1.05:
            refuse(f"a modulation of {spell(modulation)} lies outside (0, 1.05]", words)
    if any(p[0].value >= q[0].value for p, q in pairwise(rows)) or rows[0][0].value < 0:
        refuse("the frequencies do not rise", "from low to high, each once")
    return rows


def _write_pair(pair: tuple[Amount, Amount]) -> list[Any]:
    return [write_amount(part) for part in pair]


_PAIR = {"type": "array", "minItems": 2, "maxItems": 2}
Place = Annotated[tuple[Amount, Amount], *leaf(read_place, _write_pair, _PAIR)]
Size = Annotated[tuple[Amount, Amount], *leaf(read_size, _write_pair, _PAIR)]
Places = Annotated[
    tuple[tuple[Amount, Amount], ...],
    *leaf(read_places, lambda places: [_write_pair(p) for p in places], {"type": "array", "items": _PAIR}),
]
Data = Annotated[dict[str, Any], *leaf(read_data, dict, {"type": "object"})]
Transfer = Annotated[
    tuple[tuple[Amount, Amount], ...],
    *leaf(read_transfer, lambda rows: [_write_pair(row) for row in rows], {"type": "array", "items": _PAIR}),
]
