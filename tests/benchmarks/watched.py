"""Runs the program in processes of its own and watches all of them: wall time, CPU time, the most memory of each.

Linux only: it reads /proc.
"""

import contextlib
import json
import os
import subprocess
import sys
import threading
import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
_TICKS = os.sysconf("SC_CLK_TCK")
_PAUSE = 0.1
"""s between two looks: a process that lives shorter may be missed, and its last moments always are."""


@dataclass
class Watched:
    """One run of the program, and what its processes took."""

    wall: float = 0.0
    """s."""
    cpu: dict[int, float] = field(default_factory=dict)
    """s of user and system, by process."""
    peak: dict[int, float] = field(default_factory=dict)
    """MB at most so far, by process."""
    leader: int = 0
    """The run's own process."""
    stages: dict[int, float] = field(default_factory=dict)
    """The most that any process had held when so many units were done, MB."""
    code: int = -1
    """Exit code."""
    others: float = 0.0
    """Cores that other programs of the machine took meanwhile, on average."""

    @property
    def total(self) -> float:
        """CPU time of all processes, s."""
        return sum(self.cpu.values())

    @property
    def critical(self) -> float:
        """CPU time of the run's own process and of its busiest other one, s: the wall time that free cores allow."""
        others = [spent for pid, spent in self.cpu.items() if pid != self.leader]
        return self.cpu.get(self.leader, 0.0) + max(others, default=0.0)

    @property
    def most(self) -> float:
        """The most that any process ever held, MB."""
        return max(self.peak.values())


def run(folder: Path, arguments: Sequence[str], settings: Mapping[str, str], stages: Sequence[int] = ()) -> Watched:
    """Run `probatum run … --json-lines` from a folder and watch it.

    Args:
        folder: Working folder.
        arguments: Of `run`.
        settings: Environment variables besides the present ones.
        stages: Numbers of units done at which the memory is noted.
    """
    seen = Watched()
    environment = {**os.environ, "PYTHONPATH": str(ROOT), "XDG_CONFIG_HOME": str(folder / "config"), **settings}
    command = [sys.executable, "-m", "runner", "run", *arguments, "--json-lines"]
    begin, busy = time.monotonic(), _busy()
    with subprocess.Popen(
        command, cwd=folder, env=environment, stdout=subprocess.PIPE, text=True, start_new_session=True
    ) as process:
        seen.leader = process.pid
        over = threading.Event()
        watcher = threading.Thread(target=_watch, args=(seen, over))
        watcher.start()
        assert process.stdout is not None
        for line in process.stdout:
            done = int(json.loads(line)["done"])
            if done in stages:
                _look(seen)
                seen.stages[done] = seen.most
        seen.code = process.wait()
        seen.wall = time.monotonic() - begin
        over.set()
        watcher.join()
    seen.others = max(0.0, (_busy() - busy - seen.total) / seen.wall)
    return seen


def _busy() -> float:
    """Return the CPU time that all programs have taken since the machine started, s."""
    user, nice, system, _, _, irq, soft, *_ = Path("/proc/stat").read_text().splitlines()[0].split()[1:]
    return sum(int(part) for part in (user, nice, system, irq, soft)) / _TICKS


def _watch(seen: Watched, over: threading.Event) -> None:
    while not over.wait(_PAUSE):
        _look(seen)


def _look(seen: Watched) -> None:
    """Note what every process of the run's session has taken so far."""
    for place in Path("/proc").glob("[0-9]*"):
        with contextlib.suppress(OSError, ValueError, IndexError):
            fields = (place / "stat").read_text().rpartition(")")[2].split()
            if int(fields[3]) != seen.leader:
                continue
            status = (place / "status").read_text().splitlines()
            pid, peak = int(place.name), [line.split()[1] for line in status if line.startswith("VmHWM:")]
            seen.cpu[pid] = (int(fields[11]) + int(fields[12])) / _TICKS
            if peak:
                seen.peak[pid] = int(peak[0]) / 1024
