"""Serials: what a spec's pattern may cost, and whether a text is a serial.

A spec may come out of a stranger's report. Patterns are matched by trying; some try for years before they say no, such
as `(a+)+b`. So the steps of the worst text are counted before a pattern is used, as if every character fitted
everywhere: a bound from above, whatever the text.

References:
    R. Cox, "Regular expression matching can be simple and fast" (2007): patterns that backtracking tries in a time that
    grows exponentially with the text.
"""

import re
from collections.abc import Sequence
from functools import cache, reduce
from importlib import import_module
from typing import Any

LONGEST = 64
"""Characters of a serial; it names a folder, and stands in every headline."""
LONGEST_PATTERN = 200
"""Characters of a pattern."""
MOST_STEPS = 10_000_000
"""Steps of one match: a tenth of a second or two. Four runs of any length in a row stay below, five do not."""

Ways = list[int]
"""In how many ways a part of a pattern takes 0, 1 … `LONGEST` characters."""


@cache
def _compiled(pattern: str) -> re.Pattern[str]:
    return re.compile(pattern)


def is_serial(pattern: str, text: str) -> bool:
    """Tell whether a whole text is a serial.

    Args:
        pattern: Regular expression of a spec, without a fault.
        text: Any text; one that is longer than `LONGEST` is none.
    """
    return len(text) <= LONGEST and _compiled(pattern).fullmatch(text) is not None


def pattern_fault(pattern: str) -> tuple[str, str]:
    """Return why a pattern cannot be used and what to do, or two empty texts."""
    if len(pattern) > LONGEST_PATTERN:
        return f"the serial's pattern has {len(pattern)} characters", f"at most {LONGEST_PATTERN} may be"
    try:
        _compiled(pattern)
        steps = _steps(import_module("re._parser").parse(pattern))[1]
    except (re.error, OverflowError, RecursionError) as error:
        return f"'{pattern}' is no regular expression: {error}", "put single quotes around it"
    if steps > MOST_STEPS:
        found = f"the serial's pattern '{pattern}' can take forever to say that a text is no serial"
        return found, "repeat no group that repeats something itself, and say how many, for example 'WS8-[0-9]{6}'"
    if is_serial(pattern, ""):
        found = "the serial's pattern matches an empty serial"
        return found, "write what a serial looks like, for example 'WS8-[0-9]{6}'"
    return "", ""


def _steps(parts: Sequence[tuple[Any, Any]]) -> tuple[Ways, int]:
    """Return the ways of parts one behind the other, and the steps that trying all of them takes."""
    ways, steps = _just(0), 1
    for operation, argument in parts:
        mine, tried = _of(str(operation), argument)
        steps += sum(ways) * tried
        ways = _behind(ways, mine)
    return ways, steps


def _of(operation: str, argument: Any) -> tuple[Ways, int]:
    if operation in {"MAX_REPEAT", "MIN_REPEAT", "POSSESSIVE_REPEAT"}:
        return _repeated(*argument)
    if operation == "BRANCH":
        return _either([_steps(one) for one in argument[1]])
    if operation in {"SUBPATTERN", "ATOMIC_GROUP"}:
        return _steps(argument[-1] if operation == "SUBPATTERN" else argument)
    if operation == "GROUPREF_EXISTS":
        return _either([_steps(one or ()) for one in argument[1:]])
    if operation in {"ASSERT", "ASSERT_NOT"}:
        return _just(0), _steps(argument[1])[1]
    if operation in {"AT", "FAILURE"}:
        return _just(0), 1
    if operation == "GROUPREF":
        return [1] * (LONGEST + 1), 1
    return _just(1), 1  # one character: itself, one of a class, any


def _repeated(least: int, most: int, part: Sequence[tuple[Any, Any]]) -> tuple[Ways, int]:
    mine, tried = _steps(part)
    total, ways, steps = [0] * (LONGEST + 1), _just(0), 1
    for count in range(min(int(most), LONGEST) + 1):
        if count >= min(int(least), LONGEST):
            total = [a + b for a, b in zip(total, ways, strict=True)]
        steps += sum(ways) * tried
        ways = _behind(ways, mine)
    return total, steps


def _either(parts: Sequence[tuple[Ways, int]]) -> tuple[Ways, int]:
    sums = reduce(lambda one, other: [a + b for a, b in zip(one, other, strict=True)], (ways for ways, _ in parts))
    return sums, 1 + sum(tried for _, tried in parts)


def _just(length: int) -> Ways:
    return [int(n == length) for n in range(LONGEST + 1)]


def _behind(first: Ways, second: Ways) -> Ways:
    there = [(n, count) for n, count in enumerate(second) if count]
    found = [0] * (LONGEST + 1)
    for start, count in enumerate(first):
        if count:
            for more, ways in there:
                if start + more <= LONGEST:
                    found[start + more] += count * ways
    return found
