"""A square grid of round dots over the frame, or over a region: finds all of them and counts them on their lattice.

Dots may be darker or brighter than the ground. A chart whose grid overflows the frame is measured with the dots that
lie wholly in it. Marks are dots that are larger; the first is the origin.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from runner.capture.frame import Box, Frame
from runner.errors import MeasurementRefused
from runner.measure.contract import Found, NotFound
from runner.measure.lattice_finding import (
    LEAST_POINTS,
    LEAST_SIDE,
    Lattice,
    LatticeOptions,
    counted,
    missing_of,
    offered,
    placed,
    refuse_few,
    refuse_levels,
)
from runner.measure.numerics.blob_search import Blobs, find_blobs, first_binning, levels
from runner.measure.numerics.lattice_index import LatticeIndex, index_lattice
from runner.measure.options import number, reader
from runner.spec.model import Camera, Region

NAME = "dot grid"
TITLE = "Dot grid"
GROUP = "geometry"
OFFERS = frozenset({"lattice"})
METHODS = ("geometry",)
REFERENCES = ("ISO 17850:2015 (dot chart)", "ISO 19084:2015 4.2.1 (dot chart)")

LEAST_DIAMETER = 6.0
"""px: a smaller dot's border has no inside, and the share of its area per pixel hides its shape."""
WELL_SEEN = 6.0
"""px of the averaged picture: smaller dots are looked for in a finer one."""
MOST_STRAY = 0.4
"""Share of round pieces off the lattice: beyond, it is no grid with some specks but something else."""
ROUND, ROUND_SMALL, SMALL = 0.965, 0.945, 10.0
"""Median area over that of the ellipse with the same moments: a square or parallelogram has 0.955, a disc 1, one of
less than 10 px of the averaged picture, or one bent by distortion, down to 0.96."""
BOARD = (0.36, 0.44)
"""Radius of the disc that is as large as a square of a board: 0.399 pitches of the squares' own lattice."""
LARGER = 1.2
"""A dot so many times wider than most is a mark."""
AUTO, DARK, BRIGHT = "auto", "dark", "bright"


@dataclass(frozen=True)
class Options(LatticeOptions):
    """What the chart is."""

    dots: str = field(
        default=AUTO,
        metadata={"sentence": "`dark` or `bright` against their ground, or `auto`: dark ones are tried first."},
    )
    diameter: float | str | None = field(
        default=None,
        metadata={"sentence": "Diameter of a dot on the chart, e.g. 5 mm; for the record and the artwork."},
    )

    def __post_init__(self) -> None:
        """Keep each option inside its meaning."""
        super().__post_init__()
        if self.dots not in {AUTO, DARK, BRIGHT}:
            raise ValueError(f"dots is {self.dots!r}; allowed are {AUTO}, {DARK} and {BRIGHT}")
        if self.diameter is not None:
            object.__setattr__(self, "diameter", number("diameter", self.diameter, "mm", 1e-4, 1e4))


read_options = reader(Options)


def locate(
    frames: Sequence[Frame], regions: Sequence[Region], camera: Camera, options: Options
) -> Sequence[Found | NotFound]:
    """Find the grid in every region of the capture's first frame, or in the whole frame."""
    found: list[Found | NotFound] = []
    for one in placed(frames[0], regions):
        if isinstance(one, NotFound):
            found.append(one)
            continue
        name, box = one
        try:
            found.append(_locate_one(frames[0], name, box, camera, options))
        except MeasurementRefused as refused:
            found.append(NotFound(name, box, refused.cause, str(refused)))
    return found


def _locate_one(frame: Frame, name: str, box: Box, camera: Camera, options: Options) -> Found:
    codes = frame.codes[box.y0 : box.y1, box.x0 : box.x1]
    refuse_levels(codes, camera)
    blobs, index = _search(codes, options)
    refuse_few(index, "round dots", len(blobs.centres), "a dot grid")
    members = index.members
    diameter = 2 * float(np.sqrt(np.median(blobs.areas[members]) / np.pi))
    roundness = float(np.median(blobs.roundness[members]))
    radius = np.sqrt(blobs.areas[members] / np.pi / np.abs(np.linalg.det(index.steps)))
    middle = float(np.median(radius))
    least = ROUND_SMALL if diameter < SMALL * blobs.binning else ROUND
    least = max(least, ROUND + 0.01) if BOARD[0] < middle < BOARD[1] else least
    if roundness < least:
        found = (
            f"the {len(members)} pieces on a lattice fill {100 * roundness:.1f} % of ellipses of their extent; discs "
            f"fill 100 %, squares 95.5 %"
        )
        raise MeasurementRefused("another scene", found, allowed=f"{100 * least:g} % is needed")
    if diameter < LEAST_DIAMETER:
        found = f"the dots are {diameter:.1f} px wide; {LEAST_DIAMETER:g} px are needed"
        raise MeasurementRefused("undersampled", found, next_step="go nearer or take a chart with larger dots")
    stray = len(blobs.centres) - len(members)
    if stray > MOST_STRAY * len(blobs.centres):
        found = f"{stray} of {len(blobs.centres)} round pieces do not lie on the lattice"
        raise MeasurementRefused("another scene", found, allowed=f"at most {100 * MOST_STRAY:g} % may")
    large = radius > LARGER * middle
    lattice = Lattice(blobs.centres[members], index.places, index.steps, "dots")
    lattice = counted(lattice, index.places[large], options)
    geometry = {
        "radius": middle,
        "larger": float(np.median(radius[large]) / middle) if large.any() else 1.0,
        "binning": float(blobs.binning),
    }
    marks = {"larger": tuple((float(a), float(b)) for a, b in lattice.places[large])}
    return offered(name, box, lattice, geometry, marks, missing_of(lattice, options))


def _search(codes: Any, options: Options) -> tuple[Blobs, LatticeIndex]:
    """Return the round pieces and their lattice from the coarsest picture that shows them well."""
    binning = first_binning(codes.shape)
    best: tuple[Blobs, LatticeIndex] | None = None
    while True:
        at = levels(codes, binning)
        for dark in (True, False):
            if options.dots != AUTO and dark != (options.dots == DARK):
                continue
            blobs = find_blobs(at, dark=dark)
            index = index_lattice(blobs.centres)
            if best is None or len(index.members) > len(best[1].members):
                best = (blobs, index)
        assert best is not None  # noqa: S101 - one of both kinds was looked for
        members = best[1].members
        seen = 2 * np.sqrt(np.median(best[0].areas[members]) / np.pi) / best[0].binning if len(members) else 0.0
        if (min(best[1].size) >= LEAST_SIDE and len(members) >= LEAST_POINTS and seen >= WELL_SEEN) or binning == 1:
            return best
        binning = max(1, binning // 2)
