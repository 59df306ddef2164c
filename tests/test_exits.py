"""Exit codes are a contract."""

from itertools import permutations

import pytest

from runner.exits import SEVERITY, Exit, most_serious


def test_the_numbers_are_fixed() -> None:
    """Production lines and CI jobs hold on to these numbers."""
    assert {e.name: int(e) for e in Exit} == {
        "CONFORMS": 0,
        "DOES_NOT_CONFORM": 1,
        "USAGE": 2,
        "CANNOT_DECIDE": 3,
        "NOT_MEASURED": 4,
        "FAULT": 70,
        "INTERRUPTED": 130,
    }


@pytest.mark.parametrize("codes", list(permutations([0, 3, 4, 1, 2, 70], 3)))
def test_the_most_serious_wins_in_any_order(codes: tuple[int, ...]) -> None:
    """70 beats 2 beats 1 beats 4 beats 3 beats 0, whatever comes first."""
    order = [70, 2, 1, 4, 3, 0]

    assert most_serious([Exit(c) for c in codes]) == min(codes, key=order.index)


def test_nothing_judged_is_no_success() -> None:
    """A run without a unit ends as not measured."""
    assert most_serious([]) is Exit.NOT_MEASURED
    assert SEVERITY[0] is Exit.FAULT
