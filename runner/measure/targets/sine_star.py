"""A star whose light follows a sine around its centre: one star in every region."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from math import hypot, pi

import numpy as np

from runner.capture.frame import Codes, Frame, linearise
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.star_search import Star, find_star
from runner.measure.options import number, reader
from runner.measure.placing import place
from runner.spec.model import Camera, Region

NAME = "sine star"
TITLE = "Sine star"
GROUP = "transfer function"
OFFERS = frozenset({"star"})
METHODS = ("star response",)
REFERENCES = (
    "ISO 12233:2014 (s-SFR: spatial frequency response from a sine-modulated star)",
    "R. Parthasarathy, Nature Methods 9 (2012) 724, doi:10.1038/nmeth.2071 (centre from gradients)",
)

DARKEST = 0.002
"""Mean light below this share of the range is a dark picture."""
MOST_RATIO = 1.15
"""Longest over shortest diameter: a chart tilted by 30 degrees."""
COARSEST = 0.2
"""cy/px; a star whose outermost stripes are finer leaves no band to measure in."""
SHARP = 0.2
"""Step from one pixel to the next but one, over the whole range: a wholly defocused star has none such."""
SHARPER = 0.7
"""The same over the step to the eighth: of a blurred stripe of twelve pixels it is half."""
CUT = 0.97
"""A star that reaches so near to the region's border may go on beyond it."""
COARSEST_CUT = 0.12
"""cy/px; the same as `COARSEST` for such a star."""


@dataclass(frozen=True)
class Options:
    """The physical star."""

    cycles: int | None = field(
        default=None, metadata={"sentence": "Cycles around the star, e.g. 72; without it, as many as are found."}
    )
    centre_mark: float | str = field(
        default=0.0, metadata={"sentence": "Diameter of a mark in its centre, in % of the star's."}
    )

    def __post_init__(self) -> None:
        """Keep each option inside its meaning."""
        good = self.cycles is None or (isinstance(self.cycles, int) and not isinstance(self.cycles, bool))
        if not good or (self.cycles is not None and not 16 <= self.cycles <= 300):
            raise ValueError(f"cycles is {self.cycles!r}; allowed is a whole number from 16 to 300")
        object.__setattr__(self, "centre_mark", number("centre_mark", self.centre_mark, "%", 0.0, 0.9))


read_options = reader(Options)


def locate(
    frames: Sequence[Frame], regions: Sequence[Region], camera: Camera, options: Options
) -> Sequence[Found | NotFound]:
    """Find centre, cycles and reach of the star in each region."""
    return [_locate_one(frames[0], region, camera, options) for region in regions]


def _locate_one(frame: Frame, region: Region, camera: Camera, options: Options) -> Found | NotFound:
    box = place(region, frame)
    if isinstance(box, NotFound):
        return box
    codes = frame.codes[box.y0 : box.y1, box.x0 : box.x1]
    some = linearise(codes[:: max(1, codes.shape[0] // 400), :: max(1, codes.shape[1] // 400)], camera)
    if float(some.mean()) < DARKEST:
        sentence = f"the region lies at {100 * float(some.mean()):.2f} % of the range over the black level"
        return NotFound(region.name, box, "too dark", sentence)
    if np.ptp(some) == 0 and np.ptp(codes) == 0:
        return NotFound(region.name, box, "no picture", "every pixel of the region has the same value")
    star = find_star(codes)
    if star is None:
        return NotFound(region.name, box, *_nothing(codes))
    reason = _unfit(star, options)
    if reason is not None:
        return NotFound(region.name, box, *reason)
    x, y = box.x0 + star.centre[0] + 0.5, box.y0 + star.centre[1] + 0.5
    geometry = {
        "centre_x": x,
        "centre_y": y,
        "cycles": float(star.cycles),
        "outer_radius": star.outer,
        "inner_radius": float(options.centre_mark) * star.outer,
        "stretch_x": star.stretch[0],
        "stretch_d": star.stretch[1],
    }
    corners = tuple((x + star.outer * sx, y + star.outer * sy) for sx, sy in ((-1, -1), (1, -1), (1, 1), (-1, 1)))
    return Found(region.name, box, OFFERS, geometry, corners, {"centre": ((x, y),)})


def _nothing(codes: Codes) -> tuple[str, str]:
    """Return why there is no star: something else with sharp borders, or nothing that differs."""
    rows = codes[:: max(1, codes.shape[0] // 1000)].astype(np.float64)
    near, far = (np.abs(rows[:, step:] - rows[:, :-step]) for step in (2, 8))
    noise = float(np.median(near))  # of pixels in even parts
    steep, rise = (max(0.0, float(np.quantile(each, 0.995)) - 4 * noise) for each in (near, far))
    low, high = np.quantile(rows[:, :: max(1, rows.shape[1] // 1000)], (0.01, 0.99))
    sentence = "no number of stripes from 16 to 300 repeats on circles about the point that stripes lead to"
    if steep > SHARP * float(high - low) and steep > SHARPER * rise:
        return "another scene", f"{sentence}; the region holds something else with sharp borders"
    return "no modulation", f"{sentence}, and no sharp border is in the region"


def _unfit(star: Star, options: Options) -> tuple[str, str] | None:
    if options.cycles is not None and star.cycles != options.cycles:
        return "another scene", f"the star has {star.cycles} cycles, the spec states {options.cycles}"
    a = hypot(*star.stretch)
    ratio = (1 + a) / (1 - a)
    if ratio > MOST_RATIO:
        sentence = f"the star's longest diameter is {ratio:.2f} times its shortest, at most {MOST_RATIO:g} may be"
        return "outside the estimator's limits", sentence
    coarsest = star.cycles / (2 * pi * star.outer)
    cut = star.outer > CUT * star.reach
    most = COARSEST_CUT if cut else COARSEST
    needed = star.cycles / (2 * pi * most)
    if coarsest <= most:
        return None
    if cut:
        sentence = (
            f"the star's centre lies {star.reach:.0f} px from the region's border; {needed:.0f} px of the star are "
            "needed around it"
        )
        return "off the frame", sentence
    sentence = (
        f"the star reaches {star.outer:.0f} px from its centre, where its {star.cycles} cycles have {coarsest:.2f} "
        f"cy/px; at least {needed:.0f} px are needed"
    )
    return "outside the estimator's limits", sentence
