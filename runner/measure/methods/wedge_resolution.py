"""Limiting resolution of a hyperbolic wedge: where its lines are no longer told apart, and where modulation is gone.

Both read from the coarse end to the fine one and stop at the first failure: what is seen beyond, where bars and spaces
have changed places or the sampling makes lines of its own, is spurious resolution.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from math import hypot, sqrt
from typing import Any

import numpy as np

from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample, Wanted
from runner.measure.numerics.wedge_fit import WedgeFit, fit_wedge
from runner.measure.options import number, read_record
from runner.measure.reading import Component, Curve, Reading, Refusal
from runner.measure.targets.hyperbolic_wedge import turned

NAME = "wedge resolution"
TITLE = "Limiting resolution of a wedge"
GROUP = "transfer function"
NEEDS = frozenset({"wedge"})
REFERENCES = (
    "ISO 12233:2014 (visual resolution from hyperbolic wedges)",
    "CIPA DC-003 (2003) (resolution measurement of digital cameras; from memory)",
    "JCGM 100:2008 (uncertainty)",
)
ESTIMATOR = "wedge fit"

MOST_CLIPPED = 0.001
"""Share of the region at an end of the range: hot and dead pixels stay below, clipped lines do not."""
SAME = 2
"""Pieces in a row in which fewer lines stand apart: one alone may be a speck."""
SPREAD = 2
"""Pieces to either side that a crossing's mean is taken over."""
SURE = 4.0
"""Standard uncertainties below 0 from which the contrast has reversed."""
BIAS = 0.0015
"""Bound on the absolute error of the modulation over that at 0 (slopes of the outer lines, closed-form wedges)."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "limiting_resolution_by_modulation": QuantityInfo(
        "cy/px", "Frequency at which the lines' modulation falls to the criterion, of that at frequency 0.", least=0.0
    ),
    "limiting_resolution_by_count": QuantityInfo(
        "cy/px", "Frequency from which fewer lines stand apart than the wedge has.", least=0.0
    ),
    "spurious_resolution_from": QuantityInfo(
        "cy/px", "Frequency from which lines are seen with bright and dark exchanged.", least=0.0
    ),
}


@dataclass(frozen=True)
class Options:
    """When lines are no longer resolved."""

    criterion: float | str = field(
        default=0.1,
        metadata={"sentence": "Modulation over that at frequency 0 from which lines are resolved, e.g. 10 %."},
    )

    def __post_init__(self) -> None:
        """Keep the criterion inside its meaning."""
        object.__setattr__(self, "criterion", number("criterion", self.criterion, "%", 0.01, 0.9))


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
    """Measure one wedge of one frame in one channel.

    Raises:
        MeasurementRefused: The wedge as a whole cannot be measured.
    """
    crop, geometry = sample.crop, sample.found.geometry
    codes = crop.codes if crop.sites is None else crop.codes[crop.sites]
    share = float(np.mean((codes >= sample.camera.white_level) | (codes <= 0)))
    if share > MOST_CLIPPED:
        sentence = f"{100 * share:.2f} % of the region's pixels lie at an end of the range, at most 0.1 % may"
        raise MeasurementRefused("clipped", sentence, next_step="give less light, or raise the black level")
    towards = round(geometry["towards"])
    own = None if crop.sites is None else turned(crop.sites, towards)
    fit = fit_wedge(np.ascontiguousarray(turned(crop.signal, towards)), round(geometry["lines"]), own)
    if fit is None:
        raise MeasurementRefused("no modulation", "the wedge's lines do not stand out in this channel")
    end = 0.5 if crop.sites is None or crop.sites[:2, :2].sum() == 2 else 0.25
    asked = [one for one in sample.wanted if one.quantity in _QUANTITIES]
    names = {one.quantity for one in asked}
    asked += [Wanted(name, {}, {}) for name in _QUANTITIES if name not in names]
    made = tuple(_reading(sample, one, fit, float(options.criterion), end) for one in asked)
    return Measurement(made, _curves(sample, fit))


def _reading(sample: Sample, one: Wanted, fit: WedgeFit, criterion: float, end: float) -> Reading:
    blank = Reading(
        sample.found.region,
        one.quantity,
        "cy/px",
        None,
        None,
        part=one.part,
        estimator=ESTIMATOR,
        method=REFERENCES[0],
    )
    if one.part != "system":
        return replace(blank, refusal=Refusal("not defined", "lines measure the whole system"))
    if one.quantity == "limiting_resolution_by_modulation":
        return _by_modulation(blank, fit, criterion, end)
    if one.quantity == "limiting_resolution_by_count":
        return _by_count(blank, fit, end)
    return _reversed(blank, fit, end)


def _above(blank: Reading, fit: WedgeFit, end: float) -> Reading:
    """Return a bound: the wedge, or the sampling, ends before the lines do."""
    last = min(float(fit.f[-1]), end)
    why = "the sampling ends there" if fit.f[-1] >= end else "the wedge ends there"
    return replace(blank, bound=("above", last), flags=(f"lines are resolved up to {last:.3f} cy/px, {why}",))


def _valued(
    blank: Reading, fit: WedgeFit, value: float, parts: tuple[Component, ...], flags: tuple[str, ...]
) -> Reading:
    scale = Component("frequency", value * fit.frequency_u, "A", averages=True)
    kept = tuple(part for part in (*parts, scale) if part.u > 0)
    return replace(blank, value=value, u=sqrt(sum(part.u**2 for part in kept)), components=kept, flags=flags)


def _by_modulation(blank: Reading, fit: WedgeFit, criterion: float, end: float) -> Reading:
    size = 2 * SPREAD + 1
    mean = np.convolve(fit.modulation, np.ones(size) / size, mode="valid") / fit.reference
    f = fit.f[SPREAD:-SPREAD]
    below = np.flatnonzero(mean < criterion)
    if below.size and below[0] == 0:
        return replace(blank, bound=("below", float(f[0])), flags=("the coarsest lines are below the criterion",))
    if not below.size or f[below[0]] > end:
        return _above(blank, fit, end)
    k = int(below[0])
    # a straight line through the pieces around the crossing: less noise than the two beside it
    near = slice(max(0, k - 1 - SPREAD), k + SPREAD + 1)
    slope, at_zero = np.polyfit(f[near], mean[near], 1)
    value = float((criterion - at_zero) / slope) if slope < 0 else float(f[k])
    if not f[near][0] <= value <= f[near][-1]:
        value = float(f[k])
    steep = max(abs(float(slope)), 1e-3)
    noise = float(np.median(fit.u[near])) / fit.reference / sqrt(size) / steep
    reference = criterion * fit.reference_u / fit.reference / steep
    parts = (
        Component("noise", noise, "A", averages=True),
        Component("low-frequency reference", reference, "B"),
        Component("method bias", hypot(BIAS / steep, 0.05 * fit.width), "B"),
    )
    flags = [f"criterion: {100 * criterion:g} % of the modulation at frequency 0"]
    later = np.flatnonzero((np.abs(mean) >= criterion) & (f > value + 2 * fit.width) & (f < end))
    if later.size:
        words = "spurious resolution" if mean[later[0]] < 0 else "modulation again"
        flags.append(f"{words} at {f[later[0]]:.3f} cy/px and beyond")
    return _valued(blank, fit, value, parts, tuple(flags))


def _by_count(blank: Reading, fit: WedgeFit, end: float) -> Reading:
    lines = int(np.median(fit.lines[:8]))
    fewer = fit.lines < lines
    runs = np.flatnonzero(np.convolve(fewer, np.ones(SAME), mode="valid") == SAME)
    if not runs.size or fit.f[runs[0]] > end:
        return _above(blank, fit, end)
    k = int(runs[0])
    if k == 0:
        return replace(blank, bound=("below", float(fit.f[0])), flags=("fewer lines stand apart at the coarse end",))
    value = float(fit.f[k] + fit.f[k - 1]) / 2
    # single pieces on the wrong side of the first failure tell how far noise moves it
    early, late = int(fewer[:k].sum()), int((~fewer[k : k + 8]).sum())
    parts = (
        Component("pieces", fit.width / sqrt(12), "B"),
        Component("noise", fit.width * (0.5 + early + late), "A", averages=True),
    )
    found = [f"{lines} lines are told apart up to here"]
    if late:
        found.append("beyond, all lines are told apart again in places")
    return _valued(blank, fit, value, parts, tuple(found))


def _reversed(blank: Reading, fit: WedgeFit, end: float) -> Reading:
    sure = (fit.modulation < -SURE * fit.u) & (fit.modulation < -0.02 * fit.reference) & (fit.f <= end)
    runs = np.flatnonzero(np.convolve(sure, np.ones(3), mode="valid") == 3)
    if not runs.size:
        last = min(float(fit.f[-1]), end)
        return replace(blank, bound=("above", last), flags=(f"no contrast is reversed up to {last:.3f} cy/px",))
    k = int(runs[0])
    positive = np.flatnonzero(fit.modulation[:k] > 0)
    first = int(positive[-1]) if positive.size else 0
    before, after = float(fit.modulation[first]), float(fit.modulation[min(first + 1, k)])
    part = before / (before - after) if before > 0 > after else 0.5
    value = float(fit.f[first] + part * (fit.f[min(first + 1, k)] - fit.f[first]))
    slope = max(abs(after - before) / fit.width, 1e-6)
    noise = float(np.hypot(fit.u[first], fit.width / sqrt(12) * slope)) / slope
    parts = (Component("noise", min(noise, (k - first + 1) * fit.width), "A", averages=True),)
    return _valued(blank, fit, value, parts, ("lines beyond are seen with bright and dark exchanged",))


def _curves(sample: Sample, fit: WedgeFit) -> tuple[Curve, ...]:
    def curve(name: str, y: Any, u: Any) -> Curve:
        points = [tuple(float(v) for v in each) for each in (fit.f, y, u)]
        region = sample.found.region
        return Curve(region, name, points[0], points[1], points[2], "cy/px", "1", estimator=ESTIMATOR)

    stated = np.hypot(fit.u, fit.modulation * fit.reference_u / fit.reference) / fit.reference
    return (curve("modulation", fit.modulation / fit.reference, stated), curve("lines told apart", fit.lines, ()))
