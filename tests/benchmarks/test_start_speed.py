"""How soon the program answers from a cold start: help, a check of a spec, a run of one unit."""

import os
import subprocess
import sys
import time
from collections.abc import Sequence
from pathlib import Path

import pytest

from runner.cli import COMMANDS
from tests.benchmarks.side_by_side import Row, show
from tests.benchmarks.workload import lay_out_lot

ROOT = Path(__file__).resolve().parents[2]
ROUNDS = 7
DEAREST = 12
"""Imports that are listed."""


def _best(folder: Path, arguments: Sequence[str], rounds: int = ROUNDS) -> tuple[float, float]:
    """Return the best wall time and the best CPU time of a command of the program, s."""
    environment = {**os.environ, "PYTHONPATH": str(ROOT), "XDG_CONFIG_HOME": str(folder / "config")}
    walls, cpus = [], []
    for n in range(rounds):
        command = [sys.executable, "-m", "runner", *(part.format(n=n) for part in arguments)]
        start = time.perf_counter()
        with subprocess.Popen(command, cwd=folder, env=environment, stdout=subprocess.DEVNULL) as process:
            _, status, used = os.wait4(process.pid, 0)
            walls.append(time.perf_counter() - start)
            process.returncode = os.waitstatus_to_exitcode(status)
        assert process.returncode == 0, command
        cpus.append(used.ru_utime + used.ru_stime)
    return min(walls), min(cpus)


def _imports() -> list[tuple[str, float]]:
    """Return the dearest imports of `--help` with what they import, ms each, best of three."""
    best: dict[str, float] = {}
    for _ in range(3):
        command = [sys.executable, "-X", "importtime", "-m", "runner", "--help"]
        told = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=True).stderr
        for line in told.splitlines():
            parts = line.removeprefix("import time:").split("|")
            if len(parts) == 3 and parts[1].strip().isdigit():
                name, spent = parts[2].strip(), int(parts[1]) / 1000
                best[name] = min(best.get(name, spent), spent)
    return sorted(best.items(), key=lambda pair: -pair[1])[:DEAREST]


@pytest.mark.benchmark
def test_the_program_answers_at_once(tmp_path: Path) -> None:
    """Help is there in under 0.3 s; what a check and a run of one unit take is told."""
    lay_out_lot(tmp_path, 1)
    python = time.perf_counter()
    subprocess.run([sys.executable, "-c", ""], check=True)
    python = time.perf_counter() - python
    rows = [Row("an empty Python program, wall time", 1000 * python, "ms")]
    wall, cpu = _best(tmp_path, ["--help"])
    rows += [Row("probatum --help, wall time", 1000 * wall, "ms", 300), Row("its CPU time", 1000 * cpu, "ms")]
    for verb in COMMANDS:
        wall, cpu = _best(tmp_path, [verb, "--help"], 3)
        rows.append(Row(f"probatum {verb} --help, wall time", 1000 * wall, "ms"))
    wall, cpu = _best(tmp_path, ["check", "spec.yaml"], 3)
    rows += [Row("probatum check of one spec, wall time", 1000 * wall, "ms"), Row("its CPU time", 1000 * cpu, "ms")]
    wall, cpu = _best(tmp_path, ["run", "spec.yaml", "frames", "--out", "out-{n}"], 3)
    rows += [Row("probatum run of one unit, wall time", 1000 * wall, "ms"), Row("its CPU time", 1000 * cpu, "ms")]
    show("Cold start: best of several", rows)
    print(f"\nThe {DEAREST} dearest imports of `probatum --help`, each with what it imports itself")
    for name, spent in _imports():
        print(f"{name:<24}{spent:8.1f} ms")
