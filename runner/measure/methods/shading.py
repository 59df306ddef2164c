"""Shading of an evenly lit field: a map of blocks, its extremes, corners and centre, and how colour shades.

All frames of the capture are averaged over a grid of blocks. How uneven the field itself is cannot be known here: state
it as an uncertainty component. Black is the mean frame of the companion `dark`, where the capture uses one, else the
stated black level; for the colour shading of RGB frames always the latter.

Denominators: `uniformity` and `luminance_shading` are against the brightest block, `darkest_corner` and the map against
the middle block (or the mean of the two or four middle ones), `centre_offset` against half the diagonal of the region,
`colour_shading` against the middle's own ratio to green.
"""

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from itertools import pairwise
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Crop
from runner.errors import MeasurementRefused
from runner.measure import planes
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.evenness import refuse_uneven
from runner.measure.numerics.shading_map import DRAWS, SEED, ShadingMap, shading_map
from runner.measure.numerics.shading_peak import Peak, find_peak
from runner.measure.options import lookups, reader
from runner.measure.reading import Component, Map, Reading, Refusal

Real = NDArray[np.float64]

NAME = "shading"
TITLE = "Shading"
GROUP = "uniformity and noise"
TOGETHER = True
NEEDS = frozenset({"uniform"})
REFERENCES = (
    "ISO 17957:2015 (luminance and colour shading on a block grid)",
    "ISO 13653:2019 (relative irradiance in the image field, relative to the centre)",
    "ISO 19056-1:2015, ISO 21073:2019 4.2 (uniformity of microscopes, centring)",
    "JCGM 101:2008 (extremes of many blocks)",
)
ESTIMATOR = "block means"
GREEN = "green"
DARK = "dark"
AUTO, MEAN_FRAME, MEAN_LEVEL, BLACK_LEVEL = "auto", "mean frame", "mean level", "black level"
BLACKS = (AUTO, MEAN_FRAME, MEAN_LEVEL, BLACK_LEVEL)
"""Where black is taken from: see `Options.dark`."""
CELLS = 16
"""Cells along each side of a block: 256 tell the noise of its mean within 4 %."""
LEAST_CELLS = 4
"""Where a block does not hold so many cells of 2 px, its pixels are taken as they are."""
MOST_BLOCKS = 40
"""Blocks along a side: of 1600 in all, the draws for their extremes take 25 MB."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "luminance_shading": QuantityInfo("%", "100 (1 - min/max): what the darkest block lacks of the brightest one."),
    "uniformity": QuantityInfo("%", "Light of the darkest block in % of the brightest one's."),
    "darkest_corner": QuantityInfo("%", "Light of the darkest of the four corner blocks in % of the middle's."),
    "centre_offset": QuantityInfo(
        "%", "Distance of the light's maximum from the region's centre in % of half the diagonal."
    ),
    "colour_shading": QuantityInfo(
        "%", "Largest departure of a block's ratio to green from the middle's ratio; of red and of blue."
    ),
}


@dataclass(frozen=True)
class Options:
    """How shading is measured."""

    blocks_across: int = field(
        default=11, metadata={"sentence": f"Blocks from left to right, 2 to {MOST_BLOCKS}; odd ones have one middle."}
    )
    blocks_down: int = field(
        default=9, metadata={"sentence": f"Blocks from top to bottom, 2 to {MOST_BLOCKS}; odd ones have one middle."}
    )
    dark: str = field(
        default=AUTO,
        metadata={
            "sentence": "What is subtracted: `mean frame` or `mean level` of the companion `dark`, the stated "
            "`black level`, or `auto`: the mean frame where there is a companion, else the black level."
        },
    )

    def __post_init__(self) -> None:
        """Keep each option inside its meaning."""
        for name in ("blocks_across", "blocks_down"):
            count = getattr(self, name)
            if isinstance(count, bool) or not isinstance(count, int) or not 2 <= count <= MOST_BLOCKS:
                raise ValueError(f"{name} is {count!r}; allowed are whole numbers from 2 to {MOST_BLOCKS}")
        if self.dark not in BLACKS:
            raise ValueError(f"dark is {self.dark!r}; allowed are {', '.join(BLACKS)}")


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


@dataclass(frozen=True)
class _Black:
    """What is subtracted, linear DN."""

    values: Real | float
    """By cells, or one level."""
    block_u: float
    """Its standard uncertainty in a block, of its own."""
    level_u: float
    """Its standard uncertainty over the whole field."""
    words: str
    """Where it comes from."""


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure the shading of all frames of a capture in one region and channel.

    Raises:
        MeasurementRefused: No light, clipped frames, a region too small for the blocks, a companion that is missing.
    """
    if not sample.found.geometry.get("lit", 0.0):
        raise MeasurementRefused("too dark", "this is a frame without light; shading needs an evenly lit field")
    frames = planes.stack(sample.frames)
    found, black = _map(sample, frames, sample.companions.get(DARK, ()), options)
    readings = list(_luminance(sample, frames, found, black))
    readings += _colour(sample, frames, found, black, options)
    return Measurement(tuple(readings), maps=(_drawn(sample, frames, found),))


