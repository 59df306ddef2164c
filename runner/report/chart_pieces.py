"""What a chart is drawn of: areas of one tone, in mm from its centre, and how each kind of feature is made of them.

Sines are drawn as strips of one tone each, in vector form, and not as a picture: strips follow any direction exactly,
meet the borders of their box exactly, and bind the artwork to no printer's dots. A sine of n strips a cycle holds,
besides its own frequency f, only (n - 1) f and above, with 1/(n - 1) of its modulation; with 32 strips or more that is
3 % at 31 f, where no camera that resolves f still sees it. Strips lower f itself by sinc(1/n); they are drawn by as
much stronger, so that the modulation stated is the modulation drawn. Each strip reaches under the next one, so that no
light shines through between them.
"""

import re
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, fields
from math import ceil, cos, hypot, pi, radians, sin
from typing import Any

from runner.errors import UsageError
from runner.spec.chart_model import ChartFile, Feature, Point
from runner.spec.leaves import share
from runner.spec.units import UNITS, FrequencyContext, convert, parse_amount

LEAST_STRIPS, WIDEST = 32, 0.1
"""Strips a cycle at least, and mm that a strip is wide at most."""


@dataclass(frozen=True)
class Area:
    """A polygon of one tone."""

    points: tuple[Point, ...]
    """Corners, mm."""
    reflectance: float
    """Of the area."""


@dataclass(frozen=True)
class Disc:
    """A disc of one tone."""

    centre: Point
    """mm."""
    radius: float
    """mm."""
    reflectance: float
    """Of the disc."""


@dataclass(frozen=True)
class Clipped:
    """Pieces of which only what lies in a box is seen."""

    centre: Point
    """mm."""
    size: Point
    """Width and height, mm; of a round one, its diameter twice."""
    pieces: tuple["Area | Disc", ...]
    """Painted one over the other."""
    round: bool = False
    """The box is an ellipse."""


@dataclass(frozen=True)
class Picture:
    """Square cells of one tone each, for patterns that no outline describes."""

    centre: Point
    """mm."""
    size: Point
    """Width and height, mm."""
    reflectances: tuple[tuple[float, ...], ...]
    """Rows of cells, from the upper left."""


Piece = Area | Disc | Clipped | Picture


def pieces(chart: ChartFile) -> Iterator[Piece]:
    """Yield everything of a chart but its ground, in the order of painting.

    Raises:
        UsageError: A feature lacks what it is drawn from, or holds what cannot be drawn.
    """
    for at in chart.marks.at:
        yield Disc(at, chart.marks.diameter / 2, chart.ink)
        yield Disc(at, chart.marks.hole / 2, chart.ground)
    for feature in chart.features.values():
        if feature.kind in DRAWN:
            yield from DRAWN[feature.kind](_Data(feature, chart))


def without_artwork(chart: ChartFile) -> tuple[str, ...]:
    """Return the features that this program does not draw; their boxes stay empty."""
    return tuple(one.name for one in chart.features.values() if one.kind not in DRAWN)


def box(centre: Point, size: Point, reflectance: float) -> Area:
    """Return an upright rectangle."""
    (x, y), (w, h) = centre, size
    corners = ((-w, -h), (w, -h), (w, h), (-w, h))
    return Area(tuple((x + a / 2, y + b / 2) for a, b in corners), reflectance)


class _Data:
    """A feature's data, read as they are asked for."""

    def __init__(self, feature: Feature, chart: ChartFile) -> None:
        self.feature, self.chart = feature, chart

    def number(self, key: str, unit: str, default: float | None = None, *, above: float = 0.0) -> float:
        """Return a value in a unit; shares as fractions."""
        raw = self.feature.data.get(key)
        if raw is None:
            if default is None:
                raise UsageError(
                    f"feature '{self.feature.name}' lacks '{key}', from which a {self.feature.kind} is drawn",
                    next_step=f"add it to its data, in {'a plain number' if unit == '1' else unit}",
                )
            return default
        try:
            amount = parse_amount(raw) if isinstance(raw, str) else parse_amount(f"{raw!r}")
            value = (
                share(amount)
                if UNITS[amount.unit].kind == "ratio"
                else convert(amount.value, amount.unit, unit, FrequencyContext())
            )
            fits = (UNITS[amount.unit].kind == "ratio") == (unit in {"1", "%"}) and value > above
        except UsageError:
            fits, value = False, 0.0
        if not fits:
            allowed = f"a value above {above:g} in {'plain numbers' if unit == '1' else unit}"
            raise UsageError(f"'{key}' of feature '{self.feature.name}' is {raw!r}", allowed=allowed)
        return value

    def degrees(self, key: str, default: float | None = None) -> float:
        """Return an angle."""
        return self.number(key, "deg", default, above=-360.0)

    def reflectances(self, key: str) -> list[float]:
        """Return a list of reflectances."""
        raw = self.feature.data.get(key)
        if not isinstance(raw, list) or not raw:
            raise UsageError(
                f"feature '{self.feature.name}' lacks '{key}'", allowed="a list of reflectances, e.g. [5 %, 18 %]"
            )
        return [_Data(Feature("", "", (0, 0), (0, 0), {key: part}), self.chart).number(key, "%") for part in raw]


