"""Reads YAML strictly into a tree of plain values that know where they stand.

The meaning is that of YAML 1.2, minus everything that surprises: a scalar stays text until the key that it stands under
asks for a number, so `no`, `on`, `12:30` and `010` are text, a serial keeps its zeros, and `1e-3` is a number. Refused:
doubled and empty keys, anchors, aliases (no document can blow up), tags, several documents, files that are not UTF-8.
"""

import difflib
import re
from collections.abc import Iterable, Iterator, Mapping
from math import isfinite
from pathlib import Path
from typing import Any, NamedTuple

import yaml

from runner.errors import Complaint, SpecError, UsageError

MAX_BYTES = 1_000_000
"""A spec is written by people; a larger file is another file."""
MAX_DEPTH = 24
"""Mappings and lists inside one another."""

_NUMBER = re.compile(r"[-+]?(?:0|[1-9][0-9]*|(?=\.[0-9]))(?:\.[0-9]*)?(?:[eE][-+]?[0-9]+)?")


class Place(NamedTuple):
    """Where something stands."""

    file: str
    """File, or the words for what was read in place of a file."""
    line: int
    """From 1; 0 where there are no lines."""
    column: int
    """From 1."""

    def __str__(self) -> str:
        """`file:line:col`."""
        return f"{self.file}:{self.line}:{self.column}" if self.line else self.file


class Text(str):
    """A scalar as written."""

    __slots__ = ("place", "plain")

    place: Place
    plain: bool
    """Written without quotes, so that it may mean a number."""

    @classmethod
    def at(cls, text: str, place: Place, *, plain: bool) -> "Text":
        """Return the text with its place."""
        made = cls(text)
        made.place, made.plain = place, plain
        return made


class Mapped(dict[str, Any]):
    """A mapping; it and each of its keys know their places."""

    place: Place
    key_places: dict[str, Place]

    def __init__(self, place: Place) -> None:
        super().__init__()
        self.place, self.key_places = place, {}


class Listed(list[Any]):
    """A list that knows its place."""

    place: Place

    def __init__(self, place: Place) -> None:
        super().__init__()
        self.place = place


class Complaints:
    """Collects complaints, so that all of them are told at once."""

    def __init__(self) -> None:
        self._found: dict[tuple[Place, str], Complaint] = {}  # by place and sentence: nothing is said twice

    def __len__(self) -> int:
        """Number of complaints so far."""
        return len(self._found)

    def error(self, place: Place, found: str, allowed: str = "", next_step: str = "") -> None:
        """Add an error."""
        self._found.setdefault((place, found), Complaint(str(place), found, allowed, next_step))

    def warn(self, place: Place, found: str, allowed: str = "", next_step: str = "") -> None:
        """Add a warning."""
        self._found.setdefault((place, found), Complaint(str(place), found, allowed, next_step, "warning"))

    def sorted(self, severity: str) -> tuple[Complaint, ...]:
        """Return the complaints of one severity in the order of files and lines."""
        ordered = sorted(self._found.items(), key=lambda item: item[0][0])
        return tuple(complaint for _, complaint in ordered if complaint.severity == severity)

    def raise_errors(self) -> None:
        """Raise SpecError with all errors, if there are any."""
        errors = self.sorted("error")
        if errors:
            raise SpecError(errors)


def nearest(word: str, known: Iterable[str]) -> str:
    """Return `did you mean '…'?` for the known word nearest to one that is not, or nothing."""
    near = difflib.get_close_matches(word, list(known), n=1)
    return f"did you mean '{near[0]}'?" if near else ""


def number(text: object) -> int | float | None:
    """Return what a scalar means as a number, or None if it is none.

    Quoted text is none; whole numbers stay whole; leading zeros make a text (a serial), as in JSON.
    """
    if isinstance(text, bool):
        return None
    if isinstance(text, int | float):
        return text if isfinite(text) else None
    if not isinstance(text, str) or not getattr(text, "plain", False):
        return None
    return number_in(text)


def number_in(text: str) -> int | float | None:
    """Return the number that a bare text spells, or None."""
    if not _NUMBER.fullmatch(text):
        return None
    value = float(text)
    if not isfinite(value):
        return None
    return int(text) if re.fullmatch(r"[-+]?[0-9]{1,15}", text) else value


def place_of(node: object, *path: str | int) -> Place:
    """Return the place of what lies at a path below a node; where it ends early, of the last thing found."""
    place: Place = getattr(node, "place", Place("the spec", 0, 0))
    for step in path:
        if isinstance(node, Mapped) and step in node:
            child, fallback = node[str(step)], node.key_places[str(step)]
        elif isinstance(node, Listed) and isinstance(step, int) and step < len(node):
            child, fallback = node[step], place
        else:
            return place
        place, node = getattr(child, "place", fallback), child
    return place


