"""What a whole lot costs: flat memory over 200 units, and two jobs beside one."""

import shutil
from pathlib import Path

import pytest

from tests.benchmarks.side_by_side import Row, show
from tests.benchmarks.watched import Watched, run
from tests.benchmarks.workload import lay_out_large, lay_out_lot, lay_out_stacks

UNITS, STAGES = 200, (20, 100, 200)
TURNS = 3


def _run(folder: Path, jobs: int, name: str, stages: tuple[int, ...] = ()) -> Watched:
    seen = run(folder, ["spec.yaml", "frames", "--out", name, "--jobs", str(jobs)], {}, stages)
    assert seen.code == 0
    return seen


@pytest.mark.benchmark
def test_200_units_in_flat_memory(tmp_path: Path) -> None:
    """No process of a run of 200 units ever holds more than 700 MB, and the last units need no more than the first."""
    lay_out_lot(tmp_path, UNITS)
    seen = _run(tmp_path, 2, "out", STAGES)

    rows = [Row(f"the largest process so far, after {n} units", seen.stages[n], "MB", 700) for n in STAGES]
    others = sorted((peak for pid, peak in seen.peak.items() if pid != seen.leader), reverse=True)
    rows += [
        Row("growth of the largest from unit 20 to 200", seen.stages[200] - seen.stages[20], "MB"),
        Row("the run's own process, lot's files included", seen.peak[seen.leader], "MB", 700),
        Row("the first worker", others[0], "MB", 700),
        Row("the second worker", others[1], "MB", 700),
        Row("the process that loads the program for them", others[2], "MB", 700),
        Row("wall time", seen.wall, "s"),
        Row("CPU time of all processes, per unit", seen.total / UNITS, "s"),
    ]
    show("A lot of 200 units (12 checks, 4 frames of 0.3 MP each), two jobs", rows)


@pytest.mark.benchmark
def test_large_frames_in_flat_memory(tmp_path: Path) -> None:
    """Units with 12 MP frames and 25 regions stay under 700 MB a process too."""
    rows = []
    for what, lay_out, units in (("one frame", lay_out_large, 6), ("8 frames", lay_out_stacks, 3)):
        folder = tmp_path / what.replace(" ", "-")
        folder.mkdir()
        lay_out(folder, units)
        one, two = (_run(folder, jobs, f"out-{jobs}") for jobs in (1, 2))
        rows += [
            Row(f"{what}, one job: its process", one.most, "MB", 700),
            Row(f"{what}, two jobs: the run's own process", two.peak[two.leader], "MB", 700),
            Row(f"{what}, two jobs: the largest worker", two.most, "MB", 700),
        ]
        shutil.rmtree(folder)
    show("Units of 12 MP 16-bit frames: six of one chart each; three of 4 charts with 4 darks each", rows)


@pytest.mark.benchmark
def test_two_jobs_beside_one(tmp_path: Path) -> None:
    """Two jobs are at least 1.6 times as fast as one, start and end of the run included.

    On a machine that others use the wall times say little; what the processes took of the cores says what the wall
    times would be if two cores were free.
    """
    units = 24
    lay_out_lot(tmp_path, units)
    turns = [(_run(tmp_path, 1, f"one-{n}"), _run(tmp_path, 2, f"two-{n}")) for n in range(TURNS)]

    best = [min((turn[k] for turn in turns), key=lambda seen: seen.wall) for k in (0, 1)]
    one, two = (seen.wall for seen in best)
    alone, both, critical = (
        min(value)
        for value in zip(*((first.total, second.total, second.critical) for first, second in turns), strict=True)
    )
    rows = [
        Row("one job, wall time", one, "s"),
        Row("two jobs, wall time", two, "s"),
        Row("one job / two jobs, wall time", one / two, "×", 1.6, at_least=True),
        Row("cores that other programs took in those two turns, with one job", best[0].others, ""),
        Row("the same with two jobs", best[1].others, ""),
        Row("one job, CPU time", alone, "s"),
        Row("two jobs, CPU time of all processes", both, "s"),
        Row("two jobs, CPU time of the run and its busiest other process", critical, "s"),
        Row("one job / two jobs on free cores, from CPU times", alone / critical, "×", 1.6, at_least=True),
    ]
    show(f"A lot of {units} units: best of {TURNS} turns each", rows)
