"""An even field at several levels of light, from dark to beyond saturation; the whole frame is its region.

Unlike `flat field` it takes frames without light too, so that a series may begin in the dark.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from runner.capture.frame import Frame
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.uniform import locate_uniform
from runner.measure.options import read_record
from runner.spec.model import Camera, Region

NAME = "light series"
TITLE = "Even field at several levels of light"
OFFERS = frozenset({"uniform"})
METHODS = ("photon transfer",)
REFERENCES = ("EMVA Standard 1288 Release 4.0 Linear (2021), homogeneous illumination at equidistant exposures",)


@dataclass(frozen=True)
class Options:
    """There is nothing to choose."""


def read_options(asked: Mapping[str, Any]) -> Options:
    """Read the options; none are known."""
    return read_record(Options, asked)


def locate(
    frames: Sequence[Frame],
    regions: Sequence[Region],
    camera: Camera,
    options: Options,  # noqa: ARG001 - the contract's form
) -> Sequence[Found | NotFound]:
    """Offer each region as it stands; without regions, the whole frame. How much light it has is for the method."""
    offered = locate_uniform(frames[0], regions, camera, lit=False)
    return [replace(one, geometry={"lit": 1.0}) if isinstance(one, Found) else one for one in offered]
