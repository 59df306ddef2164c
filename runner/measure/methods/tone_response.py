"""How codes follow light: the opto-electronic conversion function from grey steps, its linearity and its gamma.

The curve `oecf` goes from relative light, as the chart states it, to the code as a share of the range from black to
white level. Another capture of the same run may be linearised by it (`uses: {tone: …}`). Linearity is that of the codes
with the stated tone undone: of a camera that states none, the codes themselves.

Uneven light over the chart counts as departure: a companion `flat` (an even field in the same light) takes it off, and
`light_uncertainty` says what is left.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Box
from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample, Wanted
from runner.measure.numerics.line_deviations import deviation_sizes
from runner.measure.numerics.tone_curve import Figure, ToneCurve, tone_curve
from runner.measure.options import number, read_record
from runner.measure.patch_finding import boxes_of
from runner.measure.patch_levels import Level, levels_of, refuse_uneven
from runner.measure.reading import Component, Curve, Reading, Refusal

Real = NDArray[np.float64]

NAME = "tone response"
TITLE = "Tone response"
GROUP = "tone and colour"
NEEDS = frozenset({"grey steps"})
REFERENCES = (
    "ISO 14524:2009 (opto-electronic conversion function)",
    "EMVA Standard 1288 Release 4.0 Linear (2021), linearity error: relative deviations from 5 to 95 %",
    "JCGM 100:2008, JCGM 101:2008 (uncertainty)",
)
ESTIMATOR = "patch means"

LEAST_STEPS = 4
"""Steps within the range: fewer make no curve."""
DARKEST = 0.01
"""Code of the brightest step, share of the range, below which the chart has no light."""
RANGE = (0.05, 0.95)
"""Shares of the range between which linearity and gamma are told (EMVA 1288)."""
SPREAD = 2.0
"""Brightest over darkest light of those steps, at least: of a narrower range a slope tells little."""
BETWEEN = 4
"""Points of the curve to a step."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "oecf": QuantityInfo(
        "%", "Code at a light (`level`, as the chart states it), in % of the range from black to white.", {"level": "%"}
    ),
    "linearity_error": QuantityInfo(
        "%", "Mean size of the relative deviations from the best straight line, 5 to 95 % of the range.", least=0
    ),
    "worst_linearity_error": QuantityInfo("%", "Largest size of these deviations.", least=0),
    "gamma": QuantityInfo("1", "Exponent g of the best power law code = light^(1/g), 5 to 95 % of the range.", least=0),
}


@dataclass(frozen=True)
class Options:
    """How the curve is measured."""

    light_uncertainty: float | str = field(
        default=0.0,
        metadata={
            "sentence": "Standard uncertainty of each step's light, as a share of it: the chart's calibration and "
            "uneven light, e.g. 1 %."
        },
    )
    clipped_steps: int = field(
        default=0,
        metadata={"sentence": "Steps that may lie at an end of the range; they are left out. More refuse the chart."},
    )

    def __post_init__(self) -> None:
        """Turn the share into a number and keep each option inside its meaning."""
        object.__setattr__(
            self, "light_uncertainty", number("light_uncertainty", self.light_uncertainty, "%", 0.0, 0.3)
        )
        count = self.clipped_steps
        if isinstance(count, bool) or not isinstance(count, int) or not 0 <= count <= 100:
            raise ValueError(f"clipped_steps is {count!r}; allowed are whole numbers from 0 to 100")


def read_options(asked: Mapping[str, Any]) -> Options:
    """Read the options from a spec's keys.

    Raises:
        UsageError: A key or value is not allowed.
    """
    return read_record(Options, asked)


def quantity(name: str) -> QuantityInfo | None:
    """Return what a quantity name means, or None."""
    return _QUANTITIES.get(name)


