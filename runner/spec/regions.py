"""Regions as written (single, named groups, grids) turned into regions with a name and a centre each."""

from collections.abc import Mapping
from math import cos, hypot, radians, sin

from runner.spec.chart_leaves import in_mm
from runner.spec.chart_model import ChartFile
from runner.spec.model import Amount, Camera, Region
from runner.spec.position_leaves import FieldPoint, Point
from runner.spec.region_shapes import GridShape, RegionShape
from runner.spec.tree import Complaints, nearest

MIN_SIDE = 4
"""px; less cannot hold anything to measure."""


def expand(
    shapes: Mapping[str, RegionShape | None], camera: Camera, chart: ChartFile | None, complaints: Complaints
) -> tuple[Region, ...]:
    """Return the regions of a capture in the order of the spec; a broken shape gives none.

    A member of a group carries the group's name and its own: `corners upper left`, `field r1c2`.

    Args:
        shapes: By name as written.
        camera: Gives the frame's size.
        chart: The chart's file, for regions on it.
        complaints: Takes complaints about regions off the frame and names used twice.
    """
    regions: list[Region] = []
    for name, shape in shapes.items():
        if shape is None:
            continue
        on_chart = shape.on == "chart" or shape.feature is not None
        if on_chart and (chart is None or not _known(shape, chart, complaints)):
            if chart is None:
                key = "on" if shape.stated("on") else "feature"
                complaints.error(shape.at(key), "the capture has no chart file", "", "add chart: {file: …} to it")
            continue
        for region in _on_chart(name, shape, chart) if on_chart and chart else _members(name, shape, camera):
            if any(region.name == other.name for other in regions):
                complaints.error(shape.at(), f"two regions have the name '{region.name}'", "", "rename one of them")
            if on_chart and chart:
                _on_sheet(region, shape, chart, complaints)
            else:
                _inside(region, shape, camera, complaints)
            regions.append(region)
    return tuple(regions)


def names(shapes: Mapping[str, RegionShape | None]) -> dict[str, tuple[str, ...]]:
    """Return what `where` may name, with the regions it means: regions, groups, members in full and in short.

    A member's short name is left out where two groups have it.
    """
    meant: dict[str, tuple[str, ...]] = {}
    short: dict[str, list[str]] = {}
    for name, shape in shapes.items():
        members = _member_names(shape) if shape is not None else ()
        meant[name] = tuple(f"{name} {member}" for member in members) or (name,)
        for member in members:
            meant[f"{name} {member}"] = (f"{name} {member}",)
            short.setdefault(member, []).append(f"{name} {member}")
    for member, full in short.items():
        if len(full) == 1:
            meant.setdefault(member, (full[0],))
    return meant


def _member_names(shape: RegionShape) -> tuple[str, ...]:
    if shape.grid is not None:
        return tuple(f"r{r + 1}c{c + 1}" for r in range(shape.grid.rows) for c in range(shape.grid.columns))
    if shape.feature is not None and len(shape.feature) > 1:
        return shape.feature
    return tuple(shape.position) if isinstance(shape.position, dict) else ()


def _members(name: str, shape: RegionShape, camera: Camera) -> list[Region]:
    if shape.size is None:  # complained of
        return []
    if shape.grid is not None:
        centres = _grid(shape.grid, camera)
    elif isinstance(shape.position, dict):
        centres = [_centre(point, camera) for point in shape.position.values()]
    elif shape.position is not None:
        return [Region(name, _centre(shape.position, camera), shape.size)]
    else:
        return []
    members = zip(_member_names(shape), centres, strict=True)
    return [Region(f"{name} {member}", centre, shape.size, group=name) for member, centre in members]


def _known(shape: RegionShape, chart: ChartFile, complaints: Complaints) -> bool:
    """Complain of features that the chart has not."""
    unknown = [name for name in shape.feature or () if name not in chart.features]
    for name in unknown:
        found = f"chart '{chart.name}' has no feature '{name}'"
        step = nearest(name, chart.features)
        complaints.error(shape.at("feature"), found, f"features: {', '.join(chart.features)}", step)
    return not unknown


