"""The records of a chart file: one physical piece of a target, its marks and features, all in mm from its centre."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

Point = tuple[float, float]
"""x to the right then y down from the chart's centre, as drawn, mm."""


@dataclass(frozen=True)
class Marks:
    """The round marks by which a chart is found: discs with a round hole in their middle."""

    diameter: float
    """Of the disc, mm."""
    hole: float
    """Diameter of the hole, mm."""
    at: tuple[Point, ...]
    """Their centres; an arrangement without symmetry."""


@dataclass(frozen=True)
class Feature:
    """One thing on the chart that is measured."""

    name: str
    """Name in the file."""
    kind: str
    """Name of the target that finds it, e.g. `slanted edge`."""
    position: Point
    """Its centre."""
    size: Point
    """Width and height of its box, mm."""
    data: Mapping[str, Any]
    """What it is drawn from, by the names that the target's and the methods' options have: the nominal values."""
    calibrated: Mapping[str, Any] = field(default_factory=dict)
    """Calibrated values under the same names, and their uncertainties; they go before the nominal ones."""
    transfer: tuple[tuple[float, float], ...] = ()
    """Its own transfer function: (cycles per mm on the chart, modulation), rising; empty is 1."""
    transfer_u: float = 0.0
    """Standard uncertainty of those modulations."""

    @property
    def values(self) -> dict[str, Any]:
        """Its data as they are measured with: calibrated where they are known, else nominal."""
        return {**self.data, **self.calibrated}


@dataclass(frozen=True)
class View:
    """How a chart must lie in the frame; what is None was not stated."""

    least_scale: float | None = None
    """px of the frame to a mm of the chart, anywhere on it."""
    most_scale: float | None = None
    """The same, at most."""
    most_keystone: float | None = None
    """Largest scale on the chart over the smallest, less one: what its tilt makes of it."""
    most_tilt: float | None = None
    """Degrees between the chart's normal and the optical axis; needs focal length and pixel pitch."""
    turned: float | None = None
    """Degrees by which the chart lies turned in the frame, clockwise as seen there; 45° either way are let pass."""


@dataclass(frozen=True)
class ChartFile:
    """One physical chart as its file describes it."""

    name: str
    """Name of the design."""
    serial: str
    """Serial of this piece."""
    size: Point
    """Width and height of the sheet, mm."""
    ground: float
    """Reflectance (or transmittance) of the ground, a fraction."""
    ink: float
    """The same of marks and dark parts."""
    marks: Marks
    """How it is found."""
    features: Mapping[str, Feature]
    """By name, in the order of the file."""
    view: View
    """How it must lie in a frame, unless the spec says otherwise."""
    digest: str
    """`sha256:…` of the file's plain data as canonical JSON."""
    mirrored: bool = False
    """It is seen mirrored on purpose: through its glass, or over a mirror."""
    calibrated: str = ""
    """Day of its calibration, ISO 8601."""
    due: str = ""
    """Day on which its next calibration is due, ISO 8601."""
    uses: int | None = None
    """How often it was used up to now."""
    most_uses: int | None = None
    """How often it may be used."""

    def within(self, point: Point) -> Feature | None:
        """Return the feature whose box a place lies in."""
        for one in self.features.values():
            if all(abs(p - c) <= s / 2 for p, c, s in zip(point, one.position, one.size, strict=True)):
                return one
        return None