def quantities() -> Mapping[str, QuantityInfo]:
    """Return the quantities."""
    return _QUANTITIES


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure the steps of one frame in one channel.

    Raises:
        MeasurementRefused: Steps are clipped or not even, too few are left, or a companion is missing.
    """
    levels, lights, _ = steps_of(sample, options.clipped_steps)
    span = sample.camera.white_level - sample.camera.black_level
    codes = np.array([level.code for level in levels]) / span
    codes_u = np.array([level.code_u for level in levels]) / span
    try:
        curve = tone_curve(lights, codes, codes_u, float(options.light_uncertainty))
    except ValueError as few:
        raise MeasurementRefused("too dark", str(few)) from few
    if len(curve.light) < LEAST_STEPS:
        found = f"{len(curve.light)} steps rise above one another and above black"
        raise MeasurementRefused("too dark", found, allowed=f"{LEAST_STEPS} at least")
    readings = [
        *(_at(sample, curve, wanted) for wanted in sample.wanted if wanted.quantity == "oecf"),
        *_linearity(sample, levels, lights, float(options.light_uncertainty)),
        _gamma(sample, lights, codes, codes_u, float(options.light_uncertainty)),
    ]
    return Measurement(tuple(readings), _curves(sample, curve, lights, codes, codes_u))


def steps_of(sample: Sample, most_clipped: int) -> tuple[list[Level], Real, list[Box]]:
    """Return the levels of a chart's steps within the range, their lights, uneven light taken off by a flat, and boxes.

    Args:
        sample: A region of the target `grey steps`.
        most_clipped: Steps that may be left out for lying at an end of the range.

    Raises:
        MeasurementRefused: More are clipped, a patch is not even, or the flat is missing or dark.
    """
    boxes = boxes_of(sample.found.points["patches"])
    levels = levels_of(sample.crop, boxes)
    lights = np.array([sample.found.geometry[f"light {n}"] for n in range(1, len(boxes) + 1)])
    clipped = [n for n, level in enumerate(levels) if level.clipped]
    if len(clipped) > most_clipped:
        white = sum(levels[n].at_white > levels[n].at_black for n in clipped)
        words = f"{white} at the white level, {len(clipped) - white} at code 0"
        raise MeasurementRefused(
            "clipped",
            f"{len(clipped)} of {len(levels)} steps lie at an end of the range ({words})",
            allowed=f"{most_clipped} may",
            next_step="change the exposure, or allow for them with clipped_steps",
        )
    brightest = max(level.code for level in levels) / (sample.camera.white_level - sample.camera.black_level)
    if brightest < DARKEST:
        found = f"the brightest step lies {100 * brightest:.2f} % of the range over black"
        raise MeasurementRefused("too dark", found, allowed=f"{100 * DARKEST:g} % is needed")
    refuse_uneven([level for n, level in enumerate(levels) if n not in clipped])
    lights = lights * _shading(sample, len(boxes))
    kept = [n for n in range(len(levels)) if n not in clipped]
    return [levels[n] for n in kept], lights[kept], [boxes[n] for n in kept]


def _shading(sample: Sample, count: int) -> Real:
    """Return the light at every patch over its mean, from the companion `flat`; 1 without one."""
    if "flat" in sample.lost_companions:
        found = f"the even field of '{sample.lost_companions['flat']}' cannot be used"
        raise MeasurementRefused("missing companion", found)
    flats = sample.companions.get("flat", ())
    if not flats:
        return np.ones(count)
    boxes = boxes_of(sample.found.points["patches"])
    light = np.mean([[level.light for level in levels_of(flat, boxes)] for flat in flats], axis=0)
    if light.min() < 0.01:
        found = f"the even field lies {100 * float(light.min()):.2f} % of the range over black at patch "
        raise MeasurementRefused("missing companion", f"{found}{int(light.argmin()) + 1}", allowed="1 % is needed")
    return np.asarray(light / light.mean())


def _at(sample: Sample, curve: ToneCurve, wanted: Wanted) -> Reading:
    blank = replace(_blank(sample, "oecf"), parameters=wanted.parameters, part=wanted.part)
    light = wanted.at["level"] / 100
    low, high = float(curve.light[0]), float(curve.light[-1])
    if not low * (1 - 1e-6) <= light <= high * (1 + 1e-6):
        because = f"the steps reach from {100 * low:.3g} % to {100 * high:.3g} % of light, not to {100 * light:.3g} %"
        return replace(blank, refusal=Refusal("outside the estimator's limits", because))
    return from_figure(blank, curve.code_at(light), 100.0)


def from_figure(blank: Reading, figure: Figure, scale: float) -> Reading:
    """Return a reading of a figure of a tone curve, in other units."""
    parts = [Component("noise", scale * figure.noise, "A", averages=True)]
    if figure.light > 0:
        parts.append(Component("light of the steps", scale * figure.light, "B", shared="grey steps"))
    if figure.shape > 0:
        parts.append(Component("curve between steps", scale * figure.shape, "B"))
    u = sqrt(sum(part.u**2 for part in parts))
    return replace(blank, value=scale * figure.value, u=u, components=tuple(parts))


def _in_range(codes: Real, lights: Real) -> tuple[NDArray[np.bool_], str]:
    """Return which steps lie within the range that counts, and why they do not do."""
    inside = (codes >= RANGE[0]) & (codes <= RANGE[1])
    words = f"{100 * RANGE[0]:g} and {100 * RANGE[1]:g} % of the range"
    if inside.sum() < LEAST_STEPS:
        return inside, f"{int(inside.sum())} steps lie between {words}, {LEAST_STEPS} are needed"
    ratio = float(lights[inside].max() / lights[inside].min())
    if ratio < SPREAD:
        return inside, f"the steps between {words} differ by {ratio:.2f} times in light, {SPREAD:g} times is needed"
    return inside, ""


def _linearity(sample: Sample, levels: Sequence[Level], lights: Real, light_u: float) -> Iterator[Reading]:
    """Yield mean and largest relative deviation, what noise alone adds to them taken off."""
    y, u = np.array([level.light for level in levels]), np.array([level.light_u for level in levels])
    inside, because = _in_range(y, lights)
    names = ("linearity_error", "worst_linearity_error")
    if because:
        for name in names:
            yield replace(_blank(sample, name), refusal=Refusal("outside the estimator's limits", because))
        return
    sizes = deviation_sizes(lights[inside], y[inside], u[inside], light_u)
    for name, size in zip(names, sizes, strict=True):
        yield from_figure(_blank(sample, name), Figure(size.value, size.noise, size.light, 0.0), 100.0)


def _gamma(sample: Sample, lights: Real, codes: Real, codes_u: Real, light_u: float) -> Reading:
    inside, because = _in_range(codes, lights)
    blank = _blank(sample, "gamma")
    if because:
        return replace(blank, refusal=Refusal("outside the estimator's limits", because))
    x, y = np.log(lights[inside]), np.log(codes[inside])
    weights = (x - x.mean()) / np.sum((x - x.mean()) ** 2)
    slope = float(weights @ y)
    noise = float(np.sqrt(np.sum((weights * codes_u[inside] / codes[inside]) ** 2)))
    left = y - y.mean() - slope * (x - x.mean())
    turn = (left - slope * (x - x.mean())) / np.sum((x - x.mean()) ** 2)  # by the light of each step
    light = light_u * float(np.sqrt(np.sum(turn**2)))
    value = 1 / slope
    parts = [Component("noise", noise * value**2, "A", averages=True)]
    if light > 0:
        parts.append(Component("light of the steps", light * value**2, "B", shared="grey steps"))
    u = sqrt(sum(part.u**2 for part in parts))
    return replace(blank, value=value, u=u, components=tuple(parts))


def _curves(sample: Sample, curve: ToneCurve, lights: Real, codes: Real, codes_u: Real) -> tuple[Curve, Curve]:
    """Return the curve, finely enough to linearise by straight lines between its points, and the steps themselves."""
    x = np.log(curve.light)
    fine = np.interp(np.arange(BETWEEN * (x.size - 1) + 1) / BETWEEN, np.arange(x.size), x)
    at = np.exp(fine)
    order = np.argsort(lights, kind="stable")
    return (
        _curve(sample, "oecf", at, curve.codes(at), curve.band(at)),
        _curve(sample, "grey steps", lights[order], codes[order], codes_u[order]),
    )


def _curve(sample: Sample, name: str, x: Real, y: Real, u: Real) -> Curve:
    a, b, c = (tuple(float(f"{v:.7g}") for v in of) for of in (x, y, u))
    return Curve(sample.found.region, name, a, b, c, "1", "1", estimator=ESTIMATOR)


def _blank(sample: Sample, name: str) -> Reading:
    method = REFERENCES[1] if "linearity" in name else REFERENCES[0]
    unit = _QUANTITIES[name].unit
    return Reading(sample.found.region, name, unit, None, None, estimator=ESTIMATOR, method=method)