def plain_data(node: Any) -> Any:
    """Return a tree as plain data with YAML 1.2 meaning: numbers, true and false, else text."""
    if isinstance(node, Mapping):
        return {str(key): plain_data(value) for key, value in node.items()}
    if isinstance(node, list | tuple):
        return [plain_data(value) for value in node]
    if isinstance(node, Text):
        value = number(node)
        if value is not None:
            return value
        return node == "true" if node.plain and node in {"true", "false"} else str(node)
    return node


def from_plain(data: Any, words: str) -> Any:
    """Turn plain JSON data into a tree whose places are words, e.g. `the expanded form, captures, dark`."""
    place = Place(words, 0, 0)
    if isinstance(data, Mapping):
        mapped = Mapped(place)
        for key, value in data.items():
            mapped[str(key)] = from_plain(value, f"{words}, {key}")
            mapped.key_places[str(key)] = Place(f"{words}, {key}", 0, 0)
        return mapped
    if isinstance(data, list | tuple):
        listed = Listed(place)
        listed.extend(from_plain(value, f"{words}, {index + 1}") for index, value in enumerate(data))
        return listed
    return Text.at(data, place, plain=False) if isinstance(data, str) else data


def read_tree(path: Path, label: str, complaints: Complaints) -> Mapped | None:
    """Read one YAML file whose top is a mapping.

    Args:
        path: The file.
        label: The file's name in complaints.
        complaints: Takes the complaints.

    Returns:
        The tree without what was refused, or None where nothing can be read.
    """
    start = Place(label, 1, 1)
    try:
        with path.open("rb") as file:
            data = file.read(MAX_BYTES + 1)
    except OSError as error:
        raise UsageError(
            f"cannot read the file: {error.strerror}", where=label, next_step="check the path and its permissions"
        ) from error
    if len(data) > MAX_BYTES:
        complaints.error(
            start, f"the file is larger than {MAX_BYTES // 1_000_000} MB", "", "name the spec, not the frames"
        )
        return None
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        column = error.start - data.rfind(b"\n", 0, error.start)
        complaints.error(Place(label, line, column), "the file is not UTF-8 text", "", "save it as UTF-8")
        return None
    return parse(text, label, complaints)


def parse(text: str, label: str, complaints: Complaints) -> Mapped | None:
    """Read YAML text whose top is a mapping; see `read_tree`."""
    builder = _Builder(label, complaints)
    try:
        top = builder.document(yaml.parse(text, Loader=yaml.SafeLoader))
    except yaml.YAMLError as error:
        place, found, step = _explain(error, label, text)
        complaints.error(place, found, "", step)
        return None
    except _StopReadingError:
        return None
    if top is None or isinstance(top, Mapped):
        return top
    complaints.error(
        Place(label, 1, 1), "the file does not begin with a key", "a spec is a mapping of keys to values", ""
    )
    return None


class _StopReadingError(Exception):
    """Reading on would only repeat the complaint."""


