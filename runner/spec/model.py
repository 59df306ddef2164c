"""The resolved test spec: every record that the later layers read. Frozen; units resolved; regions expanded."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from runner.spec.chart_model import ChartFile, View
from runner.spec.files import Layout, Sidecar

SIMPLE_ACCEPTANCE = "simple acceptance"
GUARDED_ACCEPTANCE = "guarded acceptance"
GUARDED_REJECTION = "guarded rejection"
PROOF_EITHER_WAY = "proof either way"
RULES = (SIMPLE_ACCEPTANCE, GUARDED_ACCEPTANCE, GUARDED_REJECTION, PROOF_EITHER_WAY)
"""Decision rules (JCGM 106:2012, ISO 14253-1:2017, ILAC-G8:09/2019)."""

COMBINATIONS = ("worst", "range", "mean", "ratio")


@dataclass(frozen=True)
class Amount:
    """A number with its unit, as asked."""

    value: float
    """The number."""
    unit: str
    """The unit's canonical symbol (see `spec.units`); `1` for a plain ratio."""


@dataclass(frozen=True)
class Document:
    """The document that asks."""

    number: str
    """Document number."""
    revision: str
    """Revision."""
    title: str = ""
    """Title."""
    issuer: str = ""
    """Who issues the report: name, address."""
    customer: str = ""
    """For whom."""
    authorised_by: str = ""
    """Who authorises the report."""


@dataclass(frozen=True)
class UnitRule:
    """What a unit is."""

    product: str
    """Kind of device."""
    serial: str
    """Regular expression that a whole serial matches."""


@dataclass(frozen=True)
class Tone:
    """How stored codes follow light; undone before measuring."""

    kind: str = "linear"
    """`linear`, `srgb` (IEC 61966-2-1), `gamma` or `table`."""
    gamma: float | None = None
    """Exponent: code fraction = light ** (1/gamma)."""
    table: tuple[tuple[float, float], ...] = ()
    """Pairs (code fraction, light fraction) between black and white level, both rising from 0 to 1."""


@dataclass(frozen=True)
class Camera:
    """The camera's data as delivered."""

    width: int
    """Columns of a frame, px."""
    height: int
    """Rows of a frame, px."""
    bit_depth: int
    """The sensor's, not the container's."""
    black_level: float
    """DN without light."""
    white_level: float
    """DN at which the signal clips."""
    mosaic: str = "none"
    """`none`, or the colour filter order."""
    colour: str = "mono"
    """`mono` or `rgb`."""
    pixel_pitch_um: float | None = None
    """Pixel pitch on the sensor, µm."""
    fill: float = 1.0
    """Fraction of the pixel's area that collects light; its linear side is the square root."""
    tone: Tone = field(default_factory=Tone)
    """Tone curve of the delivered codes."""
    processing: tuple[str, ...] = ()
    """Processing that the product applies, e.g. `sharpened`; empty for none."""
    delivers: str = "raw"
    """`raw` or `jpeg`: JPEG frames are refused unless the product delivers them."""
    layout: Layout = field(default_factory=Layout)
    """How files hold their pixels, as far as they do not say so themselves."""

    @property
    def channels(self) -> tuple[str, ...]:
        """Names of the colour channels; `mono` for a camera without colour."""
        return ("mono",) if self.mosaic == "none" and self.colour == "mono" else ("red", "green", "blue")

    def __post_init__(self) -> None:
        """Keep the pixel's fill inside its meaning."""
        if not 0 < self.fill <= 1:
            msg = "fill must lie in (0, 1]"
            raise ValueError(msg)


@dataclass(frozen=True)
class Optics:
    """The optics in front of the sensor; what is None was not stated."""

    f_number: float | None = None
    """Working f-number."""
    wavelength_um: float | None = None
    """Mean wavelength, µm."""
    focal_length_mm: float | None = None
    """Focal length, mm."""
    numerical_aperture: float | None = None
    """Object-side numerical aperture."""
    magnification: float | None = None
    """Image size over object size."""
    immersion: float | None = None
    """Refractive index of the immersion medium."""


