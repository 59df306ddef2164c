"""Mappings with known keys: every complaint at once, in our own words, and good keys stay of use."""

from collections.abc import Iterator
from typing import ClassVar

from runner.spec import leaves
from runner.spec.shape import Found, Ordered, Shape
from runner.spec.tree import Complaints, parse


class Inner(Shape):
    """A part."""

    WORDS: ClassVar[str] = "inner part"
    SHORT: ClassVar[str | None] = "name"
    REQUIRED: ClassVar[tuple[str, ...]] = ("name",)
    name: leaves.TextLeaf
    """Name."""
    size: leaves.Length | None = None
    """Size."""

    def check(self) -> Iterator[Found]:
        """A part is not called wrong."""
        if self.name == "wrong":
            yield "name", "the part is called wrong", "", "rename it"


class Outer(Shape):
    """A whole."""

    WORDS: ClassVar[str] = "the whole"
    KEPT: ClassVar[bool] = True
    REQUIRED: ClassVar[tuple[str, ...]] = ("part",)
    part: Inner | None = None
    """A part."""
    count: leaves.Count | None = None
    """A count."""
    others: list[Inner | None] | None = None
    """Parts in a row."""
    named: Ordered[Inner | None] | None = None
    """Parts by name."""


def _read(text: str) -> tuple[Outer | None, list[str]]:
    complaints = Complaints()
    shape = Outer.model_validate(parse(text, "f", complaints), context=complaints)
    return shape, [f"{c.where} {c.found}" for c in complaints.sorted("error")]


def test_a_whole_mapping_is_read() -> None:
    """A sound mapping has no complaints; a bare text stands for the part's short key."""
    shape, told = _read("part: a\ncount: 3\nothers: [b, {name: c, size: 3 um}]\n")

    assert told == []
    assert shape is not None
    assert shape.whole()
    assert shape.part is not None
    assert (shape.part.name, shape.count) == ("a", 3)
    assert str(shape.at("others", 1, "size")) == "f:3:29"


def test_every_fault_is_told_and_the_rest_is_kept() -> None:
    """Faults in one key hide none in another; keys that are sound can still be used and asked about."""
    shape, told = _read("par: a\ncount: x\nothers: [{nme: b}, 3, wrong, {name: c, size: 3}]\nnamed: 7\n")

    assert told == [
        "f:1:1 unknown key 'par' in the whole",
        "f:1:1 the whole lacks the key 'part'",
        "f:2:8 'x' is no whole number",
        "f:3:10 inner part lacks the key 'name'",
        "f:3:11 unknown key 'nme' in inner part",
        "f:3:23 the part is called wrong",
        "f:3:46 '3' has no unit here",
        "f:4:8 '7' stands where a mapping is meant",
    ]
    assert shape is not None
    assert not shape.whole()
    assert shape.sound("others")
    assert not shape.sound("count")
    assert shape.others is not None
    assert [part.name if part else None for part in shape.others] == [None, "3", None, None]


def test_an_empty_value_is_told_once() -> None:
    """A key without a value is told when the file is read, and by no shape again."""
    shape, told = _read("part:\ncount: ~\nothers: [~]\n")

    assert [line.partition(" ")[2] for line in told] == [
        "key 'part' has no value",
        "key 'count' has no value",
        "an item of the list is empty",
    ]
    assert shape is not None


def test_order_survives_the_expanded_form() -> None:
    """Named parts are written as a list of one-key mappings, which reads back in the same order."""
    shape, told = _read("part: a\nnamed: {z: b, a: c}\n")
    assert told == []
    assert shape is not None
    written = shape.model_dump(mode="json", by_alias=True, exclude_unset=True)
    assert written == {"part": {"name": "a"}, "named": [{"z": {"name": "b"}}, {"a": {"name": "c"}}]}

    again, told = _read("part: a\nnamed: [{z: b}, {a: c}]\n")
    assert told == []
    assert again is not None
    assert list(again.named or {}) == ["z", "a"]


def test_a_part_that_is_no_mapping_is_told_with_its_keys() -> None:
    """A list where a mapping is meant names the mapping's keys."""
    _, told = _read("part: [a]\n")

    assert told == ["f:1:7 a list stands where inner part is meant"]
