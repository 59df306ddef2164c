"""From a plant's own keys to a report that holds: run, verify, and what other people's tools say."""

import json
import shutil
import subprocess
from collections.abc import Iterator
from pathlib import Path

import pytest

from runner.cli import run
from runner.exits import Exit
from tests.capture.bad_frames import NEIGHBOUR, SPEC_TEXT, UNIT, good_lot


@pytest.fixture(scope="module")
def bench(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Path]:
    """Return a folder with keys and the signed reports of two good units."""
    home = tmp_path_factory.mktemp("bench")
    (home / "frames").mkdir()
    good_lot(home / "frames")
    (home / "spec.yaml").write_text(SPEC_TEXT)
    (home / "phrase").write_text("walnut shell\n")
    root, station = str(home / "root"), str(home / "station")
    new, old = ["--passphrase-file", str(home / "phrase")], ["--authority-passphrase-file", str(home / "phrase")]
    assert run(["keys", "make-authority", root, "--name", "Nut test root", *new]) is Exit.CONFORMS
    more = ["--authority", root, "--name", "Bench 2", *old, *new]
    assert run(["keys", "make-station", station, *more]) is Exit.CONFORMS
    key = next(p for p in (home / "station").iterdir() if p.suffix in {".p12", ".pfx"})
    words = ["run", str(home / "spec.yaml"), str(home / "frames"), "--out", str(home / "out"), "--quiet"]
    assert run([*words, "--key", str(key), *new]) is Exit.CONFORMS
    yield home
    shutil.rmtree(home)


@pytest.fixture
def unit(bench: Path, tmp_path: Path) -> Path:
    """Return a copy of one unit's report that a test may spoil."""
    return Path(shutil.copytree(bench / "out" / UNIT, tmp_path / UNIT))


def _verify(bench: Path, place: Path, *more: str) -> Exit:
    roots = ["--root", str(bench / "root" / "root.pem"), "--crl", str(next((bench / "root").glob("*.crl*")))]
    return run(["verify", str(place), *roots, *more])


def test_a_report_by_a_known_signer_holds(bench: Path) -> None:
    """With the plant's root everything holds, for one unit with its frames and for the whole lot."""
    assert _verify(bench, bench / "out" / UNIT, "--frames", str(bench / "frames")) is Exit.CONFORMS
    assert _verify(bench, bench / "out") is Exit.CONFORMS
    assert _verify(bench, bench / "out" / UNIT / "report.pdf") is Exit.CONFORMS


def test_without_a_root_nobody_vouches(bench: Path) -> None:
    """A sound report whose signer no given root vouches for is exit 3, not 0."""
    assert run(["verify", str(bench / "out" / UNIT)]) is Exit.CANNOT_DECIDE


def test_other_tools_accept_it(bench: Path) -> None:
    """Openssl accepts page and signature given the root; pdfsig and pdfdetach read the PDF."""
    folder, root = bench / "out" / UNIT, bench / "root" / "root.pem"
    words = [
        "openssl",
        "cms",
        "-verify",
        "-binary",
        "-inform",
        "DER",
        "-in",
        "report.html.p7s",
        "-content",
        "report.html",
    ]
    subprocess.run([*words, "-CAfile", str(root), "-out", "/dev/null"], check=True, cwd=folder, capture_output=True)
    signed = subprocess.run(["pdfsig", "-nocert", "report.pdf"], check=True, cwd=folder, capture_output=True, text=True)
    assert "Signature is Valid." in signed.stdout
    assert "Total document signed" in signed.stdout
    listed = subprocess.run(
        ["pdfdetach", "-list", "report.pdf"], check=True, cwd=folder, capture_output=True, text=True
    )
    assert "3 embedded files" in listed.stdout


def _edit(path: Path, old: bytes, new: bytes) -> None:
    data = path.read_bytes()
    assert old in data
    path.write_bytes(data.replace(old, new, 1))


@pytest.mark.parametrize(
    ("name", "old", "new"),
    [
        ("results.json", b'"verdict":"conforms"', b'"verdict":"cannot decide"'),
        ("results.json", b'"at_least":0.2,', b'"at_least":0.1,'),
        ("results.json", b'"operator":""', b'"operator":"Kim"'),
        ("report.html", b"conforms", b"Conforms"),
        ("report.html", b"\n", b"\r\n"),
        ("report.pdf", b"/Type", b"/Typo"),
    ],
)
def test_a_changed_file_is_refused(bench: Path, unit: Path, name: str, old: bytes, new: bytes) -> None:
    """A change of a few bytes in any file of the folder ends as refused."""
    _edit(unit / name, old, new)

    assert _verify(bench, unit) is Exit.DOES_NOT_CONFORM


def test_a_changed_picture_is_refused(bench: Path, unit: Path) -> None:
    """A picture beside the report must be the one inside the signed PDF."""
    picture = unit / "pictures" / "chart-overview.png"
    picture.write_bytes(picture.read_bytes() + b"x")
    assert _verify(bench, unit) is Exit.DOES_NOT_CONFORM


def test_another_units_page_is_refused(bench: Path, unit: Path) -> None:
    """A good report of another unit, put in its place, is found out."""
    for name in ("report.pdf", "report.html", "report.html.p7s"):
        shutil.copy(bench / "out" / NEIGHBOUR / name, unit / name)

    assert _verify(bench, unit) is Exit.DOES_NOT_CONFORM
    assert _verify(bench, bench / "out" / NEIGHBOUR / "report.pdf", "--serial", UNIT) is Exit.DOES_NOT_CONFORM


