"""Makes the frames of a scenario's units, and knows the truth about them.

Each frame's noise is seeded by the scenario's seed, the serial and the frame's name, so that one unit made alone or on
another process has the same bytes.
"""

import os
from collections.abc import Callable, Iterator, Mapping, Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import asdict
from hashlib import sha256
from multiprocessing import get_context
from pathlib import Path
from typing import Any

import numpy as np

from runner.errors import UsageError
from runner.rehearse import bench, gratings, scene
from runner.rehearse.delivery import Shot, deliver
from runner.rehearse.flaws import Defects, plant
from runner.rehearse.gratings import Patch
from runner.rehearse.illumination import gains
from runner.rehearse.optics import Transfer, Values, crossing
from runner.rehearse.scenario import Scenario, Unit
from runner.rehearse.scene import Picture, Square
from runner.rehearse.sensor import Firmware, Pattern

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
    """Write one unit's files and return its folder."""
    place = folder / unit.serial
    deliver(place, unit.serial, list(shots(scenario, unit)), scenario.delivery, unit.mishap, truth(scenario, unit))
    return place


def shots(scenario: Scenario, unit: Unit) -> Iterator[Shot]:
    """Yield one unit's frames in the order in which they are taken, codes as rows × columns."""
    sensor, view = scenario.sensor, unit.view
    pattern = pattern_of(scenario, unit)
    for capture, count in scenario.repeats.items():
        light = _light(scenario, unit, capture)
        for repeat in range(1, count + 1):
            name = f"{capture}-{repeat}.tif"
            if unit.dead:
                codes = np.full((view.rows, view.columns), sensor.black_level, dtype=np.uint16)
            else:
                firmware = _firmware(unit, _source(scenario, unit, f"readout of {name}"))
                codes = sensor.expose(light, pattern, _source(scenario, unit, name), firmware)
            yield Shot(capture, repeat, codes)
    if scenario.bench:
        camera = bench.Camera(sensor, scenario.mosaic, pattern, unit.transfer_at, view.mm_per_px, unit.bench)
        yield from bench.shots(scenario.bench, camera, scenario.photons, lambda name: _source(scenario, unit, name))


def pattern_of(scenario: Scenario, unit: Unit) -> Pattern:
    """Return a unit's fixed pattern, its defects planted."""
    shape = unit.view.rows, unit.view.columns
    pattern = scenario.sensor.pattern(shape, _source(scenario, unit, "pattern"))
    return plant(pattern, unit.defects, scenario.sensor.white_level, _source(scenario, unit, "defects"))


def _light(scenario: Scenario, unit: Unit, capture: str) -> Picture:
    """Return the photons that a capture brings to each pixel."""
    view = unit.view
    shape = view.rows, view.columns
    if capture == "dark" or not unit.lit or unit.dead:
        return np.zeros(shape)
    light = np.ones(shape)
    if capture == "chart" and scenario.chart is not None:
        light = scene.picture(scenario.chart, view, unit.transfer_at)
    if capture == "stripes" and scenario.stripes is not None:
        light = gratings.picture(scenario.stripes, view, unit.transfer_at)
    if unit.illumination is not None:
        light = light * unit.illumination.picture(*shape)
    return scenario.photons * light


def _firmware(unit: Unit, rng: np.random.Generator) -> Firmware:
    shape = unit.view.rows, unit.view.columns
    added = unit.bands.picture(shape, rng) if unit.bands else 0.0
    table = gains(unit.illumination.picture(*shape), unit.correction) if unit.illumination else None
    return Firmware(added, table, unit.sharpening)


def transfer_along(scenario: Scenario, unit: Unit, square: str) -> Callable[[Values], Values]:
    """Return the true transfer function (of cy/px) across the upright sides of a square, the firmware included."""
    where = _squares(scenario)[square]
    return _with_firmware(unit, unit.transfer_at(*unit.view.place(where)), unit.view.angle(where))


def _with_firmware(unit: Unit, system: Transfer, angle: float) -> Callable[[Values], Values]:
    def curve(frequency: Values) -> Values:
        firmware = unit.sharpening.along(frequency, angle) if unit.sharpening else 1.0
        return np.asarray(system.along(frequency, angle) * firmware)

    return curve


def _squares(scenario: Scenario) -> Mapping[str, Square]:
    return scenario.chart.squares if scenario.chart else {}


def truth(scenario: Scenario, unit: Unit) -> dict[str, Any]:
    """Return what is true of a unit, as plain data.

    Per square the transfer function at 0.25 cy/px and mtf50; per patch of stripes frequency, direction and transfer
    function there; bands and planted defects.
    """
    known: dict[str, Any] = {"story": unit.story}
    if scenario.chart:
        known["squares"] = {name: _square_truth(scenario, unit, name) for name in scenario.chart.squares}
    if scenario.stripes:
        known["patches"] = {name: _patch_truth(unit, patch) for name, patch in scenario.stripes.patches.items()}
    if unit.bands:
        known["bands"] = asdict(unit.bands)
    if unit.defects != Defects():
        known["defects"] = asdict(unit.defects)
    if unit.illumination:
        known["shading correction"] = unit.correction
    if scenario.bench:
        known["bench"] = bench.known(unit.bench)
    return known


def _square_truth(scenario: Scenario, unit: Unit, name: str) -> dict[str, float]:
    curve = transfer_along(scenario, unit, name)
    system = unit.transfer_at(*unit.view.place(_squares(scenario)[name]))
    return {
        "focus error um": round(system.focus_error_um, 4),
        "mtf at 0.25 cy/px": round(float(curve(np.array([0.25]))[0]), 6),
        "mtf50 cy/px": round(crossing(curve, 0.5, system.cut_off), 6),
    }


def _patch_truth(unit: Unit, patch: Patch) -> dict[str, float]:
    system, angle = unit.transfer_at(*unit.view.place(patch.square)), patch.direction + unit.view.turn
    frequency = np.array([gratings.frequency_of(patch, unit.view)])
    return {
        "frequency cy/px": round(float(frequency[0]), 6),
        "direction deg": round(angle, 4),
        "modulation transfer": round(float(_with_firmware(unit, system, angle)(frequency)[0]), 6),
    }


def _source(scenario: Scenario, unit: Unit, name: str) -> np.random.Generator:
    digest = sha256(f"{scenario.seed}/{unit.serial}/{name}".encode()).digest()
    return np.random.default_rng(int.from_bytes(digest, "big"))
