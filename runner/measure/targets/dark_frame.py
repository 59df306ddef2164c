"""Frames without light: companion of other captures, or measured for themselves; the whole frame is their region.

Nothing is measured but their exposure unless `measure` names it, so that a companion costs little: frame noise, banding
and defects take an even field.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from runner.capture.frame import Frame
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.uniform import locate_uniform
from runner.measure.options import reader
from runner.spec.model import Camera, Region

NAME = "dark frame"
TITLE = "Dark frame"
GROUP = "uniformity and noise"
OFFERS = frozenset({"uniform"})
METHODS: tuple[str, ...] = ()
REFERENCES = ("EMVA Standard 1288 Release 4.0 Linear (2021), dark measurement",)


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
    """Offer each region as it stands; without regions, the whole frame."""
    return locate_uniform(frames[0], regions, camera, lit=False)
