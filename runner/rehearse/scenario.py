"""Reads a scenario: an invented lot in physical units, one story for each unit.

The scenario says what is physically there and knows nothing of the test spec; what the spec makes of it is the test.
Every amount carries its unit; all complaints come at once, with line and column.
"""

from collections.abc import Mapping
from dataclasses import dataclass, replace
from math import ceil, hypot, radians, tan
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, ValidationError

from runner.rehearse.optics import Transfer
from runner.rehearse.scene import Chart, Square, View
from runner.rehearse.sensor import Sensor, Sharpening
from runner.spec.device_leaves import read_frame_size
from runner.spec.leaves import refuse, shown
from runner.spec.tree import Complaints, Mapped, nearest, number_in, place_of, read_tree


def _in(**factors: float) -> BeforeValidator:
    """Return the reader of an amount in one of some units, by their factors."""
    known = {_SPELLING.get(name, name): factor for name, factor in factors.items()}

    def read(node: Any) -> float:
        number, _, unit = str(node).strip().partition(" ")
        value = number_in(number)
        if not isinstance(node, str) or value is None or unit.strip() not in known:
            refuse(f"{shown(node)} is no amount that fits here", f"a number and one of: {', '.join(known)}")
        return value * known[unit.strip()]

    return BeforeValidator(read)


_SPELLING = {"percent": "%", "electrons": "e-", "dn_per_e": "DN/e-", "one": "1"}
Microns = Annotated[float, _in(um=1.0, nm=1e-3, mm=1e3)]
Millimetres = Annotated[float, _in(mm=1.0)]
Degrees = Annotated[float, _in(deg=1.0)]
Pixels = Annotated[float, _in(px=1.0)]
Share = Annotated[float, _in(percent=1e-2)]
Electrons = Annotated[float, _in(electrons=1.0)]


class Shape(BaseModel):
    """A part of the file: unknown keys are refused."""

    model_config = ConfigDict(extra="forbid", frozen=True)


class ChartShape(Shape):
    """The chart in the object."""

    modulation: Annotated[Share, Field(gt=0, lt=1)]
    """(bright - dark) / (bright + dark)."""
    side: Annotated[Millimetres, Field(gt=0)]
    """Side of the slanted squares."""
    slant: Degrees
    """Their turn, clockwise as seen."""
    squares: Annotated[Mapping[str, tuple[Millimetres, Millimetres]], Field(min_length=1)]
    """Their centres from the chart's middle, right and down."""
    mark_side: Annotated[Millimetres, Field(gt=0)]
    """Side of the small marks."""
    mark_pitch: Annotated[Millimetres, Field(gt=0)]
    """Distance between neighbouring marks of the grid; marks near a slanted square are left out."""


class OpticsShape(Shape):
    """The design of the lens."""

    f_number: Annotated[float, Field(gt=0)]
    """Working f-number."""
    wavelength: Annotated[Microns, Field(gt=0)]
    """Wavelength."""
    magnification: Annotated[float, Field(gt=0)]
    """Image size over object size."""
    field_curvature: Microns
    """Best focus in the frame's corner against that in its centre."""


class SensorShape(Shape):
    """The design of the sensor."""

    frame_size: Annotated[tuple[int, int], BeforeValidator(read_frame_size)]
    """Columns and rows."""
    pixel_pitch: Annotated[Microns, Field(gt=0)]
    """Pixel pitch."""
    fill: Annotated[Share, Field(gt=0, le=1)]
    """Share of the pixel's area that collects light."""
    quantum_efficiency: Annotated[Share, Field(gt=0, le=1)]
    """Electrons per photon."""
    full_well: Annotated[Electrons, Field(gt=0)]
    """Electrons at which a pixel is full."""
    read_noise: Annotated[Electrons, Field(ge=0)]
    """Standard deviation without light."""
    prnu: Annotated[Share, Field(ge=0)]
    """Spread of sensitivity."""
    dsnu: Annotated[Electrons, Field(ge=0)]
    """Spread of the dark signal."""
    conversion: Annotated[float, _in(dn_per_e=1.0), Field(gt=0)]
    """DN per electron."""
    black_level: Annotated[int, _in(DN=1), Field(ge=0)]
    """DN without light."""
    bit_depth: Annotated[int, _in(bit=1), Field(ge=1, le=16)]
    """Bits of the converter."""


