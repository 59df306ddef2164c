"""The demo command: its table, its exit code, what it refuses. The whole demo runs in tests/demo_lots."""

import pytest

from runner.cli import run
from runner.commands.demo import _lot_folder, _progress, _tell
from runner.exits import Exit
from runner.rehearse.expected import Documented, Expected

GOOD, BAD = Documented("conforms", None, ()), Documented("does not conform", "unit", ("2",))
EXPECTED = Expected("spec.yaml", "A1", {"A1": GOOD, "A2": BAD})
STORIES = {"A1": "Nothing.", "A2": "Soft."}


def test_all_as_documented_is_told(capsys: pytest.CaptureFixture[str]) -> None:
    """When every unit ended as documented, the table says so and nothing differs."""
    assert _tell(EXPECTED, {"A1": GOOD, "A2": BAD}, STORIES)

    text = capsys.readouterr().out
    assert "All 2 units ended as documented" in text
    assert "DIFFERS" not in text


@pytest.mark.parametrize(
    "found",
    [
        {"A1": GOOD},
        {"A1": GOOD, "A2": GOOD},
        {"A1": GOOD, "A2": Documented("does not conform", "unit", ("3",))},
        {"A1": GOOD, "A2": BAD, "A3": GOOD},
    ],
    ids=["no report", "other verdict", "other characteristic", "undocumented unit"],
)
def test_any_difference_is_told(found: dict[str, Documented], capsys: pytest.CaptureFixture[str]) -> None:
    """A missing report, another verdict, another reason and a unit that nobody documented all differ."""
    assert not _tell(EXPECTED, found, STORIES)

    assert "DIFFERS" in capsys.readouterr().out


def test_unknown_lot_is_refused(capsys: pytest.CaptureFixture[str]) -> None:
    """A lot that is not there ends in one sentence that names those that are."""
    assert run(["demo", "no_such_lot"]) == Exit.USAGE

    assert capsys.readouterr().err == "LOT: there is no demo lot 'no_such_lot'; lots: walnut_line\n"


def test_every_lot_folder_is_whole() -> None:
    """A lot has its scenario, its documented verdicts and the spec that these name."""
    home = _lot_folder("walnut_line")

    assert {"scenario.yaml", "expected.yaml", "walnut-board-camera.yaml"} <= {p.name for p in home.iterdir()}


def test_progress_is_plain_lines_off_a_terminal(capsys: pytest.CaptureFixture[str]) -> None:
    """Where there is no terminal, each step is one line."""
    with _progress("judging") as told:
        told("A1", 1, 2)

    assert capsys.readouterr().out == "1/2 judging A1\n"
