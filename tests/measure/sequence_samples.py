"""Sequences of noisy frames as a method gets them, with counters and times from sidecars."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Box, Frame, crop
from runner.measure.contract import Found, Sample, Wanted
from runner.spec.model import Amount, Camera, Chart, Optics

CAMERA = Camera(width=40, height=30, bit_depth=12, black_level=64, white_level=4095)
RGGB = Camera(width=40, height=30, bit_depth=12, black_level=64, white_level=4095, mosaic="RGGB")


def noisy(level: float, seed: int, camera: Camera = CAMERA) -> NDArray[np.int64]:
    """Return codes of an even scene of a share of the range, noise 8 DN."""
    rng = np.random.default_rng(seed)
    light = 64 + level * (4095 - 64) + 8 * rng.standard_normal((camera.height, camera.width))
    return np.clip(np.round(light), 0, 4095).astype(np.int64)


def sample(
    frames: Sequence[NDArray[np.int64]],
    *,
    counters: Sequence[int] | None = None,
    times: Sequence[float] | None = None,
    camera: Camera = CAMERA,
    channel: str = "mono",
    wanted: tuple[str, ...] = (),
) -> Sample:
    """Return what a method that takes all frames together sees."""
    made = []
    for n, codes in enumerate(frames):
        taken = {} if counters is None else {"counter": Amount(float(counters[n]), "1")}
        taken |= {} if times is None else {"time": Amount(times[n], "s")}
        made.append(Frame(f"seq-{n}.tif", "", "", codes, axes={"repeat": str(n)}, taken=taken))
    box = Box(0, 0, camera.width, camera.height)
    crops = tuple(crop(one, box, camera, channel) for one in made)
    others = {name: tuple(crop(one, box, camera, name) for one in made) for name in camera.channels}
    asked = tuple(Wanted(name, {}, {}) for name in wanted)
    found = Found("", box, frozenset({"sequence"}))
    return Sample(found, crops[0], camera, Optics(), Chart(), asked, {}, crops, others)
