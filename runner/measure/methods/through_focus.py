"""Best focus, depth of focus and the focal surface, from frames along the focus axis.

At every position along `{z}` another method of the capture reads the transfer function in each region at one frequency.
Each region's curve over the positions has its peak where that region is in focus (`numerics.focus_curve`); the peaks of
all regions make the focal surface with its tilt, curvature and astigmatism (`numerics.focal_surface`).

A region measures the tangential direction where its modulation lies along the radius from the frame's centre (lines at
right angles to the radius), the sagittal one where it lies across (lines along the radius).
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import atan2, cos, degrees, hypot, isfinite, radians, sqrt
from typing import NoReturn

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Found, Measurement, QuantityInfo, Sample, Scene, Step
from runner.measure.numerics.focal_surface import Surface, fit_surface
from runner.measure.numerics.focus_curve import FocusLost, FocusPeak, fit_peak
from runner.measure.options import lookups, number, reader
from runner.measure.reading import Component, Curve, Reading, Refusal
from runner.measure.steps import position
from runner.spec.model import Amount
from runner.spec.units import context_of, convert, parse_amount

NAME = "through focus"
TITLE = "Through focus"
GROUP = "transfer function"
NEEDS: frozenset[str] = frozenset()
GATHERS = True
AXES = frozenset({"z"})
REFERENCES = (
    "ISO 15529:2010 (modulation transfer of sampled imaging systems)",
    "W. T. Welford, Aberrations of Optical Systems (1986), 7",
    "JCGM 100:2008 (uncertainty)",
)
ESTIMATOR = "fourth order"

RADIAL = 30.0
"""deg: a modulation within this angle of the radius is tangential, within it of the normal to the radius sagittal."""
CENTRE = 0.1
"""Field height below which a region has no direction."""

_WHOLE: Mapping[str, str] = {
    "best_focus": "Position of best focus; of several regions, the focal surface's height at the frame's centre.",
    "focus_tilt_x": "Rise of the focal surface from the left to the right border of the frame.",
    "focus_tilt_y": "Rise of the focal surface from the upper to the lower border of the frame.",
    "field_curvature": "Height of the focal surface in the corners of the frame above its centre, tilt taken off.",
    "astigmatism": "Sagittal minus tangential focus in the corners of the frame.",
    "depth_of_focus": "Length over which a region keeps the stated share of its own peak, mean of the regions.",
}
_TERMS = {
    "best_focus": "height",
    "focus_tilt_x": "tilt x",
    "focus_tilt_y": "tilt y",
    "field_curvature": "curvature",
    "astigmatism": "astigmatism",
}
_QUANTITIES: Mapping[str, QuantityInfo] = {
    **{name: QuantityInfo("µm", sentence, whole=True) for name, sentence in _WHOLE.items()},
    "focal_surface_tilt": QuantityInfo(
        "deg", "Angle between the focal surface and the sensor; needs the pixel pitch.", least=0.0, whole=True
    ),
    "peak_transfer": QuantityInfo("1", "Transfer function at best focus, mean of the regions.", least=0.0, whole=True),
}


@dataclass(frozen=True)
class Options:
    """How focus is found."""

    frequency: str = field(default="0.1 cy/px", metadata={"sentence": "Spatial frequency that is followed."})
    step: str | None = field(
        default=None,
        metadata={"sentence": "Distance of one step where files are numbered, e.g. 5 um; else names or sidecars say."},
    )
    share: float | str = field(
        default=0.8, metadata={"sentence": "Share of the peak at which the depth of focus ends, e.g. 80 %."}
    )

    def __post_init__(self) -> None:
        """Keep each option inside its meaning."""
        object.__setattr__(self, "share", number("share", self.share, "%", 0.5, 0.95))
        for name, example in (("frequency", "0.1 cy/px"), ("step", "5 um")):
            asked = getattr(self, name)
            if asked is None:
                continue
            try:
                amount = parse_amount(str(asked))
            except UsageError as error:
                raise ValueError(f"{name} is {asked!r}: {error.found}") from error
            if amount.unit == "1" or amount.value <= 0:
                raise ValueError(f"{name} is {asked!r}; for example {example}")


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def wants(options: Options) -> Sequence[tuple[str, Mapping[str, Amount]]]:
    """Name what other methods must read: the transfer function at the frequency that is followed."""
    return (("mtf", {"frequency": parse_amount(options.frequency)}),)


def measure(sample: Sample, options: Options) -> NoReturn:  # noqa: ARG001 - the contract's form
    """Refuse a single frame: focus shows in several.

    Raises:
        MeasurementRefused: Always.
    """
    raise MeasurementRefused("not defined", "one frame alone has no best focus")


@dataclass(frozen=True)
class _Focused:
    """One region's curve and its peak."""

    found: Found
    """The region as found."""
    kind: float
    """+1/2 sagittal, -1/2 tangential, 0 neither."""
    peak: FocusPeak
    """Where it is in focus."""
    curve: Curve
    """Its through-focus curve."""
    shared: Mapping[str, float]
    """Relative uncertainty that its transfer shares with others, by the shared word."""


