"""`probatum run` from the command line: exit codes, tables for CI, lines for people and programs."""

import json
from pathlib import Path
from xml.etree import ElementTree as ET

import pytest

from runner.cli import run
from runner.exits import Exit
from tests.capture.bad_frames import NEIGHBOUR, SPEC_TEXT, UNIT, good_lot


@pytest.fixture
def bench(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Return a folder with a spec and a good lot of two units."""
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    (tmp_path / "frames").mkdir()
    good_lot(tmp_path / "frames")
    (tmp_path / "spec.yaml").write_text(SPEC_TEXT)
    return tmp_path


def _run(bench: Path, *more: str) -> Exit:
    return run(["run", str(bench / "spec.yaml"), str(bench / "frames"), "--out", str(bench / "out"), *more])


@pytest.mark.parametrize(
    ("limit", "code"),
    [
        ("at_least: 0.20 cy/px", Exit.CONFORMS),
        ("at_least: 0.30 cy/px", Exit.DOES_NOT_CONFORM),
        ("at_least: 0.2677 cy/px", Exit.CANNOT_DECIDE),  # true: sqrt(2 ln 2)/(2 pi 0.7) for a Gaussian of 0.7 px
    ],
)
def test_the_exit_code_is_the_verdict(bench: Path, limit: str, code: Exit) -> None:
    """A sharp unit conforms to a low limit, fails a high one, and cannot be decided at its true value."""
    (bench / "spec.yaml").write_text(SPEC_TEXT.replace("at_least: 0.20 cy/px", limit))

    assert _run(bench, "--quiet", "--unit", UNIT) is code


def test_a_line_per_unit_for_people(bench: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Away from a terminal each unit is one line, then the counts and what to open."""
    _run(bench)

    out = capsys.readouterr().out
    assert f"1/2 {UNIT}  CONFORMS" in out
    assert "2 units: 2 conforms" in out
    assert "open first:" in out


def test_a_json_object_per_unit_for_programs(bench: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """With --json-lines each line is one object with verdict, blame and folder."""
    _run(bench, "--json-lines")

    lines = [json.loads(line) for line in capsys.readouterr().out.splitlines()]
    assert [(x["serial"], x["verdict"], x["done"], x["of"]) for x in lines] == [
        (UNIT, "conforms", 1, 2),
        (NEIGHBOUR, "conforms", 2, 2),
    ]


def test_tables_for_ci_are_written(bench: Path) -> None:
    """JUnit and Markdown stand where they were asked for, also when a unit was not measured."""
    (bench / "frames" / UNIT / "chart-1.tif").write_bytes(b"")
    junit, summary = bench / "ci" / "junit.xml", bench / "ci" / "summary.md"

    assert _run(bench, "--quiet", "--junit", str(junit), "--summary", str(summary)) is Exit.NOT_MEASURED
    suites = ET.fromstring(junit.read_bytes())  # noqa: S314 - our own file
    assert (suites.get("errors"), suites.get("failures")) == ("1", "0")
    assert "not measured" in summary.read_text()


def test_files_that_no_pattern_used_are_listed(bench: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Nothing under FRAMES is passed over in silence."""
    (bench / "frames" / UNIT / "notes.txt").write_text("reseated")

    _run(bench)

    assert "notes.txt" in capsys.readouterr().out


def test_a_spec_error_exits_2_with_its_place(bench: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A typo is answered with line and column, and nothing is judged."""
    (bench / "spec.yaml").write_text(SPEC_TEXT.replace("limits:", "limts:"))

    assert _run(bench) is Exit.USAGE
    assert "spec.yaml:18:5: " in capsys.readouterr().err
    assert not (bench / "out").exists()


def test_frames_without_a_folder_of_their_own_get_a_hint(bench: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """When the frames of one unit lie in FRAMES itself, the last lines say how to name the unit."""
    spec, frames = bench / "spec.yaml", bench / "frames" / UNIT

    assert run(["run", str(spec), str(frames), "--out", str(bench / "out")]) is Exit.NOT_MEASURED
    out = capsys.readouterr().out
    assert "0 units: no unit was found" in out
    assert "name it with --unit SERIAL" in out
