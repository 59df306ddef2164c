"""Everything that was found out about one unit before anyone judges it."""

from dataclasses import dataclass, field

from runner.capture.station import StationWords
from runner.measure.reading import Curve, Map, Reading, Spot


@dataclass(frozen=True)
class FrameFact:
    """One file as it went into the measurement."""

    file: str
    """Path relative to the attempt's folder."""
    sha256: str
    """Digest of its bytes."""
    shape: tuple[int, ...]
    """Rows, columns."""
    dtype: str
    """Number type as stored."""
    page: int | None = None
    """Page of a multi-page file."""
    simulated: bool = False
    """Marked as a rehearsed frame."""


@dataclass(frozen=True)
class RegionFact:
    """One region as it was found, for pictures and for the page."""

    region: str
    """Region's name."""
    found: bool
    """The target offered it."""
    box: tuple[int, int, int, int] | None
    """x0, y0, x1, y1 in px."""
    outline: tuple[tuple[float, float], ...] = ()
    """What was found in it, (x, y) px."""


@dataclass(frozen=True)
class CaptureEvidence:
    """One capture of one attempt."""

    name: str
    """Capture."""
    attempt: int
    """Attempt, from 1."""
    target: str
    """Kind of scene."""
    frames: tuple[FrameFact, ...]
    """Frames measured."""
    faults: tuple[str, ...] = ()
    """Sentences of refused, missing, repeated or foreign files; any of them makes the capture unusable."""
    regions: tuple[RegionFact, ...] = ()
    """Regions as found in the first frame."""


@dataclass(frozen=True)
class UnitEvidence:
    """One unit's captures and all that was measured, over all attempts."""

    serial: str
    """The unit."""
    captures: tuple[CaptureEvidence, ...]
    """In the order of the spec, attempt by attempt."""
    readings: tuple[Reading, ...]
    """Sorted by capture, attempt, region, channel, quantity, parameters, part, estimator."""
    curves: tuple[Curve, ...]
    """Sorted like readings."""
    maps: tuple[Map, ...] = ()
    """Sorted like readings."""
    spots: tuple[Spot, ...] = ()
    """Sorted like readings, then by kind and place."""
    remarks: tuple[str, ...] = ()
    """What was found out about its files that changes no verdict, e.g. that completeness is only inferred."""
    marked: bool = False
    """One of its files is marked as rehearsed, though nothing of it may be measured."""
    station: StationWords = field(default_factory=StationWords)
    """What its manifests and sidecars said."""

    @property
    def simulated(self) -> bool:
        """One marked frame makes the whole unit simulated."""
        return self.marked or any(frame.simulated for capture in self.captures for frame in capture.frames)
