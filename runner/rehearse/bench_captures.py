"""Captures of a bench: one scene each, in a window of the sensor just large enough for it; and what units do to it."""

from dataclasses import dataclass, field

from runner.rehearse.bars import BarChart
from runner.rehearse.denoising import Denoising
from runner.rehearse.lattices import Board, DotGrid
from runner.rehearse.line_targets import ElementChart, Wedge
from runner.rehearse.painting import Lens
from runner.rehearse.patches import PatchChart
from runner.rehearse.scene import Chart
from runner.rehearse.sequences import SequenceFaults
from runner.rehearse.stars import Star
from runner.rehearse.texture import NoiseTexture

BenchScene = Star | BarChart | ElementChart | Wedge | DotGrid | Board | NoiseTexture | PatchChart | Chart
"""What may stand before the camera; without one, an even field."""


@dataclass(frozen=True)
class Step:
    """One condition of a capture that is taken along an axis."""

    label: str
    """What names of files say, e.g. `40um`."""
    light: float = 1.0
    """Light over that of the capture."""
    focus_um: float = 0.0
    """What is added to the unit's focus error."""


@dataclass(frozen=True)
class BenchCapture:
    """One capture."""

    name: str
    """Its name, with which its files begin."""
    window: tuple[int, int]
    """Columns and rows, from the middle of the sensor."""
    frames: int
    """Frames of each step."""
    scene: BenchScene | None
    """What is seen, or None for an even field."""
    light: float = 1.0
    """Lamp over that of the scenario."""
    steps: tuple[Step, ...] = (Step(""),)
    """Conditions one after another."""
    firmware: bool = True
    """What firmware does is done; else the frames come straight from the sensor."""
    rate_hz: float = 0.0
    """Frames a second of a sequence; 0 for frames that stand alone."""


@dataclass(frozen=True)
class BenchUnit:
    """What one unit, or its operator, makes of a bench's captures."""

    lens: Lens = field(default_factory=Lens)
    """Distortion and colours of its lens."""
    veil: float = 0.0
    """Share of the light that its lens spreads over all of the picture."""
    denoising: Denoising | None = None
    """Noise reduction of its firmware."""
    stream: SequenceFaults = field(default_factory=SequenceFaults)
    """Faults of its sequences."""
    mirrored: frozenset[str] = frozenset()
    """Captures whose chart hung the wrong way round."""
