"""Reads a scenario: an invented lot in physical units, one story for each unit.

The scenario says what is physically there and knows nothing of the test spec; what the spec makes of it is the test.
Every amount carries its unit; all complaints come at once, with line and column.
"""

from collections.abc import Mapping
from dataclasses import dataclass, replace
from math import ceil, hypot, radians, tan
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from runner.rehearse.amounts import Shape
from runner.rehearse.bench_captures import BenchCapture, BenchUnit
from runner.rehearse.bench_shapes import captures_of
from runner.rehearse.delivery import Delivery, Mishap
from runner.rehearse.flaws import Bands, Defects
from runner.rehearse.gratings import Patch, StripeChart
from runner.rehearse.illumination import Correction, Illumination
from runner.rehearse.mosaics import Mosaic
from runner.rehearse.optics import Transfer
from runner.rehearse.scenario_shapes import ChartShape, ScenarioShape, SensorShape, StripesShape, UnitShape
from runner.rehearse.scene import Chart, Square, View
from runner.rehearse.sensor import Sensor, Sharpening
from runner.spec.tree import Complaints, Mapped, nearest, place_of, read_tree


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
    """Unsharp mask of its firmware."""
    illumination: Illumination | None
    """Fall of light of its lens, or None for an even field."""
    correction: Correction
    """What its firmware does about it."""
    bands: Bands | None
    """Bands of its readout."""
    defects: Defects
    """Its flawed pixels."""
    mishap: Mishap
    """What goes wrong with its files."""
    dead: bool
    """It delivers one constant code."""
    lit: bool
    """The lamp was on."""
    bench: BenchUnit
    """What is particular about it in captures of the bench."""

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
    """Frames of each capture: `dark`, `flat`, `chart`, `stripes`."""
    chart: Chart | None
    """The chart of squares."""
    stripes: StripeChart | None
    """The chart of gratings."""
    delivery: Delivery
    """How the station writes files."""
    sensor: Sensor
    """The sensor's design."""
    mosaic: Mosaic
    """Colours of its pixels, in captures of the bench."""
    bench: tuple[BenchCapture, ...]
    """Captures of other scenes."""
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
    _charts_are_there(shape, tree, complaints)
    return Scenario(
        title=shape.title,
        seed=shape.seed,
        photons=shape.photons,
        repeats={str(k): n for k, n in shape.repeats.items()},
        chart=_chart(shape.chart, shape) if shape.chart else None,
        stripes=_stripes(shape.stripes) if shape.stripes else None,
        delivery=_delivery(shape),
        sensor=_sensor(shape.sensor),
        mosaic=Mosaic(shape.sensor.mosaic, shape.sensor.sensitivity),
        bench=captures_of(shape.bench),
        units={serial: _unit(serial, unit, shape) for serial, unit in sorted(shape.units.items())},
    )


def _charts_are_there(shape: ScenarioShape, tree: Mapped | None, complaints: Complaints) -> None:
    for name in ("chart", "stripes"):
        if name in shape.repeats and getattr(shape, name) is None:
            where = place_of(tree, "repeats", name)
            complaints.error(where, f"frames of '{name}' are asked for, and there is no {name}", "", f"add {name}")
    complaints.raise_errors()


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


def _mm_per_px(shape: ScenarioShape) -> float:
    return shape.sensor.pixel_pitch / 1e3 / shape.optics.magnification


def _delivery(shape: ScenarioShape) -> Delivery:
    if shape.station is None:
        return Delivery()
    settings = {str(name): said for name, said in shape.station.sidecar.items()}
    return Delivery(tuple(str(name) for name in shape.station.raw), shape.station.packing, settings)


def _stripes(s: StripesShape) -> StripeChart:
    patches = {name: Patch(*p.place, s.side, p.period, p.direction) for name, p in s.patches.items()}
    return StripeChart(s.level, s.modulation, patches)


def _chart(c: ChartShape, shape: ScenarioShape) -> Chart:
    mm_per_px = _mm_per_px(shape)
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
    mm_per_px, px_per_mm = _mm_per_px(shape), 1e3 / sensor.pixel_pitch
    sharpening, bands, d = unit.sharpening, unit.bands, unit.defects
    shift = unit.lens_shift[0] * px_per_mm, unit.lens_shift[1] * px_per_mm
    return Unit(
        serial=serial,
        story=unit.story,
        lens=Transfer(optics.f_number, optics.wavelength, unit.focus_error, unit.blur, sensor.pixel_pitch, sensor.fill),
        curvature_um=optics.field_curvature,
        slope=(tan(radians(unit.sensor_tilt[0])), tan(radians(unit.sensor_tilt[1]))),
        view=View(*sensor.frame_size, mm_per_px, (unit.aim[0] / mm_per_px, unit.aim[1] / mm_per_px), unit.turn),
        sharpening=Sharpening(sharpening.amount, sharpening.sigma) if sharpening else None,
        illumination=Illumination(optics.image_distance * px_per_mm, shift) if optics.image_distance else None,
        correction=unit.shading_correction,
        bands=Bands(bands.along, bands.amplitude, bands.frequency) if bands else None,
        defects=Defects(d.hot, d.hot_signal, d.dead, d.stuck, d.weak_columns, d.weakness),
        mishap=unit.files,
        dead=unit.readout == "dead",
        lit=unit.lamp == "lit",
        bench=unit.bench.unit(hypot(*sensor.frame_size) / 2),
    )
