"""Places the patches of a chart in a region: as a grid that is found, or at places that the spec names.

What a target of patches shares: its options, the checks of what a region shows at all, and the clear middle of every
patch as whole pixels.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Box, Frame, Signal, linearise
from runner.errors import MeasurementRefused
from runner.measure.numerics.patch_grid import PatchGrid, find_grids
from runner.measure.options import number
from runner.spec.model import Camera

Real = NDArray[np.float64]

DARKEST = 0.002
"""Mean light of a region below this share of the range is a dark picture."""
BRIGHTEST = 0.9
"""Share of a region's pixels at the white level from which on there is nothing to see."""
FLAT = 0.02
"""Scatter of the region's light, over its mean, below which nothing differs in it."""
MOST_UNEVEN = 0.01
"""Mean square within the patches' middles over that between them: of a chart it is some thousandths at most."""
MOST_LEFT = 0.6
"""Share of the region's sum of squares that patches, ground and gaps may leave unexplained."""
CERTAIN = 0.2
"""The same, for a grid of another layout to be told."""
LIKELY = (3.0, 0.1)
"""Of the best one's unexplained share, times and plus: how much another grid may leave to be thought of."""
LEAST_SIDE = 8
"""px of a patch's clear middle: fewer than 64 pixels tell neither a level nor a noise well."""
SHARP = 0.7
"""Step over a sixth of a patch, over that over a third of it: of a sharp border both are the same."""
MOST_PATCHES = 400


@dataclass(frozen=True)
class PatchOptions:
    """Where a chart's patches lie in its region."""

    layout: str | Sequence[int] | None = field(
        default=None, metadata={"sentence": "Columns x rows of the grid of patches that the region holds, e.g. 6 x 4."}
    )
    places: Sequence[Sequence[float | str]] | None = field(
        default=None,
        metadata={"sentence": "Or the centre of every patch, [x, y] in % of the region's width and height."},
    )
    patch: Sequence[float | str] | None = field(
        default=None,
        metadata={"sentence": "With places: width and height of a patch in % of the region's, e.g. [8 %, 20 %]."},
    )
    margin: float | str = field(
        default=0.2,
        metadata={"sentence": "Share of a patch's side that is kept clear at each of its borders, 5 to 40 %."},
    )

    def __post_init__(self) -> None:
        """Turn texts into numbers and keep each option inside its meaning."""
        object.__setattr__(self, "margin", number("margin", self.margin, "%", 0.05, 0.4))
        if (self.layout is None) == (self.places is None):
            raise ValueError("the patches' places are not known: write layout: 6 x 4, or places: and patch:, not both")
        if self.layout is not None:
            object.__setattr__(self, "layout", _layout(self.layout))
            return
        if self.patch is None or self.places is None:
            raise ValueError("places: needs patch: too, width and height of a patch, e.g. [8 %, 20 %]")
        places = tuple(_pair(f"place {n}", one) for n, one in enumerate(self.places, 1))
        if not 2 <= len(places) <= MOST_PATCHES:
            raise ValueError(f"places names {len(places)} patches; allowed are 2 to {MOST_PATCHES}")
        object.__setattr__(self, "places", places)
        object.__setattr__(self, "patch", _pair("patch", self.patch))

    @property
    def grid(self) -> tuple[int, int] | None:
        """Columns and rows, or None where places are named."""
        return None if self.layout is None else (int(self.layout[0]), int(self.layout[1]))

    @property
    def count(self) -> int:
        """Number of patches."""
        return len(self.places or ()) if self.grid is None else self.grid[0] * self.grid[1]


def _layout(asked: object) -> tuple[int, int]:
    parts = asked.split("x") if isinstance(asked, str) else asked
    try:
        columns, rows = (int(str(part)) for part in parts)  # type: ignore[attr-defined]
    except (TypeError, ValueError) as error:
        raise ValueError(f"layout is {asked!r}; allowed is columns x rows, e.g. 6 x 4") from error
    if min(columns, rows) < 1 or not 2 <= columns * rows <= MOST_PATCHES:
        raise ValueError(f"layout is {columns} x {rows}; allowed are 2 to {MOST_PATCHES} patches")
    return columns, rows


def _pair(name: str, asked: object) -> tuple[float, float]:
    if isinstance(asked, str) or not isinstance(asked, Sequence) or len(asked) != 2:
        raise ValueError(f"{name} is {asked!r}; allowed is a pair, e.g. [10 %, 50 %]")
    return number(name, asked[0], "%", 0.001, 1.0), number(name, asked[1], "%", 0.001, 1.0)


