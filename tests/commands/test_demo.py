"""The demo command: its table, its exit code, what it refuses. The whole demo runs in tests/demo_lots."""

from pathlib import Path

import pytest

from runner.cli import run
from runner.commands import demo
from runner.commands.demo import _lot_folder, _lots, _progress, _tell
from runner.exits import Exit
from runner.rehearse.expected import Documented, Expected, read_expected
from runner.rehearse.scenario import read_scenario

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

    assert (
        capsys.readouterr().err
        == "LOT: there is no demo lot 'no_such_lot'; lots: walnut_bench, walnut_line, walnut_sizer\n"
    )


@pytest.mark.parametrize("lot", list(_lots()))
def test_every_lot_folder_is_whole(lot: str) -> None:
    """A lot has its scenario, its documented verdicts and the spec that these name, and documents each of its units."""
    home = _lot_folder(lot)
    expected = read_expected(home / "expected.yaml")

    assert (home / expected.spec).is_file()
    assert set(expected.units) == set(read_scenario(home / "scenario.yaml").units)
    assert expected.open_first in expected.units


def test_without_a_lot_all_are_run_and_what_to_open_comes_last(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """Each lot has a folder of its own; one that differs makes the whole command fail; a named lot is run alone."""
    ran: list[tuple[str, Path]] = []

    def run_lot(home: Path, out: Path, _jobs: int) -> tuple[bool, str]:
        ran.append((home.name, out))
        print("table")
        return home.name == "walnut_line", f"open {home.name}"

    monkeypatch.setattr(demo, "_run_lot", run_lot)

    assert run(["demo", "--out", str(tmp_path)]) == Exit.FAULT
    assert (
        capsys.readouterr().out == "table\ntable\ntable\nopen walnut_bench\n\nopen walnut_line\n\nopen walnut_sizer\n"
    )
    assert run(["demo", "walnut_line", "--out", str(tmp_path)]) == Exit.CONFORMS
    lots = [(name, tmp_path / name) for name in ("walnut_bench", "walnut_line", "walnut_sizer")]
    assert ran == [*lots, ("walnut_line", tmp_path)]


def test_progress_is_plain_lines_off_a_terminal(capsys: pytest.CaptureFixture[str]) -> None:
    """Where there is no terminal, each step is one line."""
    with _progress("judging") as told:
        told("A1", 1, 2)

    assert capsys.readouterr().out == "1/2 judging A1\n"
