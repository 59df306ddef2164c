"""The shape of a spec file: which keys stand where, each with its sentence. The JSON Schema is generated from it."""

from collections.abc import Iterator
from typing import Annotated, Any, ClassVar

from pydantic import ConfigDict, Field, PlainSerializer, PlainValidator, WithJsonSchema

from runner.spec import device_leaves, leaves, limit_leaves
from runner.spec.chart_shapes import ChartFileShape, ViewShape, day
from runner.spec.file_shapes import FramesShape, LayoutShape, SidecarShape
from runner.spec.leaves import choice
from runner.spec.model import COMBINATIONS, RULES
from runner.spec.region_shapes import RegionShape
from runner.spec.shape import Found, Ordered, Shape
from runner.spec.tree import nearest

VERSION = 1
"""Version of the format that this program reads."""
ROLES = ("dark", "flat", "tone")
"""Roles that a companion capture may play."""


class DocumentShape(Shape):
    """The document that asks."""

    WORDS: ClassVar[str] = "document"
    REQUIRED: ClassVar[tuple[str, ...]] = ("number", "revision")
    number: leaves.TextLeaf
    """Document number."""
    revision: leaves.TextLeaf
    """Revision; kept as text."""
    title: leaves.TextLeaf | None = None
    """Title, for the report's head."""
    issuer: leaves.TextLeaf | None = None
    """Who issues the complaints: name, address."""
    customer: leaves.TextLeaf | None = None
    """For whom."""
    authorised_by: leaves.TextLeaf | None = None
    """Who authorises the complaints."""


class UnitShape(Shape):
    """What a unit is."""

    WORDS: ClassVar[str] = "unit"
    REQUIRED: ClassVar[tuple[str, ...]] = ("product", "serial")
    product: leaves.TextLeaf
    """Kind of device."""
    serial: device_leaves.Serial
    """Regular expression that a whole serial matches, e.g. 'WS8-[0-9]{6}'."""


class CameraPart(Shape):
    """Camera data of one capture, in place of those of the spec."""

    WORDS: ClassVar[str] = "camera"
    frame_size: device_leaves.FrameSize | None = None
    """Width x height of a frame, e.g. 1600 x 1200 px."""
    bit_depth: device_leaves.Bits | None = None
    """The sensor's, not the container's, e.g. 12 bit."""
    black_level: leaves.Level | None = None
    """Code without light, e.g. 64 DN."""
    white_level: leaves.Level | None = None
    """Code at which the signal clips, e.g. 4095 DN."""
    mosaic: Annotated[str, *choice("none", "RGGB", "GRBG", "GBRG", "BGGR")] | None = None
    """Colour filter order: the four pixels of the upper left corner, row by row; or none."""
    colour: Annotated[str, *choice("mono", "rgb")] | None = None
    """Planes of a delivered frame: mono, or rgb for three numbers a pixel."""
    pixel_pitch: leaves.Length | None = None
    """Pixel pitch on the sensor, e.g. 3.0 um."""
    fill: leaves.Share | None = None
    """Share of the pixel's area that collects light, e.g. 100 %."""
    tone: device_leaves.ToneLeaf | None = None
    """How codes follow light: linear, srgb, gamma 2.2, or {table: [[0, 0], …, [1, 1]]} of code and light fraction."""
    processing: device_leaves.Processing | None = None
    """Processing that the product applies before it delivers: none, or words of the list."""
    delivers: Annotated[str, *choice("raw", "jpeg")] | None = None
    """`jpeg` where the product delivers JPEG; else JPEG frames are refused."""
    layout: LayoutShape | None = None
    """How files hold their pixels, as far as they do not say so themselves."""


class CameraShape(CameraPart):
    """The camera's data as delivered."""

    model_config = ConfigDict(json_schema_extra={"required": ["frame_size", "bit_depth", "black_level", "white_level"]})
    REQUIRED: ClassVar[tuple[str, ...]] = ("frame_size", "bit_depth", "black_level", "white_level")


