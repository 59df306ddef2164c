"""A chequered board over the frame, or over a region: finds its corners and counts them on their lattice.

Points are the corners where four squares meet; columns and rows count these, not the squares. Marks are discs of the
other colour in the middle of squares, each named by the corner at its upper left on the chart; the first is the origin.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from runner.capture.frame import Box, Frame, linearise
from runner.errors import MeasurementRefused
from runner.measure.contract import Found, NotFound
from runner.measure.lattice_finding import (
    LEAST_POINTS,
    Lattice,
    LatticeOptions,
    counted,
    missing_of,
    offered,
    placed,
    refuse_few,
    refuse_levels,
)
from runner.measure.numerics.blob_search import first_binning
from runner.measure.numerics.corner_fit import CornerFits, fit_corners
from runner.measure.numerics.corner_search import find_corners
from runner.measure.numerics.lattice_index import LatticeIndex, Real, Whole, index_lattice
from runner.measure.numerics.mark_pixels import Pixels
from runner.measure.options import number, read_record
from runner.spec.model import Camera, Region

NAME = "checkerboard"
TITLE = "Checkerboard"
GROUP = "geometry"
OFFERS = frozenset({"lattice"})
METHODS = ("geometry",)
REFERENCES = (
    "P. R. Beaudet, Proc. 4th Int. Joint Conf. Pattern Recognition (1978) 579 (saddles of the light)",
    "ISO 17850:2015 (geometric distortion; its charts are dots and lines, corners stand for dots here)",
)

LEAST_SQUARE = 9.0
"""px: in smaller squares the blur of one border reaches the next."""
MOST_MISFIT = 0.2
"""Rms of what two crossed borders leave over their swing: corners of a printed board stay below 0.15."""
LEAST_SWING = 0.5
"""A corner's swing over that of most."""
MOST_LEAN = 0.5
"""How far the light midway between corners lies towards a square's: of boards 0.1, of large dots 0.65 to 1."""
MARK = 0.5
"""A square's middle is a mark where it lies nearer to the other colour than to its own border."""


@dataclass(frozen=True)
class Options(LatticeOptions):
    """What the chart is."""

    square: float | str | None = field(
        default=None, metadata={"sentence": "Side of a square, e.g. 30 mm; the same as the pitch, for the artwork."}
    )

    def __post_init__(self) -> None:
        """Keep each option inside its meaning."""
        super().__post_init__()
        if self.square is not None:
            object.__setattr__(self, "square", number("square", self.square, "mm", 1e-4, 1e4))


def read_options(asked: Mapping[str, Any]) -> Options:
    """Read the options from a spec's keys.

    Raises:
        UsageError: A key or value is not allowed.
    """
    return read_record(Options, asked)


def locate(
    frames: Sequence[Frame], regions: Sequence[Region], camera: Camera, options: Options
) -> Sequence[Found | NotFound]:
    """Find the board in every region of the capture's first frame, or in the whole frame."""
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
    pixels = Pixels(np.ascontiguousarray(codes), lambda some: linearise(some, camera))
    seen, index, fits = _search(pixels)
    refuse_few(index, "corners of squares", seen, "a chequered board")
    side = _side(index)
    _refuse_round(pixels, index, fits)
    lattice = Lattice(fits.centres, index.places, index.steps, "corners")
    marked = _marked(pixels, lattice, fits) if options.marks else np.zeros((0, 2), np.intp)
    lattice = counted(lattice, marked, options, squares=True)
    return offered(name, box, lattice, {"side": side}, {}, missing_of(lattice, options))


