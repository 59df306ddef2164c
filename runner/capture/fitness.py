"""Whether frames without light are dark, and frames of an even field lit and even: seen before anything is measured.

A dark frame taken with the lamp on, or a flat with a chart left in, is no evidence, neither by itself nor as companion
of other captures. What speaks for light through a lens or for a chart blames the capture: a fall-off to all corners, a
straight slanted edge; no sensor makes these. Where light and the unit's own faults look alike, the sentence says so.

The frame is looked at in cells of a few dozen to a side. What is finer than a cell, or fainter than a tenth of the
light, is not seen here.

References:
    EMVA Standard 1288 Release 4.0 Linear (2021): dark measurement without any light, homogeneous illumination.
    Thresholds: common practice, no source; each is argued where it stands.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from runner.capture.frame import Box, Codes, Frame, linearise
from runner.spec.model import Camera, Capture

DARK, FLAT = "dark frame", "flat field"
LIT = 0.05
"""Share of the range over black from which on a dark frame is lit: a hundred times what dark signal makes in a usual
exposure; below, a frame still serves as dark."""
STRONGLY_LIT = 0.10
"""The same where nothing but the level speaks of light, so that long exposures of warm sensors pass."""
UNLIT = 0.01
"""A flat field below 1 % of the range over black has no light; the methods hold it against the same."""
MOST_WHITE = 0.5
"""Share of pixels at the white level from which on a flat field is too bright to tell anything; methods allow less."""
STEP = 0.10
"""Share of the light by which an edge differs on both sides; a chart's black and white differ by far more."""
CELLS = 48
"""Cells along the longer side."""
LEAST_CELLS, PIXELS = 8, 8
"""Cells along a side, and px of a cell that are looked at: 64 px tell a level within an eighth of the noise."""
MIDDLE = 0.4
"""Part of a frame without regions that is looked at, about its centre: inside any circle of light that fills it."""
UNDECIDED = "look alike"
"""Stands in every sentence that blames nobody."""

Real = NDArray[np.float64]


@dataclass(frozen=True)
class Field:
    """A field that must be dark, or lit and even."""

    capture: str
    """Capture."""
    target: str
    """`DARK` or `FLAT`."""
    boxes: tuple[Box, ...]
    """Where a flat must be even."""
    series: bool = False
    """Its frames differ in exposure: the longest may have any dark signal."""


def field_of(capture: Capture) -> Field | None:
    """Return what a capture's frames must be, or None where its target is another scene."""
    if capture.target not in {DARK, FLAT} or capture.chart.file is not None:  # a chart is found by its marks
        return None
    width, height = capture.camera.width, capture.camera.height
    boxes = [
        _box(*region.centre_px(width, height), *region.size_px(width, height), width, height)
        for region in capture.regions
    ] or [_box(width / 2, height / 2, MIDDLE * width, MIDDLE * height, width, height)]
    series = capture.frames is not None and "{exposure}" in capture.frames.names
    return Field(capture.name, capture.target, tuple(boxes), series)


def unfit(field: Field, frame: Frame, camera: Camera) -> str:
    """Return why a frame cannot serve as what its capture is, or an empty text.

    Args:
        field: What it must be.
        frame: Rows × columns, or × 3 colours.
        camera: Its levels, tone and mosaic.
    """
    cells = _cells(frame.codes, Box(0, 0, frame.shape[1], frame.shape[0]), camera)
    level = float(cells.light.mean())
    where = frame.file + (f", page {frame.page + 1}" if frame.page is not None else "")
    if field.target == DARK:
        return _not_dark(where, level, cells, math.inf if field.series else STRONGLY_LIT) if level >= LIT else ""
    if level < UNLIT:
        return (
            f"{where}: the field lies {100 * level:.2f} % of the range over the black level, {100 * UNLIT:g} % is "
            "needed; light the field, open the shutter, and capture again"
        )
    if cells.white > MOST_WHITE:
        return (
            f"{where}: {100 * cells.white:.0f} % of the pixels lie at the white level; give less light, and capture "
            "again"
        )
    for box in field.boxes:
        sentence = _not_even(where, _cells(frame.codes, box, camera))
        if sentence:
            return sentence
    return ""


def _box(x: float, y: float, w: float, h: float, width: int, height: int) -> Box:
    """Return a box about a centre, inside the frame, from an even row and column on: a mosaic's cells stay whole."""
    x0, y0 = (2 * max(0, round((centre - size / 2) / 2)) for centre, size in ((x, w), (y, h)))
    return Box(x0, y0, max(x0, min(round(x + w / 2), width)), max(y0, min(round(y + h / 2), height)))


# ---- cells


@dataclass(frozen=True)
class _Cells:
    light: Real
    """Mean of each cell as a share of the range over black, all colours together; rows × columns."""
    noise: float
    """Standard deviation of these means by the pixels' noise."""
    white: float
    """Share of the pixels that lie at the white level."""
    pitch: int
    """Side of a cell, px."""


