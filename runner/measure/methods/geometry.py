"""Magnification, field of view, rotation, keystone, optical centre and distortion from a dot grid or chequered board.

A view (homography and lens) is fitted to the points, and every figure is read off it, with its uncertainty from the
points' own and from what the view does not explain. So keystone and a shifted chart do not enter distortion.

Distortion is positive outwards (pincushion). Two percentages of the picture's height are in use, one twice the other;
they are named apart, and neither sees a distortion that turns over on the way out: look at the curve.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.geometry_figures import BEYOND, Figure, Setting, curve, displacement_map, figures_of
from runner.measure.lattice_centres import Centres, centres_of
from runner.measure.numerics.plane_view import Lens, ViewFit, ViewLost, fit_view
from runner.measure.options import lookups, number, reader
from runner.measure.reading import Component, Reading, Refusal

Real = NDArray[np.float64]

NAME = "geometry"
TITLE = "Geometry"
GROUP = "geometry"
NEEDS = frozenset({"lattice"})
REFERENCES = (
    "ISO 17850:2015 (geometric distortion)",
    "EBU Tech 3249 (1995), IEC 61146-1:1994 (picture-height distortion)",
    "D. C. Brown, Photogrammetric Engineering 32 (1966) 444 (radial and tangential distortion)",
    "JCGM 100:2008 (uncertainty)",
)
FITTED, FRAME = "fitted", "frame"
MOST_TERMS = 6
SHOWS = 3.0
"""A further radial term shows if it is so many times its uncertainty."""
CENTRE_TOLD = 0.1
"""Half diagonals: the centre of distortion is fitted where its uncertainty will be less."""
FARTHEST_CENTRE = 0.5
"""Half diagonals from the frame's middle to a centre of distortion that is believed."""
WORST = 0.004
"""Residuals' rms in half diagonals: above, no lens shows the chart."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "magnification": QuantityInfo("1", "Size on the sensor over size on the chart, in the middle.", least=0),
    "object_pixel_size": QuantityInfo("µm object", "Length on the chart that a pixel sees, in the middle.", least=0),
    "field_of_view_width": QuantityInfo("mm object", "Length on the chart across the frame.", least=0),
    "field_of_view_height": QuantityInfo("mm object", "Length on the chart down the frame.", least=0),
    "field_of_view_diagonal": QuantityInfo("mm object", "Length on the chart from corner to corner.", least=0),
    "field_angle_horizontal": QuantityInfo("deg", "Angle seen across the frame, by the chart's distance.", least=0),
    "field_angle_vertical": QuantityInfo("deg", "Angle seen down the frame, by the chart's distance.", least=0),
    "field_angle_diagonal": QuantityInfo("deg", "Angle seen from corner to corner, by the chart's distance.", least=0),
    "rotation": QuantityInfo("deg", "Turn of the chart's rows against pixel rows, clockwise, in the middle."),
    "scale_ratio": QuantityInfo("1", "Scale along the chart's rows over that along its columns.", least=0),
    "keystone_horizontal": QuantityInfo("%", "By how much the scale at the right border exceeds that at the left."),
    "keystone_vertical": QuantityInfo("%", "By how much the scale at the lower border exceeds that at the upper."),
    "optical_centre_x": QuantityInfo("px", "Column of the centre of distortion; the frame's left border is 0."),
    "optical_centre_y": QuantityInfo("px", "Row of the centre of distortion; the frame's upper border is 0."),
    "optical_centre_offset": QuantityInfo("px", "Of the centre of distortion from the frame's middle.", least=0),
    "local_distortion": QuantityInfo(
        "%", "Image height over the ideal one, less 1, at a height of `field` half diagonals.", {"field": "1"}
    ),
    "largest_distortion": QuantityInfo("%", "The largest local distortion as far as points were seen."),
    "tv_distortion_ebu": QuantityInfo("%", "Sag of a long side over the picture's height: half the other one."),
    "tv_distortion_smia": QuantityInfo("%", "Height at the sides over that in the middle, less 1: twice the other."),
    "row_bow": QuantityInfo("%", "Largest bow of a row of points, in % of its chord.", least=0),
    "column_bow": QuantityInfo("%", "Largest bow of a column of points, in % of its chord.", least=0),
    "radial_k1": QuantityInfo("1", "Radial term of order 2, of the ideal height over half the diagonal."),
    "radial_k2": QuantityInfo("1", "Radial term of order 4, likewise."),
    "radial_k3": QuantityInfo("1", "Radial term of order 6, likewise."),
    "radial_k4": QuantityInfo("1", "Radial term of order 8, likewise."),
    "radial_k5": QuantityInfo("1", "Radial term of order 10, likewise."),
    "radial_k6": QuantityInfo("1", "Radial term of order 12, likewise."),
    "tangential_p1": QuantityInfo("1", "Tangential term p1, likewise, about the frame's middle."),
    "tangential_p2": QuantityInfo("1", "Tangential term p2, likewise, about the frame's middle."),
    "distortion_residual": QuantityInfo("px", "Rms of what the view leaves of the points, each way.", least=0),
    "lattice_points": QuantityInfo("1", "Dots or corners measured.", least=0),
    "missing_points": QuantityInfo("1", "Dots or corners of the chart that the frame does not show.", least=0),
}
NEEDS_PITCH = frozenset(
    {"magnification", "object_pixel_size", "field_of_view_width", "field_of_view_height", "field_of_view_diagonal"}
)
NEEDS_DISTANCE = frozenset({"field_angle_horizontal", "field_angle_vertical", "field_angle_diagonal"})


@dataclass(frozen=True)
class Options:
    """What is known of the chart, and which lens is fitted."""

    pitch: float | str | None = field(
        default=None, metadata={"sentence": "Distance of neighbouring dots or corners on the chart, e.g. 5 mm."}
    )
    pitch_uncertainty: float | str = field(
        default=0.0, metadata={"sentence": "Its relative standard uncertainty, e.g. 0.02 %."}
    )
    distance: float | str | None = field(
        default=None,
        metadata={"sentence": "From the chart to the lens's entrance pupil, e.g. 600 mm; for field angles."},
    )
    distance_uncertainty: float | str = field(
        default=0.0, metadata={"sentence": "Its relative standard uncertainty, e.g. 0.2 %."}
    )
    radial_terms: int = field(
        default=3,
        metadata={
            "sentence": f"Number of radial terms, 1 to {MOST_TERMS}: 3 hold lenses up to 60° to 0.01 px, 6 up to 110°."
        },
    )
    centre: str = field(
        default=FITTED,
        metadata={
            "sentence": "`fitted`: the centre of distortion is fitted; `frame`: it is held in the frame's middle and "
            "tangential terms are fitted, which show the same to first order."
        },
    )

    def __post_init__(self) -> None:
        """Turn lengths and shares into numbers and keep each option inside its meaning."""
        for name in ("pitch", "distance"):
            if getattr(self, name) is not None:
                object.__setattr__(self, name, number(name, getattr(self, name), "mm", 1e-5, 1e6))
        for name in ("pitch_uncertainty", "distance_uncertainty"):
            object.__setattr__(self, name, number(name, getattr(self, name), "%", 0.0, 0.5))
        terms = self.radial_terms
        if isinstance(terms, bool) or not isinstance(terms, int) or not 1 <= terms <= MOST_TERMS:
            raise ValueError(f"radial_terms is {terms!r}; allowed are whole numbers from 1 to {MOST_TERMS}")
        if self.centre not in {FITTED, FRAME}:
            raise ValueError(f"centre is {self.centre!r}; allowed are {FITTED} and {FRAME}")


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure the geometry of one frame in one channel.

    Raises:
        MeasurementRefused: The points cannot be fitted, or no view shows them.
    """
    centres = centres_of(sample.found, sample.crop)
    fit, centre_told = _fitted(sample, centres, options)
    half = fit.view.half
    rms = float(np.sqrt(np.mean(fit.residuals**2)))
    if rms > WORST * half:
        found = f"the points lie {rms:.1f} px rms off the best view of a flat lattice"
        allowed = f"at most {WORST * half:.1f} px may"
        raise MeasurementRefused("another scene", found, allowed=allowed, next_step="flatten or change the chart")
    points = centres.points - fit.shifts
    height = float(np.hypot(*(points - fit.view.centre).T).max()) / half
    pixel = sample.camera.pixel_pitch_um
    setting = Setting(
        (sample.camera.width, sample.camera.height),
        centres.places,
        min(1.0, height),
        _number(options.pitch),
        _number(options.pitch_uncertainty) or 0.0,
        _number(options.distance),
        _number(options.distance_uncertainty) or 0.0,
        None if pixel is None else pixel / 1000,
        tuple(w.at["field"] for w in sample.wanted if w.quantity == "local_distortion"),
    )
    more, shows = _longer(sample, centres, options, fit, centre_told)
    made = figures_of(fit, more, setting, shows=shows)
    readings = list(_readings(sample, options, made, setting, centre_told))
    readings += list(_locals(sample, made, setting))
    readings += list(_counts(sample, centres, fit))
    region = sample.found.region
    shown = curve(region, made, setting, _estimator(options, centre_told))
    return Measurement(tuple(readings), (shown,), (displacement_map(region, fit.view, points),))


