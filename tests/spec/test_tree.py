"""Reading YAML strictly: scalars stay text until a number is asked for, and every value knows its place."""

from pathlib import Path

import pytest

from runner.errors import UsageError
from runner.spec.tree import (
    MAX_BYTES,
    Complaints,
    Listed,
    Mapped,
    from_plain,
    number,
    parse,
    place_of,
    plain_data,
    read_tree,
)


def _parsed(text: str) -> Mapped:
    complaints = Complaints()
    tree = parse(text, "f", complaints)
    complaints.raise_errors()
    assert tree is not None
    return tree


def _refused(text: str) -> list[str]:
    complaints = Complaints()
    parse(text, "f", complaints)
    return [f"{c.where} {c.found}" for c in complaints.sorted("error")]


def test_scalars_mean_what_yaml_1_2_says() -> None:
    """The traps of YAML 1.1 are text, exponents without a point are numbers (YAML 1.2.2, 10.2, core schema)."""
    text = "{a: no, b: on, c: 12:30, d: 010, e: 1_000, f: 1.10.2, g: 1e-3, h: 5E3, i: -.5, j: 7, k: true, l: '7'}"

    assert plain_data(_parsed(text)) == {
        "a": "no", "b": "on", "c": "12:30", "d": "010", "e": "1_000", "f": "1.10.2", "g": 1e-3, "h": 5000.0, "i": -0.5,
        "j": 7, "k": True, "l": "7",
    }  # fmt: skip


def test_a_serial_keeps_its_zeros_and_its_text() -> None:
    """The written text is kept beside its meaning, so that 1.10 is no 1.1 where a text is asked for."""
    tree = _parsed("revision: 1.10\nserial: 0012345\n")

    assert str(tree["revision"]) == "1.10"
    assert number(tree["revision"]) == 1.1
    assert str(tree["serial"]) == "0012345"
    assert number(tree["serial"]) is None


def test_what_is_not_finite_is_no_number() -> None:
    """Not-a-number, infinity and overflow never become numbers."""
    for word in (".nan", ".inf", "-.inf", "nan", "inf", "1e999", "-1e999", ".", "+", "e3", ""):
        assert number(_parsed(f"a: '{word}'")["a"]) is None
        assert number(next(iter(_parsed(f"a: [{word or 'x'}]")["a"]))) is None
    assert number(float("nan")) is None
    assert number(True) is None


def test_places_point_at_values_keys_and_items() -> None:
    """A path leads to the line and column of its value; a path that ends early leads to the last thing found."""
    tree = _parsed("a:\n  b: [1, {c: 2}]\nd: 3\n")

    assert str(place_of(tree, "a", "b", 1, "c")) == "f:2:14"
    assert str(place_of(tree, "a", "b", 0)) == "f:2:7"
    assert str(place_of(tree, "a", "x", "y")) == "f:2:3"
    assert str(tree.key_places["d"]) == "f:3:1"


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("a: 1\na: 2\n", "f:2:1 key 'a' stands twice; first in line 1"),
        ("a: {b: 1, b: 2}\n", "f:1:11 key 'b' stands twice; first in line 1"),
        ("a:\nb: 1\n", "f:1:1 key 'a' has no value"),
        ("a: [1, ~]\n", "f:1:8 an item of the list is empty"),
        ("a: &x 1\n", "f:1:4 an anchor (&x) stands here"),
        ("? {a: 1}\n: 2\n", "f:1:3 a key is not a plain word"),
        ("a: !!float 1\n", "f:1:4 a tag (tag:yaml.org,2002:float) stands here"),
        ("a: 1\n---\nb: 2\n", "f:2:1 a second document begins here"),
        ("", "f:1:1 the file is empty"),
        ("# only a comment\n", "f:1:1 the file is empty"),
        ("- a\n- b\n", "f:1:1 the file does not begin with a key"),
        ("a: 'open\n", "f:2:1 the file ends inside a quoted text"),
        ('a: "\\q"\n', "f:1:6 a backslash in double quotes begins no known character"),
        ("a: 1\n b: 2\n", "f:2:3 a second ': ' stands in one line"),
        ("a: b\x07\n", "f:1:5 a character that may not stand in YAML (number 7)"),
        ("a: [1, 2\nb: 3\n", "f:2:2 a pair of brackets [ ] is not closed here, or a comma is missing"),
    ],
)
def test_what_surprises_is_refused(text: str, told: str) -> None:
    """Each surprise is one complaint in our own words, at its place."""
    assert _refused(text) == [told]


def test_aliases_cannot_blow_up() -> None:
    """A document of nested aliases ('billion laughs') is refused at its first anchor, in no time and no space."""
    lines = ["a0: &a0 [x, x, x, x, x, x, x, x, x]"]
    lines += [f"a{i}: &a{i} [{', '.join([f'*a{i - 1}'] * 9)}]" for i in range(1, 12)]

    told = _refused("\n".join(lines))

    assert told[0] == "f:1:5 an anchor (&a0) stands here"
    assert any("an alias (*a0)" in line for line in told)


def test_depth_is_bounded() -> None:
    """A file of nested brackets is refused, not recursed into."""
    assert _refused("a: " + "[" * 5000) == ["f:1:28 more than 24 levels inside one another"]


def test_files_are_utf_8_and_not_huge(tmp_path: Path) -> None:
    """Other encodings and other files are refused with the place; a byte-order mark and CRLF are read."""
    path = tmp_path / "spec.yaml"
    complaints = Complaints()
    path.write_bytes("a: 1\r\nb: µm\r\n".encode("utf-8-sig"))
    tree = read_tree(path, "f", complaints)
    assert plain_data(tree) == {"a": 1, "b": "µm"}
    assert len(complaints) == 0

    path.write_bytes("a: 1\nb: µm\n".encode("latin-1"))
    assert read_tree(path, "f", complaints) is None
    path.write_bytes(b"a" * (MAX_BYTES + 1))
    assert read_tree(path, "g", complaints) is None
    told = [f"{c.where} {c.found}" for c in complaints.sorted("error")]
    assert told == ["f:2:4 the file is not UTF-8 text", "g:1:1 the file is larger than 1 MB"]

    with pytest.raises(UsageError, match="cannot read the file: Is a directory"):
        read_tree(tmp_path, "f", complaints)


def test_plain_data_become_a_tree_whose_places_are_words() -> None:
    """Data out of JSON are read like a file, and complaints about them say where in words."""
    tree = from_plain({"a": {"b": ["x", 1]}}, "the data")

    assert isinstance(tree["a"]["b"], Listed)
    assert plain_data(tree) == {"a": {"b": ["x", 1]}}
    assert str(place_of(tree, "a", "b", 0)) == "the data, a, b, 1"


def test_complaints_are_told_once_and_sorted() -> None:
    """The same sentence at the same place is told once; errors and warnings come in the order of the lines."""
    complaints = Complaints()
    tree = _parsed("a: 1\nb: 2\n")
    for key in ("b", "a", "b"):
        complaints.error(tree.key_places[key], f"{key} is wrong")
    complaints.warn(tree.place, "careful")

    assert [str(c) for c in complaints.sorted("error")] == ["f:1:1: a is wrong", "f:2:1: b is wrong"]
    assert [str(c) for c in complaints.sorted("warning")] == ["f:1:1: warning: careful"]
