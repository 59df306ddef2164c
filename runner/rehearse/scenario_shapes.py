"""What a scenario file may hold: every part with its amounts in their units."""

from collections.abc import Mapping
from typing import Annotated, Literal

from pydantic import BeforeValidator, Field

from runner.rehearse.amounts import (
    Codes,
    CyclesPerPixel,
    Degrees,
    Electrons,
    Microns,
    Millimetres,
    Pixels,
    Shape,
    Share,
    amount_in,
)
from runner.rehearse.bench_shapes import BenchUnitShape, CaptureShape, CaptureWord
from runner.rehearse.delivery import Mishap
from runner.rehearse.illumination import Correction
from runner.spec.device_leaves import read_frame_size

CaptureName = Literal["dark", "flat", "chart", "stripes"]
"""Captures that can be made: `chart` of squares, `stripes` of gratings, `flat` of nothing but light."""


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


class PatchShape(Shape):
    """One patch of stripes."""

    place: tuple[Millimetres, Millimetres]
    """Its centre from the chart's middle, right and down."""
    period: Annotated[Millimetres, Field(gt=0)]
    """Period of the stripes."""
    direction: Degrees
    """Direction of the stripes' normal from the right, clockwise as seen."""


class StripesShape(Shape):
    """A chart of gratings in the object."""

    level: Annotated[Share, Field(gt=0, le=1)]
    """Mean light of patches and ground, of that of a white board."""
    modulation: Annotated[Share, Field(gt=0, le=1)]
    """(bright - dark) / (bright + dark) of the printed sines."""
    side: Annotated[Millimetres, Field(gt=0)]
    """Side of the patches."""
    patches: Annotated[Mapping[str, PatchShape], Field(min_length=1)]
    """Patches by name."""


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
    image_distance: Annotated[Millimetres, Field(gt=0)] | None = None
    """Distance of the exit pupil, from which light falls off towards the corners; without it the field is even."""


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
    conversion: Annotated[float, amount_in(dn_per_e=1.0), Field(gt=0)]
    """DN per electron."""
    black_level: Annotated[int, amount_in(DN=1), Field(ge=0)]
    """DN without light."""
    bit_depth: Annotated[int, amount_in(bit=1), Field(ge=1, le=16)]
    """Bits of the converter."""
    mosaic: Annotated[str, Field(pattern="^(RGGB|GRBG|GBRG|BGGR)$")] = "RGGB"
    """Colours of the upper left four pixels; for captures of the bench."""
    sensitivity: tuple[Share, Share, Share] = (1.0, 1.0, 1.0)
    """Of red, green and blue pixels to white light, over the quantum efficiency; likewise."""


class SharpeningShape(Shape):
    """Unsharp mask of the firmware."""

    amount: float
    """Amount."""
    sigma: Annotated[Pixels, Field(gt=0)]
    """Smoothing kernel."""


class BandsShape(Shape):
    """A sine that the readout adds."""

    along: Literal["rows", "columns"]
    """`rows`: all pixels of a row get the same."""
    amplitude: Annotated[Codes, Field(gt=0)]
    """Half of peak to peak."""
    frequency: Annotated[CyclesPerPixel, Field(gt=0, le=0.5)]
    """From row to row, or from column to column."""


class DefectsShape(Shape):
    """Flawed pixels and columns, at places that the seed chooses."""

    hot: Annotated[int, Field(ge=0, le=1000)] = 0
    """Pixels with a dark signal."""
    hot_signal: Annotated[Electrons, Field(gt=0)] = 1000.0
    """Their dark signal in one frame; the weakest has half of it, the strongest twice."""
    dead: Annotated[int, Field(ge=0, le=1000)] = 0
    """Pixels that see no light."""
    stuck: Annotated[int, Field(ge=0, le=1000)] = 0
    """Pixels with one code whatever the light."""
    weak_columns: Annotated[int, Field(ge=0, le=50)] = 0
    """Columns that see less light than their neighbours."""
    weakness: Annotated[Share, Field(gt=0, le=1)] = 0.05
    """How much less."""


class StationShape(Shape):
    """How the station writes files; without it, TIFFs alone."""

    raw: tuple[CaptureName, ...] = ()
    """Captures written as headerless packed raw."""
    packing: Literal["12 bit low bits first", "12 bit high bits first"] = "12 bit low bits first"
    """How two pixels share three bytes."""
    sidecar: Mapping[Literal["exposure", "gain", "temperature"], str]
    """What the sidecar of every frame says."""


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
    lens_shift: tuple[Millimetres, Millimetres] = (0.0, 0.0)
    """Where the lens's axis meets the sensor, from its middle, right and down."""
    shading_correction: Correction = "none"
    """What its firmware does about the lens's fall of light."""
    bands: BandsShape | None = None
    """Bands of its readout."""
    defects: DefectsShape = DefectsShape()
    """Its flawed pixels."""
    files: Mishap = "none"
    """What goes wrong with its files."""
    readout: Literal["live", "dead"] = "live"
    """A dead unit delivers one constant code."""
    lamp: Literal["lit", "off"] = "lit"
    """Whether the lamp of the bench was on."""
    bench: BenchUnitShape = BenchUnitShape()
    """What is particular about it in captures of the bench."""


class ScenarioShape(Shape):
    """The whole file."""

    version: Annotated[Literal["1"], Field(alias="probatum-scenario")]
    """Version of the format."""
    title: str
    """What the lot is."""
    seed: int
    """Seed of all noise."""
    photons: Annotated[float, amount_in(photons=1.0), Field(gt=0)]
    """Mean photons per pixel from the bright board in one frame."""
    repeats: Mapping[CaptureName, Annotated[int, Field(ge=1, le=100)]] = {}
    """Frames of each capture, in the order in which they are taken."""
    bench: Mapping[CaptureWord, CaptureShape] = {}
    """Captures of other scenes, each in a window of its own, taken after those."""
    chart: ChartShape | None = None
    """The chart of squares; needed for frames of `chart`."""
    stripes: StripesShape | None = None
    """The chart of gratings; needed for frames of `stripes`."""
    station: StationShape | None = None
    """How the station writes files."""
    optics: OpticsShape
    """The lens."""
    sensor: SensorShape
    """The sensor."""
    units: Annotated[Mapping[Annotated[str, Field(pattern=r"^\w[\w.-]*$")], UnitShape], Field(min_length=1)]
    """Units by serial."""