# ---- kinds


def _edge(data: _Data) -> Iterator[Piece]:
    """A straight edge through the box's centre; `angle` is the direction from dark to bright, clockwise from x."""
    one = data.feature
    dark = data.number("dark", "%", data.chart.ink)
    bright = data.number("bright", "%", data.chart.ground)
    c, s = cos(radians(data.degrees("angle"))), sin(radians(data.degrees("angle")))
    far = hypot(*one.size)
    x, y = one.position
    half = ((0, far), (0, -far), (-far, -far), (-far, far))  # along the normal, along the edge
    corners = tuple((x + n * c - t * s, y + n * s + t * c) for n, t in half)
    yield Clipped(one.position, one.size, (box(one.position, one.size, bright), Area(corners, dark)))


def _grating(data: _Data) -> Iterator[Piece]:
    """Stripes of a sine; `angle` is the direction across them, clockwise from x."""
    one = data.feature
    period, mean = data.number("period", "mm"), data.number("mean", "%")
    depth = _depth(data, mean)
    c, s = cos(radians(data.degrees("angle", 0.0))), sin(radians(data.degrees("angle", 0.0)))
    strips = max(LEAST_STRIPS, ceil(period / WIDEST))
    width, far = period / strips, hypot(*one.size) / 2 + period
    x, y = one.position
    painted = []
    for n in range(-ceil(far / width), ceil(far / width)):
        tone = mean * (1 + depth * _stronger(strips) * cos(2 * pi * (n + 0.5) / strips))
        a, b = n * width, (n + 2) * width
        corners = ((a, -far), (b, -far), (b, far), (a, far))
        painted.append(Area(tuple((x + u * c - v * s, y + u * s + v * c) for u, v in corners), tone))
    yield Clipped(one.position, one.size, tuple(painted))


def _bars(data: _Data) -> Iterator[Piece]:
    """Bars as wide as their gaps, a dark one in the middle of the box; `angle` is the direction across them."""
    one = data.feature
    period = data.number("period", "mm")
    c, s = cos(radians(data.degrees("angle", 0.0))), sin(radians(data.degrees("angle", 0.0)))
    far = hypot(*one.size) / 2 + period
    x, y = one.position
    painted: list[Area | Disc] = [box(one.position, one.size, data.number("bright", "%", data.chart.ground))]
    for n in range(-ceil(far / period), ceil(far / period) + 1):
        a, b = (n - 0.25) * period, (n + 0.25) * period
        corners = tuple((x + u * c - v * s, y + u * s + v * c) for u, v in ((a, -far), (b, -far), (b, far), (a, far)))
        painted.append(Area(corners, data.number("dark", "%", data.chart.ink)))
    yield Clipped(one.position, one.size, tuple(painted))


def _star(data: _Data) -> Iterator[Piece]:
    """A star that fills its box, on a ground of its mean."""
    one = data.feature
    cycles, mean = round(data.number("cycles", "1")), data.number("mean", "%")
    depth = _depth(data, mean)
    radius = min(one.size) / 2 * data.number("filled", "%", 0.94)
    strips = LEAST_STRIPS
    count = cycles * strips
    x, y = one.position
    reach = radius * 1.02
    painted = []
    for n in range(count):
        tone = mean * (1 + depth * _stronger(strips) * cos(2 * pi * (n + 0.5) / strips))
        ends = [2 * pi * m / count for m in ((n, n + 2) if n < count - 1 else (n, n + 1))]
        painted.append(Area(((x, y), *((x + reach * cos(t), y + reach * sin(t)) for t in ends)), tone))
    yield box(one.position, one.size, mean)
    yield Clipped(one.position, (2 * radius, 2 * radius), tuple(painted), round=True)
    mark = data.number("centre_mark", "%", 0.0, above=-1.0)
    if mark:
        yield Disc(one.position, mark * radius, mean)


def _depth(data: _Data, mean: float) -> float:
    depth = data.number("target_modulation", "%")
    low, high = sorted((data.chart.ink, data.chart.ground))
    ends = mean * (1 - depth * 1.002), mean * (1 + depth * 1.002)
    if ends[0] < low or ends[1] > high:
        raise UsageError(
            f"feature '{data.feature.name}' swings from {100 * ends[0]:.3g} % to {100 * ends[1]:.3g} %",
            allowed=f"ink and ground leave {100 * low:g} % to {100 * high:g} %",
            next_step="lower target_modulation or move mean",
        )
    return depth


