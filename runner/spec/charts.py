"""Reads chart files strictly, and builds their records with what must hold between their parts."""

from math import hypot
from pathlib import Path, PurePosixPath
from typing import Any

from runner.errors import UsageError
from runner.spec.chart_arrangement import LEAST_MARKS, likeness
from runner.spec.chart_leaves import in_mm
from runner.spec.chart_model import ChartFile, Feature, Marks, Point, View
from runner.spec.chart_shapes import MIRRORED, ChartFileShape, FeatureShape, MarksShape, ViewShape
from runner.spec.leaves import share
from runner.spec.model import Amount
from runner.spec.revision import digest
from runner.spec.tree import Complaints, Mapped, Place, Text, read_tree

GROUND, INK = 0.85, 0.05
"""Reflectances where a file states none: good matt paper and its black."""
LEAST_CONTRAST = 0.3
"""(ground - ink)/(ground + ink) of the marks; below, uneven light hides them."""
QUIET = 0.75
"""Diameters from a mark's centre inside which nothing else lies, so that blur of half its radius reaches nothing."""
APART = 2.0
"""Diameters between the centres of two marks, at least."""


def read_chart(path: Path) -> ChartFile:
    """Read a chart file.

    Raises:
        SpecError: With every complaint at once.
    """
    complaints = Complaints()
    label = path.as_posix()
    try:
        tree = read_tree(path, label, complaints)
    except UsageError as error:
        complaints.error(Place(label, 0, 0), error.found, error.allowed, error.next_step)
        tree = None
    shape: ChartFileShape | None = ChartFileShape.model_validate(tree, context=complaints) if tree is not None else None
    built = build_chart_file(shape, complaints) if shape is not None else None
    complaints.raise_errors()
    if built is None:  # pragma: no cover - what was not built has complaints
        msg = f"{label} was refused without a complaint"
        raise AssertionError(msg)
    return built


def lay_in(tree: Mapped, top: Path, complaints: Complaints) -> None:
    """Put the contents of chart files in place of their names, wherever a capture of a spec names one.

    Args:
        tree: The spec after `include`; its places say which file a name stands in.
        top: Folder of the spec that is read; chart files lie in it or below.
        complaints: Takes the complaints.
    """
    captures = tree.get("captures")
    for capture in captures.values() if isinstance(captures, Mapped) else ():
        chart = capture.get("chart") if isinstance(capture, Mapped) else None
        if isinstance(chart, Mapped) and isinstance(chart.get("file"), Text):
            chart["file"] = _content(chart["file"], top, complaints)


def _content(name: Text, top: Path, complaints: Complaints) -> Mapped | None:
    folder = PurePosixPath(name.place.file).parent
    path = Path(folder) / PurePosixPath(name)
    if PurePosixPath(name).is_absolute() or "\\" in name or not path.resolve().is_relative_to(top):
        found = f"the chart file '{name}' lies outside the spec's folder"
        complaints.error(name.place, found, "a file in it or below it, with /")
        return None
    try:
        return read_tree(path, str(folder / name), complaints)
    except UsageError as error:
        complaints.error(name.place, f"the chart file '{name}' cannot be read: {error.found}", "", "check the name")
        return None


def build_chart_file(shape: ChartFileShape, complaints: Complaints) -> ChartFile | None:
    """Return the record of a chart file, or None with complaints."""
    before = len(complaints)
    piece, size, marks = shape.chart, shape.size, shape.marks
    if piece is None or size is None or marks is None or shape.features is None or not shape.whole():
        return None
    sheet = _pair(size)
    greys = shape.greys
    ground = share(greys.ground) if greys is not None and greys.ground is not None else GROUND
    ink = share(greys.ink) if greys is not None and greys.ink is not None else INK
    if not max(ground, ink) <= 1 or abs(ground - ink) < LEAST_CONTRAST * (ground + ink):
        found = f"ground {100 * ground:g} % and ink {100 * ink:g} % do not stand out from each other"
        complaints.error(shape.at("greys"), found, f"a modulation of {100 * LEAST_CONTRAST:g} %, up to 100 % each")
    found_marks = _marks(marks, sheet, complaints)
    features = {n: _feature(n, one) for n, one in shape.features.items() if one is not None}
    _check_features(features, shape, sheet, found_marks, complaints)
    if len(complaints) > before or any(one is None for one in shape.features.values()):
        return None
    plain: dict[str, Any] = shape.model_dump(mode="json", by_alias=True, exclude_unset=True)
    return ChartFile(
        piece.name,
        piece.serial,
        sheet,
        ground,
        ink,
        found_marks,
        features,
        build_view(shape.view),
        digest(plain),
        piece.seen == MIRRORED,
        piece.calibrated or "",
        piece.due or "",
        piece.uses,
        piece.most_uses,
    )