class OpticsShape(Shape):
    """The optics in front of the sensor."""

    WORDS: ClassVar[str] = "optics"
    f_number: leaves.Positive | None = None
    """Working f-number (not together with numerical_aperture)."""
    wavelength: leaves.Length | None = None
    """Mean wavelength, e.g. 550 nm."""
    focal_length: leaves.Length | None = None
    """Focal length, e.g. 4.2 mm; needed for cy/deg."""
    numerical_aperture: leaves.Positive | None = None
    """Object-side numerical aperture."""
    magnification: leaves.Positive | None = None
    """Image size over object size; needed for lengths and frequencies in the object."""
    immersion: leaves.RefractiveIndex | None = None
    """Refractive index of the immersion medium, e.g. 1.518."""


class DecisionShape(Shape):
    """How limits are decided where a limit does not say otherwise."""

    WORDS: ClassVar[str] = "decision"
    rule: Annotated[str, *choice(*RULES)] | None = None
    """Decision rule; without one, proof either way."""
    conformance_probability: leaves.Share | None = None
    """Between 50 % and 100 %; without one, 95 %."""

    def check(self) -> Iterator[Found]:
        """A probability of half or less decides nothing."""
        yield from _probability(self.conformance_probability)


def _probability(value: Any) -> Iterator[Found]:
    if value is not None and not 0.5 < leaves.share(value) < 1:
        found = f"a conformance probability of {value.value:g}{' %' if value.unit == '%' else ''} is not allowed"
        yield "conformance_probability", found, "between 50 % and 100 %, both excluded", "for example 95 %"


class ChartShape(Shape):
    """The physical chart."""

    WORDS: ClassVar[str] = "chart"
    file: Annotated[ChartFileShape | None, WithJsonSchema(leaves.TEXT_SCHEMA)] = None
    """Chart file beside the spec or below it, e.g. charts/edges-a4.yaml; its data take the place of its name."""
    view: ViewShape | None = None
    """How the chart must lie in the frame, e.g. {scale: at least 4 px/mm}, in place of what its file says."""
    name: leaves.TextLeaf | None = None
    """Name of the chart."""
    serial: leaves.TextLeaf | None = None
    """Its serial."""
    due: leaves.TextLeaf | None = None
    """Day on which its calibration is due, e.g. 2027-03-31."""
    transfer: device_leaves.Transfer | None = None
    """Its own transfer function in the image: pairs such as [0.25 cy/px, 0.98], rising in frequency."""
    transfer_uncertainty: leaves.ShareFromZero | None = None
    """Standard uncertainty of those modulations, e.g. 0.005."""

    def check(self) -> Iterator[Found]:
        """A due date is a day; an uncertainty belongs to a table."""
        yield from day("due", self.due)
        for key in ("name", "serial", "due") if self.stated("file") else ():
            if self.stated(key):
                yield key, f"the {key} stands in the chart file", "", "leave it out here"
        if self.view is not None and not self.stated("file"):
            yield "view", "how a chart lies is known by its marks only", "", "add file: with a chart file"
        if self.transfer_uncertainty is not None and self.transfer is None:
            yield (
                "transfer_uncertainty",
                "an uncertainty is stated for a transfer table that is not there",
                "",
                "add transfer:",
            )