@dataclass(frozen=True)
class Region:
    """One region of a frame."""

    name: str
    """Unique in its capture; members of a group carry their own names."""
    position: tuple[Amount, Amount]
    """Centre, x to the right then y down, in % of the frame or px; outer borders are 0 % and 100 %.

    With `on` chart in mm from the chart's centre, until it has been placed in a frame.
    """
    size: tuple[Amount, Amount]
    """Width and height, in % or px, or mm."""
    group: str | None = None
    """The group it was written in."""
    on: str = "frame"
    """`frame` or `chart`."""
    feature: str = ""
    """The chart's feature that it is."""

    def centre_px(self, width: int, height: int) -> tuple[float, float]:
        """Return the centre (x, y) in px from the frame's outer upper left corner; pixel centres lie at +0.5."""
        return _px(self.position[0], width), _px(self.position[1], height)

    def size_px(self, width: int, height: int) -> tuple[int, int]:
        """Return width and height in whole px."""
        return round(_px(self.size[0], width)), round(_px(self.size[1], height))


def _px(length: Amount, whole: int) -> float:
    if length.unit not in {"%", "px"}:
        msg = f"{length.value:g} {length.unit} on the chart is no place in a frame before the chart was found"
        raise ValueError(msg)
    return length.value * whole / 100 if length.unit == "%" else length.value


@dataclass(frozen=True)
class FramePattern:
    """Which files are frames of a capture."""

    names: str
    """Pattern relative to the unit's (or attempt's) folder: `*` and named parts in braces (`a-{repeat}.tif`)."""
    count: int | None = None
    """How many there must be; None accepts any number from one."""


@dataclass(frozen=True)
class UncertaintyComponent:
    """A declared standard-uncertainty component, from the spec or the station file."""

    name: str
    """What it stands for, e.g. `chart`."""
    of: tuple[str, ...]
    """Quantities it adds to."""
    relative: float | None = None
    """Standard uncertainty as a fraction of the value."""
    absolute: Amount | None = None
    """Or absolute, in the quantity's unit or one that converts."""
    shared: str | None = None
    """Names what several readings have in common; such parts cancel or add in ranges and ratios."""


@dataclass(frozen=True)
class Chart:
    """The physical piece of the target, as far as a capture states it."""

    name: str = ""
    """Name of the chart."""
    serial: str = ""
    """Its serial."""
    due: str = ""
    """Calibration due date, ISO 8601."""
    transfer: tuple[tuple[float, float], ...] = ()
    """The chart's own transfer function in the image: (cy/px, modulation), rising; empty is 1."""
    transfer_u: float = 0.0
    """Standard uncertainty of those modulations."""
    file: ChartFile | None = None
    """Its file; name, serial and due day are the file's then."""
    view: View = field(default_factory=View)
    """How it must lie in a frame, with the file's own demands where the spec has none."""


@dataclass(frozen=True)
class Bound:
    """An inequality on a quantity of the capture itself (`usable_if`)."""

    quantity: str
    """Quantity."""
    at_least: float | None
    """Lower bound in `unit`."""
    at_most: float | None
    """Upper bound in `unit`."""
    unit: str
    """Unit of the bounds."""


@dataclass(frozen=True)
class Limit:
    """One numbered requirement on one quantity."""

    characteristic: str
    """Its number, as text."""
    capture: str
    """Name of the capture."""
    quantity: str
    """Quantity as named by a method, e.g. `mtf`, `mtf50`."""
    parameters: Mapping[str, Amount]
    """What the quantity is taken at, e.g. `frequency`, as asked."""
    where: tuple[str, ...]
    """Names of the regions; empty for a quantity of the whole capture."""
    where_label: str
    """The words of the spec: a region's or a group's name."""
    unit: str
    """Unit of the limits and of the check's value; empty for a value that is only reported, in its own unit."""
    at_least: float | None
    """Lower limit, or None."""
    at_most: float | None
    """Upper limit, or None."""
    rule: str
    """Decision rule, one of `RULES`."""
    conformance_probability: float
    """In (0.5, 1)."""
    combine: str | None = None
    """None: every region is checked by itself; else one of `COMBINATIONS` over the regions."""
    against: tuple[str, ...] = ()
    """For `ratio`: the regions whose mean is the denominator."""
    against_label: str = ""
    """The words of the spec for `against`."""
    nominal: float | None = None
    """Nominal value as written, if the limits were given as nominal with tolerance."""
    channel: str | None = None
    """Colour channel, or None for the only one."""
    part: str = "system"
    """`system`, or `lens` with the pixel aperture and the chart's own transfer function divided out."""
    method: str | None = None
    """Method that must yield it, or None where only one does."""
    estimator: str | None = None
    """Estimator asked for by this limit, or None for the capture's."""
    beyond_nyquist: bool = False
    """A frequency above 0.5 cy/px is meant."""
    report_only: bool = False
    """Reported with its uncertainty, never judged."""
    count_bound: str | None = None
    """For counts: `binomial` or `poisson` exact bound in place of simple acceptance."""