class SharpeningShape(Shape):
    """Unsharp mask of the firmware."""

    amount: float
    """Amount."""
    sigma: Annotated[Pixels, Field(gt=0)]
    """Smoothing kernel."""


class UnitShape(Shape):
    """One unit of the lot and what was done to it."""

    story: str
    """What is the matter with it, one sentence."""
    focus_error: Microns = 0.0
    """Sensor against best focus in the middle of the frame."""
    blur: Annotated[Microns, Field(ge=0)]
    """Standard deviation of the Gaussian that stands for aberrations and charge diffusion."""
    sensor_tilt: tuple[Degrees, Degrees] = (0.0, 0.0)
    """Slope of the sensor against the image plane, to the right and down."""
    aim: tuple[Millimetres, Millimetres] = (0.0, 0.0)
    """Where the unit sees the chart's middle, right and down."""
    turn: Degrees = 0.0
    """Turn of the chart as the unit sees it."""
    sharpening: SharpeningShape | None = None
    """Unsharp mask of its firmware."""
    readout: Literal["live", "dead"] = "live"
    """A dead unit delivers one constant code."""
    lamp: Literal["lit", "off"] = "lit"
    """Whether the lamp of the bench was on."""


class ScenarioShape(Shape):
    """The whole file."""

    version: Annotated[Literal["1"], Field(alias="probatum-scenario")]
    """Version of the format."""
    title: str
    """What the lot is."""
    seed: int
    """Seed of all noise."""
    photons: Annotated[float, _in(photons=1.0), Field(gt=0)]
    """Mean photons per pixel from the bright board in one frame."""
    repeats: Mapping[Literal["dark", "chart"], Annotated[int, Field(ge=1, le=100)]]
    """Frames of each capture."""
    chart: ChartShape
    """The chart."""
    optics: OpticsShape
    """The lens."""
    sensor: SensorShape
    """The sensor."""
    units: Annotated[Mapping[Annotated[str, Field(pattern=r"^\w[\w.-]*$")], UnitShape], Field(min_length=1)]
    """Units by serial."""


@dataclass(frozen=True)
class Unit:
    """One unit as it is simulated."""

    serial: str
    """Serial."""
    story: str
    """What is the matter with it."""
    lens: Transfer
    """The system in the middle of the frame."""
    curvature_um: float
    """Focus error that the frame's corner adds, µm."""
    slope: tuple[float, float]
    """Focus error per length on the sensor, to the right and down."""
    view: View
    """How it sees the chart."""
    sharpening: Sharpening | None
    """What its firmware does."""
    dead: bool
    """It delivers one constant code."""
    lit: bool
    """The lamp was on."""

    def transfer_at(self, x: float, y: float) -> Transfer:
        """Return the optics and pixel at a place of the sensor, (x, y) px from its middle."""
        corner = hypot(self.view.columns, self.view.rows) / 2
        across, down = x * self.lens.pitch_um * self.slope[0], y * self.lens.pitch_um * self.slope[1]
        bowl = self.curvature_um * (hypot(x, y) / corner) ** 2
        return replace(self.lens, focus_error_um=self.lens.focus_error_um + across + down + bowl)


@dataclass(frozen=True)
class Scenario:
    """An invented lot."""

    title: str
    """What it is."""
    seed: int
    """Seed of all noise."""
    photons: float
    """Mean photons per pixel from the bright board in one frame."""
    repeats: Mapping[str, int]
    """Frames of each capture: `dark`, `chart`."""
    chart: Chart
    """The chart."""
    sensor: Sensor
    """The sensor's design."""
    units: Mapping[str, Unit]
    """Units by serial."""


def read_scenario(path: Path) -> Scenario:
    """Read a scenario file.

    Raises:
        SpecError: With every complaint about the file.
    """
    complaints = Complaints()
    tree = read_tree(path, path.name, complaints)
    complaints.raise_errors()
    try:
        shape = ScenarioShape.model_validate(tree)
    except ValidationError as error:
        for item in error.errors():
            _complain(complaints, tree, item)
        complaints.raise_errors()
        raise
    units = {serial: _unit(serial, unit, shape) for serial, unit in sorted(shape.units.items())}
    return Scenario(
        shape.title,
        shape.seed,
        shape.photons,
        {str(k): n for k, n in shape.repeats.items()},
        _chart(shape),
        _sensor(shape.sensor),
        units,
    )


