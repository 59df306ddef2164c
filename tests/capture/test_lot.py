"""A folder becomes units, attempts and captures; every file in it is used once or listed, none is passed over."""

import os
from dataclasses import replace
from pathlib import Path

import pytest

from runner.capture.lot import UnitFolder, count_fault, find_lot, fold, some, source_of
from runner.errors import UsageError
from runner.spec.build import read_spec
from runner.spec.model import FramePattern, Spec
from tests.capture.bad_frames import SPEC_TEXT

UNIT = "WS8-000101"


def _put(root: Path, *files: str) -> None:
    for file in files:
        (root / file).parent.mkdir(parents=True, exist_ok=True)
        (root / file).write_bytes(b"x")


def _spec(tmp_path: Path, text: str) -> Spec:
    path = tmp_path / "own.yaml"
    path.write_text(text, encoding="utf-8")
    return read_spec(path)


def _used(unit: UnitFolder) -> list[str]:
    return [ref.file for attempt in unit.attempts for refs in attempt.frames.values() for ref in refs]


def test_every_file_is_used_once_or_listed(tmp_path: Path, spec: Spec) -> None:
    """What lies anywhere under FRAMES is a frame of one capture or stands in the list of unused files."""
    _put(tmp_path, "notes.txt", ".hidden/x.tif", "old/x.tif", f"{UNIT}/readme.txt", f"{UNIT}/chart-1.tif~")
    _put(tmp_path, *(f"{UNIT}/{name}" for name in ("dark-1.tif", "dark-2.tif", "chart-1.tif", "chart-2.tif")))
    _put(tmp_path, f"{UNIT}/deep/er/chart-3.tif", f"{UNIT}/.cache/a.tif", f"{UNIT}/chart-9.tif.part")
    (tmp_path / UNIT / "linked").symlink_to(tmp_path / "old")

    lot = find_lot(tmp_path, spec)

    assert sorted(_used(lot.units[0])) == ["chart-1.tif", "chart-2.tif", "dark-1.tif", "dark-2.tif"]
    left = {"readme.txt", "chart-1.tif~", "chart-9.tif.part", "deep/er/chart-3.tif", ".cache/", "linked/"}
    assert set(lot.unused) == {"notes.txt", ".hidden/"} | {f"{UNIT}/{name}" for name in left}
    assert lot.strangers == (r"old/ is not a unit: its name is no serial like WS8-[0-9]{6}",)


def test_order_is_that_of_serials_and_axes(tmp_path: Path, spec: Spec) -> None:
    """Units come by serial and frames by the value of their axes, however the file system lists them."""
    for serial in ("WS8-000110", "WS8-000009", UNIT):
        _put(tmp_path, *(f"{serial}/chart-{n}.tif" for n in (10, 2, 1)))

    lot = find_lot(tmp_path, spec)

    assert [unit.serial for unit in lot.units] == ["WS8-000009", UNIT, "WS8-000110"]
    assert [ref.axes["repeat"] for ref in lot.units[0].attempts[0].frames["chart"]] == ["1", "2", "10"]


def test_attempts_are_folders_by_number(tmp_path: Path, spec: Spec) -> None:
    """Attempts come in order of number; a gap is remarked, a number twice and frames beside them are faults."""
    _put(tmp_path, f"{UNIT}/attempt-10/chart-1.tif", f"{UNIT}/attempt-2/chart-1.tif", f"{UNIT}/attempt-0/a.tif")
    (unit,) = find_lot(tmp_path, spec).units
    assert [attempt.number for attempt in unit.attempts] == [2, 10]
    assert (unit.faults, unit.unused) == ((), ("attempt-0/",))
    assert unit.remarks == (f"attempt 1, 3, 4, 5, 6, 7, 8, 9 of {UNIT} is not there",)

    _put(tmp_path, f"{UNIT}/attempt-02/chart-1.tif", f"{UNIT}/chart-1.tif")
    (unit,) = find_lot(tmp_path, spec).units
    beside, doubled = unit.faults
    assert beside.startswith(f"frames lie both in the folder of {UNIT} itself and in its attempt folders;")
    assert "both claim to be attempt 2; number the attempts anew" in doubled


def test_a_file_that_two_captures_claim_is_told_to_both(tmp_path: Path, spec: Spec) -> None:
    """Where a spec's patterns overlap in a way that only the files show, it is no matter of which comes first."""
    captures = (replace(c, frames=FramePattern(p)) for c, p in zip(spec.captures, ("d*.tif", "*k.tif"), strict=True))
    overlapping = replace(spec, captures=tuple(captures))
    _put(tmp_path, f"{UNIT}/dark.tif", f"{UNIT}/black.tif", f"{UNIT}/dim.tif", f"{UNIT}/desk.tif")

    (attempt,) = find_lot(tmp_path, overlapping).units[0].attempts

    for name, rival in (("dark", "chart"), ("chart", "dark")):
        assert [fault.split(";")[0] for fault in attempt.faults[name]] == [
            f"{file}: the captures '{name}' and '{rival}' both claim it" for file in ("dark.tif", "desk.tif")
        ]


