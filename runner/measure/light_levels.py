"""Frames of a light series put together by level, with what names, sidecars or options say of the light of each.

Light is said by a level (`level-25/flat-1.tif` for `level-{level}/flat-{repeat}.tif`, or a sidecar's `level`) or by an
exposure time under a steady lamp. Photons are photons per pixel during the exposure. A plain number in a name is taken
for an amount in a unit of its own, unless it is said to be only a place in a row.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

from runner.capture.frame import Crop
from runner.errors import MeasurementRefused, UsageError
from runner.measure.steps import SIDECAR_FIELDS, position
from runner.spec.model import Amount
from runner.spec.units import UNITS, FrequencyContext, convert

AXES = ("level", "exposure")
"""Axes along which frames have different light."""
BASE = {"time": "s", "ratio": "%"}
"""Units in which amounts are held against one another, by kind; others keep their own."""


@dataclass(frozen=True)
class LevelFrames:
    """The frames of one level of light."""

    label: str
    """What it is called in sentences: as the files' names say, or its number."""
    crops: tuple[Crop, ...]
    """Its frames, in the order of the capture."""
    light: float | None = None
    """Amount of light, in the series' unit; None where nothing says it."""
    place: float | None = None
    """Place in a row, as a plain number in the names says; None without one."""
    exposure: float | None = None
    """Exposure time, s; None where nothing says it."""
    mark: str = ""
    """What names say along the axis of exposure: alike for the darks of the same exposure."""


@dataclass(frozen=True)
class Series:
    """All levels of a capture."""

    levels: tuple[LevelFrames, ...]
    """In the order of the capture."""
    light_in: str = ""
    """Unit of light: `%`, `s`, `photons` …; empty where not every level has an amount."""


def series(
    crops: Sequence[Crop], *, frames_per_level: int = 0, light: Sequence[Amount] = (), plain_is_light: bool = True
) -> Series:
    """Put the frames of a capture together by level.

    Args:
        crops: One region and channel of every frame.
        frames_per_level: Where neither names nor sidecars tell levels apart: so many frames one after another are a
            level; 0 takes them all for one.
        light: Amounts of light of the levels, one by one, in place of what names and sidecars say.
        plain_is_light: Plain numbers in names are amounts of light, else places in a row.

    Raises:
        MeasurementRefused: Frames do not divide into levels, amounts are not one for each level, or in units of
            different kinds.
    """
    levels = _cut(_grouped(crops), frames_per_level)
    if light:
        if len(light) != len(levels):
            found = f"light gives {len(light)} amounts, the frames have {len(levels)} levels"
            raise MeasurementRefused("too few frames", found, next_step="give one amount for each level")
        said: list[Mapping[str, Amount]] = [{"level": one} for one in light]
    else:
        said = [_said(level.crops[0], plain_is_light=plain_is_light) for level in levels]
    amounts, light_in = _light(levels, said)
    held = [replace(level, light=amount) for level, amount in zip(levels, amounts, strict=True)]
    return Series(tuple(_timed(held, said)), light_in)


def _grouped(crops: Sequence[Crop]) -> list[LevelFrames]:
    groups: dict[tuple[object, ...], list[Crop]] = {}
    for crop in crops:
        key = tuple(_key(crop, axis) for axis in AXES)
        groups.setdefault(key, []).append(crop)
    found = []
    for number, members in enumerate(groups.values(), 1):
        words = [f"{axis} {members[0].axes[axis]}" for axis in AXES if axis in members[0].axes]
        mark = members[0].axes.get("exposure", "") if "exposure" not in members[0].taken else ""
        found.append(
            LevelFrames(", ".join(words) or f"level {number}", tuple(members), place=_place(members[0]), mark=mark)
        )
    return found


def _key(crop: Crop, axis: str) -> object:
    taken = crop.taken.get(axis)
    return (taken.value, taken.unit) if taken is not None else crop.axes.get(axis, "")


def _place(crop: Crop) -> float | None:
    """Return a plain number that a name gives along the one axis it has."""
    named = [axis for axis in AXES if axis in crop.axes]
    if len(named) != 1:
        return None
    amount = position(crop, named[0])
    return amount.value if amount is not None and amount.unit == "1" else None


