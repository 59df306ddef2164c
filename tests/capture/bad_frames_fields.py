"""Staged bad captures of fields: dark frames that are lit, flats without light, with too much, or with a chart in."""

from collections.abc import Callable
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from tests.capture.bad_frames import tiff
from tests.capture.raw_scenes import HEIGHT, WIDTH, edge, stripes
from tests.capture.staged import SHADED, Kind, Staged, codes, spec_text

Light = NDArray[np.float64]

NO_LIGHT: Light = np.zeros((HEIGHT, WIDTH))
EVEN: Light = np.ones((HEIGHT, WIDTH))

DARK = """\
  dark:
    target: dark frame
    frames: {names: 'dark-{repeat}.tif', count: 2}
    limits: [{characteristic: 2, quantity: level, at_most: 1 %}]
"""
WHOLE = """\
  whole:
    target: flat field
    frames: {names: 'whole-{repeat}.tif', count: 1}
    limits: [{characteristic: 3, quantity: level, at_least: 10 %}]
"""


def _write(file: Path, light: Light, seed: int) -> None:
    file.write_bytes(tiff(codes(seed, light=light)))


def _unit(folder: Path, _serial: str, seed: int) -> None:
    for repeat in (1, 2):
        _write(folder / f"flat-{repeat}.tif", SHADED, seed + repeat)
        _write(folder / f"dark-{repeat}.tif", NO_LIGHT, seed + 10 + repeat)
    _write(folder / "whole-1.tif", SHADED, seed + 20)


FIELDS = Kind(spec_text() + DARK + WHOLE, _unit)


def _shows(file: str, light: Light) -> Callable[[Path], None]:
    """Return what replaces a file by a frame of another light."""
    return lambda folder: _write(folder / file, light, 7)


def _board() -> Light:
    y, x = np.mgrid[:HEIGHT, :WIDTH]
    return np.asarray(0.2 + 0.5 * ((x // 16 + y // 16) % 2), np.float64)


def _ruler() -> Light:
    return np.asarray(0.2 + 0.5 * (np.arange(WIDTH) > WIDTH / 2) * EVEN)


TELLS = "straight and slanted as a chart's; take the chart away"
ALIKE = "look alike: a flat of a unit known to be good, in the same place, would settle it"
BAD_FIELDS = (
    Staged("dark frame with the lamp on", r"dark-2.tif: the frame is lit: its level .* it falls off to all corners",
           FIELDS, _shows("dark-2.tif", SHADED), capture="dark"),
    Staged("dark frame of a dim lamp", r"falls off to all corners; a dark frame has less than 5 %: shut all light out",
           FIELDS, _shows("dark-2.tif", 0.25 * SHADED), capture="dark"),
    Staged("dark frame with the shutter open on a chart", "a scene shows in it; a dark frame has less than 5 %",
           FIELDS, _shows("dark-1.tif", edge(5)), capture="dark"),
    Staged("dark frame lit evenly", "without a picture in it; light and a unit's own dark signal look alike",
           FIELDS, _shows("dark-2.tif", 0.45 * EVEN), "cannot tell", capture="dark"),
    Staged("dark frame at the white level", r"level lies 100\.0 % of the range over the black level, without",
           FIELDS, _shows("dark-2.tif", 2 * EVEN), "cannot tell", capture="dark"),
    Staged("flat without light", "flat-2.tif: the field lies .* 1 % is needed; light the field",
           FIELDS, _shows("flat-2.tif", NO_LIGHT)),
    Staged("flat without light, no region", "whole-1.tif: the field lies .* 1 % is needed; light the field",
           FIELDS, _shows("whole-1.tif", NO_LIGHT), capture="whole"),
    Staged("flat with too much light", r"\d+ % of the pixels lie at the white level; give less light",
           FIELDS, _shows("flat-1.tif", 5 * SHADED)),
    Staged("flat with an edge in its region", f"flat-2.tif: the field is not even: an edge crosses it, .* {TELLS}",
           FIELDS, _shows("flat-2.tif", edge(30))),
    Staged("flat with an edge, no region", f"whole-1.tif: the field is not even: an edge crosses it, .* {TELLS}",
           FIELDS, _shows("whole-1.tif", SHADED * edge(30)), capture="whole"),
    Staged("flat with a step along its columns", f"an edge crosses it, with 7. % less light on .* {ALIKE}",
           FIELDS, _shows("whole-1.tif", _ruler()), "cannot tell", capture="whole"),
    Staged("flat with a chequered board", f"whole-1.tif: .* an edge crosses it.* a stop, dirt or a fault .* {ALIKE}",
           FIELDS, _shows("whole-1.tif", _board()), "cannot tell", capture="whole"),
    Staged("flat with stripes", f"all over it the light changes by .* {ALIKE}",
           FIELDS, _shows("whole-1.tif", stripes(30, 7, sharp=False)), "cannot tell", capture="whole"),
)  # fmt: skip
"""Each replaces one frame of the first unit by one of another light."""
