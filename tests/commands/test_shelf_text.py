"""What the shelves hold, in words."""

import pytest

from runner.commands.shelf_text import refusals, tell
from runner.errors import UsageError
from runner.measure import shelf
from runner.measure.methods import exposure, veiling_glare
from runner.measure.reading import CAUSES


def test_one_table_by_what_is_measured(capsys: pytest.CaptureFixture[str]) -> None:
    """Without a name, modules stand under their group with title and standard."""
    tell("method", {"exposure": exposure, "veiling glare": veiling_glare}, None)
    lines = capsys.readouterr().out.splitlines()

    assert lines[0].split() == ["method", "what", "it", "is", "standard", "or", "source"]
    assert lines.index("every capture") < lines.index("stray light and time")
    assert "  exposure       Level and clipping  EMVA Standard 1288 Release 4.0 Linear" in lines


@pytest.mark.parametrize("name", [*shelf.methods(), *shelf.targets()])
def test_every_module_has_its_group(name: str) -> None:
    """Nothing of our own stands under `other`."""
    assert getattr({**shelf.methods(), **shelf.targets()}[name], "GROUP", "")


def test_refusals_are_those_that_the_code_names() -> None:
    """A method tells the causes in its own code and in what it imports, in the words of reports."""
    told = refusals(veiling_glare)

    assert CAUSES["uneven"] in told
    assert CAUSES["missing companion"] in told
    assert CAUSES["two edges"] not in told


def test_everything_about_one(capsys: pytest.CaptureFixture[str]) -> None:
    """With a name, quantities, options and references are told."""
    tell("method", {"exposure": exposure}, "exposure")

    out = capsys.readouterr().out
    assert "  clipped (%): Share of the region's pixels" in out
    assert "EMVA Standard 1288" in out
    assert "Not measured when" in out


def test_an_unknown_name_is_answered_with_the_nearest() -> None:
    """A typo is answered with the name that was meant."""
    with pytest.raises(UsageError, match="unknown method 'expsure'; known are: exposure; did you mean 'exposure'"):
        tell("method", {"exposure": exposure}, "expsure")
