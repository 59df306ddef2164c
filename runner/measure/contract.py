"""What a target module and a method module must offer. The module is the plug-in; nothing is inherited."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, ClassVar, Protocol

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

    It sees one region of one frame in one colour channel; the session averages repeats. A module with
    `TOGETHER = True` gets all frames of the capture at once instead, in `sample.frames`.
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
