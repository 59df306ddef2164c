"""What dot grids and chequered boards have in common when they are looked for: size, marks, gaps, and what is refused.

A chart without marks is counted along the direction nearest to +x; with marks (at least three that are not symmetric)
it is known which way up it stands and whether it is seen from behind.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from runner.capture.frame import Box, Frame
from runner.errors import MeasurementRefused
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.lattice_index import LatticeIndex, Real, Whole, by_marks, gaps
from runner.measure.options import number
from runner.measure.placing import place
from runner.spec.model import Camera, Region

LEAST_POINTS = 25
"""Fewer points do not determine a view with its distortion (13 parameters) and show its residuals."""
LEAST_SIDE = 4
"""Columns and rows at least: radial distortion needs points at several distances in every direction."""
DARKEST = 0.01
"""Light below this share of the range over black is a dark picture."""
BRIGHTEST = 0.99
"""A dark level above that share of the range is a white picture."""
LEAST_MODULATION = 0.05
"""(light - dark) / (light + dark) at least."""
MOST_SIZE = 400


@dataclass(frozen=True)
class LatticeOptions:
    """What the chart is."""

    columns: int | None = field(
        default=None, metadata={"sentence": "Number along the chart's rows; if stated, all must lie in the frame."}
    )
    rows: int | None = field(
        default=None, metadata={"sentence": "Number along the chart's columns; if stated, all must lie in the frame."}
    )
    marks: Sequence[Sequence[int]] = field(
        default=(),
        metadata={"sentence": "Columns and rows of the marks, the origin first, e.g. [[6, 4], [8, 4], [6, 5]]."},
    )
    most_missing: float | str = field(
        default=0.1, metadata={"sentence": "Share of places inside the lattice's outline that may be empty, e.g. 10 %."}
    )

    def __post_init__(self) -> None:
        """Keep each option inside its meaning."""
        for name in ("columns", "rows"):
            count = getattr(self, name)
            if count is not None and (
                isinstance(count, bool) or not isinstance(count, int) or not LEAST_SIDE <= count <= MOST_SIZE
            ):
                raise ValueError(f"{name} is {count!r}; allowed are whole numbers from {LEAST_SIDE} to {MOST_SIZE}")
        if (self.columns is None) != (self.rows is None):
            raise ValueError("columns and rows go together; one of them is missing")
        object.__setattr__(self, "marks", _pairs(self.marks))
        object.__setattr__(self, "most_missing", number("most_missing", self.most_missing, "%", 0.0, 0.5))


def _pairs(asked: object) -> tuple[tuple[int, int], ...]:
    allowed = "allowed is a list of pairs of whole numbers, e.g. [[6, 4], [8, 4], [6, 5]]"
    if not isinstance(asked, (list, tuple)):
        raise TypeError(f"marks is {asked!r}; {allowed}")
    for one in asked:
        whole = isinstance(one, (list, tuple)) and len(one) == 2
        if not whole or any(isinstance(n, bool) or not isinstance(n, int) for n in one):
            raise ValueError(f"marks holds {one!r}; {allowed}")
    pairs = tuple((one[0], one[1]) for one in asked)
    if len(set(pairs)) != len(pairs):
        raise ValueError(f"marks holds a place twice; {allowed}")
    return pairs


@dataclass(frozen=True)
class Lattice:
    """Points of one frame with their places on the chart."""

    points: Real
    """(n, 2), px of the part that was searched, pixel centres at +0.5."""
    places: Whole
    """Column and row of each."""
    steps: Real
    """Steps about each, px, (n, 2, 2)."""
    words: str
    """What the points are, in the plural: `dots`, `corners`."""


def placed(frame: Frame, regions: Sequence[Region]) -> list[tuple[str, Box] | NotFound]:
    """Return name and box of every region; without regions, of the whole frame under the name ''."""
    rows, columns = frame.shape
    if not regions:
        return [("", Box(0, 0, columns, rows))]
    boxes = [(region.name, place(region, frame)) for region in regions]
    return [box if isinstance(box, NotFound) else (name, box) for name, box in boxes]


def refuse_levels(codes: Any, camera: Camera) -> None:
    """Refuse a picture without content before anything is looked for.

    Args:
        codes: Rows × columns of the region.
        camera: Black and white level.

    Raises:
        MeasurementRefused: One single value, too dark, too bright, or without two levels.
    """
    some = codes[:: max(1, codes.shape[0] // 400), :: max(1, codes.shape[1] // 400)]
    if some.min() == some.max():
        raise MeasurementRefused("no picture", f"every pixel that was looked at has the code {some.flat[0]}")
    low, high = (np.percentile(some, (2, 98)) - camera.black_level) / (camera.white_level - camera.black_level)
    if high < DARKEST:
        found = f"the brightest part reaches {100 * high:.2f} % of the range over black; {100 * DARKEST:g} % is needed"
        raise MeasurementRefused("too dark", found)
    if low > BRIGHTEST:
        found = f"the darkest part lies at {100 * low:.1f} % of the range; it must stay below {100 * BRIGHTEST:g} %"
        raise MeasurementRefused("too bright", found)
    modulation = (high - low) / max(high + max(low, 0.0), 1e-9)
    if modulation < LEAST_MODULATION:
        raise MeasurementRefused(
            "no modulation",
            f"the levels, {100 * low:.1f} to {100 * high:.1f} % of the range, differ by a modulation of "
            f"{100 * modulation:.1f} %; {100 * LEAST_MODULATION:g} % is needed",
        )


def refuse_few(index: LatticeIndex, words: str, seen: int, what: str) -> None:
    """Refuse points that are too few to be the chart.

    Args:
        index: What lies on a lattice.
        words: What the points are, in the plural.
        seen: How many there are with and without a place.
        what: The chart, with its article.

    Raises:
        MeasurementRefused: `another scene`.
    """
    if len(index.members) < LEAST_POINTS or min(index.size) < LEAST_SIDE:
        found = f"{seen} {words} were found, {len(index.members)} of them on a square lattice; this is not {what}"
        allowed = f"{LEAST_POINTS} on {LEAST_SIDE} columns and rows are needed"
        raise MeasurementRefused("another scene", found, allowed=allowed)


def counted(lattice: Lattice, marked: Whole, options: LatticeOptions, *, squares: bool = False) -> Lattice:
    """Count places as the chart does: by its marks, or else so that columns and rows come out as stated.

    Args:
        lattice: As found, places from 0.
        marked: Places of the marks found.
        options: The chart.
        squares: Marks lie in squares, half a place to the right of and below the corner whose place they have.

    Raises:
        MeasurementRefused: Marks that lie otherwise or mirrored; too many or too few columns or rows; too many gaps.
    """
    pattern = tuple((one[0], one[1]) for one in options.marks)
    places, mirrored = lattice.places, False
    if pattern:
        turned = by_marks(2 * places, 2 * marked + (1 if squares else 0), [(2 * a, 2 * b) for a, b in pattern])
        if turned is None:
            raise MeasurementRefused("another scene", _strange_marks(marked, pattern))
        places, mirrored = turned.places, turned.mirrored
        places = (places + (1 if squares else 0)) // 2 + np.array(pattern[0])
    if mirrored:
        found = "the chart's marks lie mirrored: it is seen from behind, or the picture is reversed"
        raise MeasurementRefused("another scene", found, next_step="turn the chart round")
    columns, rows = (int(n) for n in np.ptp(places, axis=0) + 1)
    if options.columns and not pattern and (columns, rows) == (options.rows, options.columns) != (rows, columns):
        columns, rows = rows, columns
        places = np.column_stack([places[:, 1], places[:, 0].max() - places[:, 0]])
    steps = _turned_steps(lattice.steps, lattice.places, places)
    if options.columns and (columns, rows) != (options.columns, options.rows):
        more = columns > options.columns or rows > (options.rows or 0)
        found = (
            f"{columns} columns and {rows} rows of {lattice.words} were found; "
            f"the chart has {options.columns} and {options.rows}"
        )
        step = (
            "use the chart that the spec names" if more else "the whole chart must lie in the frame, free of anything"
        )
        raise MeasurementRefused("another scene" if more else "off the frame", found, next_step=step)
    empty, there = len(gaps(places - places.min(axis=0))), len(places)
    if options.columns and options.rows:
        empty = options.columns * options.rows - there
    share = empty / (empty + there)
    if share > float(options.most_missing):
        found = f"{empty} of {empty + there} {lattice.words} are missing ({100 * share:.0f} %)"
        allowed = f"at most {100 * float(options.most_missing):g} % may"
        raise MeasurementRefused("another scene", found, allowed=allowed, next_step="clean or uncover the chart")
    return Lattice(lattice.points, places, steps, lattice.words)


def _strange_marks(marked: Whole, pattern: tuple[tuple[int, int], ...]) -> str:
    at = "; ".join(f"column {a}, row {b}" for a, b in (marked - marked.min(axis=0)).tolist()[:6]) if len(marked) else ""
    where = f" at {at}" if at else ""
    return f"{len(marked)} marks were found{where}; the chart has {len(pattern)}, which lie otherwise"


def _turned_steps(steps: Real, old: Whole, new: Whole) -> Real:
    """Return steps of one column and one row as the new places count them."""
    if np.array_equal(old - old[0], new - new[0]):
        return steps
    turn, *_ = np.linalg.lstsq((new - new[0]).astype(np.float64), (old - old[0]).astype(np.float64), rcond=None)
    return np.asarray(steps @ turn.T)


def offered(
    name: str, box: Box, lattice: Lattice, geometry: Mapping[str, float], more: Mapping[str, Any], missing: int
) -> Found:
    """Return the lattice as a region's find, in px of the frame.

    Args:
        name: Region.
        box: Its box.
        lattice: In px of the box.
        geometry: Figures for methods.
        more: Further lists of pairs.
        missing: Points that the chart has and the frame has not.
    """
    points = lattice.points + np.array([box.x0, box.y0])
    corners = []
    for across, down in ((-1, -1), (1, -1), (1, 1), (-1, 1)):
        corners.append(points[(across * lattice.places[:, 0] + down * lattice.places[:, 1]).argmax()])
    return Found(
        name,
        box,
        frozenset({"lattice"}),
        {**geometry, "missing": float(missing)},
        tuple((float(x), float(y)) for x, y in corners),
        {
            lattice.words: tuple((float(x), float(y)) for x, y in points),
            "places": tuple((float(a), float(b)) for a, b in lattice.places),
            **more,
        },
    )


def missing_of(lattice: Lattice, options: LatticeOptions) -> int:
    """Return how many points are missing: of the stated number, else inside the outline of those found."""
    if options.columns and options.rows:
        return options.columns * options.rows - len(lattice.places)
    return len(gaps(lattice.places - lattice.places.min(axis=0)))