def _map(sample: Sample, frames: planes.Stack, darks: tuple[Crop, ...], options: Options) -> tuple[ShadingMap, _Black]:
    """Return a channel's blocks, borders in px of the array."""
    blocks = options.blocks_down, options.blocks_across
    rows, columns = frames.shape
    if rows < 2 * blocks[0] or columns < 4 * blocks[1]:
        raise MeasurementRefused(
            "outside the estimator's limits",
            f"the region has {rows} rows and {columns} columns of its own for {blocks[0]} × {blocks[1]} blocks",
            allowed="a block needs 2 rows and 4 columns",
        )
    planes.refuse_clipped(frames, most_high=planes.MOST_CLIPPED)
    refuse_uneven(frames, lit=True)
    edges = _edges(rows, blocks[0]), _edges(columns, blocks[1])
    black = _black(sample, darks, options, edges)
    cells = [_cells(values, edges) - black.values for values in frames.frames]
    span = sample.camera.white_level - sample.camera.black_level
    for file, one in zip(frames.files, cells, strict=True):
        light = float(one.mean(dtype=np.float64)) / span
        if light < planes.DARKEST:
            found = f"the field lies {100 * light:.2f} % of the range over the {black.words}"
            allowed = f"{100 * planes.DARKEST:g} % is needed in every frame"
            raise MeasurementRefused("too dark", found, where=file, allowed=allowed)
    try:
        of = shading_map(cells, blocks)
    except ValueError as error:  # a block without light; all else was looked at before
        raise MeasurementRefused("too dark", str(error)) from error
    y, x = (e[at.astype(np.intp)].astype(np.float64) for e, at in zip(edges, (of.y, of.x), strict=True))
    return replace(of, x=x, y=y), black


