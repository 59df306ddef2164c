"""Defective pixels, columns and rows, clusters and blemishes of an even field, counted and placed.

The mean of all frames is looked through: a dark for hot pixels, a flat for dead, dim and bright ones and for blemishes,
both for columns and rows that depart as a whole. A pixel is defective where it departs from its neighbours by more than
`threshold` times the local noise of that mean frame; pixels of defective columns and rows are not counted once more.
Stuck and blinking pixels show in a set of frames only: a blinking one from two frames on, a stuck one where so many
equal codes do not come by chance, with whole codes from some ten frames on.

A mosaic's channel is compared with pixels of its own colour; the two kinds of green are brought to one level first.

Every count is to be had for the middle of the region and for what lies around it too: `hot_pixels_centre`,
`clusters_outer` and so on, with the option `centre`.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import ceil

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure import planes
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.defect_overlaps import area_of, outside, whole
from runner.measure.defect_spots import Listed
from runner.measure.defect_zones import CENTRE, Zone, split
from runner.measure.evenness import refuse_uneven
from runner.measure.numerics.defects import (
    Cluster,
    Defect,
    K,
    Pixels,
    Unsteady,
    clusters,
    flat_pixels,
    hot_pixels,
    unsteady_pixels,
)
from runner.measure.numerics.large_defects import (
    WINDOW,
    Blemishes,
    LineDefect,
    blemishes,
    line_defects,
    off_lines,
)
from runner.measure.numerics.stack_noise import mean_frame
from runner.measure.options import number, reader
from runner.measure.reading import Reading, Refusal, Spot

NAME = "defects"
TITLE = "Defective pixels, lines and blemishes"
GROUP = "uniformity and noise"
TOGETHER = True
NEEDS = frozenset({"uniform"})
REFERENCES = (
    "EMVA Standard 1288 Release 4.0 Linear (2021), defect pixels: no thresholds, the application sets them",
    "P. J. Rousseeuw and C. Croux, J. Am. Stat. Assoc. 88 (1993) 1273 (local noise by median absolute deviation)",
)
ESTIMATOR = "count"

MOST_SPOTS = 500
"""Places that are listed; of more, the strongest, columns, rows, clusters and blemishes before single pixels."""
MOST_CLAMPED = 0.25
"""Share of a dark's pixels at code 0 up to which the median of departures still tells its noise."""
LEAST_SIDE = 32
"""Rows and columns that a region needs: one block of the local noise."""
LEAST_SIZE = 2.0
"""Width of a blemish in the channel's own pixels that can be told."""
FALSE = 0.5
"""Number of false ones by noise from which on it is said."""
HEAVY = 10.0
"""Share of far departures, over that of normal noise, from which on it is said."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "hot_pixels": QuantityInfo("1", "Pixels of a dark that lie above their neighbours by more than the threshold."),
    "dead_pixels": QuantityInfo("1", "Pixels of a flat with less than `dead_below` of their neighbours' light."),
    "dim_pixels": QuantityInfo("1", "Pixels of a flat below their neighbours by the threshold, but not dead."),
    "bright_pixels": QuantityInfo("1", "Pixels of a flat above their neighbours by more than the threshold."),
    "stuck_pixels": QuantityInfo("1", "Pixels of the same code in every frame while their neighbours change."),
    "blinking_pixels": QuantityInfo(
        "1",
        "Pixels that change from frame to frame more than their neighbours, as rarely as noise passes the threshold; "
        "a hot one counts as hot alone, for its dark signal has noise of its own.",
    ),
    "blemishes": QuantityInfo(
        "1", "Smooth spots of a flat of more than `blemish_contrast` over more than `blemish_size`."
    ),
    "clusters": QuantityInfo("1", "Groups of two or more defective pixels that touch by sides or corners."),
    "largest_cluster": QuantityInfo("1", "Pixels of the largest group; 0 if none touch."),
    "defective_columns": QuantityInfo("1", "Columns that depart as a whole from their neighbours."),
    "defective_rows": QuantityInfo("1", "Rows that depart as a whole from their neighbours."),
}
_ONLY = {
    "hot_pixels": False,
    "dead_pixels": True,
    "dim_pixels": True,
    "bright_pixels": True,
    "blemishes": True,
}
"""Quantities of lit frames only (true) or of dark ones only (false)."""


@dataclass(frozen=True)
class Options:
    """What counts as a defect."""

    threshold: float = field(
        default=K,
        metadata={
            "sentence": "Times the local noise of the mean frame from which on a pixel, column or row is defective, "
            "3 to 100; at 5.6 normal noise gives less than one false pixel in 10 MP."
        },
    )
    dead_below: float | str = field(
        default=0.5,
        metadata={"sentence": "Share of the neighbours' light below which a pixel is dead and not dim, 1 % to 99 %."},
    )
    blemish_contrast: float | str = field(
        default=0.015,
        metadata={"sentence": "Departure from the surroundings that makes a blemish, 0.1 % to 90 % of their light."},
    )
    blemish_size: float | str = field(
        default=5.0,
        metadata={"sentence": "Width over which it must depart so, 2 px to 1000 px (4 px at least in a mosaic)."},
    )
    centre: float | str = field(
        default=0.5,
        metadata={
            "sentence": "Share of the region's width and height that the centre takes, 10 % to 90 %, for quantities "
            "that end in _centre or _outer."
        },
    )

    def __post_init__(self) -> None:
        """Turn amounts into numbers and keep each option inside its meaning."""
        for name, unit, low, high in (
            ("threshold", "", 3.0, 100.0),
            ("dead_below", "%", 0.01, 0.99),
            ("blemish_contrast", "%", 0.001, 0.9),
            ("blemish_size", "px", 2.0, 1000.0),
            ("centre", "%", 0.1, 0.9),
        ):
            object.__setattr__(self, name, number(name, getattr(self, name), unit, low, high))


read_options = reader(Options)


def quantity(name: str) -> QuantityInfo | None:
    """Return what a quantity name means, or None."""
    plain, zone = split(name)
    info = _QUANTITIES.get(plain)
    if info is None or not zone:
        return info
    where = "the centre of the region" if zone == CENTRE else "what lies around the centre of the region"
    return replace(info, sentence=f"{info.sentence.removesuffix('.')}; in {where}.")


def quantities() -> Mapping[str, QuantityInfo]:
    """Return the quantities."""
    return _QUANTITIES


@dataclass(frozen=True)
class _Found:
    """Everything that was found in one region and channel."""

    lit: bool
    """In a flat; else in a dark."""
    pixels: Pixels
    """Of the mean frame."""
    singles: Mapping[str, Sequence[Defect]]
    """Pixels off defective columns and rows, by kind."""
    lines: tuple[LineDefect, ...]
    """Columns and rows."""
    unsteady: Unsteady | None
    """From frame to frame; None of one frame."""
    groups: tuple[Cluster, ...]
    """Clusters."""
    spots: Blemishes | Refusal | None
    """Blemishes, why there are none to be told, or None in a dark."""


def measure(sample: Sample, options: Options) -> Measurement:
    """Count the defects of all frames of a capture in one region and channel.

    Raises:
        MeasurementRefused: Clipped or dark frames, or a region too small.
    """
    lit = bool(sample.found.geometry.get("lit", 0.0))
    frames = planes.stack(sample.frames)
    planes.refuse_clipped(frames, **({"most_high": planes.MOST_CLIPPED} if lit else {"most_low": MOST_CLAMPED}))
    refuse_uneven(frames, lit=lit)
    if min(frames.shape) < LEAST_SIDE:
        rows, columns = frames.shape
        raise MeasurementRefused(
            "outside the estimator's limits",
            f"the region has {rows} rows and {columns} columns of its own",
            allowed=f"the local noise needs {LEAST_SIDE} of each",
        )
    if lit:
        planes.refuse_dark(frames)
    mean = mean_frame(frames.frames)
    mean -= np.float32(frames.camera.black_level)
    planes.balance_greens(mean, frames.grid, gain=lit)
    found = _find(frames, mean, options, lit=lit)
    singles = [one for some in found.singles.values() for one in some]
    blemished = found.spots.spots if isinstance(found.spots, Blemishes) else ()
    listed = Listed(sample.found.region, sample.found.box, frames, mean)
    told = listed.strongest(MOST_SPOTS, singles, found.lines, found.groups, blemished)
    return Measurement(tuple(_readings(sample, frames, found, options, told)), spots=told)


def _find(frames: planes.Stack, mean: NDArray[np.float32], options: Options, *, lit: bool) -> _Found:
    k = float(options.threshold)
    code = planes.step(frames) / len(frames.frames)
    dead = float(options.dead_below)
    pixels = flat_pixels(mean, k, dead=dead, step=code) if lit else hot_pixels(mean, k, step=code)
    unsteady = unsteady_pixels(frames.frames, k, gain_drift=lit) if len(frames.frames) > 1 else None
    spots = _blemishes(frames, mean, options) if lit else None
    met = [] if not isinstance(spots, Blemishes) else [area_of(one, frames.grid) for one in spots.spots]
    lines = tuple(one for one in line_defects(mean, pixels.defects, k) if whole(mean, one, met, k))
    alone = outside(pixels.defects, met)
    every = [alone]
    if unsteady is not None:
        hot = set() if lit else {(one.x, one.y) for one in pixels.defects}
        blinking = [one for one in unsteady.blinking.defects if (one.x, one.y) not in hot]
        every += [unsteady.stuck or (), blinking]
    singles: dict[str, list[Defect]] = {}
    for defect in (one for some in every for one in off_lines(some, lines)):
        singles.setdefault(defect.kind, []).append(defect)
    groups = clusters([one for some in singles.values() for one in some])
    return _Found(lit, pixels, singles, lines, unsteady, groups, spots)


def _blemishes(frames: planes.Stack, mean: NDArray[np.float32], options: Options) -> Blemishes | Refusal:
    contrast, size = float(options.blemish_contrast), float(options.blemish_size)
    wide, _ = planes.square(mean, frames.grid)
    pitch = frames.grid.across
    if not LEAST_SIZE <= size / pitch < WINDOW * min(wide.shape):
        because = (
            f"blemishes of {size:g} px are asked for; in this region {LEAST_SIZE * pitch:g} px to "
            f"{WINDOW * min(wide.shape) * pitch:.0f} px can be told from the background"
        )
        return Refusal("outside the estimator's limits", because)
    try:
        found = blemishes(wide, contrast, size / pitch, k=float(options.threshold))
    except ValueError as error:  # light that falls to nothing somewhere
        return Refusal("too dark", str(error))
    if found.least > contrast:
        because = (
            f"noise hides what departs by less than {100 * found.least:.2g} %, {100 * contrast:.2g} % is asked for; "
            "more frames or more light lessen it"
        )
        return Refusal("too noisy", because)
    return found


def _readings(
    sample: Sample, frames: planes.Stack, found: _Found, options: Options, told: Sequence[Spot]
) -> Iterator[Reading]:
    wanted = {one.quantity for one in sample.wanted}
    for name in (*_QUANTITIES, *sorted(wanted - set(_QUANTITIES))):
        plain, word = split(name)
        zone = Zone(frames.shape, float(options.centre), word == CENTRE) if word else None
        if _ONLY.get(plain, found.lit) is not found.lit:
            if name in wanted:
                where = "a dark frame" if found.lit else "an evenly lit field"
                refusal = Refusal("not defined", f"{name.replace('_', ' ')} are counted in {where}")
                yield replace(_blank(sample, name), refusal=refusal)
            continue
        part = found if zone is None else _within(found, zone, frames)
        count = _count(plain, len(frames.frames), part)
        if isinstance(count, Refusal):
            yield replace(_blank(sample, name), refusal=count)
            continue
        listed = count if zone else sum(spot.kind == _kind(name) for spot in told)
        cut = (f"{listed} of them are listed",) if plain != "largest_cluster" and listed < count else ()
        flags = (*cut, *_about_noise(plain, part, options))
        trials = _trials(
            plain, frames.size if zone is None else zone.size, frames.shape if zone is None else zone.lines
        )
        yield replace(_blank(sample, name), value=float(count), u=0.0, trials=trials, count=True, flags=flags)


def _within(found: _Found, zone: Zone, frames: planes.Stack) -> _Found:
    """Return what lies in a zone."""
    share = zone.size / frames.size
    unsteady, spots = found.unsteady, found.spots
    if unsteady is not None:
        blinking = replace(unsteady.blinking, expected_false=share * unsteady.blinking.expected_false)
        unsteady = replace(unsteady, blinking=blinking)
    if isinstance(spots, Blemishes):
        spots = replace(spots, spots=zone.blemishes(spots.spots, 2 if frames.grid.shift else 1))
    return replace(
        found,
        pixels=replace(found.pixels, expected_false=share * found.pixels.expected_false),
        singles={kind: zone.pixels(some) for kind, some in found.singles.items()},
        lines=zone.through(found.lines),
        unsteady=unsteady,
        groups=zone.clusters(found.groups),
        spots=spots,
    )


def _count(name: str, frames: int, found: _Found) -> int | Refusal:
    """Return a count, or why there is none."""
    if name == "clusters":
        return len(found.groups)
    if name == "largest_cluster":
        return found.groups[0].size if found.groups else 0
    if name in {"defective_columns", "defective_rows"}:
        return sum(line.direction in name for line in found.lines)
    if name == "blemishes":
        return found.spots if isinstance(found.spots, Refusal) else len(found.spots.spots if found.spots else ())
    if name in {"stuck_pixels", "blinking_pixels"} and found.unsteady is None:
        return Refusal("too few frames", "one frame does not tell what changes; capture 2 of the same scene at least")
    if name == "stuck_pixels" and found.unsteady is not None and found.unsteady.stuck is None:
        chance = found.unsteady.stuck_chance
        because = f"a sound pixel gives the same code in all {frames} frames with a probability of {chance:.2g}"
        return Refusal("too few frames", f"{because}; some ten frames tell stuck ones")
    return len(found.singles.get(name.removesuffix("_pixels"), ()))


def _trials(name: str, pixels: int, lines: tuple[int, int]) -> int | None:
    if name.endswith("_pixels"):
        return pixels
    return {"defective_rows": lines[0], "defective_columns": lines[1]}.get(name)


def _about_noise(name: str, found: _Found, options: Options) -> tuple[str, ...]:
    """Say where noise alone makes a part of the count."""
    if name not in {"hot_pixels", "dim_pixels", "bright_pixels", "blinking_pixels"}:
        return ()
    of = found.unsteady.blinking if name == "blinking_pixels" and found.unsteady is not None else found.pixels
    flags = []
    if of.expected_false >= FALSE:
        flags.append(
            f"at {options.threshold:g} times the noise, noise alone gives some {ceil(of.expected_false)} pixels"
        )
    if of.tail >= HEAVY:
        flags.append(f"{of.tail:.0f} times as many pixels depart far as normal noise would let")
    return tuple(flags)


def _kind(name: str) -> str:
    """Return the kind of the spots that a quantity counts."""
    names = {"blemishes": "blemish", "clusters": "cluster", "defective_columns": "defective column"}
    names |= {"defective_rows": "defective row"}
    return names.get(name, name.removesuffix("s").replace("_", " "))


def _blank(sample: Sample, name: str) -> Reading:
    return Reading(sample.found.region, name, "1", None, None, estimator=ESTIMATOR, method=REFERENCES[0])
