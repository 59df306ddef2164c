"""A chart of even grey patches whose reflectance or transmittance is known: a wedge, a grid, or patches at places."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from runner.capture.frame import Box, Frame
from runner.errors import MeasurementRefused
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.patch_order import arrangements, out_of_order
from runner.measure.options import number, read_record
from runner.measure.patch_finding import Patches, PatchOptions, candidates
from runner.measure.placing import place
from runner.spec.model import Camera, Region

NAME = "grey steps"
TITLE = "Grey steps"
GROUP = "tone and colour"
OFFERS = frozenset({"grey steps"})
METHODS = ("tone response",)
REFERENCES = (
    "ISO 14524:2009 (grey-scale test chart for the opto-electronic conversion function)",
    "ISO 5-1:2009 (density is the negative decimal logarithm of reflectance or transmittance)",
)


@dataclass(frozen=True)
class Options(PatchOptions):
    """What the chart is: where its patches lie, and how much light each sends."""

    density: Sequence[float | str] | None = field(
        default=None, metadata={"sentence": "Density of every patch, row by row from the upper left, e.g. [0.05, 0.2]."}
    )
    reflectance: Sequence[float | str] | None = field(
        default=None,
        metadata={"sentence": "Or its reflectance or transmittance, or any relative light, e.g. [89 %, 63 %]."},
    )

    def __post_init__(self) -> None:
        """Turn texts into numbers and hold the patches against their lights."""
        super().__post_init__()
        if (self.density is None) == (self.reflectance is None):
            raise ValueError("the patches' light is not known: write density: or reflectance:, not both")
        if self.density is not None:
            known = tuple(number(f"density {n}", d, "", -0.3, 6.0) for n, d in enumerate(self.density, 1))
            object.__setattr__(self, "density", known)
        else:
            asked = enumerate(self.reflectance or (), 1)
            object.__setattr__(
                self, "reflectance", tuple(number(f"reflectance {n}", r, "%", 1e-6, 1e6) for n, r in asked)
            )
        if len(self.lights) != self.count:
            word = "density" if self.density is not None else "reflectance"
            raise ValueError(f"{word} names {len(self.lights)} patches, the chart has {self.count}")

    @property
    def lights(self) -> tuple[float, ...]:
        """Relative light of every patch."""
        if self.density is not None:
            return tuple(float(10 ** -float(d)) for d in self.density)
        return tuple(float(r) for r in self.reflectance or ())


def read_options(asked: Mapping[str, Any]) -> Options:
    """Read the options from a spec's keys.

    Raises:
        UsageError: A key or value is not allowed.
    """
    return read_record(Options, asked)


def locate(
    frames: Sequence[Frame], regions: Sequence[Region], camera: Camera, options: Options
) -> Sequence[Found | NotFound]:
    """Find the patches in each region, and hold the order of their levels against that of their lights."""
    found: list[Found | NotFound] = []
    for region in regions:
        box = place(region, frames[0])
        if isinstance(box, NotFound):
            found.append(box)
            continue
        try:
            found.append(_locate_one(frames[0], region.name, box, camera, options))
        except MeasurementRefused as refused:
            found.append(NotFound(region.name, box, refused.cause, str(refused)))
    return found


def _locate_one(frame: Frame, name: str, box: Box, camera: Camera, options: Options) -> Found:
    lights = np.array(options.lights)
    ways = candidates(frame, box, camera, options)
    faults = [_fault(frame, way, lights, camera) for way in ways]
    good = next((way for way, fault in zip(ways, faults, strict=True) if not fault), None)
    if good is None:
        raise MeasurementRefused("another scene", faults[0])
    geometry = {f"light {n}": float(light) for n, light in enumerate(lights, 1)}
    return Found(name, box, OFFERS, geometry, good.outline, {"patches": good.points})


def _fault(frame: Frame, way: Patches, lights: np.ndarray, camera: Camera) -> str:
    """Return what is wrong with the order of the patches, or nothing."""
    areas = [frame.codes[b.y0 : b.y1, b.x0 : b.x1] for b in way.boxes]
    levels = np.array([float(area.mean(dtype=np.float64)) for area in areas]) - camera.black_level
    u = np.array([float(area.std(dtype=np.float64)) / np.sqrt(area.size) + 0.3 for area in areas])  # whole codes
    wrong = out_of_order(levels, u, lights)
    if wrong is None:
        return ""
    if way.layout is not None:
        for words, order in arrangements(*way.layout):
            if out_of_order(levels, u, lights[list(order)]) is None:
                return f"the steps run as if the chart were {words}"
    a, b = wrong
    return (
        f"the steps are not in the order that the spec states: patch {a + 1} must be brighter than patch {b + 1}, "
        f"their levels are {levels[a]:.0f} and {levels[b]:.0f} DN over black"
    )
