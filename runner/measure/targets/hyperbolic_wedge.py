"""A wedge of lines that converge hyperbolically, so that their frequency rises evenly: one wedge in every region."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Frame, linearise
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.wedge_fit import fit_wedge
from runner.measure.options import read_record
from runner.measure.placing import outline, place
from runner.spec.model import Camera, Region

NAME = "hyperbolic wedge"
TITLE = "Hyperbolic resolution wedge"
GROUP = "transfer function"
OFFERS = frozenset({"wedge"})
METHODS = ("wedge resolution",)
REFERENCES = (
    "ISO 12233:2014 (visual resolution from hyperbolic wedges)",
    "CIPA DC-003 (2003) (resolution measurement of digital cameras; from memory)",
)

DARKEST = 0.002
"""Mean light below this share of the range is a dark picture."""
TURNS = ("right", "left", "down", "up")
"""Where a wedge's fine end may point to."""
MOST_CLIPPED = 0.001
"""Share of pixels at an end of the range from which no wedge is looked for any more."""
SHARP = 0.3
"""Step to the pixel after the next over all steps of the region: a blurred wedge has none such."""


@dataclass(frozen=True)
class Options:
    """The physical wedge."""

    lines: int = field(default=5, metadata={"sentence": "Number of its lines, odd, 3 to 15."})

    def __post_init__(self) -> None:
        """Keep the number inside its meaning."""
        good = isinstance(self.lines, int) and not isinstance(self.lines, bool)
        if not good or self.lines not in range(3, 16, 2):
            raise ValueError(f"lines is {self.lines!r}; allowed is an odd number from 3 to 15")


def read_options(asked: Mapping[str, Any]) -> Options:
    """Read the options from a spec's keys.

    Raises:
        UsageError: A key or value is not allowed.
    """
    return read_record(Options, asked)


def turned(values: NDArray[Any], towards: int) -> NDArray[Any]:
    """Return a patch turned so that the wedge runs along the rows with its fine end on the right.

    Args:
        values: Rows × columns.
        towards: Place in `TURNS` of where the fine end points to.
    """
    if towards == 0:
        return values
    if towards == 1:
        return values[:, ::-1]
    return values.T if towards == 2 else values[::-1].T


def locate(
    frames: Sequence[Frame], regions: Sequence[Region], camera: Camera, options: Options
) -> Sequence[Found | NotFound]:
    """Find how the wedge of each region lies."""
    return [_locate_one(frames[0], region, camera, options.lines) for region in regions]


def _locate_one(frame: Frame, region: Region, camera: Camera, lines: int) -> Found | NotFound:
    box = place(region, frame)
    if isinstance(box, NotFound):
        return box
    light = linearise(frame.codes[box.y0 : box.y1, box.x0 : box.x1], camera)
    level = float(light.mean())
    if level < DARKEST:
        sentence = f"the region lies at {100 * level:.2f} % of the range over the black level"
        return NotFound(region.name, box, "too dark", sentence)
    if np.ptp(light) == 0:
        return NotFound(region.name, box, "no picture", "every pixel of the region has the same value")
    for towards in range(len(TURNS)):
        fit = fit_wedge(turned(light, towards), lines)
        if fit is None:
            continue
        found = int(np.median(fit.lines[:COARSE]))
        if found != lines:
            sentence = f"{found} lines stand apart at the wedge's coarse end, the spec states {lines}"
            return NotFound(region.name, box, "another scene", sentence)
        return Found(region.name, box, OFFERS, {"towards": float(towards), "lines": float(lines)}, outline(box))
    codes = frame.codes[box.y0 : box.y1, box.x0 : box.x1]
    clipped = float(np.mean((codes >= camera.white_level) | (codes <= 0)))
    if clipped > MOST_CLIPPED:
        sentence = f"{100 * clipped:.1f} % of the region's pixels lie at an end of the range, at most 0.1 % may"
        return NotFound(region.name, box, "clipped", sentence)
    sentence = f"no {lines} lines that converge along the rows or columns"
    if _sharp(light):
        return NotFound(region.name, box, "another scene", sentence + "; the region holds something else")
    return NotFound(region.name, box, "no modulation", sentence + ", and no sharp border is in the region")


COARSE = 8
"""Pieces at the coarse end in which lines are counted."""


def _sharp(light: NDArray[np.float64]) -> bool:
    """Tell whether the region holds sharp borders: not a wholly defocused wedge."""
    steps = [np.abs(light[:, 2:] - light[:, :-2]), np.abs(light[2:] - light[:-2])]
    noise = min(float(np.median(each)) for each in steps)
    steep = max(float(np.quantile(each, 0.99)) for each in steps) - 4 * noise
    low, high = np.quantile(light, (0.01, 0.99))
    return steep > SHARP * float(high - low)