def colours(asked: object) -> tuple[tuple[float, float, float], ...]:
    """Turn an option into colours L*, a*, b*.

    Raises:
        ValueError: It is no list of three numbers each, or a lightness lies outside 0 to 105.
    """
    made = []
    rows = asked if isinstance(asked, Sequence) and not isinstance(asked, str) else [asked]
    for n, one in enumerate(rows, 1):
        good = isinstance(one, Sequence) and not isinstance(one, str) and len(one) == 3
        good = good and all(isinstance(part, (int, float)) and not isinstance(part, bool) for part in one)
        if not good or not (0 <= one[0] <= 105 and max(abs(one[1]), abs(one[2])) <= 200):
            raise ValueError(f"lab {n} is {one!r}; allowed is [L*, a*, b*], L* from 0 to 105, the others within ±200")
        made.append((float(one[0]), float(one[1]), float(one[2])))
    return tuple(made)


@dataclass(frozen=True)
class Patches:
    """The patches of a region in one reading of where they lie."""

    boxes: tuple[Box, ...]
    """Clear middle of every patch, whole px of the frame, in the chart's order."""
    outline: tuple[tuple[float, float], ...]
    """Corners of all of them together, px of the frame."""
    layout: tuple[int, int] | None
    """Columns and rows; None for named places."""

    @property
    def points(self) -> tuple[tuple[float, float], ...]:
        """Upper left and lower right corner of every clear middle, for `Found.points`."""
        return tuple(p for b in self.boxes for p in ((float(b.x0), float(b.y0)), (float(b.x1), float(b.y1))))


def boxes_of(points: Sequence[tuple[float, float]]) -> tuple[Box, ...]:
    """Return the clear middles that `Patches.points` holds."""
    pairs = zip(points[::2], points[1::2], strict=True)
    return tuple(Box(int(a[0]), int(a[1]), int(b[0]), int(b[1])) for a, b in pairs)


def candidates(frame: Frame, box: Box, camera: Camera, options: PatchOptions) -> list[Patches]:
    """Return the readings of where the patches lie in a region, the likeliest first.

    Args:
        frame: One picture, colours as one grey.
        box: The region.
        camera: Levels and tone.
        options: What the chart is.

    Raises:
        MeasurementRefused: The region is dark, white or blank, holds no such patches, or they are too small.
    """
    codes = frame.codes[box.y0 : box.y1, box.x0 : box.x1]
    light = linearise(codes, camera)
    _refuse_blank(light, float(np.mean(codes >= camera.white_level)))
    if options.grid is None:
        return [_named(box, options)]
    picture = np.sqrt(np.clip(light, 0, None))
    found = _fitting(find_grids(picture, *options.grid))
    likely = [one for one in found if one.left <= LIKELY[0] * found[0].left + LIKELY[1]]
    made = [_of_grid(one, box, float(options.margin)) for one in likely]
    made = [one for one in made if _within(one, box)]
    if not made:
        raise MeasurementRefused(*_nothing(picture, options.grid, outside=bool(found)))
    for one in made[:1]:
        width, height = (min(getattr(b, e) - getattr(b, s) for b in one.boxes) for s, e in (("x0", "x1"), ("y0", "y1")))
        if min(width, height) < LEAST_SIDE:
            seen = f"the clear middle of a patch is {width} × {height} px"
            step = "go nearer, or make the margin smaller"
            allowed = f"{LEAST_SIDE} × {LEAST_SIDE} px is needed"
            raise MeasurementRefused("outside the estimator's limits", seen, allowed=allowed, next_step=step)
    return made


def _fitting(grids: Sequence[PatchGrid]) -> list[PatchGrid]:
    return [one for one in grids if one.uneven <= MOST_UNEVEN and one.left <= MOST_LEFT]


def _refuse_blank(light: Signal, white: float) -> None:
    mean = float(light.mean())
    if white > BRIGHTEST:
        found = f"{100 * white:.0f} % of the region's pixels lie at the white level"
        raise MeasurementRefused("too bright", found, next_step="give less light")
    if np.ptp(light) == 0:
        raise MeasurementRefused("no picture", "every pixel of the region has the same value")
    if mean < DARKEST:
        found = f"the region lies at {100 * mean:.2f} % of the range over the black level"
        raise MeasurementRefused("too dark", found, allowed=f"{100 * DARKEST:g} % is needed")


