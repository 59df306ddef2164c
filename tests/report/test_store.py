"""Files appear whole or not at all; nothing that was written is lost."""

import errno
import json
import os
from pathlib import Path

import pytest

from runner.errors import StorageError, UsageError
from runner.report import store

FACTS = {"time": "2026-12-01T09:30:00Z", "digest": "sha256:1", "lot": "L1"}


def _unit(time: str, **more: bytes) -> dict[str, bytes]:
    document = {
        "time": time,
        "unit": {"serial": "S1"},
        "document": {"digest": "sha256:1"},
        "pictures": [{"name": "a.png"}],
    }
    names = {store.HTML: b"h", store.HTML_SIGNATURE: b"s", store.PDF: b"p", "pictures/a.png": b"i"}
    return {store.RESULTS: json.dumps(document).encode(), **names, **more}


def test_a_file_is_replaced_whole(tmp_path: Path) -> None:
    """A write leaves the new contents and no other file."""
    store.write_whole(tmp_path / "a" / "b.json", b"1")
    store.write_whole(tmp_path / "a" / "b.json", b"22")

    assert (tmp_path / "a" / "b.json").read_bytes() == b"22"
    assert [p.name for p in (tmp_path / "a").iterdir()] == ["b.json"]


def test_a_failed_write_leaves_the_old_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """When the disk fails before the rename, the old file stands and nothing lies beside it."""
    store.write_whole(tmp_path / "b.json", b"old")

    def full(_handle: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("os.fsync", full)
    with pytest.raises(OSError, match="No space left"):
        store.write_whole(tmp_path / "b.json", b"new")

    assert (tmp_path / "b.json").read_bytes() == b"old"
    assert len(list(tmp_path.iterdir())) == 1


def test_an_older_result_moves_below_the_new_one(tmp_path: Path) -> None:
    """Every older folder of a unit is kept under `earlier/`, named by its time."""
    for minute in (1, 2, 3):
        folder = store.write_unit(tmp_path, "S1", _unit(f"2026-12-01T09:0{minute}:00Z"))

    assert sorted(p.name for p in (folder / "earlier").iterdir()) == ["20261201T090100Z", "20261201T090200Z"]
    assert not list(tmp_path.glob(".making-*"))


def test_two_results_of_one_time_are_both_kept(tmp_path: Path) -> None:
    """The run's fixed time does not make a second older folder overwrite the first."""
    for _ in range(3):
        folder = store.write_unit(tmp_path, "S1", _unit("2026-12-01T09:01:00Z"))

    assert sorted(p.name for p in (folder / "earlier").iterdir()) == ["20261201T090100Z", "20261201T090100Z-2"]


def test_a_folder_that_was_left_ready_is_brought_into_place(tmp_path: Path) -> None:
    """A run killed between its renames loses neither the new nor the old folder."""
    store.write_unit(tmp_path, "S1", _unit("2026-12-01T09:01:00Z"))
    making = tmp_path / ".making-S1"
    for name, data in _unit("2026-12-01T09:02:00Z").items():
        store.write_whole(making / name, data)
    (making / ".ready").touch()
    (tmp_path / "S1").rename(tmp_path / "moved")
    (making / "earlier").mkdir()
    (tmp_path / "moved").rename(making / "earlier" / "20261201T090100Z")

    folder = store.finish(tmp_path, "S1")

    results = store.read_results(folder)
    assert results is not None
    assert results["time"] == "2026-12-01T09:02:00Z"
    assert (folder / "earlier" / "20261201T090100Z" / store.RESULTS).is_file()


def test_a_half_made_folder_is_made_anew(tmp_path: Path) -> None:
    """What a killed run had not finished writing never becomes a result."""
    store.write_whole(tmp_path / ".making-S1" / store.RESULTS, b"half")

    assert not store.finish(tmp_path, "S1").exists()


def test_a_unit_is_complete_only_with_all_its_files(tmp_path: Path) -> None:
    """A missing picture makes the unit one that has to be done again."""
    folder = store.write_unit(tmp_path, "S1", _unit("2026-12-01T09:01:00Z"))
    document = store.read_results(folder)
    assert document is not None
    assert store.is_complete(folder, document)

    (folder / "pictures" / "a.png").unlink()

    assert not store.is_complete(folder, document)


def test_a_rerun_takes_the_first_starts_time(tmp_path: Path) -> None:
    """The time of a run is fixed at its first start."""
    store.start_run(tmp_path / "out", FACTS)

    assert store.start_run(tmp_path / "out", FACTS | {"time": "2027-01-01T00:00:00Z"})["time"] == FACTS["time"]


def test_another_run_in_the_same_folder_is_refused(tmp_path: Path) -> None:
    """One folder keeps one spec, program, station and lot."""
    store.start_run(tmp_path, FACTS)

    with pytest.raises(UsageError, match="it holds a run with another digest; one folder keeps one run"):
        store.start_run(tmp_path, FACTS | {"digest": "sha256:2"})


def test_a_folder_that_cannot_be_written_is_told(tmp_path: Path) -> None:
    """A file in place of the folder ends in a sentence."""
    (tmp_path / "out").write_text("x")

    with pytest.raises(UsageError, match=r"out: the folder cannot be written: .*; choose another --out"):
        store.start_run(tmp_path / "out", FACTS)


def test_results_of_another_spec_do_not_enter_the_lot(tmp_path: Path) -> None:
    """A lot is rebuilt from all results of one spec and of no other."""
    store.write_unit(tmp_path, "S1", _unit("2026-12-01T09:01:00Z"))

    assert [d["unit"]["serial"] for d in store.each_result(tmp_path, "sha256:1")] == ["S1"]
    assert list(store.each_result(tmp_path, "sha256:2")) == []


@pytest.mark.parametrize(("number", "kind"), [(errno.ENOSPC, StorageError), (errno.EACCES, UsageError)])
def test_a_folder_without_room_is_no_wrong_command_line(
    number: int, kind: type[Exception], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A disk that is full at the very start is told as such, not as an option that was chosen wrongly."""

    def full(*_arguments: object, **_named: object) -> None:
        raise OSError(number, os.strerror(number))

    monkeypatch.setattr("tempfile.mkstemp", full)

    with pytest.raises(kind, match=r"the folder cannot be written: (No space left on device|Permission denied)"):
        store.start_run(tmp_path / "out", {"time": "t"})
    assert not (tmp_path / "out" / store.RUN).exists()
