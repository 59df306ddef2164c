"""Makes the frames of a scenario's units, and knows the truth about them.

Each frame's noise is seeded by the scenario's seed, the serial and the frame's name, so that one unit made alone or on
another process has the same bytes.
"""

import os
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor
from hashlib import sha256
from multiprocessing import get_context
from pathlib import Path
from typing import Any

import numpy as np

from runner.errors import UsageError
from runner.rehearse.frames import write_frame
from runner.rehearse.optics import Values, crossing
from runner.rehearse.scenario import Scenario, Unit
from runner.rehearse.scene import picture
from runner.rehearse.sensor import Codes

Announce = Callable[[str, int, int], None]
"""Is told each unit's serial with the number done and the number of all."""


def make_lot(
    scenario: Scenario, folder: Path, *, jobs: int = 1, announce: Announce = lambda _serial, _done, _all: None
) -> tuple[Path, ...]:
    """Write the frames of all units, one folder per unit.

    Args:
        scenario: The lot.
        folder: Takes a folder per serial.
        jobs: Processes; they change nothing about the frames.
        announce: Is told each unit.

    Raises:
        UsageError: The folder cannot be written.
    """
    units, made = list(scenario.units.values()), []
    try:
        for unit, place in zip(units, _made(scenario, units, folder, jobs), strict=True):
            made.append(place)
            announce(unit.serial, len(made), len(units))
    except OSError as error:
        raise UsageError(
            f"the frames cannot be written: {error.strerror}", where=str(folder), next_step="choose another folder"
        ) from error
    return tuple(made)


def _made(scenario: Scenario, units: Sequence[Unit], folder: Path, jobs: int) -> Iterator[Path]:
    if jobs == 1:
        yield from (make_unit(scenario, unit, folder) for unit in units)
        return
    with ProcessPoolExecutor(min(jobs, len(units), os.cpu_count() or 1), get_context("spawn")) as pool:
        yield from pool.map(make_unit, [scenario] * len(units), units, [folder] * len(units))


def make_unit(scenario: Scenario, unit: Unit, folder: Path) -> Path:
    """Write one unit's frames and return its folder."""
    for name, codes in frames(scenario, unit):
        write_frame(folder / unit.serial / name, codes, unit.serial, truth(scenario, unit))
    return folder / unit.serial


def frames(scenario: Scenario, unit: Unit) -> Iterator[tuple[str, Codes]]:
    """Yield one unit's frames by file name, codes as rows × columns."""
    view, sensor = unit.view, scenario.sensor
    shape = (view.rows, view.columns)
    pattern = sensor.pattern(shape, _source(scenario, unit, "pattern"))
    for capture, count in scenario.repeats.items():
        light = np.zeros(shape)
        if capture == "chart" and unit.lit and not unit.dead:
            light = scenario.photons * picture(scenario.chart, view, unit.transfer_at)
        for repeat in range(1, count + 1):
            name = f"{capture}-{repeat}.tif"
            if unit.dead:
                yield name, np.full(shape, sensor.black_level, dtype=np.uint16)
            else:
                yield name, sensor.expose(light, pattern, _source(scenario, unit, name), unit.sharpening)


def transfer_along(scenario: Scenario, unit: Unit, square: str) -> Callable[[Values], Values]:
    """Return the true transfer function (of cy/px) across the upright sides of a square, the firmware included."""
    where = scenario.chart.squares[square]
    system, angle = unit.transfer_at(*unit.view.place(where)), unit.view.angle(where)

    def curve(frequency: Values) -> Values:
        firmware = unit.sharpening.along(frequency, angle) if unit.sharpening else 1.0
        return np.asarray(system.along(frequency, angle) * firmware)

    return curve


def truth(scenario: Scenario, unit: Unit) -> dict[str, Any]:
    """Return what is true of a unit, as plain data: per square the transfer function at 0.25 cy/px and mtf50."""
    squares = {}
    for name, square in scenario.chart.squares.items():
        curve = transfer_along(scenario, unit, name)
        system = unit.transfer_at(*unit.view.place(square))
        squares[name] = {
            "focus error um": round(system.focus_error_um, 4),
            "mtf at 0.25 cy/px": round(float(curve(np.array([0.25]))[0]), 6),
            "mtf50 cy/px": round(crossing(curve, 0.5, system.cut_off), 6),
        }
    return {"story": unit.story, "squares": squares}


def _source(scenario: Scenario, unit: Unit, name: str) -> np.random.Generator:
    digest = sha256(f"{scenario.seed}/{unit.serial}/{name}".encode()).digest()
    return np.random.default_rng(int.from_bytes(digest, "big"))
