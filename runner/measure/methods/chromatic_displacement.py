"""Lateral chromatic displacement: where red and blue show dots or corners against green, on each colour's own pixels.

A smooth field is fitted to the displacements of all points, so that one point's noise is not taken for colour. Radial
is about the frame's middle, positive outwards. Of a mosaic nothing is interpolated; of finished RGB frames what the
camera's processing left is measured.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.lattice_centres import Centres, centres_of
from runner.measure.numerics.vector_field import VectorField, fit_field
from runner.measure.options import lookups, number, reader
from runner.measure.reading import Component, Curve, Map, Reading, Refusal

Real = NDArray[np.float64]

NAME = "chromatic displacement"
TITLE = "Chromatic displacement"
GROUP = "geometry"
TOGETHER = True
NEEDS = frozenset({"lattice"})
REFERENCES = (
    "ISO 19084:2015 (chromatic displacement)",
    "JCGM 100:2008, JCGM 101:2008 (uncertainty)",
)
ESTIMATOR = "smooth field"
GREEN = "green"

AROUND = 72
"""Directions in which a circle of one image height is looked at."""
ALONG = 31
MAP_COLUMNS, MAP_ROWS = 33, 25
MOST_POINTS = 600
"""Points over which the largest displacement is sought: of more, every so many."""
BESIDE = 0.8
"""Pitches from the nearest point within which the field is read."""
WORST = 0.25
"""Rms of what no smooth field explains, in px: above, the points of two colours are not the same."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "chromatic_displacement": QuantityInfo(
        "px",
        "Largest displacement against green at an image height of `field` half diagonals.",
        {"field": "1"},
        least=0,
    ),
    "radial_chromatic_displacement": QuantityInfo(
        "px", "Its radial part at that image height, mean around; positive outwards.", {"field": "1"}
    ),
    "worst_chromatic_displacement": QuantityInfo("px", "Largest displacement against green of any point.", least=0),
    "corner_chromatic_displacement": QuantityInfo(
        "px", "Largest displacement against green of the points nearest to the four corners.", least=0
    ),
    "chromatic_magnification": QuantityInfo("1", "Magnification over green's, in the frame's middle.", least=0),
    "chromatic_shift_x": QuantityInfo("px", "Displacement to the right of green in the frame's middle."),
    "chromatic_shift_y": QuantityInfo("px", "Displacement downwards from green in the frame's middle."),
}


@dataclass(frozen=True)
class Options:
    """How displacement is measured."""

    bias: float | str = field(
        default=0.0,
        metadata={"sentence": "Bound on how far a colour's blur moves its points by itself (coma), e.g. 0.02 px."},
    )

    def __post_init__(self) -> None:
        """Turn a length into px and keep it inside its meaning."""
        object.__setattr__(self, "bias", number("bias", self.bias, "px", 0.0, 5.0))


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure red or blue against green over all frames of a capture.

    Raises:
        MeasurementRefused: The points cannot be fitted in a colour, or two colours do not show the same.
    """
    channel = sample.crop.channel
    if channel in {GREEN, "mono"}:
        because = "green is what red and blue are held against; write channel: red or channel: blue"
        if channel != GREEN:
            because = "frames without colour have no chromatic displacement"
        refusal = Refusal("not defined", because)
        return Measurement(tuple(_asked(sample, refusal)))
    points, moved, u = _displacements(sample, channel)
    frame = (sample.camera.width, sample.camera.height)
    made = fit_field(points, moved, u, frame)
    rest = float(np.sqrt(np.mean((moved - made.at(points)[0]) ** 2)))
    if rest > max(WORST, 4 * float(np.median(u))):
        found = f"the points of {channel} lie {rest:.2f} px rms off any smooth displacement from those of green"
        raise MeasurementRefused("another scene", found, allowed=f"at most {WORST:g} px may")
    heights = np.hypot(*(points - made.middle).T) / made.size
    curve = _curve(sample, made, points, float(heights.max()))
    readings = (*_whole(sample, options, made, points), *_by_field(sample, options, made, points))
    return Measurement(readings, (curve,), (_map(sample, made, points),))


def _asked(sample: Sample, refusal: Refusal) -> Iterator[Reading]:
    for wanted in sample.wanted:
        blank = replace(_blank(sample, wanted.quantity), parameters=wanted.parameters, part=wanted.part)
        yield replace(blank, refusal=refusal, estimator=wanted.estimator or ESTIMATOR)


def _displacements(sample: Sample, channel: str) -> tuple[Real, Real, Real]:
    """Return points in green, what a colour's lie off them, and the u of that; means over all frames."""
    pairs = []
    for mine, green in zip(sample.frames, sample.channels[GREEN], strict=True):
        pairs.append((_centres(sample, mine, channel), _centres(sample, green, GREEN)))
    places = {tuple(one) for one in pairs[0][0].places.tolist()}
    for one in (c for pair in pairs for c in pair):
        places &= {tuple(place) for place in one.places.tolist()}
    common = np.array(sorted(places)).reshape(-1, 2)
    if len(common) < 25:
        found = f"{len(common)} points were measured in green and in {channel}; 25 are needed"
        raise MeasurementRefused("another scene", found)
    at = [[one.points[_order(one, common)] for one in pair] for pair in pairs]
    u = [[one.u[_order(one, common)] for one in pair] for pair in pairs]
    moved = np.mean([mine - green for mine, green in at], axis=0)
    variance = np.sum([a**2 + b**2 for a, b in u], axis=0)
    return np.mean([green for _, green in at], axis=0), moved, np.sqrt(variance) / len(pairs)


