"""Worker processes: loaded once, in the present environment, with one numeric thread, and from the right folder."""

import contextlib
import os
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import pytest

from runner import processes, threads

ROOT = Path(__file__).resolve().parent.parent


def _raise(words: str) -> None:
    raise ValueError(words)


def _state(name: str) -> tuple[str, tuple[str, ...], bool]:
    """Return what a worker sees: a variable, the thread counts, and whether the heavy libraries are there already."""
    counts = tuple(os.environ[variable] for variable in threads.NAMES)
    return os.environ.get(name, ""), counts, "weasyprint" in sys.modules


def test_each_pool_works_in_the_environment_of_its_own_start(monkeypatch: pytest.MonkeyPatch) -> None:
    """Variables set between two pools count for the second, though both are forked from one process."""
    for word in ("first", "second"):
        monkeypatch.setenv("PROBATUM_TEST", word)
        with processes.pool(1) as pool:
            found, counts, loaded = pool.submit(_state, "PROBATUM_TEST").result()
        assert found == word
        assert set(counts) == {"1"}
        assert loaded, "the worker was forked from a process that had loaded the program"
    assert "PYTHONSAFEPATH" not in os.environ


def test_the_safe_path_of_the_user_stays(monkeypatch: pytest.MonkeyPatch) -> None:
    """Loading leaves the variable that it needs for a moment as it was."""
    monkeypatch.setenv("PYTHONSAFEPATH", "yes")
    processes.warm_up()

    assert os.environ["PYTHONSAFEPATH"] == "yes"


def test_a_strangers_module_in_the_present_folder_is_not_loaded(tmp_path: Path) -> None:
    """A folder that happens to hold a `runner.py` and a `numpy.py` changes nothing."""
    for name in ("runner.py", "numpy.py"):
        (tmp_path / name).write_text("raise SystemExit('a stranger')\n")
    script = (
        "import sys; from runner import processes\n"
        "import os\n"
        "if __name__ == '__main__':\n"
        "    with processes.pool(1) as pool:\n"
        "        print(pool.submit(eval, \"__import__('runner').__file__\").result())\n"
    )
    (tmp_path / "elsewhere").mkdir()
    (tmp_path / "elsewhere" / "script.py").write_text(script)
    done = subprocess.run(
        [sys.executable, "elsewhere/script.py"],
        cwd=tmp_path,
        env=os.environ | {"PYTHONPATH": str(ROOT)},
        capture_output=True,
        text=True,
        check=False,
        timeout=120,
    )

    assert done.stderr == ""
    assert Path(done.stdout.strip()) == ROOT / "runner" / "__init__.py"


def test_what_goes_wrong_while_a_worker_is_prepared_is_told() -> None:
    """A worker that cannot be prepared breaks the pool at once; nobody waits for it."""
    with processes.pool(1, _raise, "no such thing") as pool, pytest.raises(Exception, match="terminated abruptly"):
        pool.submit(os.getpid).result(timeout=120)


def test_workers_end_with_a_run_that_is_killed(tmp_path: Path) -> None:
    """Whoever kills the run's own process alone leaves no worker behind."""
    script = tmp_path / "script.py"
    script.write_text(
        "import os, time\n"
        "from runner import processes\n"
        "if __name__ == '__main__':\n"
        "    with processes.pool(2) as pool:\n"
        "        waits = [pool.submit(time.sleep, 600) for _ in range(3)]\n"
        "        print('at work', flush=True)\n"
        "        time.sleep(600)\n"
    )
    environment = os.environ | {"PYTHONPATH": str(ROOT)}
    with subprocess.Popen(
        [sys.executable, str(script)], env=environment, stdout=subprocess.PIPE, start_new_session=True
    ) as run:
        assert run.stdout is not None
        run.stdout.readline()
        _until(lambda: len(_of_session(run.pid)) >= 4)  # the run, the process that loads, two workers
        run.kill()
        run.wait()
        _until(lambda: not _of_session(run.pid))


def _until(reached: Callable[[], bool]) -> None:
    end = time.monotonic() + 60
    while not reached():
        assert time.monotonic() < end, "it takes too long"
        time.sleep(0.1)


def _of_session(leader: int) -> list[int]:
    """Return the processes of a session that are still at work (Linux)."""
    found = []
    for stat in Path("/proc").glob("[0-9]*/stat"):
        with contextlib.suppress(OSError):
            fields = stat.read_text().rpartition(")")[2].split()
            if int(fields[3]) == leader and fields[0] != "Z":
                found.append(int(stat.parent.name))
    return found
