"""A frame: what one file (or page) holds, with the digest of the bytes that were decoded."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.capture.mosaic import plane, sites
from runner.spec.model import Amount, Camera

Codes = NDArray[Any]
"""Stored codes, rows × columns, in the file's own number type."""
Signal = NDArray[np.float64]
"""Light as a fraction of full range: 0 at black level, 1 at white level; rows × columns."""


@dataclass(frozen=True)
class Frame:
    """One decoded frame. The arrays are never written to."""

    file: str
    """Path relative to the unit's (or attempt's) folder, with `/`."""
    sha256: str
    """Digest of the file's bytes."""
    pixels_sha256: str
    """Digest of the decoded pixels, shape and type: the same picture in another file has the same one.

    Empty where nothing is to be compared.
    """
    codes: Codes
    """Stored codes, rows × columns; RGB frames have their three channels as a last axis."""
    page: int | None = None
    """Page of a multi-page file, from 0; None for a single page."""
    axes: Mapping[str, str] = field(default_factory=dict)
    """Named parts of the file pattern (repeat, exposure, z …); pages add `page`."""
    metadata: Mapping[str, str] = field(default_factory=dict)
    """What the file says of itself (description, software, serial …)."""
    simulated: bool = False
    """The file is marked as a rehearsed frame."""
    taken: Mapping[str, Amount] = field(default_factory=dict)
    """What its sidecars say of how it was taken, by field: exposure, gain, level, position, temperature, counter."""

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return int(self.codes.shape[0]), int(self.codes.shape[1])


@dataclass(frozen=True)
class Box:
    """A rectangle of whole pixels: columns x0 … x1-1, rows y0 … y1-1."""

    x0: int
    """First column."""
    y0: int
    """First row."""
    x1: int
    """One past the last column."""
    y1: int
    """One past the last row."""

    def inside(self, width: int, height: int) -> bool:
        """Tell whether the box lies wholly in a frame of that size."""
        return 0 <= self.x0 < self.x1 <= width and 0 <= self.y0 < self.y1 <= height


@dataclass(frozen=True)
class Crop:
    """A box of one frame."""

    file: str
    """The frame's file."""
    box: Box
    """Where it lies."""
    codes: Codes
    """Stored codes, rows × columns."""
    camera: Camera
    """Levels and tone."""
    axes: Mapping[str, str] = field(default_factory=dict)
    """The frame's axes."""
    taken: Mapping[str, Amount] = field(default_factory=dict)
    """What the frame's sidecars say of how it was taken."""
    channel: str = "mono"
    """Colour channel."""
    sites: NDArray[np.bool_] | None = None
    """The channel's own pixels in a mosaic, rows × columns: only they may be used; None is all of them."""

    @cached_property
    def signal(self) -> Signal:
        """The codes as light, black level and tone undone; worked out when first asked for."""
        return linearise(self.codes, self.camera)


def crop(frame: Frame, box: Box, camera: Camera, channel: str = "mono") -> Crop:
    """Cut a box out of one channel of a frame and linearise it. The frame is not changed.

    Args:
        frame: The frame.
        box: Whole pixels, inside the frame.
        camera: Its levels, tone and mosaic.
        channel: One of the camera's channels.
    """
    codes = plane(frame.codes, channel, camera)[box.y0 : box.y1, box.x0 : box.x1]
    mask = sites(channel, camera, (box.y0, box.x0), (codes.shape[0], codes.shape[1]))
    return Crop(frame.file, box, codes, camera, frame.axes, frame.taken, channel, mask)


def linearise(codes: Codes, camera: Camera) -> Signal:
    """Turn stored codes into light as a fraction of the range from black to white level.

    Values outside the range stay outside (noise below black is kept, so that means are unbiased): above white a formula
    goes on as it is, a table as a straight line with its end slope; below black a tone curve is its own mirror image.

    Args:
        codes: Rows × columns, DN.
        camera: Black level, white level (DN) and tone.

    References:
        IEC 61966-2-1:1999 (sRGB transfer function).
    """
    fraction = (np.asarray(codes, dtype=np.float64) - camera.black_level) / (camera.white_level - camera.black_level)
    tone = camera.tone
    if tone.kind == "linear":
        return fraction
    size = np.abs(fraction)
    if tone.kind == "srgb":
        light = np.where(size <= 0.04045, size / 12.92, ((np.maximum(size, 0.04045) + 0.055) / 1.055) ** 2.4)
    elif tone.kind == "gamma":
        light = size ** float(tone.gamma or 1.0)
    else:
        code_points, light_points = np.array(tone.table).T
        light = np.interp(size, code_points, light_points)
        slope = (light_points[-1] - light_points[-2]) / (code_points[-1] - code_points[-2])
        light = np.where(size > code_points[-1], light_points[-1] + slope * (size - code_points[-1]), light)
    return np.asarray(np.sign(fraction) * light, dtype=np.float64)
