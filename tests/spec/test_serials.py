"""Patterns of serials: what they cost is known before they are used."""

import re
import time
from itertools import product

import pytest

from runner.spec import serials
from runner.spec.serials import LONGEST, is_serial, pattern_fault

USUAL = (
    "WS8-[0-9]{6}",
    "[A-Z]+-[0-9]+",
    r"[\w.-]+",
    "(?:AB|CD){2}[0-9]{3}(-[A-Z]+)?",
    "([0-9]{3}-){2}[0-9]{3}",
    "[A-Z]*[0-9]*[A-Z]*[0-9]+",
    "(?i)pc-(?P<year>[0-9]{2})/?[0-9]{4}",
    "(?!X)[A-Z]{2}[0-9]+",
    ".+",
)
ENDLESS = (
    "(a+)+b",
    "(a|a)*b",
    "(x+x+)+y",
    "(?:a|a){30}b{40}",
    "(a?){40}a{20}",
    "((a{1,20}){1,20}){1,20}b",
    "(?=(a+)+b)a+",
    ".*-.*-.*-.*-.*",
    "([A-Z0-9]+-)*[0-9]+",
)
"""Textbook cases (R. Cox 2007; the Wikipedia article "ReDoS", from memory), and what looks like them."""


@pytest.mark.parametrize("pattern", USUAL)
def test_usual_patterns_pass(pattern: str) -> None:
    """Patterns as people write them have no fault, and their worst texts are answered at once."""
    assert pattern_fault(pattern) == ("", "")
    begun = time.perf_counter()
    for text in ("A" * LONGEST, "0" * LONGEST, "A0" * (LONGEST // 2), "-" * LONGEST, "AB" * 31 + "!"):
        is_serial(pattern, text)
    assert time.perf_counter() - begun < 5  # five texts of at most a second or so each, on a busy machine


@pytest.mark.parametrize("pattern", ENDLESS)
def test_patterns_that_try_for_years_are_refused_unused(pattern: str) -> None:
    """Nested and overlapping repeats are told with what to write, and nothing is ever matched with them."""
    begun = time.perf_counter()
    fault, step = pattern_fault(pattern)

    assert fault == f"the serial's pattern '{pattern}' can take forever to say that a text is no serial"
    assert step.startswith("repeat no group that repeats something itself, and say how many")
    assert time.perf_counter() - begun < 1


@pytest.mark.parametrize(
    ("pattern", "says"),
    [
        ("[A-", "is no regular expression"),
        ("a{99999999999}", "is no regular expression"),
        ("[0-9]*", "matches an empty serial"),
        ("A" * 201, "has 201 characters"),
        ("(" * 5000 + ")" * 5000, "has 10000 characters"),
    ],
    ids=["broken", "repeats too often", "empty", "long", "deep"],
)
def test_patterns_that_are_none(pattern: str, says: str) -> None:
    """Whatever is no pattern is a sentence, never an exception."""
    assert says in pattern_fault(pattern)[0]


def test_steps_are_counted_exactly_where_every_character_fits() -> None:
    """The ways of small patterns over one letter are those that trying all splittings finds."""
    for one, two in product(range(1, 4), range(2, 5)):
        ways = serials._steps(__import__("re")._parser.parse(f"(?:a{{1,{one}}}){{1,{two}}}"))[0]
        for length in range(one * two + 2):
            splits = sum(
                1
                for count in range(1, two + 1)
                for parts in product(range(1, one + 1), repeat=count)
                if sum(parts) == length
            )
            assert ways[length] == splits, (one, two, length)


def test_a_serial_has_an_end() -> None:
    """64 characters may be one, 65 never are, and a part of a text is none."""
    assert is_serial(".+", "x" * 64)
    assert not is_serial(".+", "x" * 65)
    assert not is_serial("WS8-[0-9]{6}", "WS8-0000011")
    assert re.fullmatch(".+", "x" * 65)
