"""`probatum chart`: check and draw."""

from pathlib import Path

import pytest

from runner import cli
from runner.exits import Exit
from tests.scenes.chart_text import CHART, changed, write_chart


def test_check_lists_complaints_and_says_what_is_good(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Every complaint has its line; a good file is told with its digest; one bad file makes the exit code 2."""
    good, bad = write_chart(tmp_path), write_chart(tmp_path, changed("ink: 8 %", "ink: 60 %"), "bad.yaml")

    assert cli.run(["chart", "check", str(good)]) is Exit.CONFORMS
    assert "Small board, serial SB-01, 9 marks, 2 features, sha256:" in capsys.readouterr().out
    assert cli.run(["chart", "check", str(good), str(bad)]) is Exit.USAGE
    assert "bad.yaml:4:" in capsys.readouterr().out


def test_check_tells_charts_that_look_alike(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Two designs with one arrangement of marks are warned of; two pieces of one design are not."""
    one = write_chart(tmp_path)
    design = write_chart(tmp_path, changed("name: Small board", "name: Another board"), "other.yaml")
    piece = write_chart(tmp_path, changed("serial: SB-01", "serial: SB-02"), "piece.yaml")

    assert cli.run(["chart", "check", str(one), str(design)]) is Exit.CONFORMS
    assert "warning: it can be taken for" in capsys.readouterr().out
    assert cli.run(["chart", "check", str(one), str(piece)]) is Exit.CONFORMS
    assert "warning" not in capsys.readouterr().out


def test_what_cannot_be_drawn_is_a_warning_to_check_and_an_error_to_draw(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """A bought chart may be described without what its artwork needs; drawing it says what is missing."""
    path = write_chart(tmp_path, changed("data: {angle: 5 deg}", "data: {}"))

    assert cli.run(["chart", "check", str(path)]) is Exit.CONFORMS
    assert "warning: it cannot be drawn: feature 'left edge' lacks 'angle'" in capsys.readouterr().out
    assert cli.run(["chart", "draw", str(path), "--out", str(tmp_path / "a.pdf")]) is Exit.USAGE
    assert "lacks 'angle'" in capsys.readouterr().err


def test_draw_writes_the_file(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Artwork is written where asked for, and what it shows is said."""
    path = write_chart(
        tmp_path, CHART + "  bought: {kind: colour patches, position: [0, -35 mm], size: [20 mm, 20 mm]}\n"
    )
    out = tmp_path / "new" / "art.svg"

    assert cli.run(["chart", "draw", str(path), "--out", str(out)]) is Exit.CONFORMS
    assert out.read_text("utf-8").startswith("<svg")
    assert "200 mm × 150 mm; no artwork for bought" in capsys.readouterr().out
    assert cli.run(["chart", "draw", str(path), "--out", str(tmp_path / "a.png")]) is Exit.USAGE
