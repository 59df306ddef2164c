"""A stochastic pattern that is known to the last detail: noise or dead leaves, drawn from its numbers."""

from collections.abc import Sequence
from dataclasses import dataclass

from runner.capture.frame import Frame, linearise
from runner.measure.contract import Found, NotFound
from runner.measure.options import reader
from runner.measure.placing import outline, place
from runner.spec.model import Camera, Region

NAME = "random pattern"
TITLE = "Stochastic pattern"
GROUP = "transfer function"
OFFERS = frozenset({"texture"})
METHODS = ("texture response",)
REFERENCES = (
    "ISO/TS 19567-2:2019 (texture analysis using stochastic patterns)",
    "G. Matheron, Éléments pour une théorie des milieux poreux (1967): dead leaves",
)
LEAST_SIDE = 96
"""px of a region's shorter side: fewer waves tell a transfer function too badly."""
DARKEST = 0.01
"""Mean light below this share of the range: the pattern is not lit."""


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
    """Offer each region as it stands; the method finds how the pattern lies in it."""
    return [_locate(frames[0], region, camera) for region in regions]


def _locate(frame: Frame, region: Region, camera: Camera) -> Found | NotFound:
    box = place(region, frame)
    if isinstance(box, NotFound):
        return box
    codes = frame.codes[box.y0 : box.y1, box.x0 : box.x1]
    if codes.min() == codes.max():
        return NotFound(region.name, box, "no picture", f"every pixel of the region has the code {codes.flat[0]:g}")
    if min(codes.shape) < LEAST_SIDE:
        sentence = f"the region has {codes.shape[1]} × {codes.shape[0]} px; {LEAST_SIDE} px are needed each way"
        return NotFound(region.name, box, "outside the estimator's limits", sentence)
    level = float(linearise(codes, camera).mean())
    if level < DARKEST:
        sentence = f"the region lies {100 * level:.2f} % of the range over black; {100 * DARKEST:g} % is needed"
        return NotFound(region.name, box, "too dark", sentence)
    return Found(region.name, box, OFFERS, {}, outline(box))
