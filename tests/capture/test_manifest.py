"""A manifest is the truth about completeness: both forms, whole or refused, in the attempt's folder or above it."""

import json
import subprocess
from pathlib import Path

import pytest

from runner.capture.integrity import survey
from runner.capture.lot import find_lot
from runner.capture.manifest import Entry, ManifestRef, manifest_faults, read_manifest
from runner.errors import UsageError
from runner.spec.model import Spec
from tests.capture.bad_frames import UNIT, good_unit
from tests.capture.staged import manifest, sha


def test_the_lines_of_sha256sum_are_read(tmp_path: Path) -> None:
    """What the system's own program prints, as text or binary, is read back to the same digests."""
    for name in ("a b.tif", "c.tif"):
        (tmp_path / name).write_bytes(name.encode())
    for mode in ("--text", "--binary"):
        call = ["sha256sum", mode, "a b.tif", "./c.tif"]
        printed = subprocess.run(call, cwd=tmp_path, capture_output=True, text=True, check=True).stdout
        (tmp_path / "manifest.sha256").write_text(printed)

        assert read_manifest(tmp_path / "manifest.sha256") == {
            name: Entry(sha(name.encode()), None) for name in ("a b.tif", "c.tif")
        }


def test_an_empty_files_digest_is_the_published_one(tmp_path: Path) -> None:
    """SHA-256 of nothing (FIPS 180-4; from memory) in an upper-case list fits an empty file, and only that."""
    digest = "E3B0C44298FC1C149AFBF4C8996FB92427AE41E4649B934CA495991B7852B855"
    (tmp_path / "manifest.sha256").write_text(f"{digest}  a.tif\n")
    (tmp_path / "a.tif").write_bytes(b"")
    ref = ManifestRef(tmp_path / "manifest.sha256")
    assert manifest_faults(ref, ["a.tif"], {}) == []

    (tmp_path / "a.tif").write_bytes(b"x")
    (fault,) = manifest_faults(ref, ["a.tif"], {})
    assert fault.startswith("manifest.sha256: a.tif is not the file that was listed")


@pytest.mark.parametrize(
    ("name", "text", "says"),
    [
        ("manifest.json", "{", "cannot be used"),
        ("manifest.json", "[]", "no count and list of files"),
        ("manifest.json", '{"count": 0, "files": []}', "it lists nothing"),
        ("manifest.json", '{"count": 1, "files": [{"name": "a", "size": -1, "sha256": "%s"}]}' % ("0" * 64), "no size"),
        ("manifest.json", '{"count": 1, "files": [{"name": "a", "size": 1, "sha256": "12"}]}', "lacks its name or its"),
        ("manifest.sha256", "", "last line is not complete"),
        ("manifest.sha256", f"{'0' * 64}  /etc/passwd\n", "no path inside the folder"),
        ("manifest.sha256", f"{'0' * 64}  a/../../b\n", "no path inside the folder"),
        ("manifest.sha256", f"{'0' * 64}  a\n{'1' * 64}  ./a\n", "a is listed twice"),
        ("manifest.sha256", f"\\{'0' * 64}  a\\n\n", "line 1 is not a digest"),
    ],
)
def test_what_is_not_whole_is_refused(name: str, text: str, says: str, tmp_path: Path) -> None:
    """A list that is cut, empty, doubled, or leads out of the folder proves nothing."""
    (tmp_path / name).write_text(text)

    with pytest.raises(UsageError, match=f"{name}: the manifest cannot be used.*; let the copying end") as caught:
        read_manifest(tmp_path / name)

    assert says in str(caught.value)


def test_every_cut_of_a_manifest_is_refused(tmp_path: Path) -> None:
    """A manifest that is still being written is no proof, wherever it ends."""
    (tmp_path / "a.tif").write_bytes(b"x" * 100)
    manifest(tmp_path)
    data = (tmp_path / "manifest.json").read_bytes()

    for size in range(len(data)):
        (tmp_path / "manifest.json").write_bytes(data[:size])
        with pytest.raises(UsageError, match="the manifest cannot be used"):
            read_manifest(tmp_path / "manifest.json")


@pytest.mark.parametrize("above", [False, True])
def test_every_attempt_is_held_against_its_list(above: bool, tmp_path: Path, spec: Spec) -> None:
    """A list in the unit's folder speaks of all attempts; one in an attempt's folder of that one alone."""
    unit = tmp_path / UNIT
    for number in (1, 2):
        good_unit(unit / f"attempt-{number}", 100 * number)
    if above:
        files = sorted(unit.rglob("*.tif"))
        lines = [f"{sha(f.read_bytes())}  {f.relative_to(unit).as_posix()}\n" for f in files]
        (unit / "manifest.sha256").write_text("".join(lines))
    else:
        manifest(unit / "attempt-2")
    seen = survey(find_lot(tmp_path, spec), spec)
    assert seen.sentences == {}
    assert seen.unused == {UNIT: ()}
    assert seen.inferred == ({} if above else {UNIT: (1,)})

    (unit / "attempt-2" / "dark-1.tif").unlink()
    seen = survey(find_lot(tmp_path, spec), spec)

    assert any("dark-1.tif is listed and not there" in fault for fault in seen.faults(UNIT, 2, "chart"))
    assert seen.faults(UNIT, 1, "chart") == ()


def test_a_report_says_what_was_only_inferred(tmp_path: Path, spec: Spec) -> None:
    """Without a manifest one line says that completeness is inferred; with one there is none."""
    good_unit(tmp_path / UNIT, 100)
    (line,) = survey(find_lot(tmp_path, spec), spec).remarks(UNIT)
    assert line == "Without a manifest of attempt 1 its completeness is inferred from the files themselves."

    manifest(tmp_path / UNIT)

    assert json.loads((tmp_path / UNIT / "manifest.json").read_text())["count"] == 4
    assert survey(find_lot(tmp_path, spec), spec).remarks(UNIT) == ()
