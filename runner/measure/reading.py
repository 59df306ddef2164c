"""What a measurement yields: readings with their uncertainty, curves, or the reason why there is none."""

from collections.abc import Mapping
from dataclasses import dataclass, field

from runner.spec.model import Amount

CAUSES: Mapping[str, str] = {
    "clipped": "pixels of the region lie at the white or black end of the range",
    "too dark": "the level does not rise above the dark level",
    "too bright": "the level reaches the white level",
    "no modulation": "the region has no two levels that differ enough",
    "no edge": "no edge was found in the region",
    "two edges": "more than one edge crosses the region",
    "edge not straight": "the edge departs from the fitted curve by more than its order allows",
    "edge too near an axis": "the edge crosses too few rows or columns for sub-pixel sampling",
    "too few crossings": "the edge is too short in the region",
    "off the frame": "the region does not lie wholly in the frame",
    "outside the estimator's limits": "the estimator's own limits of use exclude the region",
    "undersampled": "the sampling of this edge direction leaves the quantity undetermined",
    "no picture": "the frame holds one single value or no noise at all",
    "uneven": "illumination varies too much over the region",
    "too noisy": "the noise is too large against the step",
    "missing companion": "a companion capture is missing or unusable",
    "too few frames": "the capture holds fewer frames than the quantity needs",
    "another scene": "the region holds something else than the target",
    "not defined": "the quantity does not exist for this region's curve",
    "fault": "the program failed",
}
"""Words for why a region gave no value; the judge turns them into blame."""


@dataclass(frozen=True)
class Component:
    """One named part of a standard uncertainty, in the reading's unit."""

    name: str
    """What it comes from: `noise`, `method bias`, `shading`, a declared name."""
    u: float
    """Standard uncertainty."""
    type: str
    """`A` (from the data) or `B` (from anything else), JCGM 100:2008 4.2, 4.3."""
    dof: float | None = None
    """Degrees of freedom; None is infinite."""
    shared: str | None = None
    """What it has in common with other readings; readings with the same word move together."""
    averages: bool = False
    """Falls as 1/√n over repeated frames."""


@dataclass(frozen=True)
class Refusal:
    """Why there is no value."""

    cause: str
    """A word of `CAUSES`."""
    because: str
    """One plain sentence with figures."""


@dataclass(frozen=True)
class Reading:
    """A measured value with its uncertainty, or the reason why there is none."""

    region: str
    """Region's name; empty for the whole capture."""
    quantity: str
    """Quantity name."""
    measured_in: str
    """Unit of value and u."""
    value: float | None
    """The value; None when not measured or only bounded."""
    u: float | None
    """Combined standard uncertainty; None with the value."""
    components: tuple[Component, ...] = ()
    """Parts of u."""
    parameters: Mapping[str, Amount] = field(default_factory=dict)
    """What it was taken at, as asked."""
    part: str = "system"
    """`system` or `lens`."""
    estimator: str = ""
    """Name of the estimator."""
    method: str = ""
    """Standard or publication, with edition."""
    channel: str = "mono"
    """Colour channel."""
    capture: str = ""
    """Capture; filled by the session."""
    attempt: int = 1
    """Attempt; filled by the session."""
    bound: tuple[str, float] | None = None
    """Censored: (`above`, x) or (`below`, x) in place of a value."""
    refusal: Refusal | None = None
    """Why there is no value."""
    count: bool = False
    """A count: judged by simple acceptance or an exact bound, never by a normal u."""
    trials: int | None = None
    """For counts out of a number: that number."""
    flags: tuple[str, ...] = ()
    """Remarks, one plain phrase each."""

    @property
    def label(self) -> str:
        """Quantity with its parameters, e.g. `mtf at 0.25 cy/px`."""
        return label(self.quantity, self.parameters, self.part)


@dataclass(frozen=True)
class Curve:
    """A measured curve, rounded only for storage."""

    region: str
    """Region's name."""
    name: str
    """`mtf`, `edge spread`, `residual`, `line spread` …"""
    x: tuple[float, ...]
    """Abscissae."""
    y: tuple[float, ...]
    """Ordinates."""
    u: tuple[float, ...]
    """Standard uncertainties of y; empty when not stated."""
    x_in: str
    """Unit of x."""
    y_in: str
    """Unit of y."""
    capture: str = ""
    """Capture; filled by the session."""
    attempt: int = 1
    """Attempt; filled by the session."""
    channel: str = "mono"
    """Colour channel."""
    estimator: str = ""
    """Name of the estimator."""


@dataclass(frozen=True)
class Map:
    """A quantity over an area, drawn by the report: shading over the frame, a spectrum over frequencies."""

    region: str
    """Region's name; empty for the whole frame."""
    name: str
    """`spectrum`, `shading` …"""
    x: tuple[float, ...]
    """Positions of the columns."""
    y: tuple[float, ...]
    """Positions of the rows."""
    values: tuple[tuple[float, ...], ...]
    """Rows × columns."""
    axes_in: str
    """Unit of x and y."""
    values_in: str
    """Unit of the values."""
    marks: tuple[tuple[float, float, str], ...] = ()
    """x, y and words of what is marked."""
    capture: str = ""
    """Capture; filled by the session."""
    attempt: int = 1
    """Attempt; filled by the session."""
    channel: str = "mono"
    """Colour channel."""


@dataclass(frozen=True)
class Spot:
    """One thing at a place in the frame: a defective pixel, a cluster, a blemish."""

    region: str
    """Region's name; empty for the whole frame."""
    kind: str
    """`hot pixel`, `dead pixel`, `cluster` …"""
    x: float
    """Column, px of the frame; the centre of an extended one."""
    y: float
    """Row, px of the frame."""
    words: str
    """How far it departs, with figures."""
    capture: str = ""
    """Capture; filled by the session."""
    attempt: int = 1
    """Attempt; filled by the session."""
    channel: str = "mono"
    """Colour channel."""


def label(quantity: str, parameters: Mapping[str, Amount], part: str = "system") -> str:
    """Return a quantity's name in words, with what it is taken at and of which part."""
    words = quantity.replace("_", " ")
    for amount in parameters.values():
        words += f" at {amount.value:g}" + ("" if amount.unit == "1" else f" {amount.unit}")
    return words if part == "system" else f"{words}, {part} alone"
