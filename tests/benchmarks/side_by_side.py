"""What all benchmarks share: fair timing on a machine that others use too, and one small table for what was seen.

Nothing here asserts a time: a busy machine must not turn a test red. Contestants take turns within one run and the best
turn of each counts, because whatever disturbs a turn can only make it slower.
"""

import os
import platform
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass


@dataclass(frozen=True)
class Row:
    """One line of a table."""

    what: str
    """What was measured."""
    measured: float
    """The value."""
    unit: str
    """Its unit; `×` for a ratio."""
    bar: float | None = None
    """What the value is held against; None for a plain figure."""
    at_least: bool = False
    """The value should be at least the bar; else at most."""


def best_cpu(contestants: Mapping[str, Callable[[], object]], rounds: int) -> dict[str, float]:
    """Return each contestant's best CPU time, s, of several rounds in which all take turns."""
    best = dict.fromkeys(contestants, float("inf"))
    for _ in range(rounds):
        for name, work in contestants.items():
            start = time.process_time()
            work()
            best[name] = min(best[name], time.process_time() - start)
    return best


def show(title: str, rows: Sequence[Row]) -> None:
    """Print a table: what, measured, bar, measured over bar, and whether the bar is met."""
    wide = max(len(row.what) for row in rows)
    print(f"\n\n{title}\n{machine()}")
    print(f"{'':<{wide}}  {'measured':>12}  {'bar':>12}  {'ratio':>6}")
    for row in rows:
        line = f"{row.what:<{wide}}  {_figure(row.measured, row.unit):>12}"
        if row.bar is not None:
            ratio = row.measured / row.bar
            met = ratio >= 1 if row.at_least else ratio <= 1
            sign = "≥" if row.at_least else "≤"
            line += f"  {sign + ' ' + _figure(row.bar, row.unit):>12}  {ratio:>6.2f}  {'met' if met else 'MISSED'}"
        print(line)


def machine() -> str:
    """Return the machine's state: how much of it others use, and how fast one core is just now."""
    cores, load = os.cpu_count() or 1, os.getloadavg()[0]
    pace = best_cpu({"loop": _loop}, 5)["loop"]
    return (
        f"{platform.system()} {platform.machine()}, Python {platform.python_version()}, {cores} cores; "
        f"load of the last minute {load:.1f}; 10⁶ steps of a plain loop: {1000 * pace:.0f} ms"
    )


def _figure(value: float, unit: str) -> str:
    digits = 0 if abs(value) >= 100 else 1 if abs(value) >= 10 else 2
    return f"{value:.{digits}f} {unit}"


def _loop() -> int:
    total = 0
    for i in range(1_000_000):
        total += i & 7
    return total
