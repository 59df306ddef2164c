"""`probatum check`: complaints with their lines, a line per spec, exit codes 0 and 2."""

import json
from pathlib import Path

import pytest

from runner.cli import run
from runner.exits import Exit
from runner.spec.build import read_spec
from tests.scenes.spec_text import FLAT, TEXT, write


def test_a_usable_spec_is_one_line(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A spec that can be used is told in one line with its document, counts and digest; exit code 0."""
    path = write(tmp_path, FLAT)

    assert run(["check", str(path)]) == Exit.CONFORMS
    digest = read_spec(path).digest
    assert (
        capsys.readouterr().out == f"{path.as_posix()}: WS8-FLD revision A, 1 capture, 1 limit, 0 warnings, {digest}\n"
    )


def test_every_spec_is_told_and_one_bad_one_refuses(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """All specs are read; complaints have file, line and column; one that cannot be used makes the exit code 2."""
    good = write(tmp_path, FLAT)
    bad = write(tmp_path, TEXT.replace("12 bit", "12").replace("64 DN", "64"), "bad.yaml")

    assert run(["check", str(bad), str(good)]) == Exit.USAGE
    out = capsys.readouterr().out.splitlines()
    assert out[0].startswith(f"{bad.as_posix()}:6:14: '12' is no bit depth")
    assert out[1].startswith(f"{bad.as_posix()}:7:16: '64' has no unit here")
    assert out[2] == f"{bad.as_posix()}: cannot be used, 2 complaints"
    assert out[3].startswith(f"{good.as_posix()}: WS8-FLD revision A")


def test_names_of_methods_and_quantities_are_checked_with_their_lines(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """What only the shelves know is told at its line and column too."""
    path = write(tmp_path, FLAT.replace("quantity: level", "quantity: levle"))

    assert run(["check", str(path)]) == Exit.USAGE
    out = capsys.readouterr().out.splitlines()
    assert out[0].startswith(f"{path.as_posix()}:10:44: unknown quantity 'levle'")
    assert "did you mean 'level'?" in out[0]

    path = write(tmp_path, FLAT.replace("flat field", "flat feild"))
    assert run(["check", str(path)]) == Exit.USAGE
    assert capsys.readouterr().out.startswith(f"{path.as_posix()}:")


def test_warnings_do_not_refuse(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A spec with warnings can be used; the warnings come first, marked as such."""
    path = write(tmp_path, FLAT.replace("'WS8-[0-9]{6}'", "'.+'"))

    assert run(["check", str(path)]) == Exit.CONFORMS
    out = capsys.readouterr().out.splitlines()
    assert out[0].startswith(f"{path.as_posix()}:3:30: warning: the serial's pattern matches any text")
    assert "1 warning, sha256:" in out[1]


def test_the_expanded_form_is_shown(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The canonical JSON, of which the digest is, can be seen."""
    path = write(tmp_path, FLAT)

    assert run(["check", "--expanded", str(path)]) == Exit.CONFORMS
    assert json.loads(capsys.readouterr().out.splitlines()[1]) == read_spec(path).expanded


def test_a_station_file_is_read_as_strictly(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A station file with a typo is refused before any spec is read."""
    station = write(tmp_path, "probatum-station: 1\nnme: Bench\n", "station.yaml")

    assert run(["check", str(write(tmp_path, FLAT)), "--station", str(station)]) == Exit.USAGE
    assert "unknown key 'nme' in the station file" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("extra", "told"),
    [
        (["--frames", "x"], "--frames and --out belong together"),
        (["--out", "x"], "--frames and --out belong together"),
        (["again.yaml", "--frames", "x", "--out", "y"], "--frames shows one spec at a time"),
    ],
)
def test_options_that_belong_together(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], extra: list[str], told: str
) -> None:
    """Half of a pair of options is a usage error, in one sentence."""
    assert run(["check", str(write(tmp_path, FLAT)), *extra]) == Exit.USAGE
    assert told in capsys.readouterr().err


def test_a_spec_that_is_not_there(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A missing file is a complaint with its name, never a traceback."""
    assert run(["check", str(tmp_path / "none.yaml")]) == Exit.USAGE
    assert "none.yaml: cannot read the file: No such file or directory" in capsys.readouterr().out
