"""A run may be killed at any moment, run twice at once, or lose its folder, and still says the same in the end."""

import json
import os
import random
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from runner.report import store
from tests.capture.bad_frames import SPEC_TEXT, good_unit

TIME = "2026-12-01T09:30:00Z"


def _lot(folder: Path, units: int) -> Path:
    """Write a lot of good units, each with frames of its own, and its spec."""
    for n in range(units):
        good_unit(folder / "frames" / f"WS8-{n + 1:06d}", seed=100 * n)
    (folder / "spec.yaml").write_text(SPEC_TEXT)
    return folder


def _start(folder: Path, out: str, jobs: int) -> subprocess.Popen[bytes]:
    command = [sys.executable, "-m", "runner", "run", "spec.yaml", "frames", "--out", out, "--time", TIME, "--quiet"]
    root = str(Path(__file__).resolve().parent.parent)
    environment = os.environ | {"XDG_CONFIG_HOME": str(folder / "config"), "PYTHONPATH": root}
    with (folder / f"{Path(out).name}.err").open("ab") as said:
        return subprocess.Popen(
            [*command, "--jobs", str(jobs)],
            cwd=folder,
            env=environment,
            start_new_session=True,
            stdout=subprocess.DEVNULL,
            stderr=said,
        )


def _contents(out: Path) -> dict[str, bytes]:
    """Return every file that must not differ: no signatures, which are random, and of a PDF what was there before."""
    found = {}
    for path in sorted(p for p in out.rglob("*") if p.is_file()):
        name = path.relative_to(out).as_posix()
        if name in {".lock", ".lock-units"} or path.suffix == ".p7s":
            continue
        data = path.read_bytes()
        found[name] = data[: data.index(b"%%EOF")] if path.suffix == ".pdf" else data
    return found


def _whole(out: Path) -> None:
    """Assert that whatever lies in a run's folder is whole: no unit's folder without all of its files."""
    for folder in (p for p in out.glob("WS8-*") if p.is_dir()):
        document = json.loads((folder / store.RESULTS).read_bytes())
        assert store.is_complete(folder, document), folder.name
        assert document["verdict"] == "conforms"
        assert not (folder / "earlier").exists()
    for name in ("lot.json", "lot-values.json", "run.json"):
        if (out / name).exists():
            json.loads((out / name).read_bytes())


def _kill_and_go_on(folder: Path, kills: int, jobs: int) -> None:
    begun = time.monotonic()
    assert _start(folder, "calm", jobs).wait() == 0
    whole = time.monotonic() - begun
    rng = random.Random(20261201)
    for _ in range(kills):
        run = _start(folder, "out", jobs)
        try:
            run.wait(rng.uniform(0.1, whole))
        except subprocess.TimeoutExpired:
            os.killpg(run.pid, signal.SIGKILL)
            run.wait()
        if (folder / "out").exists():
            _whole(folder / "out")
        if run.returncode == 0 and rng.random() < 0.5:
            shutil.rmtree(folder / "out")  # finished: begin again, so that kills meet every state
    assert _start(folder, "out", jobs).wait() == 0
    assert _contents(folder / "out") == _contents(folder / "calm")


def test_a_killed_run_goes_on(tmp_path: Path) -> None:
    """After each of four kills everything is whole, and the end has the bytes of an undisturbed run."""
    _kill_and_go_on(_lot(tmp_path, 3), kills=4, jobs=2)


@pytest.mark.study
def test_three_hundred_kills(tmp_path: Path) -> None:
    """300 kills at random moments over 20 units with two jobs: nothing lost, nothing torn, the same bytes."""
    _kill_and_go_on(_lot(tmp_path, 20), kills=300, jobs=2)


def test_two_runs_into_one_folder_at_once(tmp_path: Path) -> None:
    """Both end with 0, no unit is done twice, and the bytes are those of a single run."""
    folder = _lot(tmp_path, 3)
    runs = [_start(folder, "out", 1), _start(folder, "out", 2)]
    assert [run.wait() for run in runs] == [0, 0]
    assert _start(folder, "calm", 1).wait() == 0

    assert _contents(folder / "out") == _contents(folder / "calm")


def test_a_folder_that_is_lost_on_the_way(tmp_path: Path) -> None:
    """When the folder of results vanishes in the middle, the run says so in plain words and ends with 70."""
    folder = _lot(tmp_path, 5)
    run = _start(folder, "out", 1)
    for _ in range(600):
        if (folder / "out" / "WS8-000001").exists() or run.poll() is not None:
            break
        time.sleep(0.05)
    (folder / "out").rename(folder / "gone")
    run.wait()
    said = (folder / "out.err").read_bytes()

    assert run.returncode == 70
    assert b"Traceback" not in said
    assert b"cannot be written" in said
    assert not (folder / "out").exists()


