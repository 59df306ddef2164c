"""What the `bench` of a scenario file may hold, and the captures that it makes of it."""

from collections.abc import Mapping
from typing import Annotated, Literal, Self

from pydantic import BeforeValidator, Field, model_validator

from runner.rehearse.amounts import Codes, Degrees, Hertz, LinePairs, Microns, Millimetres, Shape, Share
from runner.rehearse.bars import BarChart, Group
from runner.rehearse.bench_captures import BenchCapture, BenchScene, BenchUnit, Step
from runner.rehearse.denoising import Denoising
from runner.rehearse.lattices import Board, DotGrid
from runner.rehearse.line_targets import Element, ElementChart, Wedge
from runner.rehearse.painting import Lens
from runner.rehearse.patches import Area, PatchChart
from runner.rehearse.scene import Chart, Square
from runner.rehearse.sequences import SequenceFaults
from runner.rehearse.stars import Star
from runner.rehearse.texture import NoiseTexture
from runner.spec.device_leaves import read_frame_size

Place = tuple[Millimetres, Millimetres]
Length = Annotated[Millimetres, Field(gt=0)]
Light = Annotated[Share, Field(ge=0, le=1)]
Part = Annotated[Share, Field(gt=0, lt=1)]
Whole = Annotated[int, Field(ge=1, le=1000)]
MarkPlaces = tuple[tuple[int, int], ...]
CaptureWord = Annotated[str, Field(pattern=r"^[a-z][a-z-]*$")]


class StarShape(Shape):
    """A star of sines."""

    cycles: Whole
    diameter: Length
    modulation: Part
    level: Part

    def scene(self) -> Star:
        """Return the star."""
        return Star(self.cycles, self.diameter, self.modulation, self.level)


class GroupShape(Shape):
    """One square full of bars."""

    place: Place
    period: Length
    direction: Degrees


class BarsShape(Shape):
    """Groups of bars."""

    bright: Light
    dark: Light
    side: Length
    groups: Annotated[Mapping[str, GroupShape], Field(min_length=1)]

    def scene(self) -> BarChart:
        """Return the chart."""
        groups = {name: Group(g.place, self.side, g.period, g.direction) for name, g in self.groups.items()}
        return BarChart(self.bright, self.dark, groups)


class ElementShape(Shape):
    """One element of three bars."""

    place: Place
    element: tuple[int, Annotated[int, Field(ge=1, le=6)]]
    """Group and number."""
    direction: Degrees


class ElementsShape(Shape):
    """Elements of three bars, as the table has them."""

    bright: Light
    dark: Light
    elements: Annotated[Mapping[str, ElementShape], Field(min_length=1)]

    def scene(self) -> ElementChart:
        """Return the chart; group G, number E has 2^(G + (E - 1)/6) line pairs per mm."""
        made = {
            name: Element(e.place, 2.0 ** (e.element[0] + (e.element[1] - 1) / 6), e.direction)
            for name, e in self.elements.items()
        }
        return ElementChart(self.bright, self.dark, made)


class WedgeShape(Shape):
    """A wedge of converging lines."""

    bright: Light
    dark: Light
    lines: Whole
    length: Length
    coarse: Annotated[LinePairs, Field(gt=0)]
    fine: Annotated[LinePairs, Field(gt=0)]

    def scene(self) -> Wedge:
        """Return the wedge."""
        return Wedge(self.bright, self.dark, self.lines, self.length, self.coarse, self.fine)


class DotsShape(Shape):
    """A dot grid."""

    columns: Whole
    rows: Whole
    pitch: Length
    diameter: Length
    bright: Light
    dark: Light
    marks: MarkPlaces = ()

    def scene(self) -> DotGrid:
        """Return the grid."""
        return DotGrid(self.columns, self.rows, self.pitch, self.diameter, self.bright, self.dark, self.marks)


class BoardShape(Shape):
    """A chequered board."""

    columns: Whole
    rows: Whole
    square: Length
    bright: Light
    dark: Light
    marks: MarkPlaces = ()

    def scene(self) -> Board:
        """Return the board."""
        return Board(self.columns, self.rows, self.square, self.bright, self.dark, self.marks)


class TextureShape(Shape):
    """Noise of a known spectrum."""

    seed: int
    cells: Whole
    side: Length
    slope: float
    low: Light
    high: Light

    def scene(self) -> NoiseTexture:
        """Return the pattern."""
        return NoiseTexture(self.seed, self.cells, self.side, self.slope, self.low, self.high)


class AreaShape(Shape):
    """One patch."""

    place: Place
    light: tuple[Light, Light, Light]


class PatchesShape(Shape):
    """Even patches."""

    ground: tuple[Light, Light, Light]
    size: tuple[Length, Length]
    areas: Annotated[Mapping[str, AreaShape], Field(min_length=1)]

    def scene(self) -> PatchChart:
        """Return the chart."""
        return PatchChart(self.ground, {n: Area(a.place, self.size, a.light) for n, a in self.areas.items()})