def _cut(levels: list[LevelFrames], frames: int) -> list[LevelFrames]:
    if not frames or len(levels) > 1:
        return levels
    crops = levels[0].crops
    if len(crops) % frames:
        found = f"{len(crops)} frames do not make levels of {frames} frames each"
        raise MeasurementRefused("too few frames", found, next_step="correct frames_per_level, or capture again")
    return [
        LevelFrames(f"level {number + 1}", crops[first : first + frames])
        for number, first in enumerate(range(0, len(crops), frames))
    ]


def _said(crop: Crop, *, plain_is_light: bool) -> dict[str, Amount]:
    """Return what says how much light there was, by axis; plain numbers in names only if they are meant so."""
    said = {}
    for axis in AXES:
        amount = position(crop, axis)
        if amount is None:
            continue
        named = all(name not in crop.taken for name in SIDECAR_FIELDS[axis])
        if not (named and amount.unit == "1") or plain_is_light:
            said[axis] = amount
    return said


def _light(levels: Sequence[LevelFrames], said: Sequence[Mapping[str, Amount]]) -> tuple[list[float | None], str]:
    """Return each level's amount of light and their unit: the product of what changes from level to level."""
    product: list[float] = [1.0] * len(levels)
    units: list[str] = []
    nothing: list[float | None] = [None] * len(levels)
    for axis in AXES:
        named = {_key(level.crops[0], axis) for level in levels}
        amounts = [one[axis] for one in said if axis in one]
        if len(amounts) < len(levels):
            if len(named) > 1:
                return nothing, ""  # it changes, and nothing says by how much
            continue
        values, unit = _alike(amounts)
        if unit == "photons" and not units:  # they are counted during the exposure, whatever its time
            return list(values), unit
        if len(set(values)) > 1 or len(levels) == 1:
            product = [a * b for a, b in zip(product, values, strict=True)]
            units.append(unit)
    return (list(product), " ".join(units)) if units else (nothing, "")


def _alike(amounts: Sequence[Amount]) -> tuple[list[float], str]:
    plain = all(one.unit == "1" for one in amounts)
    unit = "1" if plain else BASE.get(UNITS[amounts[0].unit].kind, amounts[0].unit)
    try:
        return [convert(one.value, one.unit, unit, FrequencyContext()) for one in amounts], unit
    except UsageError as error:
        raise MeasurementRefused("not defined", f"amounts of light do not belong together: {error.found}") from error


def _timed(levels: Sequence[LevelFrames], said: Sequence[Mapping[str, Amount]]) -> Iterator[LevelFrames]:
    """Add exposure times: of an axis, of sidecars, or of amounts of light that are times."""
    for level, one in zip(levels, said, strict=True):
        amount = next((a for a in one.values() if UNITS[a.unit].kind == "time"), None)
        amount = amount or level.crops[0].taken.get("exposure") or position(level.crops[0], "exposure")
        known = amount is not None and UNITS[amount.unit].kind == "time"
        yield replace(level, exposure=_alike([amount])[0][0]) if known and amount is not None else level


def out_of_order(levels: Sequence[LevelFrames], light: Sequence[float], tolerance: float) -> tuple[str, str] | None:
    """Return the first two levels whose light goes against their order, or None.

    The order is that of amounts of light, else of places in a row, which may rise or fall; without either there is
    none.

    Args:
        levels: Levels to be looked at.
        light: What was measured of each.
        tolerance: Differences below it tell nothing.
    """
    keys = [level.light if level.light is not None else level.place for level in levels]
    known = [key for key in keys if key is not None]
    if len(known) < len(keys) or len(keys) < 2:
        return None
    ranked = sorted(zip(known, light, [level.label for level in levels], strict=True), key=lambda row: row[0])
    falls = levels[0].light is None and ranked[-1][1] < ranked[0][1]
    for before, after in pairwise(reversed(ranked) if falls else ranked):
        if after[1] < before[1] - tolerance:
            return before[2], after[2]
    return None
