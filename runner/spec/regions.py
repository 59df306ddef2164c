"""Regions as written (single, named groups, grids) turned into regions with a name and a centre each."""

from collections.abc import Mapping
from math import cos, hypot, radians, sin

from runner.spec.model import Amount, Camera, Region
from runner.spec.position_leaves import FieldPoint, Point
from runner.spec.shapes import GridShape, RegionShape
from runner.spec.tree import Complaints

MIN_SIDE = 4
"""px; less cannot hold anything to measure."""


def expand(shapes: Mapping[str, RegionShape | None], camera: Camera, complaints: Complaints) -> tuple[Region, ...]:
    """Return the regions of a capture in the order of the spec; a broken shape gives none.

    A member of a group carries the group's name and its own: `corners upper left`, `field r1c2`.

    Args:
        shapes: By name as written.
        camera: Gives the frame's size.
        complaints: Takes complaints about regions off the frame and names used twice.
    """
    regions: list[Region] = []
    for name, shape in shapes.items():
        if shape is None:
            continue
        for region in _members(name, shape, camera):
            if any(region.name == other.name for other in regions):
                complaints.error(shape.at(), f"two regions have the name '{region.name}'", "", "rename one of them")
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
    return tuple(shape.position) if isinstance(shape.position, dict) else ()


def _members(name: str, shape: RegionShape, camera: Camera) -> list[Region]:
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