def _on_chart(name: str, shape: RegionShape, chart: ChartFile) -> list[Region]:
    """Return regions in mm on the chart; a size in px stays in px."""
    members = _member_names(shape)
    names = [f"{name} {member}" for member in members] or [name]
    group = name if members else None
    if shape.feature is not None:
        features = [chart.features[one] for one in shape.feature]
        sizes = [_mm_or_px(shape.size) if shape.size else _mm(one.size) for one in features]
        rows = zip(names, [_mm(one.position) for one in features], sizes, [one.name for one in features], strict=True)
        return [Region(full, centre, size, group, "chart", one) for full, centre, size, one in rows]
    if shape.size is None:  # complained of
        return []
    if shape.grid is not None:
        ends = [(in_mm(a), in_mm(b)) for a, b in zip(shape.grid.start, shape.grid.to, strict=True)]
        counts = (shape.grid.columns, shape.grid.rows)
        xs, ys = (
            _steps(Amount(a, "mm"), Amount(b, "mm"), count, 0) for (a, b), count in zip(ends, counts, strict=True)
        )
        centres = [(x, y) for y in ys for x in xs]
    else:
        points = shape.position.values() if isinstance(shape.position, dict) else [shape.position]
        centres = [_mm((in_mm(p[0]), in_mm(p[1]))) for p in points if isinstance(p, tuple)]
    size = _mm_or_px(shape.size)
    return [Region(full, centre, size, group, "chart") for full, centre in zip(names, centres, strict=True)]


def _mm(pair: tuple[float, float]) -> tuple[Amount, Amount]:
    return Amount(pair[0], "mm"), Amount(pair[1], "mm")


def _mm_or_px(size: tuple[Amount, Amount]) -> tuple[Amount, Amount]:
    width, height = (part if part.unit == "px" else Amount(in_mm(part), "mm") for part in size)
    return width, height


def _on_sheet(region: Region, shape: RegionShape, chart: ChartFile, complaints: Complaints) -> None:
    over = []
    for centre, size, whole in zip(region.position, region.size, chart.size, strict=True):
        half = size.value / 2 if size.unit == "mm" else 0.0
        over.append(abs(centre.value) + half - whole / 2)
    if max(over) > 0.005:
        place = shape.at("grid") if shape.grid is not None else shape.at("position")
        found = f"region '{region.name}' reaches {max(over):.3g} mm over the chart's border"
        sheet = f"a sheet of {chart.size[0]:g} mm × {chart.size[1]:g} mm, positions from its centre"
        complaints.error(place, found, sheet, "move it or make it smaller")


def _centre(point: Point, camera: Camera) -> tuple[Amount, Amount]:
    if not isinstance(point, FieldPoint):
        return point
    reach = point.field * hypot(camera.width, camera.height) / 2
    x = camera.width / 2 + reach * cos(radians(point.azimuth_deg))
    y = camera.height / 2 + reach * sin(radians(point.azimuth_deg))
    return Amount(x, "px"), Amount(y, "px")


def _grid(grid: GridShape, camera: Camera) -> list[tuple[Amount, Amount]]:
    xs = _steps(grid.start[0], grid.to[0], grid.columns, camera.width)
    ys = _steps(grid.start[1], grid.to[1], grid.rows, camera.height)
    return [(x, y) for y in ys for x in xs]


def _steps(start: Amount, end: Amount, count: int, whole: int) -> list[Amount]:
    """Return evenly spaced positions, in the unit of both ends or in px where they differ."""
    if start.unit != end.unit:
        start, end = (Amount(a.value * whole / 100 if a.unit == "%" else a.value, "px") for a in (start, end))
    if count == 1:
        return [Amount((start.value + end.value) / 2, start.unit)]
    return [Amount(start.value + (end.value - start.value) * i / (count - 1), start.unit) for i in range(count)]


def _inside(region: Region, shape: RegionShape, camera: Camera, complaints: Complaints) -> None:
    (x, y), (width, height) = region.centre_px(camera.width, camera.height), region.size_px(camera.width, camera.height)
    if min(width, height) < MIN_SIDE:
        complaints.error(
            shape.at("size"), f"region '{region.name}' is only {width} x {height} px", f"at least {MIN_SIDE} px"
        )
    edges = {"left": x - width / 2, "top": y - height / 2, "right": camera.width - x - width / 2}
    edges["bottom"] = camera.height - y - height / 2
    over = [f"{-room:.4g} px over the {side} border" for side, room in edges.items() if room < -0.5]
    if over:
        place = shape.at("grid") if shape.grid is not None else shape.at("position")
        step = "move it or make it smaller"
        found = f"region '{region.name}' reaches {' and '.join(over)} of the frame"
        complaints.error(place, found, f"inside {camera.width} x {camera.height} px", step)