def gather(scene: Scene, options: Options) -> Measurement:
    """Find best focus in every region, and the surface through them.

    Raises:
        MeasurementRefused: Positions are not known, or a region has no peak.
    """
    places = _positions(scene, options)
    if scene.lost and scene.wanted:
        raise MeasurementRefused(scene.lost[0].cause, f"{scene.lost[0].region}: {scene.lost[0].because}")
    focused = [_focus(scene, region, places, options) for region in scene.regions]
    there = [one for one in focused if isinstance(one, _Focused)]
    lost = [one for one in focused if isinstance(one, Refusal)]
    if lost and (scene.wanted or not there):
        raise MeasurementRefused(lost[0].cause, lost[0].because)
    return Measurement(tuple(_readings(scene, there)), tuple(one.curve for one in there) if not scene.region else ())


def _positions(scene: Scene, options: Options) -> NDArray[np.float64]:
    """Return the position of every step, µm."""
    context = context_of(scene.camera, scene.optics)
    places = []
    for step in scene.steps:
        said = position(step, "z")
        if said is not None and said.unit == "1" and options.step is not None:
            one = parse_amount(options.step)
            said = Amount(said.value * one.value, one.unit)
        if said is None or said.unit == "1":
            named = step.axes.get("z", "")
            found = f"the position of step '{named}' is not known: neither a sidecar nor the name states a length"
            raise MeasurementRefused("not defined", f"{found}, and the spec has no through focus: {{step: …}}")
        try:
            places.append(convert(said.value, said.unit, "µm", context))
        except UsageError as error:
            raise MeasurementRefused("not defined", f"a position is no length on the sensor: {error.found}") from error
    if len(set(places)) < len(places):
        raise MeasurementRefused("not defined", "two steps have the same position")
    return np.array(places)


def _focus(scene: Scene, region: str, places: NDArray[np.float64], options: Options) -> _Focused | Refusal:
    known = [
        (float(z), reading, sample)
        for z, step in zip(places, scene.steps, strict=True)
        for sample in step.samples
        if sample.found.region == region and (reading := _reading(step, region, options)) is not None
    ]
    known.sort(key=lambda one: one[0])
    good = [(z, r, s) for z, r, s in known if r.value is not None and r.u is not None]
    if not good:
        first = next((r.refusal for _, r, _ in known if r.refusal), Refusal("no edge", "it was found at no position"))
        return Refusal(first.cause, f"{region}: {first.because}")
    z = np.array([one[0] for one in good])
    values, u = np.array([float(r.value or 0) for _, r, _ in good]), np.array([float(r.u or 0) for _, r, _ in good])
    try:
        peak = fit_peak(z, values, np.array([_own(r) for _, r, _ in good]), float(options.share))
    except FocusLost as lost:
        return Refusal("not defined", f"{region}: {lost}")
    top = good[int(np.argmax(values))][1]
    x, y, y_u = (tuple(map(float, row)) for row in (z, values, u))
    curve = Curve(region, "through focus", x, y, y_u, "µm", "1", estimator=top.estimator)
    found = good[0][2].found
    shared = {c.shared: c.u / float(top.value or 1) for c in top.components if c.shared}
    return _Focused(found, _kind(scene, found), peak, curve, shared)


def _reading(step: Step, region: str, options: Options) -> Reading | None:
    asked = parse_amount(options.frequency)
    for reading in step.readings:
        place = (reading.region, reading.quantity, reading.part)
        if place == (region, "mtf", "system") and dict(reading.parameters) == {"frequency": asked}:
            return reading
    return None


def _own(reading: Reading) -> float:
    """Return the noise that one position has for itself: what all share moves the whole curve, not its peak."""
    parts = [c.u for c in reading.components if c.type == "A" and not c.shared]
    return max(sqrt(sum(u**2 for u in parts)) if parts else float(reading.u or 0), 1e-9)


def _kind(scene: Scene, found: Found) -> float:
    """Return +1/2 for a sagittal, -1/2 for a tangential region, 0 where it has no direction."""
    width, height = scene.frame_size
    x, y = _centre(found)
    dx, dy = x - width / 2, y - height / 2
    if "edge_direction" not in found.geometry or hypot(dx, dy) < CENTRE * hypot(width, height) / 2:
        return 0.0
    apart = abs((found.geometry["edge_direction"] - degrees(atan2(dy, dx)) + 90) % 180 - 90)
    return -0.5 if apart <= RADIAL else 0.5 if apart >= 90 - RADIAL else 0.0


