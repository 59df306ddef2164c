"""`probatum targets` lists the shelf of targets."""

import pytest

from runner.cli import run
from runner.exits import Exit


def test_the_shelf_is_listed(capsys: pytest.CaptureFixture[str]) -> None:
    """The verb lists each of the targets and ends well."""
    assert run(["targets"]) is Exit.CONFORMS
    assert "slanted edge" in capsys.readouterr().out


def test_an_unknown_one_is_a_usage_error(capsys: pytest.CaptureFixture[str]) -> None:
    """A name that is not there ends with exit code 2 and a sentence."""
    assert run(["targets", "nothing"]) is Exit.USAGE
    assert "unknown target 'nothing'" in capsys.readouterr().err
