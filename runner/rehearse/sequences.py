"""What goes wrong with frames one after another: lost, delivered twice, and a level that is not steady."""

from collections.abc import Iterator
from dataclasses import dataclass
from math import cos, pi


@dataclass(frozen=True)
class SequenceFaults:
    """Faults of one unit's stream."""

    lost: tuple[int, ...] = ()
    """Numbers of frames (from 1) that never arrive."""
    repeated: tuple[int, ...] = ()
    """Numbers of frames in whose place the one before is delivered again, pixel by pixel."""
    flicker: float = 0.0
    """Amplitude of the level's wave, as a share of the level."""
    flicker_hz: float = 0.0
    """Its frequency."""


@dataclass(frozen=True)
class Moment:
    """One frame as it arrives."""

    counter: int
    """What the camera's counter says."""
    time_s: float
    """Since the first frame."""
    level: float
    """Light over the steady one."""
    again: bool
    """It holds the pixels of the frame before."""


def moments(count: int, rate_hz: float, faults: SequenceFaults) -> Iterator[Moment]:
    """Yield the frames that arrive of so many that were asked for."""
    for number in range(1, count + 1):
        if number in faults.lost:
            continue
        time = (number - 1) / rate_hz
        level = 1 + faults.flicker * cos(2 * pi * faults.flicker_hz * time)
        yield Moment(number, time, level, number in faults.repeated)
