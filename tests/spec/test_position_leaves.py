"""Positions, sizes and names of regions."""

from typing import Any

import pytest
from pydantic import TypeAdapter

from runner.spec.model import Amount
from runner.spec.position_leaves import FieldPoint, Position, Size, read_name
from runner.spec.tree import Complaints, parse

MIDDLE = (Amount(50.0, "%"), Amount(120.0, "px"))


def _node(text: str) -> Any:
    complaints = Complaints()
    tree = parse(f"a: {text}\n", "f", complaints)
    complaints.raise_errors()
    assert tree is not None
    return tree["a"]


@pytest.mark.parametrize(
    ("text", "value", "written"),
    [
        ("[50 %, 120 px]", MIDDLE, ["50 %", "120 px"]),
        ("{left: [50 %, 120 px]}", {"left": MIDDLE}, [{"left": ["50 %", "120 px"]}]),
        ("[{left: [50 %, 120 px]}]", {"left": MIDDLE}, [{"left": ["50 %", "120 px"]}]),
        ("{field: 80 %, azimuth: 45 deg}", FieldPoint(0.8, 45.0), {"field": 0.8, "azimuth": "45 deg"}),
        ("{a: {field: 0, azimuth: 0 deg}}", {"a": FieldPoint(0.0, 0.0)}, [{"a": {"field": 0.0, "azimuth": "0 deg"}}]),
    ],
)
def test_positions_are_read_and_written(text: str, value: object, written: object) -> None:
    """One position, a group of named ones, a field height: each is read, and written in an order that is kept."""
    adapter: TypeAdapter[Any] = TypeAdapter(Position)

    assert adapter.validate_python(_node(text)) == value
    assert adapter.dump_python(value, mode="json") == written


@pytest.mark.parametrize(
    ("kind", "text", "told"),
    [
        (Position, "centre", "'centre' is no pair"),
        (Position, "[50 %, 3 DN]", "3 has unit DN"),
        (Position, "{}", "the group has no positions"),
        (Position, "{field: 1.2, azimuth: 0 deg}", "1.2 is no field height"),
        (Position, "{field: 0.5, azimuth: 0.3}", "0.3 is no azimuth"),
        (Position, "{field: 0.5}", "a field position has the keys field and azimuth"),
        (Position, "{a/b: [1 %, 1 %]}", "'a/b' is no name"),
        (Size, "[-8 px, 8 px]", "width and height lie above zero"),
    ],
)
def test_what_is_no_position_is_refused(kind: Any, text: str, told: str) -> None:
    """What does not fit is refused with what was found."""
    with pytest.raises(ValueError, match="validation error") as caught:
        TypeAdapter(kind).validate_python(_node(text))

    assert told in str(caught.value)


def test_names_can_stand_in_file_names_and_sentences() -> None:
    """Letters of any language, digits and inner spaces are names; separators, hidden and padded ones are not."""
    for name in ("centre", "upper left", "r1c1", "Größe (2)", "a-b_c.d+"):
        assert read_name(name) == name
    for name in ("", " a", "a ", "../a", "a/b", "a\\b", ".a", "a:b", "a\nb", "-a", "x" * 61):
        with pytest.raises(ValueError, match="is no name"):
            read_name(name)
