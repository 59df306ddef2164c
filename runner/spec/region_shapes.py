"""The shapes of regions: single ones, groups, grids, features of a chart."""

from collections.abc import Iterator
from typing import Annotated, ClassVar

from pydantic import Field

from runner.spec import leaves, position_leaves
from runner.spec.leaves import choice
from runner.spec.shape import Found, Shape
from runner.spec.units import spell


class GridShape(Shape):
    """Centres of regions in rows and columns."""

    WORDS: ClassVar[str] = "grid"
    REQUIRED: ClassVar[tuple[str, ...]] = ("columns", "rows", "from", "to")
    columns: leaves.GridCount
    """Number of columns."""
    rows: leaves.GridCount
    """Number of rows."""
    start: position_leaves.Pair = Field(alias="from")
    """Centre of the first region, row 1 column 1."""
    to: position_leaves.Pair
    """Centre of the last region."""


class RegionShape(Shape):
    """One region, a group of named ones, or a grid."""

    WORDS: ClassVar[str] = "region"
    on: Annotated[str, *choice("frame", "field", "chart")] | None = None
    """What positions refer to: frame (the default), field, or chart."""
    position: position_leaves.Position | None = None
    """Centre, x to the right then y down, in % of the frame or px, or mm on the chart; named centres make a group."""
    feature: leaves.Texts | None = None
    """In place of position: a feature of the chart file by its name; several make a group."""
    grid: GridShape | None = None
    """In place of position: regions r1c1, r1c2 … in rows and columns."""
    size: position_leaves.Size | None = None
    """Width and height, in % of the frame or px, or mm on the chart; a feature has its own."""

    def check(self) -> Iterator[Found]:
        """One of position, grid and feature; `on` says what the positions are."""
        if sum(one is not None for one in (self.position, self.grid, self.feature)) != 1:
            yield "size", "a region has either a position or a grid or a feature", "", "write one of them"
            return
        if self.size is None and self.feature is None:
            yield "size", "region lacks the key 'size'", "", "add size:"
        if self.feature is not None and self.on not in {None, "chart"}:
            yield "on", f"a feature of the chart stands under on: {self.on}", "", "leave on out"
        yield from self._units()
        points = list(self.position.values()) if isinstance(self.position, dict) else [self.position]
        in_field = [isinstance(point, position_leaves.FieldPoint) for point in points]
        if self.on == "field" and not all(in_field):
            yield "position", "on: field needs field heights", "for example {field: 0.8, azimuth: 45 deg}", ""
        if self.on == "frame" and any(in_field):
            yield "position", "a field height stands under on: frame", "", "write on: field or leave on out"
        if self.on == "chart" and any(in_field):
            yield "position", "a field height stands under on: chart", "", "give mm on the chart"

    def _units(self) -> Iterator[Found]:
        """Lengths in mm and on: chart belong together; a size may be in px there too."""
        on_chart = self.on == "chart" or self.feature is not None
        points = list(self.position.values()) if isinstance(self.position, dict) else [self.position]
        places = [one for one in points if isinstance(one, tuple)]
        places += [self.grid.start, self.grid.to] if self.grid is not None else []
        for key, pairs in (("position" if self.grid is None else "grid", places), ("size", [self.size])):
            for length in (part for pair in pairs if pair is not None for part in pair):
                if length.unit not in {"%", "px"} and not on_chart:
                    yield key, f"{spell(length)} is a length on a chart", "% of the frame, or px", "or add on: chart"
                elif on_chart and key == "size" and self.size and len({p.unit == "px" for p in self.size}) > 1:
                    yield key, "one side is in px and one in mm", "one unit for both", ""
                elif on_chart and (length.unit == "%" or (length.unit == "px" and key != "size")):
                    yield key, f"{spell(length)} is no length on the chart", "mm or µm", ""