def _number(value: float | str | None) -> float | None:
    return None if value is None else float(value)


def _fitted(sample: Sample, centres: Centres, options: Options) -> tuple[ViewFit, bool]:
    """Return the view, and whether its centre is fitted: where distortion is too small it cannot be."""
    frame = (sample.camera.width, sample.camera.height)
    try:
        held = fit_view(
            centres.points, centres.places, centres.u, frame, Lens(options.radial_terms, centre=False), centres.marks
        )
    except ViewLost as lost:
        raise MeasurementRefused("another scene", f"no view of a flat lattice fits the points: {lost}") from lost
    if options.centre == FRAME:
        return held, False
    k1 = float(held.view.radial[0])
    u = np.sqrt(np.maximum(np.diag(held.covariance)[-2:], 0)) * sqrt(1 + held.excess**2)
    if float(u.max()) > CENTRE_TOLD * abs(k1):
        return held, False
    p1, p2 = held.view.tangential
    start = np.array(frame) / 2 + np.clip(np.array([p2, p1]) / k1, -0.2, 0.2) * held.view.half
    try:
        free = fit_view(
            centres.points, centres.places, centres.u, frame, Lens(options.radial_terms), centres.marks, start
        )
    except ViewLost:
        return held, False
    away = hypot(*(free.view.centre - np.array(frame) / 2)) / free.view.half
    return (free, True) if away < FARTHEST_CENTRE else (held, False)


