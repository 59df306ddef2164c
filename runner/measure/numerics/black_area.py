"""One black area in a bright surround: where it lies, its inner part, and the light around and in it."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage
from skimage.filters import threshold_otsu

Light = NDArray[np.float64]
Mask = NDArray[np.bool_]

LEAST_CONTRAST = 0.3
"""(bright - dark) / bright of the two levels: with less there is no black area, or too much glare to tell it."""
LEAST_SIDE = 8
"""px of the inner part's sides."""
SPECK = 0.02
"""Dark spots below this share of the largest are dirt and count to no side."""


class AreaLost(Exception):
    """Raised when a region shows no single black area inside a bright surround; the sentence says what it shows."""


@dataclass(frozen=True)
class BlackArea:
    """The area as found, in the region's own rows and columns."""

    inner: Mask
    """Pixels of the black area well away from its border."""
    around: Mask
    """Pixels of the bright surround well away from it."""
    box: tuple[int, int, int, int]
    """First column, first row, one past the last column, one past the last row of the black area."""


def find_black_area(light: Light, margin: float) -> BlackArea:
    """Find the black area of a region.

    Args:
        light: Rows × columns, any linear unit.
        margin: Share of the area's shorter side that is kept clear on both sides of its border.

    Raises:
        AreaLost: There is none, more than one, one that reaches the border, or one that is too small.
    """
    smooth = ndimage.uniform_filter(light, 3)
    level = float(threshold_otsu(smooth))  # type: ignore[no-untyped-call]
    dark = smooth < level
    if dark.all() or not dark.any():
        raise AreaLost("the region has one level only")
    low, high = float(np.median(smooth[dark])), float(np.median(smooth[~dark]))
    if high <= 0 or (high - low) / high < LEAST_CONTRAST:
        raise AreaLost(
            f"the darkest part has {100 * low / max(high, 1e-12):.0f} % of the light around it: no black area"
        )
    labels, count = ndimage.label(dark)
    sizes = ndimage.sum_labels(dark, labels, np.arange(1, count + 1))
    large = np.flatnonzero(sizes >= SPECK * sizes.max()) + 1
    if large.size > 1:
        raise AreaLost(f"{large.size} dark areas lie in the region, one is expected")
    area = labels == large[0]
    rows, columns = np.flatnonzero(area.any(axis=1)), np.flatnonzero(area.any(axis=0))
    box = (int(columns[0]), int(rows[0]), int(columns[-1]) + 1, int(rows[-1]) + 1)
    if box[0] == 0 or box[1] == 0 or box[2] == area.shape[1] or box[3] == area.shape[0]:
        raise AreaLost("the black area reaches the region's border")
    clear = max(2, round(margin * min(box[2] - box[0], box[3] - box[1])))
    inside = ndimage.distance_transform_edt(ndimage.binary_fill_holes(area)) > clear
    outside = (ndimage.distance_transform_edt(~area) > clear) & ~dark
    if np.sqrt(np.count_nonzero(inside)) < LEAST_SIDE:
        raise AreaLost(f"the black area's inner part has {np.count_nonzero(inside)} px, {LEAST_SIDE**2} are needed")
    if not outside.any():
        raise AreaLost("the region holds no bright surround outside the black area's blurred border")
    return BlackArea(inside, outside, box)


def surround_at(light: Light, around: Mask, inner: Mask) -> tuple[float, float]:
    """Return the surround's light at the black area's place by a plane, and how far it lies from the plain mean.

    Args:
        light: Rows × columns.
        around: Pixels of the surround.
        inner: Pixels of the black area.
    """
    y, x = np.nonzero(around)
    centre_y, centre_x = (float(axis.mean()) for axis in np.nonzero(inner))
    design = np.stack([np.ones(x.size), x - centre_x, y - centre_y], axis=1)
    values = light[around]
    terms = np.linalg.lstsq(design, values, rcond=None)[0]
    return float(terms[0]), abs(float(terms[0]) - float(values.mean()))