def _stronger(strips: int) -> float:
    """Return what a staircase of so many strips a cycle takes from its sine."""
    return (pi / strips) / sin(pi / strips)


def _flat(data: _Data) -> Iterator[Piece]:
    yield box(data.feature.position, data.feature.size, data.number("reflectance", "%"))


def _dots(data: _Data) -> Iterator[Piece]:
    """Dots in rows and columns about the centre; as many as the box holds, where their number is not stated."""
    one = data.feature
    pitch = data.number("pitch", "mm")
    diameter = data.number("diameter", "mm", pitch / 2)
    tone = data.number("dark", "%", data.chart.ink)
    fit = [int((side - diameter) / pitch + 1e-9) + 1 for side in one.size]
    columns, rows = (round(data.number(key, "1", float(n))) for key, n in zip(("columns", "rows"), fit, strict=True))
    for j in range(rows):
        for i in range(columns):
            x, y = one.position
            yield Disc((x + (i - (columns - 1) / 2) * pitch, y + (j - (rows - 1) / 2) * pitch), diameter / 2, tone)


def _squares(data: _Data) -> Iterator[Piece]:
    """A checkerboard of whole squares about the centre, the upper left one dark."""
    one = data.feature
    side = data.number("square", "mm", data.number("pitch", "mm", 0.0, above=-1.0) or None)
    fit = [int(length / side + 1e-9) for length in one.size]
    columns, rows = (round(data.number(key, "1", float(n))) for key, n in zip(("columns", "rows"), fit, strict=True))
    x, y = one.position
    for j in range(rows):
        for i in range(columns):
            if (i + j) % 2 == 0:
                centre = (x + (i - (columns - 1) / 2) * side, y + (j - (rows - 1) / 2) * side)
                yield box(centre, (side, side), data.number("dark", "%", data.chart.ink))


def _steps(data: _Data) -> Iterator[Piece]:
    """Grey patches in rows from the upper left, on a ground of `surround`, gaps of `gap` of a patch's pitch."""
    one = data.feature
    tones = data.reflectances("reflectance")
    columns, rows = _layout(data, len(tones))
    gap = data.number("gap", "%", 0.1, above=-1.0)
    yield box(one.position, one.size, data.number("surround", "%", tones[len(tones) // 2]))
    pitch = one.size[0] / columns, one.size[1] / rows
    left, top = one.position[0] - one.size[0] / 2, one.position[1] - one.size[1] / 2
    for n, tone in enumerate(tones):
        centre = (left + (n % columns + 0.5) * pitch[0], top + (n // columns + 0.5) * pitch[1])
        yield box(centre, (pitch[0] * (1 - gap), pitch[1] * (1 - gap)), tone)


def _random(data: _Data) -> Iterator[Piece]:
    """A stochastic pattern in the middle of its box, its cells as they are measured with."""
    from runner.measure.methods.texture_response import Options, pattern_of, read_options  # noqa: PLC0415 - heavy

    one = data.feature
    known = {f.name for f in fields(Options)}
    pattern = pattern_of(read_options({key: value for key, value in one.data.items() if key in known}))
    side = data.number("side", "mm")
    if side > min(one.size):
        raise UsageError(f"feature '{one.name}' has a side of {side:g} mm in a box of {min(one.size):g} mm")
    rows = tuple(tuple(float(v) for v in row) for row in pattern.raster)
    yield Picture(one.position, (side, side), rows)


def _layout(data: _Data, count: int) -> tuple[int, int]:
    """Return columns and rows of patches, all in one row where it is not said."""
    raw = data.feature.data.get("layout", f"{count} x 1")
    found = re.fullmatch(r"\s*(\d{1,3})\s*x\s*(\d{1,3})\s*", str(raw))
    if found is None or int(found[1]) * int(found[2]) != count:
        raise UsageError(
            f"'layout' of feature '{data.feature.name}' is {raw!r}",
            allowed=f"columns x rows of its {count} patches, e.g. {count} x 1",
        )
    return int(found[1]), int(found[2])


def _black(data: _Data) -> Iterator[Piece]:
    """A black area in the middle of a bright box."""
    one = data.feature
    yield box(one.position, one.size, data.number("bright", "%", data.chart.ground))
    yield Disc(one.position, data.number("diameter", "mm") / 2, data.number("dark", "%", data.chart.ink))


DRAWN: Mapping[str, Callable[[_Data], Iterator[Any]]] = {
    "slanted edge": _edge,
    "sinusoidal grating": _grating,
    "square wave bars": _bars,
    "sine star": _star,
    "dot grid": _dots,
    "checkerboard": _squares,
    "grey steps": _steps,
    "black areas": _black,
    "random pattern": _random,
    "flat field": _flat,
    "flat": _flat,
}
"""Kinds that this program draws."""
