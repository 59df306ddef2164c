"""How a verification ends follows from its checks: any refusal refuses, what is open must be accepted by name."""

from itertools import product
from pathlib import Path

import pytest

from runner.commands.verify import WORDS
from runner.exits import Exit
from runner.report import verify_record
from runner.report.verify_record import Check, Outcome

HELD, REFUSED = Check("a", True, "x"), Check("b", False, "x")
OPEN = Check("c", None, "x", verify_record.TEXT_ONLY)
OTHER = Check("d", None, "x", verify_record.CRL)


def _exit(*checks: Check, accept: frozenset[str] = frozenset()) -> Exit:
    return Outcome(Path("report.pdf"), checks, accept=accept).exit


def test_nothing_looked_at_is_no_pass() -> None:
    """A list of checks that is empty is a refusal: nothing was found to hold."""
    assert _exit() is Exit.DOES_NOT_CONFORM


@pytest.mark.parametrize("checks", list(product([HELD, OPEN, REFUSED], repeat=3)))
def test_the_worst_check_decides(checks: tuple[Check, ...]) -> None:
    """Design, 4: 1 refused, else 3 something open, else 0; in whatever order they stand."""
    expected = 1 if REFUSED in checks else 3 if OPEN in checks else 0

    assert _exit(*checks) == expected


def test_only_what_is_named_is_accepted() -> None:
    """`--accept` takes one kind of openness and no other, and never a refusal."""
    text = frozenset({verify_record.TEXT_ONLY})

    assert _exit(HELD, OPEN, accept=text) is Exit.CONFORMS
    assert _exit(HELD, OPEN, OTHER, accept=text) is Exit.CANNOT_DECIDE
    assert _exit(REFUSED, OPEN, accept=frozenset(verify_record.ACCEPTABLE)) is Exit.DOES_NOT_CONFORM


def test_what_is_open_for_no_reason_cannot_be_accepted() -> None:
    """A check that says no word by which it could be accepted stays open."""
    assert _exit(Check("e", None, "x"), accept=frozenset(verify_record.ACCEPTABLE)) is Exit.CANNOT_DECIDE


def test_the_command_offers_the_same_words() -> None:
    """The help of `--accept` is written apart, so that it loads nothing; its words are those of the record."""
    assert set(WORDS) == set(verify_record.ACCEPTABLE)
