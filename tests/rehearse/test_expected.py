"""Documented verdicts: read whole, compared in verdict, blame and characteristics."""

from pathlib import Path

import pytest

from runner.errors import SpecError, UsageError
from runner.rehearse.expected import Documented, found_in, read_expected


def _write(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "expected.yaml"
    path.write_text(text, encoding="utf-8")
    return path


def test_file_is_read(tmp_path: Path) -> None:
    """Numbers of characteristics become sorted text; a unit without blame has none."""
    failing = "  A1: {verdict: does not conform, at_fault: unit, characteristics: [3, 2]}"
    text = f"spec: s.yaml\nopen_first: A1\nunits:\n{failing}\n  A2: {{verdict: conforms}}\n"

    expected = read_expected(_write(tmp_path, text))

    assert expected.spec == "s.yaml"
    assert expected.units["A1"] == Documented("does not conform", "unit", ("2", "3"))
    assert expected.units["A2"] == Documented("conforms", None, ())


def test_results_are_told_in_the_same_words() -> None:
    """Checks that do not conform or cannot be decided count, each characteristic once; others do not."""
    checks = [
        {"characteristic": 2, "verdict": "does not conform"},
        {"characteristic": 2, "verdict": "does not conform"},
        {"characteristic": 1, "verdict": "conforms"},
        {"characteristic": 5, "verdict": "report only"},
        {"characteristic": 4, "verdict": "cannot decide"},
        {"characteristic": 6, "verdict": "not measured"},
    ]

    found = found_in({"verdict": "does not conform", "at_fault": "unit", "checks": checks})

    assert found == Documented("does not conform", "unit", ("2", "4"))
    assert str(found) == "does not conform, at fault: unit, characteristics 2, 4"


def test_missing_part_is_told(tmp_path: Path) -> None:
    """A file without its units says what is missing."""
    with pytest.raises(UsageError, match="the file lacks a part: 'units'"):
        read_expected(_write(tmp_path, "spec: s.yaml\nopen_first: A1\n"))


def test_doubled_unit_is_refused(tmp_path: Path) -> None:
    """A serial that stands twice is refused, not overwritten."""
    with pytest.raises(SpecError, match="key 'A1' stands twice"):
        read_expected(_write(tmp_path, "units:\n  A1: {verdict: conforms}\n  A1: {verdict: conforms}\n"))