def _centre(found: Found) -> tuple[float, float]:
    return (found.box.x0 + found.box.x1) / 2, (found.box.y0 + found.box.y1) / 2


def _readings(scene: Scene, focused: Sequence[_Focused]) -> list[Reading]:
    centres = np.array([_centre(one.found) for one in focused])
    noise = np.array([one.peak.position_u for one in focused])
    bias = max(one.peak.position_bias for one in focused)
    surface = fit_surface(
        centres[:, 0],
        centres[:, 1],
        (float(scene.frame_size[0]), float(scene.frame_size[1])),
        np.array([one.kind for one in focused]),
        np.array([one.peak.position for one in focused]),
        np.maximum(noise, 1e-6),
    )
    made = [_term(scene, name, term, surface, bias) for name, term in _TERMS.items()]
    made.append(_tilt(scene, surface, bias))
    depths = np.array([one.peak.high - one.peak.low for one in focused])
    if all(isfinite(depth) for depth in depths):
        u = float(np.sqrt(np.sum([one.peak.depth_u**2 for one in focused]))) / len(focused)
        parts = (Component("noise", u, "A"), Component("method bias", 2 * bias, "B"))
        made.append(_valued(scene, "depth_of_focus", float(depths.mean()), parts))
    else:
        because = "the positions end before every region has fallen to the stated share of its peak"
        made.append(_refused(scene, "depth_of_focus", because))
    made.append(_peak(scene, focused))
    return made


def _term(scene: Scene, name: str, term: str, surface: Surface, bias: float) -> Reading:
    if term not in surface.terms:
        return _refused(scene, name, f"{len(scene.regions)} regions at these places do not tell it")
    parts = (Component("noise", surface.u(term), "A"), Component("method bias", bias, "B"))
    return _valued(scene, name, surface.terms[term], parts)


def _tilt(scene: Scene, surface: Surface, bias: float) -> Reading:
    name, pitch = "focal_surface_tilt", scene.camera.pixel_pitch_um
    if pitch is None:
        return _refused(scene, name, "the spec does not state the pixel pitch")
    if not {"tilt x", "tilt y"} <= set(surface.terms):
        return _refused(scene, name, f"{len(scene.regions)} regions at these places do not tell it")
    width, height = (pitch * side for side in scene.frame_size)
    slopes = np.array([surface.terms["tilt x"] / width, surface.terms["tilt y"] / height])
    places = [list(surface.terms).index(term) for term in ("tilt x", "tilt y")]
    scale = np.diag([1 / width, 1 / height])
    covariance = scale @ surface.covariance[np.ix_(places, places)] @ scale
    size = hypot(*slopes)
    # A length is never negative, so noise alone makes it positive: its mean square is taken off, down to zero.
    corrected = sqrt(max(0.0, size**2 - float(np.trace(covariance))))
    along = slopes / size if size else np.array([1.0, 0.0])
    u = sqrt(max(float(along @ covariance @ along), float(np.trace(covariance)) / 2))
    to_degrees = degrees(1.0) * cos(radians(degrees(np.arctan(size)))) ** 2
    parts = (
        Component("noise", to_degrees * u, "A"),
        Component("method bias", to_degrees * bias / min(width, height), "B"),
    )
    return _valued(scene, name, degrees(float(np.arctan(corrected))), parts)


def _peak(scene: Scene, focused: Sequence[_Focused]) -> Reading:
    value = float(np.mean([one.peak.height for one in focused]))
    u = sqrt(sum(min(one.curve.u) ** 2 for one in focused)) / len(focused)
    words = sorted({word for one in focused for word in one.shared})
    shared = [
        Component(word, value * float(np.mean([one.shared.get(word, 0.0) for one in focused])), "B", shared=word)
        for word in words
    ]
    return _valued(scene, "peak_transfer", value, (Component("noise", u, "A"), *shared))


def _valued(scene: Scene, name: str, value: float, parts: tuple[Component, ...]) -> Reading:
    u = sqrt(sum(part.u**2 for part in parts))
    return replace(_blank(scene, name), value=float(value), u=u, components=parts)


def _refused(scene: Scene, name: str, because: str) -> Reading:
    return replace(_blank(scene, name), refusal=Refusal("not defined", because))


def _blank(scene: Scene, name: str) -> Reading:
    unit = _QUANTITIES[name].unit
    return Reading(scene.region, name, unit, None, None, estimator=ESTIMATOR, method=REFERENCES[1])
