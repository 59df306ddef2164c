"""Finds a chart in a frame by its round marks, or says in one sentence why the frame is no picture of it.

Every sentence begins with `the chart`. Where a missing chart and a unit that sees nothing look alike, it says so; else
what it tells is the capture's doing.
"""

from dataclasses import dataclass
from math import acos, atan2, degrees

import numpy as np
from numpy.typing import NDArray

from runner.capture.fitness import UNDECIDED
from runner.capture.frame import Codes, linearise
from runner.measure.numerics.chart_pose import ChartPose, solve_pose
from runner.measure.numerics.mark_matching import LEAST, Match, convincing, match_marks
from runner.measure.numerics.ring_fit import Centre, fit_ring
from runner.measure.numerics.ring_search import MOST, Rings, find_rings
from runner.spec.chart_model import ChartFile, View
from runner.spec.model import Camera, Chart, Optics

Real = NDArray[np.float64]

BEGINS = "the chart "
"""Every sentence about a chart begins so."""
PICTURES = (1400, 3200)
"""Longer side of the picture that is searched, px; a finer one only where the first does not tell."""
DARKEST = 0.01
"""A frame whose brightest part stays below 1 % of the range over black holds no light."""
BRIGHTEST = 0.99
"""A frame whose darkest part lies above 99 % is white."""
TURN = 45.0
"""Degrees that a chart may lie turned from what is asked for; beyond, it was put in another way round."""
REFINEMENTS = 3
LOST = 0.5
"""px; a mark that lies further than that and five times the others' rms from its place is covered in part."""
BENT = 0.03
"""Of a mark's diameter: rms of the marks about the view. Sheets that lie less flat, and chance fits, exceed it."""


@dataclass(frozen=True)
class Unfit:
    """A frame that is no picture of the chart as it must be."""

    because: str
    """One plain sentence."""
    shown: bool = True
    """The frame shows this chart, or what stands in its place; else it has too little light or sharpness to tell."""


def look(codes: Codes, camera: Camera, optics: Optics, chart: Chart) -> ChartPose | Unfit | None:
    """Find the chart in a frame.

    Args:
        codes: Rows × columns, colours as one grey.
        camera: Levels and tone.
        optics: Focal length, where a tilt is bounded.
        chart: With its file; without one there is nothing to find.

    Returns:
        The pose, why there is none, or None for a chart without a file.
    """
    file = chart.file
    if file is None:
        return None
    size = (int(codes.shape[1]), int(codes.shape[0]))
    match, seen, fitting = None, 0, 0
    for longest in PICTURES:
        rings = find_rings(codes, file.marks.hole / file.marks.diameter, dark=file.ink < file.ground, longest=longest)
        match, count = _matched(rings, file, size)
        seen, fitting = max(seen, int(rings.holes.sum())), max(fitting, count)
        if match is not None or longest >= max(size):
            break
    pose = _refined(codes, camera, file, match, size) if match is not None else None
    if pose is None:
        return _not_found(codes, camera, file, seen, fitting)
    fault = _handedness(pose, file, chart.view) or _whole(pose, file, size) or _distance(pose, file, chart.view)
    fault = fault or _tilt(pose, file, chart.view, camera, optics)
    return Unfit(f"{BEGINS}{fault}") if fault else pose


def _matched(rings: Rings, file: ChartFile, size: tuple[int, int]) -> tuple[Match | None, int]:
    """Match marks with holes; where they do not do, also those whose hole may be lost in blur."""
    arrangement, diameter = np.array(file.marks.at), file.marks.diameter
    own = rings.holes
    match, count = match_marks(arrangement, diameter, rings.centres[own], rings.radii[own], size)
    if match is None and LEAST <= len(rings.centres) <= MOST and not own.all():
        match, _ = match_marks(arrangement, diameter, rings.centres, rings.radii, size)
    return match, count