class SquaresShape(Shape):
    """Dark slanted squares."""

    modulation: Part
    side: Length
    slant: Degrees
    squares: Annotated[Mapping[str, Place], Field(min_length=1)]

    def scene(self) -> Chart:
        """Return the chart."""
        squares = {name: Square(*place, self.side, self.slant) for name, place in self.squares.items()}
        return Chart(self.modulation, squares, ())


SCENES = ("star", "bars", "elements", "wedge", "dots", "board", "texture", "patches", "squares")


class CaptureShape(Shape):
    """One capture: an even field, or one of the scenes."""

    window: Annotated[tuple[int, int], BeforeValidator(read_frame_size)]
    """Columns and rows, from the middle of the sensor."""
    frames: Annotated[int, Field(ge=1, le=500)]
    """Frames of each step."""
    light: Annotated[Share, Field(ge=0, le=10)] = 1.0
    """Lamp over that of the scenario."""
    firmware: Literal["on", "off"] = "on"
    """Off: straight from the sensor."""
    levels: tuple[Annotated[int, Field(ge=0, le=1000)], ...] = ()
    """Steps of light, in %; names of files say them as plain numbers."""
    focus: tuple[Microns, ...] = ()
    """Steps of the focus stage."""
    focus_zero: Microns = 0.0
    """Where on that stage a unit without focus error is sharp."""
    rate: Annotated[Hertz, Field(gt=0)] | None = None
    """Frames a second: the frames are a sequence."""
    star: StarShape | None = None
    bars: BarsShape | None = None
    elements: ElementsShape | None = None
    wedge: WedgeShape | None = None
    dots: DotsShape | None = None
    board: BoardShape | None = None
    texture: TextureShape | None = None
    patches: PatchesShape | None = None
    squares: SquaresShape | None = None

    @model_validator(mode="after")
    def _one_scene(self) -> Self:
        if sum(getattr(self, name) is not None for name in SCENES) > 1:
            raise ValueError(f"a capture holds one scene at most: {', '.join(SCENES)}")
        if any(size % 4 for size in self.window):
            raise ValueError("a window's columns and rows are multiples of 4, so that it keeps the mosaic's order")
        return self

    def scene(self) -> BenchScene | None:
        """Return what is seen, or None for an even field."""
        for name in SCENES:
            shape = getattr(self, name)
            if shape is not None:
                found: BenchScene = shape.scene()
                return found
        return None

    def steps(self) -> tuple[Step, ...]:
        """Return the capture's conditions."""
        if self.levels:
            return tuple(Step(str(level), light=level / 100) for level in self.levels)
        if self.focus:
            return tuple(Step(f"{at:g}um", focus_um=at - self.focus_zero) for at in self.focus)
        return (Step(""),)


class LensShape(Shape):
    """What one unit's lens does."""

    k1: float = 0.0
    """Image height is the ideal one × (1 + k1 · (ideal height / half diagonal)²)."""
    red: Annotated[float, Field(gt=0.9, lt=1.1)] = 1.0
    """Magnification over green's."""
    blue: Annotated[float, Field(gt=0.9, lt=1.1)] = 1.0
    """Magnification over green's."""


class DenoisingShape(Shape):
    """Noise reduction."""

    alike: Annotated[Codes, Field(gt=0)]
    """Neighbours that differ by no more are averaged."""
    reach: Annotated[int, Field(ge=1, le=5)]
    """Neighbours each way."""


class StreamShape(Shape):
    """Faults of a sequence."""

    lost: tuple[Whole, ...] = ()
    repeated: tuple[Whole, ...] = ()
    flicker: Annotated[Share, Field(ge=0, lt=1)] = 0.0
    flicker_rate: Annotated[Hertz, Field(gt=0)] = 1.0


class BenchUnitShape(Shape):
    """What is particular about a unit before the bench."""

    lens: LensShape = LensShape()
    veil: Annotated[Share, Field(ge=0, lt=1)] = 0.0
    """Share of the light that its lens spreads over all of the picture."""
    noise_reduction: DenoisingShape | None = None
    stream: StreamShape = StreamShape()
    mirrored: tuple[CaptureWord, ...] = ()
    """Captures whose chart hung the wrong way round."""

    def unit(self, half_diagonal_px: float) -> BenchUnit:
        """Return the unit."""
        smooth, stream = self.noise_reduction, self.stream
        return BenchUnit(
            Lens(self.lens.k1, half_diagonal_px, (self.lens.red, 1.0, self.lens.blue)),
            self.veil,
            Denoising(smooth.alike, smooth.reach) if smooth else None,
            SequenceFaults(stream.lost, stream.repeated, stream.flicker, stream.flicker_rate),
            frozenset(self.mirrored),
        )


def captures_of(bench: Mapping[str, CaptureShape]) -> tuple[BenchCapture, ...]:
    """Return the captures of a file, in its order."""
    return tuple(
        BenchCapture(name, c.window, c.frames, c.scene(), c.light, c.steps(), c.firmware == "on", c.rate or 0.0)
        for name, c in bench.items()
    )