def _nothing(picture: Real, grid: tuple[int, int], *, outside: bool) -> tuple[str, str]:
    """Return why there are no such patches: cause and sentence."""
    columns, rows = grid
    block = max(1, int(min(picture.shape[1] / columns, picture.shape[0] / rows) // 12))
    h, w = (n // block for n in picture.shape)
    small = picture[: h * block, : w * block].reshape(h, block, w, block).mean(axis=(1, 3))
    scatter = float(small.std() / max(small.mean(), 1e-12))
    if 2 * scatter < FLAT:  # of a square root, half of the light's
        return "no modulation", f"the region is even: its light scatters by {200 * scatter:.1f} % of its mean"
    other = _fitting(find_grids(picture, rows, columns)) if columns != rows else []
    if other and other[0].left <= CERTAIN:
        return (
            "another scene",
            f"the chart lies on its side: {rows} × {columns} patches are seen, {columns} × {rows} asked",
        )
    if outside:
        return "off the frame", "the chart reaches over the region's border: some of its patches lie outside"
    steps = [float(np.quantile(np.abs(small[:, n:] - small[:, :-n]), 0.98)) for n in (2, 4)]
    why = f"no grid of {columns} × {rows} even patches explains what the region shows"
    if steps[0] < SHARP * steps[1]:
        return "no modulation", f"{why}, and no sharp border is in it"
    return "another scene", f"{why}: another chart, one that has moved, or one that is covered"


def _named(box: Box, options: PatchOptions) -> Patches:
    """Return patches at places that the spec names."""
    width, height = box.x1 - box.x0, box.y1 - box.y0
    w, h = (float(part) for part in options.patch or ())
    keep = 1 - 2 * float(options.margin)
    half = np.array([w * width, h * height]) * keep / 2
    boxes = []
    for x, y in options.places or ():
        centre = np.array([box.x0 + float(x) * width, box.y0 + float(y) * height])
        low, high = np.ceil(centre - half).astype(int), np.floor(centre + half).astype(int)
        one = Box(int(low[0]), int(low[1]), int(high[0]), int(high[1]))
        if min(one.x1 - one.x0, one.y1 - one.y0) < LEAST_SIDE:
            found = f"the clear middle of a patch is {one.x1 - one.x0} × {one.y1 - one.y0} px"
            allowed = f"{LEAST_SIDE} × {LEAST_SIDE} px is needed"
            raise MeasurementRefused("outside the estimator's limits", found, allowed=allowed)
        if one.x0 < box.x0 or one.y0 < box.y0 or one.x1 > box.x1 or one.y1 > box.y1:
            found = f"the patch at {100 * float(x):g} %, {100 * float(y):g} % reaches over the region's border"
            raise MeasurementRefused("outside the estimator's limits", found)
        boxes.append(one)
    corners = ((box.x0, box.y0), (box.x1, box.y0), (box.x1, box.y1), (box.x0, box.y1))
    return Patches(tuple(boxes), tuple((float(a), float(b)) for a, b in corners), None)


def _of_grid(grid: PatchGrid, box: Box, margin: float) -> Patches:
    """Return the patches of a grid that was found: of each the largest upright box in its clear middle."""
    shift = np.array([box.x0, box.y0])
    boxes = [_clear(quad + shift, margin) for quad in grid.patches()]
    corners = grid.corners + shift
    outline = tuple((float(x), float(y)) for x, y in corners)
    return Patches(tuple(boxes), outline, (grid.columns, grid.rows))


def _within(patches: Patches, box: Box) -> bool:
    return all(box.x0 <= one.x0 < one.x1 <= box.x1 and box.y0 <= one.y0 < one.y1 <= box.y1 for one in patches.boxes)


def _clear(quad: Real, margin: float) -> Box:
    centre = quad.mean(axis=0)
    right, down = (quad[1] + quad[2] - quad[0] - quad[3]) / 4, (quad[2] + quad[3] - quad[0] - quad[1]) / 4
    half = np.array([abs(right[0]), abs(down[1])])
    inverse = np.linalg.inv(np.column_stack([right, down]))
    reach = max(float(np.abs(inverse @ (half * sign)).max()) for sign in (np.array([1, 1]), np.array([1, -1])))
    half = half * (1 - 2 * margin) / reach
    low, high = np.ceil(centre - half), np.floor(centre + half)
    return Box(int(low[0]), int(low[1]), int(high[0]), int(high[1]))