@pytest.fixture(scope="module")
def calm(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return the folder of a lot of two units with the results of an undisturbed run beside it."""
    folder = _lot(tmp_path_factory.mktemp("calm"), 2)
    assert _start(folder, "calm", 1).wait() == 0
    return folder


def _small_disk(place: Path, size: str) -> None:
    """Mount a file system of so much memory, or give it another size; skip where that is not allowed."""
    place.mkdir(exist_ok=True)
    option = f"{'remount,' if place.is_mount() else ''}size={size}"
    made = subprocess.run(["mount", "-t", "tmpfs", "-o", option, "tmpfs", place], capture_output=True, check=False)
    if made.returncode:
        pytest.skip(f"a small file system cannot be mounted: {made.stderr.decode().strip()}")


def test_a_full_disk(calm: Path, tmp_path: Path) -> None:
    """When the disk is full in the middle of a lot a sentence says so and 70 ends the run; nothing is torn.

    Once there is room, a rerun completes with the bytes of an undisturbed run.
    """
    folder = tmp_path / "lot"
    shutil.copytree(calm, folder)
    disk = folder / "disk"
    _small_disk(disk, "240k")  # a unit's files take 150 kB
    try:
        run = _start(folder, "disk/out", 1)
        assert run.wait() == 70
        said, done = (folder / "out.err").read_text(), list((disk / "out").glob("WS8-*"))
        _whole(disk / "out")
        _small_disk(disk, "20m")
        assert _start(folder, "disk/out", 1).wait() == 0

        assert len(done) == 1
        assert "Traceback" not in said
        assert "cannot be written: No space left on device" in said
        assert _contents(disk / "out") == _contents(folder / "calm")
    finally:
        subprocess.run(["umount", "-l", disk], check=False)


FULL = """
import errno, os, runpy, sys, tempfile
room, made = int(sys.argv.pop(1)), tempfile.mkstemp
def mkstemp(*arguments, **named):
    global room
    if str(named.get("dir", "")).startswith("out"):
        room -= 1
        if room < 0:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC), str(named["dir"]))
    return made(*arguments, **named)
tempfile.mkstemp = mkstemp
sys.argv[0] = "probatum"
runpy.run_module("runner", run_name="__main__")
"""
"""Runs the program with room for so many files in its folder of results."""


@pytest.mark.parametrize(
    "room", [4, pytest.param(0, marks=pytest.mark.study), pytest.param(9, marks=pytest.mark.study)]
)
def test_room_for_so_many_files(room: int, calm: Path, tmp_path: Path) -> None:
    """Wherever the room ends, before, in or after a unit, a sentence says so, 70 ends the run, a rerun completes it."""
    folder = tmp_path / "lot"
    shutil.copytree(calm, folder)
    root = str(Path(__file__).resolve().parent.parent)
    environment = os.environ | {"XDG_CONFIG_HOME": str(folder / "config"), "PYTHONPATH": root}
    command = [sys.executable, "-c", FULL, str(room), "run", "spec.yaml", "frames", "--out", "out", "--time", TIME]
    ended = subprocess.run(command, cwd=folder, env=environment, capture_output=True, text=True, check=False)
    _whole(folder / "out")
    assert _start(folder, "out", 1).wait() == 0

    told = ended.stdout + ended.stderr
    assert ended.returncode == 70
    assert "No space left on device" in told
    assert "make room" in told.lower()
    assert "Traceback" not in told
    assert _contents(folder / "out") == _contents(folder / "calm")


def test_units_one_after_another_are_one_lot(tmp_path: Path) -> None:
    """`--unit` for each serial in turn ends with the bytes of one run over all."""
    folder = _lot(tmp_path, 3)
    root = str(Path(__file__).resolve().parent.parent)
    environment = os.environ | {"XDG_CONFIG_HOME": str(folder / "config"), "PYTHONPATH": root}
    command = [sys.executable, "-m", "runner", "run", "spec.yaml", "frames", "--out", "out", "--time", TIME, "--quiet"]
    for n in (2, 1, 3):
        subprocess.run([*command, "--unit", f"WS8-{n:06d}"], cwd=folder, env=environment, check=True)
    assert _start(folder, "calm", 2).wait() == 0

    assert _contents(folder / "out") == _contents(folder / "calm")


@pytest.mark.study
def test_the_time_of_a_unit_does_not_grow(tmp_path: Path) -> None:
    """Of 200 units run with `--unit` one after another the last ones take no longer, and the lot is that of one run.

    What is allowed, half as much again for the last fifth as for the first, is far above the scatter of a machine that
    does nothing else, and far below what looking at every unit in every run would take.
    """
    folder = _lot(tmp_path, 200)
    root = str(Path(__file__).resolve().parent.parent)
    environment = os.environ | {"XDG_CONFIG_HOME": str(folder / "config"), "PYTHONPATH": root}
    command = [sys.executable, "-m", "runner", "run", "spec.yaml", "frames", "--out", "out", "--time", TIME, "--quiet"]
    took = []
    for n in range(1, 201):
        begun = time.monotonic()
        subprocess.run([*command, "--unit", f"WS8-{n:06d}"], cwd=folder, env=environment, check=True)
        took.append(time.monotonic() - begun)
    assert _start(folder, "calm", 2).wait() == 0

    first, last = sorted(took[:40])[20], sorted(took[-40:])[20]
    print(f"median of the first 40 units {first:.2f} s, of the last 40 {last:.2f} s")
    assert last < 1.5 * first
    assert _contents(folder / "out") == _contents(folder / "calm")