def _longer(
    sample: Sample, centres: Centres, options: Options, fit: ViewFit, told: bool
) -> tuple[ViewFit | None, bool]:
    """Return a fit with one more radial term, and whether that term shows."""
    frame = (sample.camera.width, sample.camera.height)
    lens = Lens(options.radial_terms + 1, centre=told)
    start = fit.view.centre if told else None
    try:
        more = fit_view(centres.points, centres.places, centres.u, frame, lens, centres.marks, start)
    except ViewLost:
        return None, False
    at = 8 + options.radial_terms
    u = sqrt(max(0.0, float(more.covariance[at, at]))) * sqrt(1 + more.excess**2)
    return more, abs(float(more.view.radial[-1])) > SHOWS * u


def _estimator(options: Options, told: bool) -> str:
    return f"{options.radial_terms} radial terms, centre {'fitted' if told else 'held'}"


def _readings(
    sample: Sample, options: Options, made: Mapping[str, Figure], setting: Setting, told: bool
) -> Iterator[Reading]:
    for name in _QUANTITIES:
        if name == "local_distortion" or (name not in made and not name.startswith("radial_k")):
            continue
        refusal = _why_not(name, options, made, setting, sample, told)
        blank = replace(_blank(sample, name), estimator=_estimator(options, told))
        yield replace(blank, refusal=refusal) if refusal else _with(blank, made[name])
    index = max(range(len(setting.heights)), key=lambda i: abs(made[f"at height {i}"].value))
    where = f"at an image height of {setting.heights[index]:.2f} half diagonals"
    blank = replace(_blank(sample, "largest_distortion"), estimator=_estimator(options, told), flags=(where,))
    yield _with(blank, made[f"at height {index}"])