def _edges(size: int, blocks: int) -> NDArray[np.intp]:
    """Return the borders of cells along one side, so many to a block; where blocks are small, of single pixels."""
    cells = min(CELLS, size // blocks // 2)
    if cells < LEAST_CELLS:
        return np.arange(size + 1)
    return np.round(np.linspace(0, size, blocks * cells + 1)).astype(np.intp)


def _cells(values: planes.Values, edges: tuple[NDArray[np.intp], NDArray[np.intp]]) -> NDArray[np.float32]:
    """Return the means of an array's cells, between borders along y and x."""
    y, x = edges
    sums = np.array([planes.sums(values[a:b], 0) for a, b in pairwise(y)], dtype=np.float64)
    return np.asarray(np.add.reduceat(sums, x[:-1], axis=1) / np.outer(np.diff(y), np.diff(x)), dtype=np.float32)


def _black(
    sample: Sample, darks: tuple[Crop, ...], options: Options, edges: tuple[NDArray[np.intp], NDArray[np.intp]]
) -> _Black:
    taken = MEAN_FRAME if options.dark == AUTO else options.dark
    if taken != BLACK_LEVEL and (lost := sample.lost_companions.get(DARK)):
        raise MeasurementRefused(
            "missing companion",
            f"the companion '{lost}' whose {taken} is black cannot be used",
            next_step="capture it again, or write dark: black level",
        )
    if options.dark in {MEAN_FRAME, MEAN_LEVEL} and not darks:
        raise MeasurementRefused(
            "missing companion",
            f"the companion '{DARK}' whose {options.dark} is black is missing or unusable",
            next_step=f"name it under 'uses' ({DARK}: CAPTURE) and capture it",
        )
    if options.dark == BLACK_LEVEL or not darks:
        return _Black(sample.camera.black_level, 0.0, 0.0, f"stated black level of {sample.camera.black_level:g} DN")
    cells = np.array([_cells(values, edges) for values in planes.stack(darks).frames])
    apart = cells[0] - cells[-1] if len(cells) > 1 else cells[0, :, 1:-1] - (cells[0, :, :-2] + cells[0, :, 2:]) / 2
    noise = float(apart.std(dtype=np.float64)) / sqrt((2 if len(cells) > 1 else 1.5) * len(cells))
    in_block = noise * sqrt(options.blocks_across * options.blocks_down / cells[0].size)
    words = f"{len(cells)} dark frame{'s' if len(cells) > 1 else ''}"
    level_u = noise / sqrt(cells[0].size)
    if options.dark == MEAN_LEVEL:
        return _Black(float(cells.mean(dtype=np.float64)), 0.0, level_u, f"mean level of {words}")
    return _Black(cells.mean(axis=0), in_block, 0.0, f"mean of {words}")


def _luminance(sample: Sample, frames: planes.Stack, found: ShadingMap, black: _Black) -> Iterator[Reading]:
    ratio, brightest = min(1.0, found.ratio.value), found.maximum.light.value
    dark = hypot((1 - ratio) * black.level_u, hypot(1, ratio) * black.block_u) / brightest
    made = _reading(sample, "luminance_shading", 100 * (1 - ratio), 100 * found.ratio.u, 100 * dark)
    yield replace(made, flags=(f"black is the {black.words}",))
    yield _reading(sample, "uniformity", 100 * ratio, 100 * found.ratio.u, 100 * dark)
    own = min(found.corners, key=lambda one: one.value).u
    corner, corner_u = _extreme(found.light, found.light_u, _darkest_corner, own)
    dark = hypot((1 - corner) * black.level_u, hypot(1, corner) * black.block_u) / found.centre.value
    yield _reading(sample, "darkest_corner", 100 * corner, 100 * corner_u, 100 * dark)
    peak = _peak(sample, frames, found)
    if peak is None:
        because = "no maximum of the light is told inside the region: it lies at the border, or the field is even"
        yield replace(_blank(sample, "centre_offset"), refusal=Refusal("not defined", because))
        return
    value, u_value = peak.offset
    yield _reading(sample, "centre_offset", 100 * value / peak.half_diagonal, 100 * u_value / peak.half_diagonal)


def _colour(
    sample: Sample, frames: planes.Stack, found: ShadingMap, black: _Black, options: Options
) -> Iterator[Reading]:
    channel = sample.crop.channel
    if channel in {GREEN, "mono"}:
        if any(w.quantity == "colour_shading" for w in sample.wanted):
            because = "green is what red and blue are held against; write channel: red or channel: blue"
            if channel != GREEN:
                because = "frames without colour have no colour shading"
            yield replace(_blank(sample, "colour_shading"), refusal=Refusal("not defined", because))
        return
    darks = sample.companions.get(DARK, ())
    if darks and sample.crop.sites is None:  # planes of the companion's other channels are not at hand
        darks, options = (), replace(options, dark=BLACK_LEVEL)
        found, black = _map(sample, frames, darks, options)
    darks = tuple(replace(dark, channel=GREEN, sites=sample.channels[GREEN][0].sites) for dark in darks)
    others = planes.stack(sample.channels[GREEN])
    green, green_black = _map(sample, others, darks, options)
    places, green_places = (_places(sample, *one) for one in ((frames, found), (others, green)))
    light = found.light
    for axis, (place, other) in enumerate(zip(places, green_places, strict=True)):  # half a pixel beside green's, or so
        slope = np.gradient(found.light, place, axis=axis)
        light = light + slope * np.expand_dims(other - place, 1 - axis)
    ratio = light / green.light
    u = ratio * np.sqrt(
        (found.light_u**2 + black.block_u**2) / light**2 + (green.light_u**2 + green_black.block_u**2) / green.light**2
    )
    own = np.hypot(u / ratio, float(_middle(u / ratio))).max()
    value, u_value = _extreme(ratio, u, _largest_departure, float(own))
    yield _reading(sample, "colour_shading", 100 * max(0.0, value), 100 * u_value)


def _middle(values: Real) -> Real:
    """Return the middle of maps, or the mean of the two or four middle ones, over the last two axes."""
    rows, columns = (slice((n - 1) // 2, n // 2 + 1) for n in values.shape[-2:])
    return np.asarray(values[..., rows, columns].mean(axis=(-2, -1)))


def _darkest_corner(light: Real) -> Real:
    corners = light[..., [0, 0, -1, -1], [0, -1, 0, -1]]
    return np.asarray(corners.min(axis=-1) / _middle(light))


def _largest_departure(ratio: Real) -> Real:
    return np.asarray(np.abs(ratio / _middle(ratio)[..., None, None] - 1).max(axis=(-2, -1)))


def _extreme(values: Real, u: Real, pick: Callable[[Real], Real], own: float) -> tuple[float, float]:
    """Return the extreme of a noisy map, what noise adds to it taken off, and its u, as `shading_map` does it.

    Args:
        values: Rows × columns of blocks.
        u: Standard uncertainty of each.
        pick: Takes maps and returns the extreme of each.
        own: Standard uncertainty of the extreme if it were known which block it is.
    """
    found = float(pick(values))
    drawn = pick(values + u * np.random.default_rng(SEED).standard_normal((DRAWS, *values.shape)))
    rise = float(drawn.mean()) - found
    return found - rise, hypot(max(own, float(drawn.std())), sqrt(2) * rise)


def _places(sample: Sample, frames: planes.Stack, found: ShadingMap) -> tuple[Real, Real]:
    """Return the middles of the blocks along y and x, px from the region's corner."""
    (x, y), point, box = ((e[:-1] + e[1:]) / 2 for e in (found.x, found.y)), frames.grid.point, sample.found.box
    return (
        np.array([point(float(v), 0.5)[1] for v in y]) - box.y0,
        np.array([point(0.5, float(v))[0] for v in x]) - box.x0,
    )


def _peak(sample: Sample, frames: planes.Stack, found: ShadingMap) -> Peak | None:
    y, x = _places(sample, frames, found)
    box = sample.found.box
    return find_peak(x, y, found.light, found.light_u, (box.x1 - box.x0, box.y1 - box.y0))


def _drawn(sample: Sample, frames: planes.Stack, found: ShadingMap) -> Map:
    light, _ = found.to_centre
    y, x = _places(sample, frames, found)
    x, y = x + sample.found.box.x0, y + sample.found.box.y0
    marks = []
    for at, words in ((light.argmax(), "brightest"), (light.argmin(), "darkest")):
        i, j = np.unravel_index(int(at), light.shape)
        marks.append((float(x[j]), float(y[i]), f"{words} {100 * light[i, j]:.1f} %"))
    return Map(
        sample.found.region,
        "shading",
        tuple(float(v) for v in x),
        tuple(float(v) for v in y),
        tuple(tuple(100 * float(v) for v in row) for row in light),
        "px",
        "%",
        tuple(marks),
    )


def _blank(sample: Sample, name: str) -> Reading:
    unit = _QUANTITIES[name].unit
    return Reading(sample.found.region, name, unit, None, None, estimator=ESTIMATOR, method=REFERENCES[0])


def _reading(sample: Sample, name: str, value: float, noise: float, dark: float = 0.0) -> Reading:
    parts = (Component("noise", noise, "A"), *((Component("dark frames", dark, "A"),) if dark else ()))
    return replace(_blank(sample, name), value=value, u=hypot(*(part.u for part in parts)), components=parts)