class LimitShape(Shape):
    """One numbered requirement."""

    WORDS: ClassVar[str] = "limit"
    KEPT: ClassVar[bool] = True
    REQUIRED: ClassVar[tuple[str, ...]] = ("characteristic", "quantity")
    characteristic: leaves.TextLeaf
    """Its number on the drawing; unique with where and channel."""
    quantity: leaves.TextLeaf
    """Name of the quantity, e.g. mtf, mtf50, edge_width (see `probatum methods`)."""
    frequency: leaves.Frequency | None = None
    """Spatial frequency that the quantity is taken at, e.g. 0.25 cy/px."""
    modulation: leaves.Share | None = None
    """Modulation that the quantity is taken at, e.g. 50 %."""
    parameters: limit_leaves.At | None = None
    """What else the quantity is taken at, by the method's own names, e.g. {level: 18 %}."""
    where: leaves.Texts | None = None
    """Region, group (each of its members) or a list of them; left out for a value of the whole capture."""
    at_least: leaves.AnyAmount | None = None
    """Lower limit."""
    at_most: leaves.AnyAmount | None = None
    """Upper limit."""
    nominal: leaves.AnyAmount | None = None
    """Nominal value; needs a tolerance."""
    tolerance: leaves.Tolerance | None = None
    """Tolerance on the nominal value: one size, or [minus, plus]."""
    combine: Annotated[str, *choice(*COMBINATIONS)] | None = None
    """One value over all regions: worst, range, mean, or ratio to the mean of `against`."""
    against: leaves.Texts | None = None
    """For ratio: regions or groups whose mean is the denominator."""
    rule: Annotated[str, *choice(*RULES)] | None = None
    """Decision rule of this limit."""
    conformance_probability: leaves.Share | None = None
    """Between 50 % and 100 %."""
    method: leaves.TextLeaf | None = None
    """Method that must yield it, where several do."""
    estimator: leaves.TextLeaf | None = None
    """Estimator that must yield it, in place of the capture's."""
    part: Annotated[str, *choice("system", "lens")] | None = None
    """lens: the pixel aperture and the chart's own transfer function are divided out."""
    channel: leaves.TextLeaf | None = None
    """Colour channel, where there are several."""
    beyond_nyquist: leaves.Truth | None = None
    """true: a frequency above 0.5 cy/px is meant."""
    report_only: leaves.Truth | None = None
    """true: reported with its uncertainty, never judged."""
    measured_in: leaves.TextLeaf | None = None
    """With report_only: the unit to report in."""
    bound: Annotated[str, *choice("binomial", "poisson")] | None = None
    """For counts: judged by an exact bound in place of simple acceptance."""

    def check(self) -> Iterator[Found]:
        """A limit has one form."""
        bounded = self.at_least is not None or self.at_most is not None
        if self.report_only and (bounded or self.nominal is not None):
            yield "report_only", "a value that is only reported has no limit", "", "leave out report_only or the limit"
        if not self.report_only and not bounded and self.nominal is None:
            yield (
                "characteristic",
                f"limit {self.characteristic} has no limit",
                "at_least, at_most, nominal with tolerance, or report_only: true",
                "",
            )
        if self.nominal is not None and bounded:
            yield "nominal", "a nominal value and at_least or at_most stand together", "one of the two forms", ""
        if (self.nominal is None) != (self.tolerance is None):
            key, other = ("tolerance", "nominal") if self.nominal is None else ("nominal", "tolerance")
            yield key, f"{key} stands without {other}", "", f"add {other}:"
        if (self.combine == "ratio") != (self.against is not None):
            found = "ratio needs a denominator" if self.combine == "ratio" else "against belongs to combine: ratio"
            yield "combine" if self.combine else "against", found, "combine: ratio, against: a region or group", ""
        if self.combine is not None and self.where is None:
            yield "combine", "a combination needs regions", "", "add where:"
        if self.measured_in is not None and not self.report_only:
            yield "measured_in", "measured_in belongs to report_only", "the limit's own unit is used", "leave it out"
        yield from _probability(self.conformance_probability)


