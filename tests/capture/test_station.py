"""What a station says is kept with the digests of what was read, so that anyone can compare again."""

import json
from pathlib import Path

from runner.capture.integrity import Survey, survey
from runner.capture.lot import find_lot
from runner.capture.station import FrameWords, StationFile
from runner.spec.build import read_spec
from tests.capture.bad_frames import tiff
from tests.capture.bad_frames_station import STATION, said
from tests.capture.staged import UNIT, codes, good_lot, sha


def _survey(root: Path) -> Survey:
    (root / "spec.yaml").write_text(STATION.spec)
    spec = read_spec(root / "spec.yaml")
    return survey(find_lot(root / "frames", spec, (UNIT,)), spec)


def test_files_and_words_are_kept(tmp_path: Path) -> None:
    """Every manifest and sidecar is listed with the SHA-256 of its bytes, every frame with what was said of it."""
    good_lot(tmp_path / "frames", STATION)
    folder = tmp_path / "frames" / UNIT

    station = _survey(tmp_path).station[UNIT]

    assert [(one.file, one.kind) for one in station.files] == [
        ("flat-1.json", "sidecar"),
        ("flat-2.json", "sidecar"),
        ("manifest.json", "manifest"),
    ]
    assert all(one.sha256 == sha((folder / one.file).read_bytes()) for one in station.files)
    first = station.frames[0]
    assert (first.attempt, first.capture, first.file) == (1, "flat", "flat-1.tif")
    assert ("exposure", "2 ms", "flat-1.json") in first.fields
    assert ("counter", "41", "flat-1.json") in first.fields
    assert "operator's mood" not in {name for name, _, _ in first.fields}


def test_what_cannot_be_read_is_listed_too(tmp_path: Path) -> None:
    """A torn sidecar has the digest of its bytes; a lost one that was a dangling link has none."""
    good_lot(tmp_path / "frames", STATION)
    folder = tmp_path / "frames" / UNIT
    (folder / "flat-1.json").write_bytes(b'{"serial": ')
    (folder / "flat-2.json").unlink()
    (folder / "flat-2.json").symlink_to("nowhere.json")

    files = {one.file: one.sha256 for one in _survey(tmp_path).station[UNIT].files}

    assert files["flat-1.json"] == sha(b'{"serial": ')
    assert files["flat-2.json"] == ""


def test_files_above_the_attempts_belong_to_each(tmp_path: Path) -> None:
    """A unit's own sidecar and manifest are named as seen from each attempt; the nearest word counts."""
    folder = tmp_path / "frames" / UNIT
    for number in (1, 2):
        place = folder / f"attempt-{number}"
        place.mkdir(parents=True)
        for repeat in (1, 2):
            (place / f"flat-{repeat}.tif").write_bytes(tiff(codes(10 * number + repeat)))
    (folder / "unit.json").write_text(json.dumps(said(UNIT, 1, counter=None)))
    (folder / "attempt-2" / "flat-2.json").write_text(json.dumps({"exposure": "4 ms"}))

    station = _survey(tmp_path).station[UNIT]

    assert [(one.attempt, one.file) for one in station.files] == [
        (1, "../unit.json"),
        (2, "../unit.json"),
        (2, "flat-2.json"),
    ]
    last = station.frames[-1]
    assert isinstance(last, FrameWords)
    assert ("exposure", "4 ms", "flat-2.json") in last.fields
    assert ("gain", "6 dB", "../unit.json") in last.fields
    assert isinstance(station.files[0], StationFile)