def _cells(codes: Codes, box: Box, camera: Camera) -> _Cells:
    part = codes[box.y0 : box.y1, box.x0 : box.x1]
    side = 2 * max(2, max(part.shape[:2]) // (2 * CELLS))
    rows, columns = max(1, part.shape[0] // side), max(1, part.shape[1] // side)
    taken = min(side, PIXELS)
    y, x = ((np.arange(n)[:, None] * side + np.arange(taken)).ravel() for n in (rows, columns))
    y, x = y[y < part.shape[0]], x[x < part.shape[1]]
    some = part[np.ix_(y, x)].astype(np.float64)
    white = float(np.mean(some >= camera.white_level))
    apart = some[:, 2:] - some[:, :-2]  # of a mosaic the next of the same colour
    noise = 1.4826 * float(np.median(np.abs(apart - np.median(apart)))) / np.sqrt(2) if apart.size else 0.0
    planes = some if some.ndim == 2 else some.mean(axis=2)
    means = planes[: rows * taken, : columns * taken]
    if means.shape == (rows * taken, columns * taken):
        means = means.reshape(rows, taken, columns, taken).mean(axis=(1, 3))
    span = camera.white_level - camera.black_level
    return _Cells(linearise(means, camera), noise / taken / span, white, side)


# ---- dark


def _not_dark(where: str, level: float, cells: _Cells, strongly: float) -> str:
    words = f"{where}: the frame is lit: its level lies {100 * level:.1f} % of the range over the black level"
    told = "a scene shows in it" if _edges(cells) else "it falls off to all corners" if _falls_off(cells.light) else ""
    if told:
        return f"{words}, and {told}; a dark frame has less than {100 * LIT:g} %: shut all light out, and capture again"
    if level < strongly:
        return ""
    return (
        f"{words}, without a picture in it; light and a unit's own dark signal {UNDECIDED}: a dark frame of a unit "
        "known to be good, on the same station, would settle it"
    )


def _falls_off(light: Real) -> bool:
    """Tell whether the middle is brighter than each corner by a tenth: a sensor's own glow comes from its borders."""
    rows, columns = (max(1, n // 6) for n in light.shape)
    ends = [
        (a, b) for a in (slice(None, rows), slice(-rows, None)) for b in (slice(None, columns), slice(-columns, None))
    ]
    y, x = (n // 2 for n in light.shape)
    middle = float(np.median(light[y - rows // 2 : y + rows // 2 + 1, x - columns // 2 : x + columns // 2 + 1]))
    return all(float(np.median(light[end])) < (1 - STEP) * middle for end in ends)


# ---- even


def _not_even(where: str, cells: _Cells) -> str:
    edges = _edges(cells)
    if not edges:
        rough = _roughness(cells)
        return (
            ""
            if rough < STEP
            else (
                f"{where}: the field is not even: all over it the light changes by {100 * rough:.0f} % within "
                f"{cells.pitch} px; a chart left in the light and a fault in the unit {UNDECIDED}: a flat of a unit "
                "known to be good, in the same place, would settle it"
            )
        )
    straight = next((edge for edge in edges if edge.slanted), None)
    step = max(edge.step for edge in edges)
    words = f"{where}: the field is not even: an edge crosses it, with {100 * step:.0f} % less light on its one side"
    if straight is not None:
        return f"{words}, straight and slanted as a chart's; take the chart away, and capture again"
    return (
        f"{words}; a chart left in the light, and a stop, dirt or a fault in the unit {UNDECIDED}: a flat of a unit "
        "known to be good, in the same place, would settle it"
    )


def _roughness(cells: _Cells) -> float:
    """Return by which share of the light half of all cells depart from the mean of their neighbours at least."""
    light = cells.light
    if min(light.shape) < LEAST_CELLS:
        return 0.0
    around = (light[1:-1, :-2] + light[1:-1, 2:] + light[:-2, 1:-1] + light[2:, 1:-1]) / 4
    typical = float(np.median(np.abs(light[1:-1, 1:-1] - around)))
    return typical / float(light.mean()) if typical > 2 * cells.noise else 0.0  # noise makes 0.75 of it


@dataclass(frozen=True)
class _Edge:
    step: float
    """Share of the light that the darker side lacks."""
    slanted: bool
    """It is a straight line, and lies along neither rows nor columns."""


def _edges(cells: _Cells) -> Sequence[_Edge]:
    """Return edges that go on over half of the field: across them the light differs, on each side it does not.

    Shading, however steep, differs as much on both sides of a place as across it; what is small or thin has the same
    light on both sides.
    """
    light = cells.light
    if min(light.shape) < LEAST_CELLS or light.max() <= 0:
        return ()
    marked, across = np.zeros(light.shape, bool), np.zeros(light.shape)
    floor = 0.05 * float(np.quantile(light, 0.9))  # what is darker counts as this dark: it may have no light at all
    for axis in (0, 1):
        turned = np.moveaxis(light, axis, 0)
        step = np.abs(turned[3:-1] - turned[1:-3])
        beside = np.maximum(np.abs(turned[1:-3] - turned[:-4]), np.abs(turned[4:] - turned[3:-1]))
        brighter = np.maximum(np.maximum(turned[3:-1], turned[1:-3]), floor)
        share = (step - 2 * beside) / brighter
        told = (share > STEP) & (step - 2 * beside > 8 * cells.noise)
        np.moveaxis(marked, axis, 0)[2:-2] |= told
        far = np.abs(turned[4:] - turned[:-4]) / np.maximum(np.maximum(turned[4:], turned[:-4]), floor)
        np.moveaxis(across, axis, 0)[2:-2] = np.maximum(np.moveaxis(across, axis, 0)[2:-2], far * told)
    names, count = ndimage.label(marked, np.ones((3, 3)))
    found = []
    for number in range(1, count + 1):
        y, x = np.nonzero(names == number)
        if max(np.ptp(y) + 1 - light.shape[0] / 2, np.ptp(x) + 1 - light.shape[1] / 2) >= 0:
            found.append(_Edge(float(np.median(across[y, x])), _slanted(y, x)))
    return found


def _slanted(y: NDArray[np.intp], x: NDArray[np.intp]) -> bool:
    """Tell whether cells lie on one straight line that goes over more than two rows and two columns."""
    points = np.stack([y - y.mean(), x - x.mean()])
    spread = np.linalg.eigvalsh(points @ points.T / points.shape[1])
    return bool(min(np.ptp(y), np.ptp(x)) > 2 and spread[0] < 1.0)
