"""Reads the station file: the place of the test, its instruments and charts, and what they add to the uncertainty."""

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Annotated, Any, ClassVar

from pydantic import Field

from runner.errors import UsageError
from runner.spec import leaves
from runner.spec.build import build_component
from runner.spec.chart_shapes import day
from runner.spec.model import Station
from runner.spec.revision import digest
from runner.spec.shape import Found, Shape
from runner.spec.shapes import VERSION, ComponentShape
from runner.spec.tree import Complaints, Place, from_plain, read_tree


class InstrumentShape(Shape):
    """An instrument or chart of the station."""

    WORDS: ClassVar[str] = "instrument"
    REQUIRED: ClassVar[tuple[str, ...]] = ("name", "serial")
    name: leaves.TextLeaf
    """What it is."""
    serial: leaves.TextLeaf
    """Its serial."""
    due: leaves.TextLeaf | None = None
    """Day on which its calibration is due."""

    def check(self) -> Iterator[Found]:
        """A due date is a day."""
        yield from day("due", self.due)


class StationShape(Shape):
    """A station file."""

    WORDS: ClassVar[str] = "the station file"
    KEPT: ClassVar[bool] = True
    REQUIRED: ClassVar[tuple[str, ...]] = ("probatum-station", "name")
    version: Annotated[int, *leaves.whole_number(VERSION, VERSION)] | None = Field(
        default=None, alias="probatum-station"
    )
    """Version of the format: 1."""
    name: leaves.TextLeaf | None = None
    """Name of the station."""
    place: leaves.TextLeaf | None = None
    """Where it stands."""
    instruments: list[InstrumentShape | None] | None = None
    """Instruments and charts."""
    uncertainty: list[ComponentShape | None] | None = None
    """Declared standard-uncertainty components."""


def read_station(path: Path) -> Station:
    """Read a station file strictly.

    Raises:
        SpecError: With every complaint at once.
    """
    complaints = Complaints()
    label = path.as_posix()
    try:
        tree = read_tree(path, label, complaints)
    except UsageError as error:
        complaints.error(Place(label, 0, 0), error.found, error.allowed, error.next_step)
        tree = None
    shape: StationShape | None = StationShape.model_validate(tree, context=complaints) if tree is not None else None
    complaints.raise_errors()
    return station_of(shape)


def station_of(shape: "StationShape | None") -> Station:
    """Return the record of a shape that has no complaints."""
    if shape is None:
        return Station()
    raw = shape.model_dump(mode="json", by_alias=True, exclude_unset=True)
    instruments = tuple(one.model_dump(exclude_unset=True) for one in shape.instruments or () if one is not None)
    declared = tuple(build_component(one) for one in shape.uncertainty or () if one is not None)
    return Station(shape.name or "", shape.place or "", instruments, declared, raw, digest(raw))


def from_raw(raw: Mapping[str, Any]) -> Station:
    """Rebuild a station from `Station.raw`, e.g. out of results.json.

    Raises:
        SpecError: The data are no station file.
    """
    if not raw:
        return Station()
    complaints = Complaints()
    shape: StationShape | None = StationShape.model_validate(from_plain(raw, "the station's data"), context=complaints)
    complaints.raise_errors()
    return station_of(shape)
