"""`probatum check --frames --out`: the regions on the frames, as asked and as found."""

import base64
import io
import re
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from runner.cli import run
from runner.exits import Exit
from tests.scenes.spec_text import FLAT, write


def _frame(path: Path, level: float, seed: int) -> None:
    noise = np.random.default_rng(seed).normal(0, 5, (48, 64))
    path.parent.mkdir(parents=True, exist_ok=True)
    np.save(path, np.clip(np.round(64 + level * 4031 + noise), 0, 4095).astype(np.uint16))


@pytest.mark.parametrize("place", ["WS8-000101", "WS8-000101/attempt-1", ""])
def test_regions_are_shown_on_the_first_unit_or_the_frames_themselves(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], place: str
) -> None:
    """The page holds the frame itself, each region's outline in the frame's own pixels, and what was found."""
    _frame(tmp_path / "frames" / place / "flat-1.npy", 0.5, 1)
    out = tmp_path / "page" / "regions.html"

    code = run(["check", str(write(tmp_path, FLAT)), "--frames", str(tmp_path / "frames"), "--out", str(out)])

    assert code == Exit.CONFORMS
    assert "the regions on frames of " in capsys.readouterr().out.splitlines()[-1]
    page = out.read_text(encoding="utf-8")
    assert '<rect class="asked" x="24.0" y="16.0" width="16" height="16"/>' in page
    assert "<td>middle</td><td>(32.0, 24.0), 16 × 16</td><td>yes</td>" in page
    assert "Nothing was judged here." in page
    data = re.search(r"data:image/png;base64,([^\"]+)\"", page)
    assert data is not None
    picture = Image.open(io.BytesIO(base64.b64decode(data[1])))
    assert picture.size == (64, 48)
    grey = np.asarray(picture).mean()
    assert grey == pytest.approx(255 * 0.5 ** (1 / 2.2), abs=1)  # gamma 2.2 of half light; noise 0.1 %


def test_what_is_not_found_says_why(tmp_path: Path) -> None:
    """A region that the target does not offer has the reason in its row; a file that is refused has its sentence."""
    _frame(tmp_path / "frames" / "flat-1.npy", 0.001, 1)
    out = tmp_path / "regions.html"
    order = ["check", str(write(tmp_path, FLAT)), "--frames", str(tmp_path / "frames"), "--out", str(out)]
    assert run(order) == Exit.CONFORMS
    assert "<td>no: the field lies " in out.read_text(encoding="utf-8")

    (tmp_path / "frames" / "flat-1.npy").write_bytes(b"no frame")
    assert run(order) == Exit.CONFORMS
    assert "The file was refused." in out.read_text(encoding="utf-8")


def test_names_are_escaped(tmp_path: Path) -> None:
    """Text of the spec stands in the page as text."""
    _frame(tmp_path / "frames" / "flat-1.npy", 0.5, 1)
    out = tmp_path / "regions.html"
    spec = write(tmp_path, FLAT.replace("number: WS8-FLD", "number: '<script>x</script>'"))

    assert run(["check", str(spec), "--frames", str(tmp_path / "frames"), "--out", str(out)]) == Exit.CONFORMS
    assert "<script>" not in out.read_text(encoding="utf-8")


def test_a_folder_without_frames_is_refused(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Where no file fits any pattern there is no page, and the sentence says what to check."""
    (tmp_path / "frames").mkdir()
    out = tmp_path / "regions.html"

    assert (
        run(["check", str(write(tmp_path, FLAT)), "--frames", str(tmp_path / "frames"), "--out", str(out)])
        == Exit.USAGE
    )
    assert "no file fits any pattern of the spec" in capsys.readouterr().err
    assert not out.exists()