@dataclass(frozen=True)
class Capture:
    """A step of the test: the frames of one target under one condition."""

    name: str
    """Name in the spec."""
    target: str
    """Kind of scene, a name on the targets' shelf."""
    frames: FramePattern | None
    """Files; None when `same_frames_as` names another capture."""
    same_frames_as: str | None
    """Capture whose frames are used."""
    uses: Mapping[str, str]
    """Companion captures by role, e.g. `dark`, `flat`."""
    camera: Camera
    """The camera, with this capture's overrides."""
    optics: Optics
    """The optics, with this capture's overrides."""
    chart: Chart
    """The physical chart."""
    regions: tuple[Region, ...]
    """Regions in the order of the spec."""
    measure: Mapping[str, Mapping[str, Any]]
    """Options by method name, as asked (checked by `measure.plan` against the method's own record)."""
    target_options: Mapping[str, Any]
    """Options of the target, as asked."""
    usable_if: tuple[Bound, ...]
    """What makes the capture usable, judged before the limits."""
    limits: tuple[Limit, ...]
    """Requirements."""
    sidecar: Sidecar = field(default_factory=Sidecar)
    """What the sidecars of its frames must say."""


@dataclass(frozen=True)
class Spec:
    """A whole test spec, resolved."""

    document: Document
    """Who asks."""
    unit: UnitRule
    """What a unit is."""
    camera: Camera
    """The camera."""
    optics: Optics
    """The optics."""
    captures: tuple[Capture, ...]
    """Steps in the order of the spec."""
    uncertainty: tuple[UncertaintyComponent, ...]
    """Declared components of the spec (the station's are added by `with_station`)."""
    expanded: Mapping[str, Any]
    """The expanded form as asked: plain JSON data after include and override, nothing filled in."""
    digest: str
    """`sha256:…` of `expanded` as canonical JSON."""
    source: str = ""
    """File it was read from, for messages."""
    warnings: tuple[Any, ...] = ()
    """Complaints of severity `warning`."""
    places: Mapping[str, str] = field(default_factory=dict, compare=False)
    """`file:line:col` of what stands in the file, by words such as `captures, chart, limit 1`."""

    def place(self, words: str) -> str:
        """Return `file:line:col` of `captures, chart, limit 1` and the like, or the words with the file's name."""
        words = words.removeprefix(f"{self.source}: ")
        return self.places.get(words) or (f"{self.source}: {words}" if self.source else words)

    def capture(self, name: str) -> Capture:
        """Return the capture of that name.

        Raises:
            KeyError: There is none.
        """
        for capture in self.captures:
            if capture.name == name:
                return capture
        raise KeyError(name)


@dataclass(frozen=True)
class Station:
    """The place of the test: from `--station FILE`."""

    name: str = ""
    """Name of the station."""
    place: str = ""
    """Where it stands."""
    instruments: tuple[Mapping[str, str], ...] = ()
    """Instruments and charts: name, serial, due."""
    uncertainty: tuple[UncertaintyComponent, ...] = ()
    """Declared components."""
    raw: Mapping[str, Any] = field(default_factory=dict)
    """The file as plain data, for the report."""
    digest: str = ""
    """`sha256:…` of the file."""
