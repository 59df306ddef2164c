"""A slanted edge in every region: finds it, moves the region onto it, or says why there is none."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from math import cos, degrees, sin

import numpy as np

from runner.capture.frame import Box, Frame, Signal, linearise
from runner.errors import MeasurementRefused
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.edge_search import (
    LEAST_MODULATION,
    EdgeTrace,
    confirm_edge,
    level_range,
    trace_edge,
    without_specks,
)
from runner.measure.options import number, reader
from runner.spec.model import Camera, Region

NAME = "slanted edge"
TITLE = "Slanted edge"
GROUP = "transfer function"
OFFERS = frozenset({"edge"})
METHODS = ("edge response",)
REFERENCES = ("ISO 12233:2014 6.2 (slanted edge)", "J. Bigün and G. H. Granlund, ICCV 1987 (structure tensor)")

DARKEST = 0.01
"""A bright side below 1 % of the range over black is a dark picture."""
BRIGHTEST = 0.99
"""A dark side above 99 % of the range is a white picture."""
LEAST_ANGLE = 2.0
"""Degrees from the nearest axis: below, the edge passes fewer than two pixels on 60 px of its length."""
LARGEST_REST = 0.25
"""The edge may stay off the region's centre by that share of the region's extent along its normal."""
MOST_SEARCH = 200.0
"""px; further away the edge is another one."""
SMALLEST = 16
"""A region needs that many px each way to show two plateaus and an edge."""


@dataclass(frozen=True)
class Options:
    """How far the edge may lie from where the spec says."""

    search: float | str = field(
        default=10.0, metadata={"sentence": "How far a region may move to follow its edge, px."}
    )

    def __post_init__(self) -> None:
        """Turn a length with its unit into px and keep it inside its meaning."""
        object.__setattr__(self, "search", number("search", self.search, "px", 0.0, MOST_SEARCH))


read_options = reader(Options)


def locate(
    frames: Sequence[Frame], regions: Sequence[Region], camera: Camera, options: Options
) -> Sequence[Found | NotFound]:
    """Find the edge of every region in the capture's first frame, in order; colours come as one grey picture.

    A region moves by whole pixels along the edge's normal, never further than the search distance, so that the edge
    passes through its centre.
    """
    frame = frames[0]
    found: list[Found | NotFound] = []
    for region in regions:
        rows, columns = frame.shape
        (x, y), (w, h) = region.centre_px(columns, rows), region.size_px(columns, rows)
        x0, y0 = round(x - w / 2), round(y - h / 2)
        box = Box(x0, y0, x0 + w, y0 + h)
        if not box.inside(columns, rows):
            sentence = (
                f"it reaches from column {box.x0}, row {box.y0} to column {box.x1}, row {box.y1} of a frame of "
                f"{columns} × {rows} px"
            )
            found.append(NotFound(region.name, _clipped(box, columns, rows), "off the frame", sentence))
            continue
        try:
            found.append(_locate_one(frame, region.name, box, camera, int(options.search)))
        except MeasurementRefused as refused:
            found.append(NotFound(region.name, box, refused.cause, refused.found))
    return found


def _clipped(box: Box, columns: int, rows: int) -> Box | None:
    x0, y0, x1, y1 = max(box.x0, 0), max(box.y0, 0), min(box.x1, columns), min(box.y1, rows)
    return Box(x0, y0, x1, y1) if x0 < x1 and y0 < y1 else None


def _locate_one(frame: Frame, name: str, box: Box, camera: Camera, search: int) -> Found:
    rows, columns = frame.shape
    if min(box.x1 - box.x0, box.y1 - box.y0) < SMALLEST:
        size = f"{box.x1 - box.x0} × {box.y1 - box.y0} px"
        raise MeasurementRefused("no edge", f"the region of {size} is too small; an edge needs {SMALLEST} px each way")
    wide = Box(
        max(box.x0 - search, 0), max(box.y0 - search, 0), min(box.x1 + search, columns), min(box.y1 + search, rows)
    )
    signal = without_specks(linearise(frame.codes[wide.y0 : wide.y1, wide.x0 : wide.x1], camera))
    inner = signal[box.y0 - wide.y0 : box.y1 - wide.y0, box.x0 - wide.x0 : box.x1 - wide.x0]
    _refuse_level(frame, inner)
    trace = trace_edge(signal, search)
    centre = (box.x0 + box.x1 - wide.x0 - wide.x1) / 2, (box.y0 + box.y1 - wide.y0 - wide.y1) / 2
    trace = trace.moved(*centre)
    dx, dy = _shift(trace, box, search, columns, rows)
    trace = trace.moved(dx, dy)
    box = Box(box.x0 + dx, box.y0 + dy, box.x1 + dx, box.y1 + dy)
    confirm_edge(signal[box.y0 - wide.y0 : box.y1 - wide.y0, box.x0 - wide.x0 : box.x1 - wide.x0], trace)
    _refuse_place(trace, box, search)
    ends = trace.ends((box.y1 - box.y0, box.x1 - box.x0)) or ()
    geometry = {
        "edge_angle": degrees(trace.angle),
        "edge_direction": degrees(trace.normal),
        "edge_offset": trace.offset,
    }
    outline = tuple((box.x0 + float(px), box.y0 + float(py)) for px, py in ends)
    return Found(name, box, OFFERS, geometry, outline)


def _refuse_level(frame: Frame, signal: Signal) -> None:
    """Refuse pictures without any content, before an edge is looked for."""
    low, high = level_range(signal)
    constant = bool(signal.min() == signal.max())
    if low > BRIGHTEST:
        sentence = f"the darkest part lies at {100 * low:.1f} % of the range; it must stay below {100 * BRIGHTEST:g} %"
        raise MeasurementRefused("too bright", sentence)
    if constant and frame.codes.min() == frame.codes.max():
        raise MeasurementRefused("no picture", f"every pixel of the frame has the code {frame.codes.flat[0]}")
    if high < DARKEST:
        sentence = (
            f"the brightest part reaches {100 * high:.2f} % of the range over black; {100 * DARKEST:g} % is needed"
        )
        raise MeasurementRefused("too dark", sentence)
    modulation = (high - low) / (high + low)
    if modulation < LEAST_MODULATION:
        raise MeasurementRefused(
            "no modulation",
            f"the levels of the region, {100 * low:.1f} to {100 * high:.1f} % of the range, differ by a modulation of "
            f"{100 * modulation:.1f} %; {100 * LEAST_MODULATION:g} % is needed",
        )


def _shift(trace: EdgeTrace, box: Box, search: int, columns: int, rows: int) -> tuple[int, int]:
    """Return the whole-pixel move along the normal that brings the edge to the centre, inside search and frame."""
    length = float(np.clip(trace.offset, -search, search))
    dx, dy = int(length * cos(trace.normal)), int(length * sin(trace.normal))
    if abs(trace.offset) <= search:
        dx, dy = round(length * cos(trace.normal)), round(length * sin(trace.normal))
    return int(np.clip(dx, -box.x0, columns - box.x1)), int(np.clip(dy, -box.y0, rows - box.y1))


def _refuse_place(trace: EdgeTrace, box: Box, search: int) -> None:
    c, s = abs(cos(trace.normal)), abs(sin(trace.normal))
    extent = min((box.x1 - box.x0) / max(c, 1e-9), (box.y1 - box.y0) / max(s, 1e-9))
    if abs(trace.offset) > LARGEST_REST * extent:
        raise MeasurementRefused(
            "no edge",
            f"the edge stays {abs(trace.offset):.0f} px from the region's centre after a search of {search} px; "
            f"at most {LARGEST_REST * extent:.0f} px is allowed",
        )
    angle = degrees(trace.angle)
    if angle + 2 * degrees(trace.u_angle) < LEAST_ANGLE:
        raise MeasurementRefused(
            "edge too near an axis",
            f"the edge lies {angle:.2f}° from the nearest axis of the pixel grid; {LEAST_ANGLE:g}° is needed",
        )