_MEANT = {
    "tuple_type": "two amounts in brackets are meant, for example [1 mm, 0 mm]",
    "int_type": "a whole number is meant",
    "int_parsing": "a whole number is meant",
    "float_type": "a number is meant",
    "float_parsing": "a number is meant",
    "string_type": "a text is meant",
    "dict_type": "keys with values are meant",
    "mapping_type": "keys with values are meant",
    "model_type": "keys with values are meant",
    "string_pattern_mismatch": "a serial has letters, digits, - and . only",
}
"""Plain words for what the shapes refuse."""


def _complain(complaints: Complaints, tree: Mapped | None, item: Mapping[str, Any]) -> None:
    path = [step for step in item["loc"] if step != "[key]"]
    where, context = place_of(tree, *path), item.get("ctx", {})
    name = str(path[-1]) if path else "the file"
    if item["type"] == "extra_forbidden":
        known = {f.alias or n for s in Shape.__subclasses__() for n, f in s.model_fields.items()}
        hint = "it stands in the wrong place" if name in known else nearest(name, known)
        complaints.error(where, f"unknown key '{name}'", hint, "move, correct or remove it")
    elif item["type"] == "missing":
        complaints.error(where, f"the key '{name}' is missing", "", "add it")
    elif item["type"] == "spec":
        complaints.error(where, context["found"], context["allowed"], context["step"])
    else:
        complaints.error(where, f"{name}: {_MEANT.get(item['type'], item['msg'][0].lower() + item['msg'][1:])}")


def _chart(shape: ScenarioShape) -> Chart:
    c, mm_per_px = shape.chart, shape.sensor.pixel_pitch / 1e3 / shape.optics.magnification
    squares = {name: Square(x, y, c.side, c.slant) for name, (x, y) in c.squares.items()}
    columns, rows = shape.sensor.frame_size
    half_x, half_y = columns * mm_per_px / 2, rows * mm_per_px / 2
    places = (
        ((i + 0.5) * c.mark_pitch, (j + 0.5) * c.mark_pitch)
        for j in range(-ceil(half_y / c.mark_pitch), ceil(half_y / c.mark_pitch))
        for i in range(-ceil(half_x / c.mark_pitch), ceil(half_x / c.mark_pitch))
    )
    free = [(x, y) for x, y in places if all(max(abs(x - s.x_mm), abs(y - s.y_mm)) > c.side for s in squares.values())]
    return Chart(c.modulation, squares, tuple(Square(x, y, c.mark_side, 0.0) for x, y in free))


def _sensor(shape: SensorShape) -> Sensor:
    return Sensor(
        quantum_efficiency=shape.quantum_efficiency,
        full_well_e=shape.full_well,
        read_noise_e=shape.read_noise,
        prnu=shape.prnu,
        dsnu_e=shape.dsnu,
        dn_per_e=shape.conversion,
        black_level=shape.black_level,
        bit_depth=shape.bit_depth,
    )


def _unit(serial: str, unit: UnitShape, shape: ScenarioShape) -> Unit:
    optics, sensor = shape.optics, shape.sensor
    mm_per_px = sensor.pixel_pitch / 1e3 / optics.magnification
    sharpening = unit.sharpening
    return Unit(
        serial=serial,
        story=unit.story,
        lens=Transfer(optics.f_number, optics.wavelength, unit.focus_error, unit.blur, sensor.pixel_pitch, sensor.fill),
        curvature_um=optics.field_curvature,
        slope=(tan(radians(unit.sensor_tilt[0])), tan(radians(unit.sensor_tilt[1]))),
        view=View(*sensor.frame_size, mm_per_px, (unit.aim[0] / mm_per_px, unit.aim[1] / mm_per_px), unit.turn),
        sharpening=Sharpening(sharpening.amount, sharpening.sigma) if sharpening else None,
        dead=unit.readout == "dead",
        lit=unit.lamp == "lit",
    )
