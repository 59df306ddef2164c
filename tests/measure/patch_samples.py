"""Samples of charts of patches for tests of methods: scene to frame to found region to sample."""

from collections.abc import Sequence
from typing import Any

import numpy as np

from runner.capture.frame import Box, Frame, crop
from runner.capture.mosaic import grey as one_grey
from runner.measure.contract import Found, Measurement, NotFound, Sample, Wanted
from runner.measure.reading import Reading
from runner.spec.model import Amount, Camera, Chart, Optics, Region, Tone
from tests.scenes.patches import PatchChart, Recorder


def camera_of(chart: PatchChart, recorder: Recorder, tone: Tone | None = None) -> Camera:
    """Return what a spec would state of the camera; the tone only if it states one."""
    colour = "rgb" if recorder.mosaic == "none" and len(chart.lights[0]) == 3 else "mono"
    return Camera(
        chart.size[0],
        chart.size[1],
        recorder.bits,
        recorder.black,
        recorder.white,
        mosaic=recorder.mosaic,
        colour=colour,
        tone=tone or Tone(),
    )


def frame_of(codes: np.ndarray, name: str = "steps-1.tif") -> Frame:
    """Return a frame."""
    return Frame(name, "", "", codes)


def whole(camera: Camera, name: str = "chart") -> Region:
    """Return a region that is the whole frame."""
    half, full = Amount(50.0, "%"), Amount(100.0, "%")
    return Region(name, (half, half), (full, full))


def located(module: Any, codes: np.ndarray, camera: Camera, options: dict[str, Any]) -> Found | NotFound:
    """Let a target find its one region in a frame."""
    seen = frame_of(one_grey(codes, camera))
    (found,) = module.locate([seen], [whole(camera)], camera, module.read_options(options))
    assert isinstance(found, (Found, NotFound))
    return found


def sample_of(
    found: Found,
    frames: Sequence[np.ndarray],
    camera: Camera,
    *,
    wanted: Sequence[Wanted] = (),
    channel: str = "",
    flats: Sequence[np.ndarray] = (),
    darks: Sequence[np.ndarray] = (),
    lost: dict[str, str] | None = None,
) -> Sample:
    """Return the sample that a session would make, all frames and channels in it."""
    channel = channel or camera.channels[0]
    box = Box(0, 0, camera.width, camera.height)
    made = [frame_of(codes, f"steps-{n}.tif") for n, codes in enumerate(frames, 1)]
    crops = {name: tuple(crop(one, box, camera, name) for one in made) for name in camera.channels}
    roles = {"flat": flats, "dark": darks}
    beside = {role: [frame_of(one, f"{role}.tif") for one in of] for role, of in roles.items() if len(of)}
    companions = {role: tuple(crop(one, box, camera, channel) for one in of) for role, of in beside.items()}
    by_channel = {
        role: {name: tuple(crop(one, box, camera, name) for one in of) for name in camera.channels}
        for role, of in beside.items()
    }
    return Sample(
        found,
        crops[channel][0],
        camera,
        Optics(),
        Chart(),
        tuple(wanted),
        companions,
        crops[channel],
        crops,
        by_channel,
        lost or {},
    )


def at_level(quantity: str, percent: float) -> Wanted:
    """Return a wanted reading at a level in %."""
    return Wanted(quantity, {"level": Amount(percent, "%")}, {"level": percent})


def found_blocks(count: int, columns: int, side: int, lights: Sequence[float] = (), margin: int = 4) -> Found:
    """Return square patches of whole pixels as a target would have found them."""
    points = []
    for n in range(count):
        i, j = divmod(n, columns)
        points += [(j * side + margin, i * side + margin), ((j + 1) * side - margin, (i + 1) * side - margin)]
    box = Box(0, 0, columns * side, -(-count // columns) * side)
    geometry = {f"light {n}": float(light) for n, light in enumerate(lights, 1)}
    places = tuple((float(x), float(y)) for x, y in points)
    return Found("chart", box, frozenset({"grey steps", "colour patches"}), geometry, points={"patches": places})


def read(measured: Measurement) -> dict[str, Reading]:
    """Return readings by quantity."""
    return {reading.quantity: reading for reading in measured.readings}