def _not_found(codes: Codes, camera: Camera, file: ChartFile, seen: int, fitting: int) -> Unfit:
    brightest = float(np.percentile(linearise(codes[::4, ::4], camera), 99.5))
    if brightest < DARKEST:
        found = f"its brightest part reaches {100 * brightest:.2f} % of the range over black"
        return Unfit(f"{BEGINS}got no light: {found}, {100 * DARKEST:g} % is needed", shown=False)
    darkest = float(np.percentile(linearise(codes[::4, ::4], camera), 0.5))
    if darkest > BRIGHTEST:
        found = f"its darkest part lies at {100 * darkest:.1f} % of the range"
        return Unfit(f"{BEGINS}got too much light: {found}", shown=False)
    count = len(file.marks.at)
    if seen >= max(5, count / 2):
        fit = f"at most {fitting} of its {count} marks fit" if fitting else f"its {count} marks do not fit them"
        found = f"{seen} round marks are seen, but {fit}"
        return Unfit(f"{BEGINS}is not '{file.name}': {found}; another chart, or marks are covered")
    found = f"{seen} round marks are seen, '{file.name}' has {count}"
    why = f"a missing or distant chart and a wholly defocused unit {UNDECIDED}"
    return Unfit(f"{BEGINS}is not seen: {found}; {why}", shown=False)


def _refined(codes: Codes, camera: Camera, file: ChartFile, match: Match, size: tuple[int, int]) -> ChartPose | None:
    """Measure all marks to a part of a px and solve the view again; None where they are not this chart's after all."""
    pose, radii = match.pose, (file.marks.diameter / 2, file.marks.hole / 2)
    arrangement = np.array(file.marks.at)
    blurred = len(match.marks) == len(arrangement)  # all are there: where blur reaches over their ground, rough ones do
    for _ in range(REFINEMENTS):
        centres = [
            fit_ring(codes, lambda part: linearise(part, camera), pose, (float(x), float(y)), radii)
            for x, y in arrangement
        ]
        better = _solved(arrangement, centres, size)
        if better is None and not blurred:
            return None
        if better is None:
            break
        moved = np.abs(better.to_frame(arrangement) - pose.to_frame(arrangement)).max()
        pose = better
        if moved < 0.005:
            break
    px = file.marks.diameter * float(np.sqrt(np.abs(np.linalg.det(pose.slopes(np.zeros((1, 2)))))[0]))
    return pose if pose.rms <= BENT * px + 0.1 else None


def _solved(arrangement: Real, centres: list[Centre | None], size: tuple[int, int]) -> ChartPose | None:
    """Solve from the marks that were measured, leaving out one after another that does not lie with the rest."""
    kept = [n for n, one in enumerate(centres) if one is not None]
    while len(kept) >= 6:
        places = np.array([(one.x, one.y) for n in kept if (one := centres[n]) is not None])
        pose = solve_pose(arrangement[kept], places, size)
        gaps = np.linalg.norm(pose.to_frame(arrangement[kept]) - places, axis=1)
        worst = int(gaps.argmax())
        others = float(np.sqrt(np.mean(np.delete(gaps, worst) ** 2)))
        if gaps[worst] <= max(LOST, 5 * others):
            return pose if convincing(len(kept), pose, arrangement, size) else None
        del kept[worst]
    return None


# ---- how it lies


def _handedness(pose: ChartPose, file: ChartFile, view: View) -> str:
    slope = pose.slopes(np.zeros((1, 2)))[0]
    mirrored = bool(np.linalg.det(slope) < 0)
    if mirrored != file.mirrored:
        return "is seen mirrored" if mirrored else "is not seen mirrored, as its file says it must be"
    turn = degrees(atan2(-slope[0, 1], slope[1, 1]))  # of its downward axis: a mirror leaves it
    asked = view.turned or 0.0
    off = (turn - asked + 180) % 360 - 180
    if abs(off) <= TURN:
        return ""
    how = "lies upside down" if abs(off) > 180 - TURN else "lies on its side"
    wanted = "upright" if asked == 0 else f"{asked:g}°"
    return f"{how}: it is turned by {turn:.0f}°, asked for is {wanted}, {TURN:g}° either way"


