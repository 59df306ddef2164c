"""Stars from closed-form scenes to readings, along the way that a run takes."""

from dataclasses import replace
from typing import Any

import numpy as np

from runner.capture.frame import Frame, crop
from runner.measure.contract import Found, NotFound, Sample, Wanted
from runner.measure.methods import star_response
from runner.measure.reading import Reading
from runner.measure.targets import sine_star
from runner.spec.model import Amount, Camera, Chart, Optics, Region
from tests.scenes.stars import StarScene

CAMERA = Camera(width=320, height=300, bit_depth=16, black_level=1000, white_level=61000)
F = (0.1, 0.2, 0.3, 0.4, 0.45)


def frame_of(light: np.ndarray, camera: Camera = CAMERA) -> Frame:
    """Return light from 0 to 1 as a frame of whole codes."""
    codes = camera.black_level + light * (camera.white_level - camera.black_level)
    return Frame("star.tif", "", "", np.clip(np.round(codes), 0, camera.white_level).astype(np.uint16))


def camera_for(scene: StarScene, **changes: Any) -> Camera:
    """Return the camera for a scene's size."""
    return replace(CAMERA, width=scene.size[0], height=scene.size[1], **changes)


def whole_frame(name: str = "star") -> Region:
    """Return a region that is all of the frame."""
    return Region(name, (Amount(50, "%"), Amount(50, "%")), (Amount(100, "%"), Amount(100, "%")))


def locate(frame: Frame, camera: Camera, region: Region | None = None, **options: Any) -> Found | NotFound:
    """Return what the target finds."""
    asked = sine_star.read_options(options)
    return sine_star.locate([frame], [region or whole_frame()], camera, asked)[0]


def wanted() -> tuple[Wanted, ...]:
    """Return transfers of every family at the usual frequencies."""
    families = ("", "worst_", "sagittal_", "tangential_")
    return tuple(
        Wanted(f"{one}mtf", {"frequency": Amount(f, "cy/px")}, {"frequency": f}) for one in families for f in F
    )


def measure(
    frame: Frame, camera: Camera, channel: str = "mono", found: Found | NotFound | None = None, **options: Any
) -> dict[str, Reading]:
    """Return readings by their labels."""
    found = locate(frame, camera) if found is None else found
    assert isinstance(found, Found), found
    sample = Sample(found, crop(frame, found.box, camera, channel), camera, Optics(), Chart(), wanted())
    asked = star_response.read_options(options)
    return {r.label: r for r in star_response.measure(sample, asked).readings}


def value(reading: Reading) -> float:
    """Return a reading's value, which must be there."""
    assert reading.value is not None, reading
    return reading.value