def build_view(shape: ViewShape | None, base: View | None = None) -> View:
    """Return how a chart must lie in the frame, what a shape states laid over a base."""
    base = base or View()
    if shape is None:
        return base
    low, high = (shape.scale.at_least, shape.scale.at_most) if shape.scale is not None else (None, None)
    keystone, tilt = (one.at_most if one is not None else None for one in (shape.keystone, shape.tilt))
    return View(
        low.value if low is not None else base.least_scale if shape.scale is None else None,
        high.value if high is not None else base.most_scale if shape.scale is None else None,
        share(keystone) if keystone is not None else base.most_keystone,
        tilt.value if tilt is not None else base.most_tilt,
        shape.turned.value if shape.turned is not None else base.turned,
    )


def _pair(pair: tuple[Amount, Amount]) -> Point:
    return in_mm(pair[0]), in_mm(pair[1])


def _feature(name: str, shape: FeatureShape) -> Feature:
    transfer = tuple((frequency.value, share(modulation)) for frequency, modulation in shape.transfer or ())
    u = share(shape.transfer_uncertainty) if shape.transfer_uncertainty is not None else 0.0
    return Feature(
        name,
        shape.kind,
        _pair(shape.position),
        _pair(shape.size),
        shape.data or {},
        shape.calibrated or {},
        transfer,
        u,
    )


# ---- what must hold between the parts


def _marks(shape: MarksShape, sheet: Point, complaints: Complaints) -> Marks:
    diameter, at = in_mm(shape.diameter), tuple(_pair(place) for place in shape.places)
    hole = in_mm(shape.hole) if shape.hole is not None else diameter / 2
    if not 0.3 * diameter <= hole <= 0.7 * diameter:
        found = f"a hole of {hole:g} mm in marks of {diameter:g} mm"
        complaints.error(shape.at("hole"), found, "0.3 to 0.7 of the diameter, so that rim and hole are both seen")
    if len(at) < LEAST_MARKS:
        found = f"there are {len(at)} marks"
        step = "a mark may be hidden and lens distortion must still show"
        complaints.error(shape.at("at"), found, f"at least {LEAST_MARKS}", step)
    for n, (x, y) in enumerate(at):
        if any(abs(p) + QUIET * diameter > side / 2 for p, side in zip((x, y), sheet, strict=True)):
            found = f"mark {n + 1} at {x:g} mm, {y:g} mm lies less than {QUIET:g} diameters inside the sheet"
            complaints.error(
                shape.at("at", n), found, f"a sheet of {sheet[0]:g} mm × {sheet[1]:g} mm", "move it inwards"
            )
        near = [m for m in range(n) if hypot(x - at[m][0], y - at[m][1]) < APART * diameter]
        if near:
            found = f"marks {near[0] + 1} and {n + 1} lie less than {APART:g} diameters apart"
            complaints.error(shape.at("at", n), found, "", "move one of them")
    if len(at) >= LEAST_MARKS and (alike := likeness(at, diameter)):
        complaints.error(shape.at("at"), f"the arrangement of the marks is symmetric: {alike}", "", "move some marks")
    return Marks(diameter, hole, at)


def _check_features(
    features: dict[str, Feature], shape: ChartFileShape, sheet: Point, marks: Marks, complaints: Complaints
) -> None:
    done: list[Feature] = []
    for one in features.values():
        place = shape.at("features", one.name, "position")
        if any(abs(c) + s / 2 > w / 2 + 1e-9 for c, s, w in zip(one.position, one.size, sheet, strict=True)):
            found = f"feature '{one.name}' reaches over the sheet of {sheet[0]:g} mm × {sheet[1]:g} mm"
            complaints.error(place, found, "", "move it or make it smaller")
        for n, mark in enumerate(marks.at):
            if _distance(mark, one) < QUIET * marks.diameter - 1e-9:
                found = f"feature '{one.name}' lies less than {QUIET:g} diameters from the centre of mark {n + 1}"
                complaints.error(place, found, "", "move one of them: marks need quiet ground around them")
        for other in done:
            if all(
                abs(a - b) < (s + t) / 2 - 1e-9
                for a, b, s, t in zip(one.position, other.position, one.size, other.size, strict=True)
            ):
                complaints.error(place, f"features '{other.name}' and '{one.name}' overlap", "", "move one of them")
        done.append(one)


def _distance(point: Point, feature: Feature) -> float:
    gaps = [max(abs(p - c) - s / 2, 0.0) for p, c, s in zip(point, feature.position, feature.size, strict=True)]
    return hypot(*gaps)
