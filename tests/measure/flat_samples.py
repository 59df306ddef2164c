"""Samples of even fields as a method gets them: codes → frames → target → crops of every channel, with companions."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from runner.capture.frame import Box, Crop, Frame, crop
from runner.measure.contract import Found, Measurement, Sample, Wanted
from runner.measure.reading import Reading
from runner.measure.targets import dark_frame, flat_field
from runner.spec.model import Amount, Camera, Chart, Optics, Region
from tests.scenes.flats import Values

BLACK, WHITE = 500, 65535
CAMERA = Camera(width=160, height=120, bit_depth=16, black_level=BLACK, white_level=WHITE)


def camera(values: np.ndarray, **more: Any) -> Camera:
    """Return a 16-bit camera of the size of a frame."""
    plain = {"bit_depth": 16, "black_level": BLACK, "white_level": WHITE}
    return Camera(width=values.shape[1], height=values.shape[0], **(plain | more))


def codes(light: Values, black: float = BLACK) -> np.ndarray:
    """Return whole 16-bit codes of a light in DN over black."""
    return np.clip(np.round(light + black), 0, WHITE).astype(np.uint16)


def sample(
    frames: Sequence[np.ndarray],
    of: Camera | None = None,
    *,
    lit: bool = True,
    channel: str = "mono",
    box: Box | None = None,
    wanted: tuple[str, ...] = (),
    darks: Sequence[np.ndarray] = (),
) -> Sample:
    """Return what a method that takes all frames together sees of a set.

    Args:
        frames: Stored codes of each.
        of: The camera; None is a 16-bit one of that size.
        lit: A flat field, else a dark frame.
        channel: Colour channel.
        box: Region; None is the whole frame.
        wanted: Quantities that limits ask for.
        darks: Stored codes of the companion `dark`.
    """
    device = of or camera(frames[0])
    taken = [Frame(f"field-{n}.tif", "", "", one) for n, one in enumerate(frames, 1)]
    target = flat_field if lit else dark_frame
    found = target.locate(taken, _regions(box), device, target.read_options({}))[0]
    assert isinstance(found, Found), found
    crops = tuple(crop(one, found.box, device, channel) for one in taken)
    others = {name: tuple(crop(one, found.box, device, name) for one in taken) for name in device.channels}
    companions: Mapping[str, tuple[Crop, ...]] = {}
    if darks:
        black = (Frame(f"dark-{n}.tif", "", "", one) for n, one in enumerate(darks, 1))
        companions = {"dark": tuple(crop(one, found.box, device, channel) for one in black)}
    asked = tuple(Wanted(name, {}, {}) for name in wanted)
    return Sample(found, crops[0], device, Optics(), Chart(), asked, companions, crops, others)


def read(measured: Measurement) -> dict[str, Reading]:
    """Return readings by their quantity; no quantity comes twice."""
    by_name = {one.quantity: one for one in measured.readings}
    assert len(by_name) == len(measured.readings)
    return by_name


def value(reading: Reading) -> float:
    """Return a reading's value."""
    assert reading.value is not None, reading
    return reading.value


def _regions(box: Box | None) -> tuple[Region, ...]:
    if box is None:
        return ()
    centre = Amount((box.x0 + box.x1) / 2, "px"), Amount((box.y0 + box.y1) / 2, "px")
    return (Region("part", centre, (Amount(box.x1 - box.x0, "px"), Amount(box.y1 - box.y0, "px"))),)
