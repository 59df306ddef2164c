"""A chart of even coloured patches whose L*a*b* are known: a grid, or patches at named places.

Patches are found in one grey picture, where their lightness tells whether the chart lies as stated; their colours are
held against the stated ones by the method `colour`, which sees the channels.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Box, Frame, linearise
from runner.errors import MeasurementRefused
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.patch_order import arrangements
from runner.measure.options import read_record
from runner.measure.patch_finding import Patches, PatchOptions, candidates, colours
from runner.measure.placing import place
from runner.spec.model import Camera, Region

Real = NDArray[np.float64]

NAME = "colour patches"
TITLE = "Colour patches"
GROUP = "tone and colour"
OFFERS = frozenset({"colour patches"})
METHODS = ("colour",)
AGREES, CERTAIN = 0.7, 0.9
"""Correlation of the patches' lightness with that of lab: below the first it is another chart or order; one way to lie
that reaches the second is told."""
LEAST_RANGE = 20.0
"""Range of lightness over the references below which it tells no order."""
REFERENCES = ("ISO 17321-1:2012 (colour characterisation from a chart)", "ISO/CIE 11664-4 (L*a*b*)")


@dataclass(frozen=True)
class Options(PatchOptions):
    """Where the chart's patches lie."""

    lab: Sequence[Sequence[float]] | None = field(
        default=None,
        metadata={
            "sentence": "L*, a*, b* of every patch, row by row: their lightness tells another chart or way to lie."
        },
    )

    def __post_init__(self) -> None:
        """Hold the patches against their colours."""
        super().__post_init__()
        if self.lab is not None:
            object.__setattr__(self, "lab", colours(self.lab))
            if len(self.lab) != self.count:
                raise ValueError(f"lab names {len(self.lab)} patches, the chart has {self.count}")


def read_options(asked: Mapping[str, Any]) -> Options:
    """Read the options from a spec's keys.

    Raises:
        UsageError: A key or value is not allowed.
    """
    return read_record(Options, asked)


def locate(
    frames: Sequence[Frame], regions: Sequence[Region], camera: Camera, options: Options
) -> Sequence[Found | NotFound]:
    """Find the patches in each region."""
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
    ways = candidates(frame, box, camera, options)
    if options.lab is not None:
        lightness = np.array(options.lab)[:, 0]
        seen = [_lightness(frame, way, camera) for way in ways]
        best = max(range(len(ways)), key=lambda n: round(_agreement(seen[n], lightness), 1))
        _refuse_order(ways[best], seen[best], lightness)
        ways = [ways[best]]
    size = {"columns": float(options.grid[0]), "rows": float(options.grid[1])} if options.grid else {}
    return Found(name, box, OFFERS, size, ways[0].outline, {"patches": ways[0].points})


def _lightness(frame: Frame, way: Patches, camera: Camera) -> Real:
    """Return cube roots of the patches' light: of raw colours' grey they follow lightness well enough for an order."""
    areas = [linearise(frame.codes[b.y0 : b.y1, b.x0 : b.x1], camera) for b in way.boxes]
    return np.cbrt([float(area.mean()) for area in areas])


def _agreement(seen: Real, lightness: Real) -> float:
    """Return the correlation of two, 0 where one of them is the same everywhere."""
    if np.ptp(seen) == 0 or np.ptp(lightness) == 0:
        return 0.0
    return float(np.corrcoef(seen, lightness)[0, 1])


def _refuse_order(way: Patches, seen: Real, lightness: Real) -> None:
    """Refuse patches whose lightness is not the stated one in the stated order.

    Raises:
        MeasurementRefused: `another scene`.
    """
    found = _agreement(seen, lightness)
    if found >= AGREES or np.ptp(lightness) < LEAST_RANGE:
        return
    if way.layout is not None:
        for words, order in arrangements(*way.layout):
            if _agreement(seen, lightness[list(order)]) >= CERTAIN:
                raise MeasurementRefused("another scene", f"the patches stand as if the chart were {words}")
    sentence = (
        f"the patches' lightness does not follow that of lab: their correlation is {found:.2f}; another chart, one "
        "that has moved, or one in another order"
    )
    raise MeasurementRefused("another scene", sentence, allowed=f"{AGREES:g} is needed")
