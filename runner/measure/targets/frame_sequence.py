"""Frames taken one after another of a scene that stands still: for their order, their timing and their level.

Anything lit may stand in front of the camera. Each region is taken as it stands; without regions, the whole frame.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from runner.capture.frame import Frame
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.uniform import locate_uniform
from runner.measure.options import reader
from runner.spec.model import Camera, Region

NAME = "frame sequence"
TITLE = "Frames one after another"
GROUP = "stray light and time"
OFFERS = frozenset({"sequence"})
METHODS = ("frame order", "level over time")
REFERENCES = ("IEEE Std 2020 (flicker and frame sequences of vehicle cameras; from memory)",)


@dataclass(frozen=True)
class Options:
    """There is nothing to choose."""


read_options = reader(Options)


def locate(
    frames: Sequence[Frame],
    regions: Sequence[Region],
    camera: Camera,
    options: Options,  # noqa: ARG001 - the contract's form
) -> Sequence[Found | NotFound]:
    """Offer each region as it stands; the first frame may be dark, for the level may still settle."""
    found = locate_uniform(frames[0], regions, camera, lit=False)
    return [_sequence(one) if isinstance(one, Found) else one for one in found]


def _sequence(found: Found) -> Found:
    return Found(found.region, found.box, OFFERS, {}, found.outline)
