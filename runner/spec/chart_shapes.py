"""The shape of a chart file: which keys stand where, each with its sentence."""

import datetime as dt
from collections.abc import Iterator
from typing import Annotated, Any, ClassVar

from pydantic import Field

from runner.spec import chart_leaves, leaves
from runner.spec.leaves import choice, whole_number
from runner.spec.shape import Found, Ordered, Shape

VERSION = 1
"""Version of the format that this program reads."""
AS_DRAWN, MIRRORED = "as drawn", "mirrored"


def day(key: str, text: str | None) -> Iterator[Found]:
    """Yield a complaint where a text is no day."""
    if text is None:
        return
    try:
        dt.date.fromisoformat(text)
    except ValueError:
        yield key, f"'{text}' is no day of the calendar", "year-month-day, for example 2027-03-31", ""


class PieceShape(Shape):
    """Which piece it is."""

    WORDS: ClassVar[str] = "chart"
    REQUIRED: ClassVar[tuple[str, ...]] = ("name", "serial")
    name: leaves.TextLeaf
    """Name of the design."""
    serial: leaves.TextLeaf
    """Serial of this piece."""
    calibrated: leaves.TextLeaf | None = None
    """Day of its calibration, e.g. 2026-03-31."""
    due: leaves.TextLeaf | None = None
    """Day on which its next calibration is due; after it, captures of it are unfit."""
    uses: Annotated[int, *whole_number(0, 10_000_000)] | None = None
    """How often it was used up to now."""
    most_uses: Annotated[int, *whole_number(1, 10_000_000)] | None = None
    """How often it may be used; beyond, captures of it are unfit."""
    seen: Annotated[str, *choice(AS_DRAWN, MIRRORED)] | None = None
    """mirrored where it is seen through its glass or over a mirror; without it, as drawn."""

    def check(self) -> Iterator[Found]:
        """Days are days, in their order."""
        yield from day("calibrated", self.calibrated)
        yield from day("due", self.due)
        if self.calibrated and self.due and self.due < self.calibrated:
            yield "due", f"it is due on {self.due}, before it was calibrated on {self.calibrated}", "", "correct a day"


class GreysShape(Shape):
    """What the sheet and its marks reflect (or let through)."""

    WORDS: ClassVar[str] = "greys"
    ground: leaves.Share | None = None
    """Reflectance of the ground, e.g. 85 %."""
    ink: leaves.Share | None = None
    """Reflectance of marks and dark parts, e.g. 5 %."""


class MarksShape(Shape):
    """The round marks by which a chart is found."""

    WORDS: ClassVar[str] = "marks"
    REQUIRED: ClassVar[tuple[str, ...]] = ("diameter", "at")
    diameter: leaves.Length
    """Outer diameter, e.g. 9 mm."""
    hole: leaves.Length | None = None
    """Diameter of the hole in the middle; without it, half the outer one."""
    places: chart_leaves.Places = Field(alias="at")
    """Their centres from the chart's centre, x right then y down, e.g. [[-130 mm, -88 mm], [-61 mm, -93 mm]]."""


class FeatureShape(Shape):
    """One thing on the chart that is measured."""

    WORDS: ClassVar[str] = "feature"
    REQUIRED: ClassVar[tuple[str, ...]] = ("kind", "position", "size")
    kind: leaves.TextLeaf
    """Name of the target that finds it, e.g. slanted edge."""
    position: chart_leaves.Place
    """Its centre from the chart's centre, x right then y down."""
    size: chart_leaves.Size
    """Width and height of its box."""
    data: chart_leaves.Data | None = None
    """What it is drawn from, by the names of the target's and methods' options, e.g. {period: 2 mm}."""
    calibrated: chart_leaves.Data | None = None
    """Calibrated values under the same names, with their uncertainties; they are measured with, not drawn."""
    transfer: chart_leaves.Transfer | None = None
    """Its own transfer function: pairs such as [2 lp/mm, 0.98], lp/mm on the chart."""
    transfer_uncertainty: leaves.ShareFromZero | None = None
    """Standard uncertainty of those modulations."""

    def check(self) -> Iterator[Found]:
        """An uncertainty belongs to a table."""
        if self.transfer_uncertainty is not None and self.transfer is None:
            found = "an uncertainty is stated for a transfer table that is not there"
            yield "transfer_uncertainty", found, "", "add transfer:"


class ViewShape(Shape):
    """How a chart must lie in the frame."""

    WORDS: ClassVar[str] = "view"
    scale: leaves.InequalityLeaf | None = None
    """px of the frame to a mm of the chart, e.g. at least 4 px/mm."""
    keystone: leaves.InequalityLeaf | None = None
    """Largest scale on the chart over the smallest, less one, e.g. at most 3 %."""
    tilt: leaves.InequalityLeaf | None = None
    """Between the chart's normal and the optical axis, e.g. at most 5 deg; needs focal_length and pixel_pitch."""
    turned: Annotated[Any, *leaves.amount("deg", example="180 deg")] | None = None
    """How the chart lies in the frame, clockwise; without it, upright. 45 deg either way are let pass."""

    def check(self) -> Iterator[Found]:
        """Each bound has its unit and its side."""
        for key, units, example in (
            ("scale", ("px/mm",), "at least 4 px/mm"),
            ("keystone", ("%", "1"), "at most 3 %"),
            ("tilt", ("deg",), "at most 5 deg"),
        ):
            one = getattr(self, key)
            if one is None:
                continue
            ends = [end for end in (one.at_least, one.at_most) if end is not None]
            if any(end.unit not in units or end.value <= 0 for end in ends):
                yield key, f"{key} is given in {ends[0].unit}", f"for example {example}", ""
            elif key != "scale" and one.at_least is not None:
                yield key, f"a lower bound of the {key} has no meaning", f"for example {example}", ""


class ChartFileShape(Shape):
    """A chart file."""

    WORDS: ClassVar[str] = "the chart file"
    KEPT: ClassVar[bool] = True
    REQUIRED: ClassVar[tuple[str, ...]] = ("probatum-chart", "chart", "size", "marks", "features")
    version: Annotated[int, *whole_number(VERSION, VERSION)] | None = Field(default=None, alias="probatum-chart")
    """Version of the format: 1."""
    chart: PieceShape | None = None
    """Which piece it is."""
    size: chart_leaves.Size | None = None
    """Width and height of the sheet, e.g. [297 mm, 210 mm]."""
    greys: GreysShape | None = None
    """What the sheet and its marks reflect; without it, 85 % and 5 %."""
    marks: MarksShape | None = None
    """The round marks by which it is found."""
    view: ViewShape | None = None
    """How it must lie in a frame, unless the spec says otherwise."""
    features: Ordered[FeatureShape | None] | None = None
    """What it carries, by name."""
