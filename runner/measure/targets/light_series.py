"""An even field at several levels of light, from dark to beyond saturation; the whole frame is its region.

Unlike `flat field` it takes frames without light too, so that a series may begin in the dark.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from runner.capture.frame import Box, Frame
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.uniform import WHOLE_FRAME
from runner.measure.options import reader
from runner.measure.placing import outline, place
from runner.spec.model import Camera, Region

NAME = "light series"
TITLE = "Even field at several levels of light"
GROUP = "sensor"
OFFERS = frozenset({"uniform"})
METHODS = ("photon transfer",)
REFERENCES = ("EMVA Standard 1288 Release 4.0 Linear (2021), homogeneous illumination at equidistant exposures",)


@dataclass(frozen=True)
class Options:
    """There is nothing to choose."""


read_options = reader(Options)


def locate(
    frames: Sequence[Frame],
    regions: Sequence[Region],
    camera: Camera,  # noqa: ARG001 - the contract's form
    options: Options,  # noqa: ARG001 - the contract's form
) -> Sequence[Found | NotFound]:
    """Offer each region as it stands; without regions, the whole frame. How much light it has is for the method."""
    frame = frames[0]
    rows, columns = frame.shape
    if not regions:
        return [_offer(WHOLE_FRAME, Box(0, 0, columns, rows))]
    placed = [(region, place(region, frame)) for region in regions]
    return [box if isinstance(box, NotFound) else _offer(region.name, box) for region, box in placed]


def _offer(name: str, box: Box) -> Found:
    return Found(name, box, OFFERS, {"lit": 1.0}, outline(box))