def _why_not(
    name: str, options: Options, made: Mapping[str, Figure], setting: Setting, sample: Sample, told: bool
) -> Refusal | None:
    """Return why a figure cannot be given, or None."""
    because = ""
    needed = setting.needed(name)
    if name in NEEDS_PITCH | NEEDS_DISTANCE and options.pitch is None:
        because = "the spec does not state the chart's pitch: geometry: {pitch: 5 mm}"
    elif name in NEEDS_DISTANCE and options.distance is None:
        because = "the spec does not state the chart's distance: geometry: {distance: 600 mm}"
    elif name == "magnification" and sample.camera.pixel_pitch_um is None:
        because = "the spec does not state the camera's pixel_pitch"
    elif name.startswith("optical_centre") and not told:
        because = "the centre is held in the frame's middle (centre: frame)"
        if options.centre == FITTED:
            because = "the distortion is too small to tell where its centre lies"
    elif name.startswith("tangential") and told:
        because = "the centre is fitted, which takes the tangential terms up; write centre: frame"
    elif name.startswith("radial_k") and name not in made:
        because = f"{options.radial_terms} radial terms are fitted (radial_terms)"
    elif needed > BEYOND * setting.height:
        because = _too_far(needed, setting)
    elif not np.isfinite(made[name].value):
        because = "the fitted lens has no ideal position for the frame's borders"
    return Refusal("not defined", because) if because else None


def _too_far(needed: float, setting: Setting) -> str:
    return (
        f"points were seen up to {setting.height:.2f} half diagonals from the centre; this figure needs {needed:.2f}, "
        f"at most {BEYOND:g} times as far is read"
    )


def _locals(sample: Sample, made: Mapping[str, Figure], setting: Setting) -> Iterator[Reading]:
    """Yield the distortion at every image height that a limit asks for."""
    asked = [w for w in sample.wanted if w.quantity == "local_distortion"]
    for i, wanted in enumerate(asked):
        height = wanted.at["field"]
        blank = replace(_blank(sample, "local_distortion"), parameters=wanted.parameters, part=wanted.part)
        blank = replace(blank, estimator=wanted.estimator or "")
        figure = made[f"at field {i}"]
        if height < 0 or height > BEYOND * setting.height or not np.isfinite(figure.value):
            refusal = Refusal("outside the estimator's limits", _too_far(height, setting))
            yield replace(blank, refusal=refusal)
            continue
        far = f"points were seen up to {setting.height:.2f} half diagonals"
        yield _with(replace(blank, flags=(far,) if height > setting.height else ()), figure)


def _counts(sample: Sample, centres: Centres, fit: ViewFit) -> Iterator[Reading]:
    rms = float(np.sqrt(np.mean(fit.residuals**2)))
    freedom = max(1, fit.residuals.size - len(fit.parameters))
    u = Component("noise", rms / sqrt(2 * freedom), "A", dof=float(freedom), averages=True)
    yield replace(_blank(sample, "distortion_residual"), value=rms, u=u.u, components=(u,))
    lost = len(centres.kept) - len(centres.points)
    missing = int(sample.found.geometry["missing"]) + lost
    for name, count in (("lattice_points", len(centres.points)), ("missing_points", missing)):
        yield replace(_blank(sample, name), value=float(count), u=0.0, count=True)


def _blank(sample: Sample, name: str) -> Reading:
    return Reading(sample.found.region, name, _QUANTITIES[name].unit, None, None, method=REFERENCES[0])


def _with(blank: Reading, figure: Figure) -> Reading:
    return replace(blank, value=figure.value, u=figure.u, components=figure.components)
