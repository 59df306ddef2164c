"""What the shelves hold, in words."""

import pytest

from runner.commands.shelf_text import tell
from runner.errors import UsageError
from runner.measure.methods import exposure


def test_one_line_each(capsys: pytest.CaptureFixture[str]) -> None:
    """Without a name, each module is listed with its title."""
    tell("method", {"exposure": exposure}, None)

    assert capsys.readouterr().out == "exposure             Level and clipping\n"


def test_everything_about_one(capsys: pytest.CaptureFixture[str]) -> None:
    """With a name, quantities, options and references are told."""
    tell("method", {"exposure": exposure}, "exposure")

    out = capsys.readouterr().out
    assert "  clipped (%): Share of the region's pixels" in out
    assert "EMVA Standard 1288" in out


def test_an_unknown_name_is_answered_with_the_nearest() -> None:
    """A typo is answered with the name that was meant."""
    with pytest.raises(UsageError, match="unknown method 'expsure'; known are: exposure; did you mean 'exposure'"):
        tell("method", {"exposure": exposure}, "expsure")