def _centres(sample: Sample, crop: Any, channel: str) -> Centres:
    try:
        return centres_of(sample.found, crop)
    except MeasurementRefused as refused:
        raise MeasurementRefused(refused.cause, f"in {channel}: {refused}") from refused


def _order(centres: Centres, places: Real) -> NDArray[np.intp]:
    number_of = {tuple(place): n for n, place in enumerate(centres.places.tolist())}
    return np.array([number_of[tuple(place)] for place in places.tolist()], dtype=np.intp)


def _whole(sample: Sample, options: Options, made: VectorField, points: Real) -> Iterator[Reading]:
    some = points[:: max(1, -(-len(points) // MOST_POINTS))]
    outer = [
        points[((points - made.middle) * [a, b]).sum(axis=1).argmax()] for a, b in ((-1, -1), (1, -1), (-1, 1), (1, 1))
    ]
    for name, where in (
        ("worst_chromatic_displacement", np.vstack([some, outer])),
        ("corner_chromatic_displacement", np.array(outer)),
    ):
        value, u, most = made.largest(where)
        flag = f"at column {where[most][0]:.0f}, row {where[most][1]:.0f}"
        yield replace(_reading(_blank(sample, name), options, value, u), flags=(flag,))
    ratio, u = made.divergence()
    yield _reading(_blank(sample, "chromatic_magnification"), options, 1 + ratio, u, 1 / made.size)
    (shift,), (u_shift,) = made.at(made.middle[None, :])
    for name, part in (("chromatic_shift_x", shift[0]), ("chromatic_shift_y", shift[1])):
        yield _reading(_blank(sample, name), options, float(part), float(u_shift))


def _by_field(sample: Sample, options: Options, made: VectorField, points: Real) -> Iterator[Reading]:
    """Yield what limits ask for at image heights."""
    for wanted in sample.wanted:
        if "field" not in wanted.at:
            continue
        blank = replace(_blank(sample, wanted.quantity), parameters=wanted.parameters, part=wanted.part)
        blank = replace(blank, estimator=wanted.estimator or ESTIMATOR)
        height = wanted.at["field"]
        circle = _circle(made, points, height)
        if not len(circle):
            most = float(np.hypot(*(points - made.middle).T).max()) / made.size
            because = f"points were seen up to {most:.2f} half diagonals from the frame's middle, not at {height:g}"
            yield replace(blank, refusal=Refusal("outside the estimator's limits", because))
        elif wanted.quantity == "chromatic_displacement":
            value, u, _ = made.largest(circle)
            yield _reading(blank, options, value, u)
        else:
            yield _reading(blank, options, *made.mean_along(circle, _outwards(made, circle)))


def _circle(made: VectorField, points: Real, height: float) -> Real:
    """Return places on a circle about the frame's middle, of one image height, among the points."""
    turn = 2 * np.pi * (np.arange(AROUND) + 0.5) / AROUND
    circle = made.middle + height * made.size * np.column_stack([np.cos(turn), np.sin(turn)])
    from scipy.spatial import cKDTree  # noqa: PLC0415 - heavy

    tree = cKDTree(points)
    pitch = float(np.median(np.asarray(tree.query(points, k=2)[0])[:, 1]))
    return np.asarray(circle[tree.query(circle)[0] <= BESIDE * pitch])


def _outwards(made: VectorField, at: Real) -> Real:
    away = at - made.middle
    return np.asarray(away / np.maximum(np.hypot(*away.T), 1e-9)[:, None])


def _curve(sample: Sample, made: VectorField, points: Real, most: float) -> Curve:
    x, y, u = [], [], []
    for height in np.linspace(0, most, ALONG)[1:]:
        circle = _circle(made, points, float(height))
        if len(circle):
            value, own = made.mean_along(circle, _outwards(made, circle))
            x.append(round(float(height), 5))
            y.append(round(value, 5))
            u.append(round(own, 5))
    name = "radial chromatic displacement"
    return Curve(sample.found.region, name, tuple(x), tuple(y), tuple(u), "1", "px", estimator=ESTIMATOR)


def _map(sample: Sample, made: VectorField, points: Real) -> Map:
    low, high = points.min(axis=0), points.max(axis=0)
    x, y = np.linspace(low[0], high[0], MAP_COLUMNS), np.linspace(low[1], high[1], MAP_ROWS)
    at = np.stack(np.meshgrid(x, y), axis=-1).reshape(-1, 2)
    length = np.round(np.hypot(*made.at(at)[0].T), 4).reshape(MAP_ROWS, MAP_COLUMNS)
    return Map(
        sample.found.region,
        "chromatic displacement",
        tuple(round(float(v), 2) for v in x),
        tuple(round(float(v), 2) for v in y),
        tuple(tuple(float(v) for v in row) for row in length),
        "px",
        "px",
    )


def _blank(sample: Sample, name: str) -> Reading:
    unit = _QUANTITIES[name].unit
    return Reading(sample.found.region, name, unit, None, None, estimator=ESTIMATOR, method=REFERENCES[0])


def _reading(blank: Reading, options: Options, value: float, noise: float, bias: float = 1.0) -> Reading:
    parts = [Component("noise", noise, "A")]
    if float(options.bias) > 0:
        parts.append(Component("blur of one colour", bias * float(options.bias) / np.sqrt(3), "B"))
    return replace(blank, value=value, u=float(np.hypot.reduce([p.u for p in parts])), components=tuple(parts))
