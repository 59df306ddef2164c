"""What a target module and a method module must offer. The module is the plug-in; nothing is inherited."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import inf
from typing import Any, ClassVar, Protocol

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Box, Crop, Frame
from runner.measure.reading import Curve, Map, Reading, Spot
from runner.spec.model import Amount, Camera, Chart, Optics, Region


@dataclass(frozen=True)
class Wanted:
    """A reading that some limit of the spec asks for."""

    quantity: str
    """Quantity name."""
    parameters: Mapping[str, Amount]
    """As asked; carried into the reading unchanged."""
    at: Mapping[str, float]
    """The same in the method's own units (frequency in cy/px, modulation as a fraction)."""
    part: str = "system"
    """`system` or `lens`."""
    estimator: str | None = None
    """Estimator asked for, or None for the option's."""


class Pose(Protocol):
    """Where the chart lies in a frame: found by its marks, lens distortion followed."""

    def to_frame(self, points: NDArray[np.float64]) -> NDArray[np.float64]:
        """Turn chart positions (n, 2), mm, x right and y down from the chart's centre, into px of the frame."""
        ...

    def to_chart(self, points: NDArray[np.float64]) -> NDArray[np.float64]:
        """Turn px of the frame (n, 2), pixel centres at +0.5, into mm on the chart."""
        ...


@dataclass(frozen=True)
class Found:
    """One region as the target found it in the frame."""

    region: str
    """Region's name."""
    box: Box
    """Where it lies after following the target."""
    offers: frozenset[str] = frozenset()
    """What the region holds: `edge`, `stripes`, `uniform` …"""
    geometry: Mapping[str, float] = field(default_factory=dict)
    """Figures that a method may start from, e.g. `edge_angle` in degrees."""
    outline: tuple[tuple[float, float], ...] = ()
    """Corners of what was found, (x, y) px, for pictures."""
    points: Mapping[str, tuple[tuple[float, float], ...]] = field(default_factory=dict)
    """Named lists of places that a method needs, (x, y) px of the frame: dots, corners of patches."""
    pose: Pose | None = None
    """Where the chart lies, if it has a chart file with marks."""


@dataclass(frozen=True)
class NotFound:
    """A region that the target could not offer."""

    region: str
    """Region's name."""
    box: Box | None
    """Where it was looked for, clipped to the frame."""
    cause: str
    """A word of `reading.CAUSES`."""
    because: str
    """One plain sentence with figures."""


@dataclass(frozen=True)
class Sample:
    """One region over one frame, with its companions by role: all that a method sees."""

    found: Found
    """The region as found."""
    crop: Crop
    """Its pixels, in one colour channel; of a mosaic only those in `crop.sites` may be used."""
    camera: Camera
    """Levels, pitch, fill."""
    optics: Optics
    """Optics as stated."""
    chart: Chart
    """The chart's own data."""
    wanted: tuple[Wanted, ...]
    """Readings that limits ask for; a method may offer more."""
    companions: Mapping[str, tuple[Crop, ...]] = field(default_factory=dict)
    """Crops of the same box and channel from companion captures by role."""
    frames: tuple[Crop, ...] = ()
    """For a method that takes a capture's frames together: all of them, `crop` first; else empty."""
    channels: Mapping[str, tuple[Crop, ...]] = field(default_factory=dict)
    """For such a method, the same frames in every colour channel by its name."""
    companion_channels: Mapping[str, Mapping[str, tuple[Crop, ...]]] = field(default_factory=dict)
    """For such a method, companion crops by role, then by colour channel."""
    lost_companions: Mapping[str, str] = field(default_factory=dict)
    """Roles whose capture gave no frames, each with the name of that capture."""


@dataclass(frozen=True)
class Step:
    """The frames of one condition along a capture's axes, e.g. one focus position."""

    axes: Mapping[str, str]
    """Axes without repeats, as the files' names say."""
    taken: Mapping[str, Amount]
    """What the sidecars of its first frame say of how it was taken."""
    samples: tuple[Sample, ...]
    """Every region found in the step's first frame, in this channel."""
    readings: tuple[Reading, ...]
    """What the capture's other methods read, in this channel, over the step's repeats."""


@dataclass(frozen=True)
class Scene:
    """A whole capture in one channel, or a group of its regions: all that a method with `GATHERS = True` sees."""

    region: str
    """Name that its readings carry: empty for all regions, or a group's name."""
    regions: tuple[str, ...]
    """Names of the regions meant, in the order of the spec; also those that were not found."""
    steps: tuple[Step, ...]
    """In the order of the capture's axes; one without axes."""
    lost: tuple[NotFound, ...]
    """Regions that the first step's target did not offer."""
    frame_size: tuple[int, int]
    """Columns, rows."""
    camera: Camera
    """Levels, pitch, fill."""
    optics: Optics
    """Optics as stated."""
    chart: Chart
    """The chart's own data."""
    wanted: tuple[Wanted, ...]
    """Readings that limits ask for."""