def _whole(pose: ChartPose, file: ChartFile, size: tuple[int, int]) -> str:
    where = pose.to_frame(np.array(file.marks.at))
    names = ("left", "top", "right", "bottom")
    over = np.column_stack([-where[:, 0], -where[:, 1], where[:, 0] - size[0], where[:, 1] - size[1]])
    out = [n for n in range(len(where)) if over[n].max() > 0]
    if not out:
        return ""
    side = int(over.max(axis=0).argmax())
    numbers = ", ".join(str(n + 1) for n in out)
    marks = f"mark {numbers} lies" if len(out) == 1 else f"marks {numbers} lie"
    return f"is partly out of the frame: {marks} up to {over.max():.0f} px beyond its {names[side]} border"


def _distance(pose: ChartPose, file: ChartFile, view: View) -> str:
    scales = np.sqrt(np.abs(np.linalg.det(pose.slopes(_spread(file)))))
    low, high = float(scales.min()), float(scales.max())
    if view.least_scale is not None and low < view.least_scale:
        return f"is too far: it has {low:.3g} px/mm at its smallest, at least {view.least_scale:g} px/mm is asked for"
    if view.most_scale is not None and high > view.most_scale:
        return f"is too near: it has {high:.3g} px/mm at its largest, at most {view.most_scale:g} px/mm is asked for"
    return ""


def _tilt(pose: ChartPose, file: ChartFile, view: View, camera: Camera, optics: Optics) -> str:
    scales = pose.plain_scales(_spread(file))
    keystone = float(scales.max() / scales.min()) - 1
    if view.most_keystone is not None and keystone > view.most_keystone:
        asked = f"at most {100 * view.most_keystone:g} % is asked for"
        return f"is tilted: its scale changes by {100 * keystone:.1f} % over it, {asked}"
    if view.most_tilt is None or optics.focal_length_mm is None or camera.pixel_pitch_um is None:
        return ""
    tilt = tilt_of(pose, optics.focal_length_mm / (camera.pixel_pitch_um / 1000))
    if tilt > view.most_tilt:
        return f"is tilted by {tilt:.1f}°, at most {view.most_tilt:g}° is asked for"
    return ""


def tilt_of(pose: ChartPose, focal_px: float) -> float:
    """Return the angle between the chart's normal and the optical axis, degrees.

    Args:
        pose: The view.
        focal_px: Focal length, px: the object is far away.

    References:
        Z. Zhang, IEEE Trans. Pattern Anal. Mach. Intell. 22 (2000) 1330 (a plane's axes from its homography).
    """
    view = np.array(pose.view).reshape(3, 3)
    ideal = np.diag([pose.half_diagonal / focal_px, pose.half_diagonal / focal_px, 1.0]) @ view
    across, down = (ideal[:, n] / np.linalg.norm(ideal[:, n]) for n in (0, 1))
    normal = np.cross(across, down)
    return degrees(acos(min(1.0, float(abs(normal[2]) / np.linalg.norm(normal)))))


def _spread(file: ChartFile) -> Real:
    """Return a lattice of places over what the marks span."""
    marks = np.array(file.marks.at)
    x, y = (np.linspace(marks[:, n].min(), marks[:, n].max(), 5) for n in (0, 1))
    return np.array([(a, b) for b in y for a in x])


# ---- whether it may be used


def worn(chart: Chart, time: str) -> tuple[str, ...]:
    """Return why a chart may not be used at a time, whatever a frame of it shows.

    Args:
        chart: With its file; one without is not looked at.
        time: Of the run, ISO 8601; empty where days do not count.
    """
    file, day = chart.file, time[:10]
    if file is None or not day:
        return ()
    piece = f"'{file.name}', serial {file.serial},"
    sentences = []
    if file.due and day > file.due:
        sentences.append(f"{BEGINS}{piece} is overdue for calibration: it was due on {file.due}, this run is of {day}")
    if file.uses is not None and file.most_uses is not None and file.uses > file.most_uses:
        sentences.append(f"{BEGINS}{piece} is worn: it was used {file.uses} times, {file.most_uses} are allowed")
    return tuple(sentences)
