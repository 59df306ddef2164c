"""Samples of lattices as methods get them: light → codes → frame → target → crop."""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from types import ModuleType
from typing import Any

import numpy as np

from runner.capture.frame import Frame, crop
from runner.capture.mosaic import grey
from runner.measure.contract import Found, Measurement, NotFound, Sample, Wanted
from runner.measure.methods import chromatic_displacement, geometry
from runner.measure.reading import Reading
from runner.measure.targets import checkerboard, dot_grid
from runner.spec.model import Amount, Camera, Chart, Optics, Region
from tests.scenes.lattices import LatticeScene, Values

BLACK, WHITE = 64, 4095
PITCH, DISTANCE, PIXEL = 5.0, 120.0, 0.003
"""mm: pitch and distance of the chart, pixel pitch of the sensor."""


def camera(light: np.ndarray, **more: Any) -> Camera:
    """Return a 12-bit camera of the size of a picture."""
    plain = {"bit_depth": 12, "black_level": BLACK, "white_level": WHITE, "pixel_pitch_um": 1000 * PIXEL}
    return Camera(width=light.shape[1], height=light.shape[0], **(plain | more))


def frame(light: np.ndarray) -> Frame:
    """Return a 12-bit frame of light that is 1 at the white level."""
    codes = np.clip(np.round(BLACK + (WHITE - BLACK) * light), 0, WHITE)
    return Frame("grid-1.tif", "", "", codes.astype(np.uint16))


def located(
    target: ModuleType,
    light: np.ndarray | Frame,
    of: Camera | None = None,
    regions: Sequence[Region] = (),
    **asked: Any,
) -> Found | NotFound:
    """Return what a target makes of a picture's first region."""
    taken = light if isinstance(light, Frame) else frame(light)
    device = of or camera(taken.codes)
    seen = replace(taken, codes=grey(taken.codes, device))
    (found,) = target.locate([seen], regions, device, target.read_options(asked))
    return found  # type: ignore[no-any-return]


def drawn(scene: LatticeScene, target: ModuleType) -> Values:
    """Return the scene's dots or board."""
    return scene.dots() if target is dot_grid else scene.board()


def wanted(fields: Sequence[float], *names: str) -> tuple[Wanted, ...]:
    """Return what limits at image heights want of quantities."""
    return tuple(Wanted(name, {"field": Amount(f, "1")}, {"field": f}) for f in fields for name in names)


def measured(
    target: ModuleType,
    light: np.ndarray | Frame,
    of: Camera | None = None,
    *,
    channel: str = "mono",
    fields: Sequence[float] = (),
    chart: Mapping[str, Any] | None = None,
    **options: Any,
) -> Measurement:
    """Return what geometry measures on a picture."""
    taken = light if isinstance(light, Frame) else frame(light)
    device = of or camera(taken.codes)
    found = located(target, taken, device, **(chart or {}))
    assert isinstance(found, Found), found
    asked = wanted(fields, "local_distortion")
    sample = Sample(found, crop(taken, found.box, device, channel), device, Optics(), Chart(), asked)
    return geometry.measure(sample, geometry.read_options(options))


def colour_sample(
    target: ModuleType, lights: Sequence[np.ndarray], of: Camera, channel: str, asked: tuple[Wanted, ...] = ()
) -> Sample:
    """Return what chromatic displacement sees of one frame or more."""
    taken = [frame(light) for light in lights]
    found = located(target, taken[0], of)
    assert isinstance(found, Found), found
    crops = {name: tuple(crop(one, found.box, of, name) for one in taken) for name in of.channels}
    mine = crops[channel]
    return Sample(found, mine[0], of, Optics(), Chart(), asked, frames=mine, channels=crops)


def colours_measured(
    target: ModuleType, lights: Sequence[np.ndarray], of: Camera, channel: str, fields: Sequence[float] = ()
) -> Measurement:
    """Return what chromatic displacement measures."""
    asked = wanted(fields, "chromatic_displacement", "radial_chromatic_displacement")
    sample = colour_sample(target, lights, of, channel, asked)
    return chromatic_displacement.measure(sample, chromatic_displacement.Options())


def by_name(made: Measurement) -> dict[str, Reading]:
    """Return readings by their labels."""
    return {r.label: r for r in made.readings}


BOTH = (dot_grid, checkerboard)