@dataclass(frozen=True)
class Measurement:
    """What a method yields for one sample."""

    readings: tuple[Reading, ...]
    """Readings, also those refused."""
    curves: tuple[Curve, ...] = ()
    """Curves."""
    maps: tuple[Map, ...] = ()
    """Maps."""
    spots: tuple[Spot, ...] = ()
    """Things at places."""


def joined(parts: Sequence[Measurement]) -> Measurement:
    """Put several measurements together, in their order."""
    return Measurement(
        tuple(reading for part in parts for reading in part.readings),
        tuple(curve for part in parts for curve in part.curves),
        tuple(one for part in parts for one in part.maps),
        tuple(spot for part in parts for spot in part.spots),
    )


def in_channel(measured: Measurement, channel: str) -> Measurement:
    """Say of everything in a measurement which colour channel it belongs to."""
    return Measurement(
        tuple(replace(reading, channel=channel) for reading in measured.readings),
        tuple(replace(curve, channel=channel) for curve in measured.curves),
        tuple(replace(area, channel=channel) for area in measured.maps),
        tuple(replace(spot, channel=channel) for spot in measured.spots),
    )


@dataclass(frozen=True)
class QuantityInfo:
    """What a quantity is."""

    unit: str
    """Unit in which the method yields it."""
    sentence: str
    """What it means, one sentence."""
    parameters: Mapping[str, str] = field(default_factory=dict)
    """Parameters that a limit must give, by name, with the method's own unit."""
    ceiling: bool = False
    """A transfer-function value: the optics' ceiling at the frequency can be computed."""
    least: float = -inf
    """Least value that its definition allows, in `unit`."""
    most: float = inf
    """Greatest value that its definition allows, in `unit`."""
    whole: bool = False
    """It belongs to all regions, or a group of them, together: `where` names a group or nothing."""


class OptionsRecord(Protocol):
    """A frozen dataclass: keys allowed in the spec, with defaults; `metadata['sentence']` tells each key's meaning."""

    __dataclass_fields__: ClassVar[dict[str, Any]]


class Target(Protocol):
    """A kind of scene."""

    NAME: str
    TITLE: str
    OFFERS: frozenset[str]
    METHODS: tuple[str, ...]
    """Methods that run when the spec's `measure` names none."""
    REFERENCES: tuple[str, ...]
    Options: Any

    def read_options(self, asked: Mapping[str, Any]) -> Any:
        """Turn the spec's keys into the module's `Options` record.

        Raises:
            UsageError: A key or value is not allowed.
        """
        ...

    def locate(
        self, frames: Sequence[Frame], regions: Sequence[Region], camera: Camera, options: Any
    ) -> Sequence[Found | NotFound]:
        """Find every region of the capture in its first frame; never raises for what the frame holds."""
        ...


class Method(Protocol):
    """A measurement.

    It sees one region of one frame in one colour channel; the session averages repeats. Three optional names change
    that:

    - `TOGETHER = True`: `measure` gets all frames of the capture at once, in `sample.frames`.
    - `GATHERS = True`: after all other methods `gather(scene: Scene, options) -> Measurement` is called in place of
      `measure`, once for all regions of a channel and once for every group that a limit names. It raises as `measure`
      does. Its quantities are `whole`. With `wants(options) -> Sequence[tuple[str, Mapping[str, Amount]]]` it names
      quantities, with what they are taken at, that other methods must read in every region for it.
    - `AXES = frozenset({"z"})`: with one of the two above, the axes of file patterns along which it takes frames that
      differ in more than `repeat`. In a capture with such an axis the readings of other methods are not reported; they
      only reach `gather`, step by step.
    """

    NAME: str
    TITLE: str
    NEEDS: frozenset[str]
    """What a region must offer."""
    REFERENCES: tuple[str, ...]
    Options: Any

    def read_options(self, asked: Mapping[str, Any]) -> Any:
        """Turn the spec's keys into the module's `Options` record.

        Raises:
            UsageError: A key or value is not allowed.
        """
        ...

    def quantity(self, name: str) -> QuantityInfo | None:
        """Return what a quantity name means, or None if this method does not yield it."""
        ...

    def quantities(self) -> Mapping[str, QuantityInfo]:
        """Return the quantities for listings; families such as `mtf50` by their usual members."""
        ...

    def measure(self, sample: Sample, options: Any) -> Measurement:
        """Measure one region of one frame.

        Raises:
            MeasurementRefused: The region as a whole cannot be measured; the session turns it into readings.
        """
        ...