class ComponentShape(Shape):
    """A declared standard-uncertainty component."""

    WORDS: ClassVar[str] = "uncertainty component"
    REQUIRED: ClassVar[tuple[str, ...]] = ("name", "of")
    name: leaves.TextLeaf
    """What it stands for, e.g. chart."""
    of: leaves.Texts
    """Quantities it adds to."""
    relative: leaves.Share | None = None
    """Standard uncertainty as a share of the value, e.g. 0.5 %."""
    absolute: leaves.AnyPositive | None = None
    """Or in the quantity's unit."""
    shared: leaves.TextLeaf | None = None
    """Names what several readings have in common; it cancels in ranges and ratios."""

    def check(self) -> Iterator[Found]:
        """One size."""
        if (self.relative is None) == (self.absolute is None):
            yield "name", f"component '{self.name}' has either relative or absolute", "", "write one of the two"


def _read_uses(node: Any) -> dict[str, str]:
    if not isinstance(node, dict) or not node:
        leaves.refuse(f"{leaves.shown(node)} stands where companions are meant", "for example {dark: dark}")
    for role in node:
        if role not in ROLES:
            leaves.refuse(f"unknown role '{role}'", f"known are: {', '.join(ROLES)}", nearest(role, ROLES), (role,))
    return {role: leaves.read_text(name) for role, name in sorted(node.items())}


_ROLE_SCHEMA = {"type": "object", "properties": {r: {"type": "string"} for r in ROLES}, "additionalProperties": False}
Uses = Annotated[dict[str, str], PlainValidator(_read_uses), PlainSerializer(dict), WithJsonSchema(_ROLE_SCHEMA)]


class CaptureShape(Shape):
    """A step of the test: the frames of one target under one condition."""

    model_config = ConfigDict(json_schema_extra={"required": ["target"]})
    WORDS: ClassVar[str] = "capture"
    KEPT: ClassVar[bool] = True
    REQUIRED: ClassVar[tuple[str, ...]] = ("target",)
    target: device_leaves.TargetLeaf | None = None
    """Kind of scene (see `probatum targets`), or {name: {its options}}."""
    frames: FramesShape | None = None
    """Pattern of the files, or {names: …, count: …}."""
    sidecar: SidecarShape | None = None
    """What the sidecars of its frames must say, e.g. {require: serial, exposure: 2 ms}."""
    same_frames_as: leaves.TextLeaf | None = None
    """Another capture whose frames are used."""
    uses: Uses | None = None
    """Companion captures by role, e.g. {dark: dark, flat: flat}."""
    camera: CameraPart | None = None
    """Camera data that differ in this capture."""
    optics: OpticsShape | None = None
    """Optics data that differ in this capture."""
    chart: ChartShape | None = None
    """The physical chart."""
    regions: Ordered[RegionShape | None] | None = None
    """Regions by name."""
    measure: device_leaves.Methods | None = None
    """Methods with their options; without it, the target's usual ones."""
    usable_if: dict[str, leaves.InequalityLeaf] | None = None
    """What makes the capture usable, e.g. {clipped: at most 0.01 %}; judged before the limits."""
    limits: list[LimitShape | None] | None = None
    """Requirements."""


class RootShape(Shape):
    """A test spec."""

    model_config = ConfigDict(
        title="probatum test spec",
        json_schema_extra={"required": ["probatum-spec", "document", "unit", "camera", "captures"]},
    )
    WORDS: ClassVar[str] = "the spec"
    KEPT: ClassVar[bool] = True
    REQUIRED: ClassVar[tuple[str, ...]] = ("probatum-spec", "document", "unit", "camera", "captures")
    version: Annotated[int, *leaves.whole_number(VERSION, VERSION)] | None = Field(default=None, alias="probatum-spec")
    """Version of the format: 1."""
    document: DocumentShape | None = None
    """The document that asks."""
    unit: UnitShape | None = None
    """What a unit is."""
    camera: CameraShape | None = None
    """The camera's data as delivered."""
    optics: OpticsShape | None = None
    """The optics in front of the sensor."""
    decision: DecisionShape | None = None
    """How limits are decided."""
    uncertainty: list[ComponentShape | None] | None = None
    """Declared standard-uncertainty components."""
    captures: Ordered[CaptureShape | None] | None = None
    """Captures by name, in the order of the test."""