class _Builder:
    """Builds the tree from parser events; recursion is bounded by `MAX_DEPTH`."""

    def __init__(self, label: str, complaints: Complaints) -> None:
        self._label, self._complaints = label, complaints

    def document(self, events: Iterator[yaml.Event]) -> Any:
        """Return the one document of the stream."""
        top: Any = None
        documents = 0
        for event in events:
            if isinstance(event, yaml.DocumentStartEvent):
                documents += 1
                if documents > 1:
                    self._error(event, "a second document begins here", "one spec per file", "split the file")
                    raise _StopReadingError
                top = self._node(next(events), events, 0)
        if documents == 0 or top is None:
            self._complaints.error(Place(self._label, 1, 1), "the file is empty", "", "write a spec")
        return top

    def _node(self, event: yaml.Event, events: Iterator[yaml.Event], depth: int) -> Any:
        if depth > MAX_DEPTH:
            self._error(event, f"more than {MAX_DEPTH} levels inside one another", "", "write it flatter")
            raise _StopReadingError
        if isinstance(event, yaml.AliasEvent):
            self._error(
                event,
                f"an alias (*{event.anchor}) stands here",
                "anchors and aliases are not used in a spec",
                "write the value out, put quotes around a text that begins with *, or use include",
            )
            return None
        if getattr(event, "anchor", None) is not None:
            self._error(
                event,
                f"an anchor (&{event.anchor}) stands here",  # type: ignore[attr-defined]
                "anchors and aliases are not used in a spec",
                "write the value out or use include",
            )
        tag = getattr(event, "tag", None)
        if tag is not None:
            self._error(event, f"a tag ({tag}) stands here", "tags are not used in a spec", "leave it out")
        if isinstance(event, yaml.MappingStartEvent):
            return self._mapping(event, events, depth)
        if isinstance(event, yaml.SequenceStartEvent):
            return self._list(event, events, depth)
        return self._scalar(event)

    def _mapping(self, start: yaml.Event, events: Iterator[yaml.Event], depth: int) -> Mapped:
        mapped = Mapped(self._place(start))
        while not isinstance(event := next(events), yaml.MappingEndEvent):
            key = self._node(event, events, depth + 1)
            place = self._place(event)
            value = self._node(next(events), events, depth + 1)
            if not isinstance(key, Text):
                self._complaints.error(place, "a key is not a plain word", "", "write key: value")
                continue
            name = str(key)
            if name in mapped:
                first = mapped.key_places[name]
                self._complaints.error(
                    place, f"key '{name}' stands twice; first in line {first.line}", "", "keep one of them"
                )
                continue
            mapped.key_places[name] = place
            mapped[name] = value
            if isinstance(value, Text) and value.plain and value in {"", "~", "null"}:
                self._complaints.error(place, f"key '{name}' has no value", "", "give it one or leave the key out")
                mapped[name] = None
        return mapped

    def _list(self, start: yaml.Event, events: Iterator[yaml.Event], depth: int) -> Listed:
        listed = Listed(self._place(start))
        while not isinstance(event := next(events), yaml.SequenceEndEvent):
            value = self._node(event, events, depth + 1)
            if isinstance(value, Text) and value.plain and value in {"", "~", "null"}:
                self._error(event, "an item of the list is empty", "", "fill it or leave it out")
                value = None
            listed.append(value)
        return listed

    def _scalar(self, event: yaml.Event) -> Text:
        plain = isinstance(event, yaml.ScalarEvent) and event.style is None
        return Text.at(str(getattr(event, "value", "")), self._place(event), plain=plain)

    def _place(self, event: yaml.Event) -> Place:
        mark = event.start_mark
        if mark is None:  # pragma: no cover - the parser marks every event
            return Place(self._label, 1, 1)
        return Place(self._label, mark.line + 1, mark.column + 1)

    def _error(self, event: yaml.Event, found: str, allowed: str, next_step: str) -> None:
        self._complaints.error(self._place(event), found, allowed, next_step)


def _explain(error: yaml.YAMLError, label: str, text: str) -> tuple[Place, str, str]:
    """Turn the parser's own words into place, plain sentence and advice."""
    if isinstance(error, yaml.reader.ReaderError):
        before = text[: error.position]
        line, column = before.count("\n") + 1, len(before) - before.rfind("\n")
        found = f"a character that may not stand in YAML (number {ord(text[error.position])})"
        return Place(label, line, column), found, "remove it"
    mark = getattr(error, "problem_mark", None) or getattr(error, "context_mark", None)
    place = Place(label, mark.line + 1, mark.column + 1) if mark else Place(label, 1, 1)
    problem = str(getattr(error, "problem", "") or "")
    for part, found, step in _PROBLEMS:
        if part in problem:
            return place, found, step
    return place, "from here on the file is not YAML", "check quotes, brackets and indentation just before this place"


_QUOTE = "put quotes around a text that holds : # { } [ ] , or begins with * & ! % @"
_PROBLEMS = (
    ("'\\t'", "a tab stands where spaces are meant", "indent with spaces"),
    ("that cannot start any token", "a character stands here that no value may begin with", _QUOTE),
    ("expected ',' or '}'", "a pair of braces { } is not closed here, or a comma is missing", _QUOTE),
    ("expected ',' or ']'", "a pair of brackets [ ] is not closed here, or a comma is missing", _QUOTE),
    ("mapping values are not allowed here", "a second ': ' stands in one line", _QUOTE),
    ("could not find expected ':'", "a key has no colon behind it", "write key: value"),
    ("expected <block end>", "the indentation does not fit the lines above", "give keys of one level one indentation"),
    ("unexpected end of stream", "the file ends inside a quoted text", "close the quotes"),
    ("expected alphabetic or numeric", "a text begins with * or &", _QUOTE),
    ("unknown escape character", "a backslash in double quotes begins no known character", "use single quotes"),
)