def test_other_frames_are_refused(bench: Path, tmp_path: Path) -> None:
    """Frames that are not those of the report are found by their digests."""
    frames = tmp_path / "frames"
    frames.mkdir()
    good_lot(frames)
    shutil.copy(frames / UNIT / "chart-2.tif", frames / UNIT / "chart-1.tif")

    assert _verify(bench, bench / "out" / UNIT, "--frames", str(frames)) is Exit.DOES_NOT_CONFORM


def test_a_changed_lot_table_is_refused(bench: Path, tmp_path: Path) -> None:
    """The lot's own files follow from the units' results, or the lot does not hold."""
    lot = Path(shutil.copytree(bench / "out", tmp_path / "lot"))
    data = json.loads((lot / "lot.json").read_text())
    data["counts"]["conforms"] = 3
    (lot / "lot.json").write_text(json.dumps(data))

    assert _verify(bench, lot) is Exit.DOES_NOT_CONFORM


def test_nothing_to_verify_is_a_usage_error(bench: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A path without a report ends in a sentence, not in success."""
    assert _verify(bench, tmp_path / "nothing") is Exit.USAGE
    assert "nothing: it cannot be read" in capsys.readouterr().err


# ---- what is printed


def _lines(capsys: pytest.CaptureFixture[str]) -> list[str]:
    return [line.strip() for line in capsys.readouterr().out.splitlines()]


def test_a_lot_that_holds_is_told_in_a_line_for_each_unit(bench: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """One line for each unit with its verdict, one for the lot's own files, one for the end."""
    assert _verify(bench, bench / "out") is Exit.CONFORMS
    lines = _lines(capsys)

    assert lines[:3] == [f"{bench / 'out'}:", f"holds    {UNIT}  conforms", f"holds    {NEIGHBOUR}  conforms"]
    assert lines[3] == "holds    lot.json, lot.html, lot.csv, lot-values.json: what the units' results give"
    assert lines[-1] == f"{bench / 'out'}: everything holds (2 units)"
    assert len(lines) <= 6


def test_only_units_that_do_not_hold_are_told_in_detail(
    bench: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """The reason stands below the unit, which says nothing of itself any more; the other unit keeps its line."""
    lot = Path(shutil.copytree(bench / "out", tmp_path / "lot"))
    _edit(lot / UNIT / "report.html", b"conforms", b"Conforms")
    assert _verify(bench, lot) is Exit.DOES_NOT_CONFORM
    lines = _lines(capsys)

    assert lines[1:3] == [
        f"REFUSED  {UNIT}",
        "HTML report: it was changed after signing: its digest is not the signed one",
    ]
    assert lines[3] == f"holds    {NEIGHBOUR}  conforms"
    assert lines[-1] == f"{lot}: REFUSED (1 of 2 units)"


def test_what_is_open_in_all_units_is_told_once(bench: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The unknown signer is named once for the lot, with the digest that people compare; accepted, it stays named."""
    assert run(["verify", str(bench / "out")]) is Exit.CANNOT_DECIDE
    lines = _lines(capsys)
    (told,) = [line for line in lines if "nobody vouches" in line]
    (full,) = [line for line in lines if "in full" in line]
    mark = full.rsplit("sha256:", 1)[1]

    assert lines[1] == f"open     {UNIT}  conforms"
    assert told.startswith("open     all units: PDF and HTML signer: signed by 'Bench 2' (")
    assert f"({mark[:4]} {mark[4:8]} {mark[8:12]} {mark[12:16]} …)" in told
    assert run(["verify", str(bench / "out"), "--accept", "unknown-signer"]) is Exit.CONFORMS
    assert f"accepted {UNIT}  conforms" in _lines(capsys)


def test_one_report_is_told_in_full(bench: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """What the report says of its unit stands first; what holds of PDF and page alike is told once."""
    assert _verify(bench, bench / "out" / UNIT) is Exit.CONFORMS
    lines = _lines(capsys)

    assert lines[0] == f"{bench / 'out' / UNIT}: everything holds"
    assert lines[1].startswith(f"says     unit {UNIT}: conforms (by WS8-BAD revision A, 20")
    assert [line for line in lines if " signer: " in line] == [
        "holds    PDF and HTML signer: signed by 'Bench 2', for whom 'Nut test root' vouches"
    ]
    assert "holds    verdicts: every verdict follows from the readings (1)" in lines


def test_quiet_prints_only_what_does_not_hold(bench: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Nothing at all where everything holds; the refused unit and the end otherwise."""
    assert _verify(bench, bench / "out", "--quiet") is Exit.CONFORMS
    assert _lines(capsys) == []

    lot = Path(shutil.copytree(bench / "out", tmp_path / "lot"))
    _edit(lot / UNIT / "report.html", b"conforms", b"Conforms")
    _verify(bench, lot, "--quiet")
    lines = _lines(capsys)
    assert lines[0] == f"REFUSED  {UNIT}"
    assert not any(NEIGHBOUR in line or line.startswith(("holds", "note")) for line in lines)


def test_names_cannot_steer_the_terminal(unit: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A file's name that would wipe the line and write a better one is printed as what it is."""
    (unit / "x\x1b[2K\rreport: everything holds\u202e").write_bytes(b"")
    run(["verify", str(unit)])
    out = capsys.readouterr().out

    assert "x\\x1b[2K\\rreport: everything holds\\u202e" in out
    assert not {"\x1b", "\r", "\u202e"} & set(out)


def test_several_reports_end_with_the_most_serious(bench: Path, unit: Path) -> None:
    """One refused report among good ones refuses the call."""
    _edit(unit / "report.html", b"conforms", b"Conforms")
    good = str(bench / "out" / UNIT)

    assert _verify(bench, unit, good) is Exit.DOES_NOT_CONFORM
