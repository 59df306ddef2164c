"""Samples of light series as a method gets them: levels and darks of one sensor, crops with their axes."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from runner.capture.frame import Crop, Frame, crop
from runner.measure.contract import Found, Measurement, Sample, Wanted
from runner.measure.methods import photon_transfer
from runner.measure.reading import Reading
from runner.measure.targets import light_series
from runner.spec.model import Amount, Camera, Chart, Optics
from tests.scenes.photons import Sensor

LEVELS = tuple(np.linspace(1, 16, 16) / 16)
"""Sixteen equal steps of light."""
BEYOND = 1.15
"""Their top over the well, so that the last levels are clipped."""


@dataclass(frozen=True)
class Shot:
    """One frame to be."""

    codes: np.ndarray
    """Rows × columns."""
    axes: Mapping[str, str] = field(default_factory=dict)
    """As the file's name says."""
    taken: Mapping[str, Amount] = field(default_factory=dict)
    """As its sidecar says."""


def lit(
    sensor: Sensor,
    rng: np.random.Generator,
    *,
    levels: Sequence[float] = LEVELS,
    repeats: int = 2,
    top: float | None = None,
    **more: Any,
) -> list[Shot]:
    """Return a series in which names say the share of the brightest light in %."""
    full = BEYOND * sensor.well if top is None else top
    return [
        Shot(sensor.frame(full * level, rng, **more), {"level": f"{100 * level:.6g}%", "repeat": str(n)})
        for level in levels
        for n in range(1, repeats + 1)
    ]


def unlit(sensor: Sensor, rng: np.random.Generator, *, repeats: int = 2, times: Sequence[float] = ()) -> list[Shot]:
    """Return darks, of exposure times in s if there are any."""
    return [
        Shot(
            sensor.frame(0.0, rng, time=time),
            ({"exposure": f"{time:g}s"} if times else {}) | {"repeat": str(n)},
        )
        for time in times or (0.0,)
        for n in range(1, repeats + 1)
    ]


def camera(codes: np.ndarray, **more: Any) -> Camera:
    """Return a 16-bit camera of a frame's size."""
    plain = {"bit_depth": 16, "black_level": 100, "white_level": 65535}
    return Camera(width=codes.shape[1], height=codes.shape[0], **(plain | more))


def sample(
    shots: Sequence[Shot],
    darks: Sequence[Shot] = (),
    *,
    of: Camera | None = None,
    wanted: Sequence[str] = (),
    channel: str = "mono",
    lost: Mapping[str, str] | None = None,
) -> Sample:
    """Return what the method sees of a capture of the whole frame."""
    device = of or camera(shots[0].codes)
    frames = [Frame(f"lit-{n}.tif", "", "", s.codes, axes=s.axes, taken=s.taken) for n, s in enumerate(shots, 1)]
    found = light_series.locate(frames, (), device, light_series.read_options({}))[0]
    assert isinstance(found, Found), found
    crops = tuple(crop(one, found.box, device, channel) for one in frames)
    black = [Frame(f"dark-{n}.tif", "", "", s.codes, axes=s.axes, taken=s.taken) for n, s in enumerate(darks, 1)]
    companions: dict[str, tuple[Crop, ...]] = {}
    if black:
        companions = {"dark": tuple(crop(one, found.box, device, channel) for one in black)}
    asked = tuple(Wanted(name, {}, {}) for name in wanted)
    return Sample(found, crops[0], device, Optics(), Chart(), asked, companions, crops, lost_companions=lost or {})


def measure(
    shots: Sequence[Shot], darks: Sequence[Shot] = (), *, options: Any = None, **more: Any
) -> dict[str, Reading]:
    """Measure a series and return its readings by quantity."""
    return read(photon_transfer.measure(sample(shots, darks, **more), photon_transfer.read_options(options or {})))


def read(measured: Measurement) -> dict[str, Reading]:
    """Return readings by their quantity; no quantity comes twice."""
    by_name = {one.quantity: one for one in measured.readings}
    assert len(by_name) == len(measured.readings)
    return by_name


def value(reading: Reading) -> float:
    """Return a reading's value."""
    assert reading.value is not None, reading
    return reading.value
