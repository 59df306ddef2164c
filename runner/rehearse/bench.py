"""Frames of a bench's captures: scene, lens, stray light, mosaic, sensor and firmware of one unit."""

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from typing import Any

import numpy as np

from runner.rehearse import painting, scene
from runner.rehearse.bench_captures import BenchCapture, BenchUnit, Step
from runner.rehearse.delivery import Shot
from runner.rehearse.mosaics import Mosaic
from runner.rehearse.optics import Transfer
from runner.rehearse.painting import Seen
from runner.rehearse.patches import PatchChart
from runner.rehearse.scene import Chart, Picture, TransferAt, View
from runner.rehearse.sensor import Codes, Pattern, Sensor
from runner.rehearse.sequences import moments
from runner.rehearse.texture import NoiseTexture

Source = Callable[[str], np.random.Generator]
"""Gives each frame, by its name, a source of noise of its own."""
START = datetime(2026, 12, 1, 9, 30, tzinfo=UTC)
"""When a sequence begins."""


@dataclass(frozen=True)
class Camera:
    """One unit before the bench."""

    sensor: Sensor
    """The sensor's design."""
    mosaic: Mosaic
    """Colours of its pixels."""
    pattern: Pattern
    """Its fixed pattern, all of the sensor."""
    system: TransferAt
    """Optics and pixel at a place of the sensor."""
    mm_per_px: float
    """Length in the object that one pixel sees."""
    own: BenchUnit
    """What is particular about it."""


def shots(captures: Sequence[BenchCapture], camera: Camera, photons: float, source: Source) -> Iterator[Shot]:
    """Yield one unit's frames in the order in which they are taken.

    Args:
        captures: What is captured.
        camera: The unit.
        photons: Mean photons per pixel from a white board in one frame.
        source: Noise of frames.
    """
    for capture in captures:
        pattern = _window(camera.pattern, capture.window)
        for step in capture.steps:
            light = photons * capture.light * step.light * lit(capture, step, camera)
            yield from _stream(capture, step, camera, pattern, light, source)


def _stream(
    capture: BenchCapture, step: Step, camera: Camera, pattern: Pattern, light: Picture, source: Source
) -> Iterator[Shot]:
    if not capture.rate_hz:
        for repeat in range(1, capture.frames + 1):
            rng = source(f"{capture.name}-{step.label}-{repeat}")
            yield Shot(capture.name, repeat, _exposed(capture, camera, pattern, light, rng), step.label)
        return
    last: Codes | None = None
    for repeat, moment in enumerate(moments(capture.frames, capture.rate_hz, camera.own.stream), 1):
        rng = source(f"{capture.name}-{moment.counter}")
        if last is None or not moment.again:
            last = _exposed(capture, camera, pattern, light * moment.level, rng)
        said = {"counter": moment.counter, "time": _stamp(moment.time_s)}
        yield Shot(capture.name, repeat, last, step.label, said)


def _exposed(
    capture: BenchCapture, camera: Camera, pattern: Pattern, light: Picture, rng: np.random.Generator
) -> Codes:
    codes = camera.sensor.expose(light, pattern, rng)
    if capture.firmware and camera.own.denoising is not None:
        return camera.own.denoising.apply(codes, 2)
    return codes


def lit(capture: BenchCapture, step: Step, camera: Camera) -> Picture:
    """Return the light that a capture brings to each pixel, relative to a white board in a fully sensitive colour."""
    columns, rows = capture.window
    if capture.scene is None:
        return camera.mosaic.taken([np.ones((rows, columns))] * 3)
    veil = camera.own.veil
    pictures = [(1 - veil) * one + veil * one.mean() for one in _pictures(capture, step, camera)]
    return camera.mosaic.taken(pictures)


def _pictures(capture: BenchCapture, step: Step, camera: Camera) -> list[Picture]:
    """Return a scene's light in red, green and blue; once for all where the colours do not differ."""
    what, (columns, rows) = capture.scene, capture.window
    if isinstance(what, Chart):
        view = View(columns, rows, camera.mm_per_px)
        return [scene.picture(what, view, lambda x, y: _defocused(camera.system(x, y), step))] * 3
    seen = Seen(
        columns,
        rows,
        camera.mm_per_px,
        _defocused(camera.system(0.0, 0.0), step),
        camera.own.lens,
        capture.name in camera.own.mirrored,
    )
    if isinstance(what, NoiseTexture):
        return [what.picture(seen)] * 3
    if isinstance(what, PatchChart):
        return [_patches(what, seen, colour) for colour in range(3)]
    if what is None or len(set(camera.own.lens.colours)) == 1:
        return [painting.picture(what.paint, seen)] * 3 if what else []
    return [painting.picture(what.paint, seen, colour=colour) for colour in range(3)]


def _patches(what: PatchChart, seen: Seen, colour: int) -> Picture:
    return painting.picture(lambda x, y, side: what.paint(x, y, side, colour), seen, colour=colour)


def _defocused(system: Transfer, step: Step) -> Transfer:
    return replace(system, focus_error_um=system.focus_error_um + step.focus_um)


def _window(pattern: Pattern, window: tuple[int, int]) -> Pattern:
    """Return the middle of a sensor's pattern; stuck pixels are left out."""
    rows, columns = pattern.gain.shape
    first = (rows - window[1]) // 2, (columns - window[0]) // 2
    part = slice(first[0], first[0] + window[1]), slice(first[1], first[1] + window[0])
    return Pattern(pattern.gain[part], pattern.offset_e[part], pattern.dark_e[part])


def known(own: BenchUnit) -> Mapping[str, Any]:
    """Return what is particular about a unit, as plain data."""
    return {
        "distortion k1": own.lens.k1,
        "magnification of red, green, blue": list(own.lens.colours),
        "veil": own.veil,
        "noise reduction": own.denoising is not None,
        "lost frames": list(own.stream.lost),
        "repeated frames": list(own.stream.repeated),
        "flicker": own.stream.flicker,
        "seen from behind": sorted(own.mirrored),
    }


def _stamp(time_s: float) -> str:
    """Return a time of the invented day on which the lot was captured, to a microsecond."""
    return (START + timedelta(seconds=time_s)).strftime("%Y-%m-%dT%H:%M:%S.%fZ")