def test_same_frames_as_uses_the_other_captures_files(tmp_path: Path) -> None:
    """A capture on another one's frames has the same files, and is no rival of them."""
    spec = _spec(tmp_path, SPEC_TEXT + "  again: {target: flat field, same_frames_as: dark}\n")
    _put(
        tmp_path / "frames", *(f"{UNIT}/{name}" for name in ("dark-1.tif", "dark-2.tif", "chart-1.tif", "chart-2.tif"))
    )

    (attempt,) = find_lot(tmp_path / "frames", spec).units[0].attempts

    assert [ref.file for ref in attempt.frames["again"]] == ["dark-1.tif", "dark-2.tif"]
    assert attempt.frames["again"] == attempt.frames["dark"]
    assert set(attempt.faults.values()) == {()}
    assert [source_of(capture, spec) for capture in spec.captures] == ["dark", "chart", "dark"]


def test_units_that_were_asked_for(tmp_path: Path, spec: Spec) -> None:
    """The others are still looked through; a unit that is not there, or no serial, is told with what there is."""
    _put(tmp_path, f"{UNIT}/chart-1.tif", "WS8-000102/chart-1.tif")

    lot = find_lot(tmp_path, spec, [UNIT])

    assert ([u.serial for u in lot.units], [u.serial for u in lot.others]) == ([UNIT], ["WS8-000102"])
    with pytest.raises(UsageError, match="no frames of unit WS8-000103; there are WS8-000101, WS8-000102; check"):
        find_lot(tmp_path, spec, ["WS8-000103"])
    with pytest.raises(UsageError, match=r"'WS8-1' is not a serial of this spec; serials like WS8-\[0-9\]\{6\}"):
        find_lot(tmp_path, spec, ["WS8-1"])


def test_frames_themselves_serve_for_exactly_one_unit(tmp_path: Path, spec: Spec) -> None:
    """With one --unit FRAMES may hold the frames; without it, the folder of a unit is told from a lot's."""
    folder = tmp_path / UNIT
    _put(folder, "chart-1.tif", "notes.txt")

    lot = find_lot(folder, spec, ["WS8-000777"])

    assert (lot.units[0].serial, lot.unused) == ("WS8-000777", ("notes.txt",))
    assert find_lot(folder, spec).units == ()
    assert find_lot(folder, spec).strangers == (
        f"{UNIT} is itself the folder of a unit: give the folder above, or --unit {UNIT}",
    )
    with pytest.raises(UsageError, match="no frames of unit WS8-000777, WS8-000778; there are no units at all"):
        find_lot(folder, spec, ["WS8-000777", "WS8-000778"])


def test_serials_that_differ_in_spelling_only_are_faults(tmp_path: Path) -> None:
    """Two folders whose names people read as one unit make neither of them evidence."""
    spec = _spec(tmp_path, SPEC_TEXT.replace("WS8-[0-9]{6}", "[A-Za-z0-9Ａ-]+"))
    _put(tmp_path / "frames", "Ab-1/chart-1.tif", "aB-1/chart-1.tif", "AB-2/chart-1.tif")

    by_serial = {unit.serial: unit.faults for unit in find_lot(tmp_path / "frames", spec).units}

    assert by_serial["AB-2"] == ()
    assert "the folders Ab-1 and aB-1 differ only in case or spelling" in by_serial["Ab-1"][0]
    assert by_serial["aB-1"]
    assert fold("Ａb-1") == fold("ab-1")  # NFKC: full-width letters


def test_a_folder_that_cannot_be_read_stops_the_run(
    tmp_path: Path, spec: Spec, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A folder without permission, at any depth, is named; its frames are not silently missing."""
    _put(tmp_path, f"{UNIT}/chart-1.tif", f"{UNIT}/shut/chart-2.tif")
    scan = os.scandir

    def refuse(path: str | os.PathLike[str]) -> object:
        if Path(path).name == "shut":
            raise PermissionError(13, "Permission denied", str(path))
        return scan(path)

    with pytest.raises(UsageError, match=r"nowhere: the folder of frames cannot be read: no such file"):
        find_lot(tmp_path / "nowhere", spec)
    monkeypatch.setattr(os, "scandir", refuse)
    with pytest.raises(UsageError, match=r"shut: the folder of frames cannot be read: permission denied; .*; check"):
        find_lot(tmp_path, spec)


def test_lost_frames_are_named_where_the_numbers_show_them(tmp_path: Path, spec: Spec) -> None:
    """The sentence about a lost frame says which numbers are missing; a right count draws none."""
    capture = spec.capture("chart")
    _put(tmp_path, *(f"{UNIT}/chart-{n}.tif" for n in (2, 5)))
    refs = find_lot(tmp_path, spec).units[0].attempts[0].frames["chart"]

    assert count_fault(capture, refs, 2) is None
    assert count_fault(capture, refs, 1) == (
        "1 of 2 frames 'chart-{repeat}.*', repeat 1, 3, 4 missing; copy what is missing, or capture again"
    )
    assert "3 frames 'chart-{repeat}.*', the spec asks for 2" in str(count_fault(capture, refs, 3))
    assert some([str(n) for n in range(8)]) == "0, 1, 2, 3, 4 and 3 more"
