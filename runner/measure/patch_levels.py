"""Levels of the patches of a chart in one colour channel: means with their noise, and ends of the range they touch."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Box, Crop
from runner.errors import MeasurementRefused

Real = NDArray[np.float64]

MOST_AT_END = 0.001
"""Share of a patch's pixels at an end of the range above which its mean is no longer that of its light."""
MOST_UNEVEN = 0.06
"""Of a patch's level: by so much may its quarters differ, noise apart; shading over a patch stays far below."""


@dataclass(frozen=True)
class Level:
    """One patch."""

    code: float
    """Mean code over black, DN."""
    code_u: float
    """Its standard uncertainty from noise."""
    light: float
    """Mean of the codes with the stated tone undone, share of the range."""
    light_u: float
    """Its standard uncertainty from noise."""
    count: int
    """Pixels of the channel."""
    spread: float
    """Standard deviation of its codes, DN."""
    at_black: float
    """Share of its pixels at code 0."""
    at_white: float
    """Share of its pixels at the white level."""
    uneven: float
    """Difference of its quarters beyond what noise explains, over its level."""

    @property
    def clipped(self) -> bool:
        """Its mean is not that of its light."""
        return max(self.at_black, self.at_white) > MOST_AT_END


def part(crop: Crop, box: Box) -> Crop:
    """Return a box of the frame out of a crop that holds it."""
    rows = slice(box.y0 - crop.box.y0, box.y1 - crop.box.y0)
    columns = slice(box.x0 - crop.box.x0, box.x1 - crop.box.x0)
    sites = None if crop.sites is None else crop.sites[rows, columns]
    codes = crop.codes[rows, columns]
    return Crop(crop.file, box, codes, crop.camera, crop.axes, crop.taken, crop.channel, sites)


def levels_of(crop: Crop, boxes: Sequence[Box]) -> list[Level]:
    """Return the level of every patch.

    Args:
        crop: The region in one channel; of a mosaic only its own pixels count.
        boxes: Clear middles of the patches, inside the crop.
    """
    return [_level(part(crop, box)) for box in boxes]


def refuse_uneven(levels: Sequence[Level]) -> None:
    """Refuse patches that are covered in part, stained, or lie beside where they were found.

    Raises:
        MeasurementRefused: `another scene`, naming the worst patch.
    """
    worst = int(np.argmax([level.uneven for level in levels]))
    if levels[worst].uneven > MOST_UNEVEN:
        found = f"patch {worst + 1} is not even: its quarters differ by {100 * levels[worst].uneven:.0f} % of its level"
        raise MeasurementRefused("another scene", found, allowed=f"at most {100 * MOST_UNEVEN:g} % may")


def _level(crop: Crop) -> Level:
    camera = crop.camera
    own = np.ones(crop.codes.shape, dtype=bool) if crop.sites is None else crop.sites
    codes = crop.codes[own].astype(np.float64)
    light = crop.signal[own]
    root = np.sqrt(codes.size)
    whole = crop.codes.dtype.kind in "ui"
    spread = float(codes.std(ddof=1))
    rounding = 1 / np.sqrt(12) if whole and spread < 0.5 else 0.0  # noise that moves codes smooths their steps
    span = camera.white_level - camera.black_level
    per_code = float(light.std() / codes.std()) if spread > 0 else 1 / span
    mean = float(codes.mean()) - camera.black_level
    low = float(np.mean(codes <= 0)) if camera.black_level > 0 or whole else 0.0
    return Level(
        mean,
        float(np.hypot(spread / root, rounding)),
        float(light.mean()),
        float(np.hypot(light.std(ddof=1) / root, rounding * per_code)),
        int(codes.size),
        spread,
        low,
        float(np.mean(codes >= camera.white_level)),
        _uneven(crop.codes, own, mean),
    )


def _uneven(codes: NDArray[np.generic], own: NDArray[np.bool_], mean: float) -> float:
    """Return by how much the means of the quarters differ more than noise explains, over the level."""
    rows, columns = (size // 2 for size in codes.shape)
    means, errors = [], []
    for y in (slice(None, rows), slice(rows, None)):
        for x in (slice(None, columns), slice(columns, None)):
            values = codes[y, x][own[y, x]].astype(np.float64)
            if values.size:
                means.append(float(values.mean()))
                errors.append(float(values.std()) / np.sqrt(values.size))
    noise = 4 * float(np.hypot(*sorted(errors)[-2:])) + 1.0  # whole codes
    return max(0.0, float(np.ptp(means)) - noise) / max(abs(mean), 1e-9)