def _search(pixels: Pixels) -> tuple[int, LatticeIndex, CornerFits]:
    """Return how many saddles there are, and the corners' lattice from the coarsest picture that shows them well."""
    codes = pixels.codes
    binning = first_binning((codes.shape[0], codes.shape[1]))
    while True:
        corners = find_corners(codes, binning)
        index, fits = _confirmed(pixels, corners.centres, corners.parity)
        if (len(index.members) >= LEAST_POINTS and min(index.size) >= 4) or binning == 1:
            return len(corners.centres), index, fits
        binning = max(1, binning // 2)


def _confirmed(pixels: Pixels, points: Real, parity: Whole) -> tuple[LatticeIndex, CornerFits]:
    """Return the lattice of those points that are crossings of two borders, with their fits."""
    index = index_lattice(points, parity)
    if len(index.members) >= LEAST_POINTS and _side(index) < LEAST_SQUARE:
        found = f"the squares are {_side(index):.1f} px wide; {LEAST_SQUARE:g} px are needed"
        raise MeasurementRefused("undersampled", found, next_step="go nearer or take a chart with larger squares")
    fits = fit_corners(pixels, points[index.members], index.steps)
    for _ in range(2):  # a strange point beside the board may have kept a true one off; then they are counted again
        swing = np.abs(fits.swing)
        usual = float(np.median(swing[fits.settled])) if fits.settled.any() else np.inf
        good = fits.settled & (fits.misfit < MOST_MISFIT * swing) & (swing > LEAST_SWING * usual)
        if good.all():
            break
        kept = index.members[good]
        again = index_lattice(fits.centres[good], parity[kept])
        fits = fits.some(np.flatnonzero(good)[again.members])
        index = LatticeIndex(kept[again.members], again.places, again.steps)
    return index, fits


def _refuse_round(pixels: Pixels, index: LatticeIndex, fits: CornerFits) -> None:
    """Refuse a lattice of gaps between large dots: midway between two corners of a board two squares meet halves."""
    at = {(int(a), int(b)): n for n, (a, b) in enumerate(index.places)}
    pairs = np.array([(n, at[a + 1, b]) for (a, b), n in at.items() if (a + 1, b) in at], dtype=np.intp)
    middle = (fits.centres[pairs[:, 0]] + fits.centres[pairs[:, 1]]) / 2
    light = pixels.between(middle)
    lean = float(np.median((light - fits.mean[pairs].mean(axis=1)) / np.abs(fits.swing[pairs]).mean(axis=1)))
    if abs(lean) > MOST_LEAN:
        found = (
            f"midway between corners the light lies {100 * abs(lean):.0f} % of the way to one colour of the squares; "
            "their borders are not straight"
        )
        raise MeasurementRefused("another scene", found, allowed=f"at most {100 * MOST_LEAN:g} % may")


def _side(index: LatticeIndex) -> float:
    """Return the side of a square, px: the median over the lattice."""
    return float(np.median(np.sqrt(np.abs(np.linalg.det(index.steps)))))


def _marked(pixels: Pixels, lattice: Lattice, fits: CornerFits) -> Whole:
    """Return the squares, by the corner with the least column and row, whose middle has the other colour."""
    at = {(int(a), int(b)): n for n, (a, b) in enumerate(lattice.places)}
    found = []
    for (a, b), n in at.items():
        ring = [at.get((a + i, b + j)) for i, j in ((0, 0), (1, 0), (1, 1), (0, 1))]
        if any(one is None for one in ring):
            continue
        corners = lattice.points[np.array(ring, dtype=np.intp)]
        middle = corners.mean(axis=0)
        inner, outer = (_light(pixels, middle + share * (corners - middle)) for share in (0.12, 0.78))
        if abs(inner - outer) > MARK * 2 * abs(float(fits.swing[n])):
            found.append((a, b))
    return np.array(found, dtype=np.intp).reshape(-1, 2)


def _light(pixels: Pixels, points: Real) -> float:
    columns, rows = (np.clip(np.floor(points[:, i]).astype(np.intp), 0, pixels.codes.shape[1 - i] - 1) for i in (0, 1))
    return float(np.mean(pixels.light(pixels.codes[rows, columns])))
