"""Stripes whose light follows a sine: one patch in every region, at any frequency and orientation."""

from collections.abc import Sequence
from dataclasses import dataclass

from runner.capture.frame import Frame, linearise
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.grating_search import strongest_line
from runner.measure.options import reader
from runner.measure.placing import outline, place
from runner.spec.model import Camera, Region

NAME = "sinusoidal grating"
TITLE = "Sinusoidal grating"
GROUP = "transfer function"
OFFERS = frozenset({"grating"})
METHODS = ("grating response", "transfer curve")
REFERENCES = (
    "ISO 15529:2010 (modulation transfer of sampled imaging systems)",
    "F. J. Harris, Proc. IEEE 66 (1978) 51 (windows for harmonic analysis)",
)

LEAST_CONTRAST = 40.0
"""Power of the line over the median ordinate; noise of a million pixels reaches that with odds of 1e-6."""
DARKEST = 0.002
"""Mean light below this share of the range is a dark picture."""


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
    """Find the strongest line in the spatial Fourier transform of each region, to start a fit from."""
    return [_locate_one(frames[0], region, camera) for region in regions]


def _locate_one(frame: Frame, region: Region, camera: Camera) -> Found | NotFound:
    box = place(region, frame)
    if isinstance(box, NotFound):
        return box
    light = linearise(frame.codes[box.y0 : box.y1, box.x0 : box.x1], camera)
    level = float(light.mean())
    if level < DARKEST:
        sentence = f"the patch lies at {100 * level:.2f} % of the range over the black level"
        return NotFound(region.name, box, "too dark", sentence)
    line = strongest_line(light, smoothed=camera.mosaic != "none")
    if line is None:
        return NotFound(region.name, box, "no picture", "every pixel of the patch has the same value")
    if line.contrast < LEAST_CONTRAST:
        sentence = (
            f"no line stands out of the patch's spectrum: its highest ordinate is {line.contrast:.0f} times the "
            f"median, {LEAST_CONTRAST:g} times is needed"
        )
        return NotFound(region.name, box, "no modulation", sentence)
    start = {"frequency_x": line.frequency[0], "frequency_y": line.frequency[1]}
    return Found(region.name, box, OFFERS, start, outline(box))
