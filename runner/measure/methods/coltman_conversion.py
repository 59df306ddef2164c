"""Modulation transfer from the contrasts of several groups of bars, by Coltman's series.

Each group gives the contrast transfer at its own frequency (`bar response`); groups of one frequency are averaged. The
series needs the response at odd multiples of a frequency; what the groups do not reach is told in the uncertainty.
"""

from collections.abc import Mapping
from dataclasses import dataclass, replace
from math import sqrt
from typing import NoReturn

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample, Scene, Wanted
from runner.measure.numerics.coltman import ContrastCurve
from runner.measure.options import lookups, reader
from runner.measure.patch_points import lost_patch, points_of
from runner.measure.reading import Component, Curve, Reading, Refusal

NAME = "coltman conversion"
TITLE = "Coltman's conversion of several bar groups"
GROUP = "transfer function"
NEEDS = frozenset({"bars"})
GATHERS = True
REFERENCES = (
    "J. W. Coltman, J. Opt. Soc. Am. 44 (1954) 468",
    "N. B. Nill, MITRE MTR 01B0000021 (2001) 3.2",
    "JCGM 100:2008 (uncertainty)",
)
ESTIMATOR = "coltman series"

LEAST_FREQUENCIES = 3
POINTS = 81
"""Of the curve."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "mtf": QuantityInfo(
        "1", "Modulation transfer from the groups' contrasts.", {"frequency": "cy/px"}, True, least=0.0, whole=True
    ),
    "mtf50": QuantityInfo("cy/px", "Lowest frequency at which it falls to 50 %.", least=0.0, whole=True),
    "mtf30": QuantityInfo("cy/px", "Lowest frequency at which it falls to 30 %.", least=0.0, whole=True),
    "mtf10": QuantityInfo("cy/px", "Lowest frequency at which it falls to 10 %.", least=0.0, whole=True),
}
_CROSSINGS = {"mtf50": 0.5, "mtf30": 0.3, "mtf10": 0.1}

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Options:
    """There is nothing to choose."""


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> NoReturn:  # noqa: ARG001 - the contract's form
    """Refuse a single region: the series needs several.

    Raises:
        MeasurementRefused: Always.
    """
    raise MeasurementRefused("not defined", "one group of bars alone cannot be converted")


def gather(scene: Scene, options: Options) -> Measurement:  # noqa: ARG001 - the contract's form
    """Convert the contrasts of all groups of a capture, or of some.

    Raises:
        MeasurementRefused: Something is wanted and a group was not measured, or they have too few frequencies.
    """
    lost = lost_patch(scene, "contrast_transfer", "group")
    if scene.wanted and lost is not None:
        raise MeasurementRefused(lost.cause, lost.because)
    points = points_of(scene.steps[0].readings, "bar_frequency", "contrast_transfer")
    curve = ContrastCurve(points.f, points.values, points.own, points.shared)
    if curve.f.size < LEAST_FREQUENCIES:
        if not scene.wanted:
            return Measurement(())
        found = f"the groups have {curve.f.size} frequencies, the conversion needs {LEAST_FREQUENCIES}"
        raise MeasurementRefused("not defined", found)
    grid = np.geomspace(float(curve.f[0]) / 4, float(curve.f[-1]), POINTS)
    value, parts = curve.converted(grid)
    converted = _curve(scene, "mtf", grid, value, np.sqrt(sum((p**2 for p in parts.values()), np.zeros_like(grid))))
    wanted = [one for one in scene.wanted if one.quantity in _QUANTITIES]
    asked = {one.quantity for one in wanted}
    if lost is None:  # plain figures are offered whether or not a limit asks
        wanted += [Wanted(name, {}, {}) for name in _CROSSINGS if name not in asked]
    readings_made = tuple(_reading(scene, one, curve, grid, value) for one in wanted)
    return Measurement(readings_made, (converted, _curve(scene, "contrast", curve.f, curve.contrast, curve.u())))


def _curve(scene: Scene, name: str, x: Array, y: Array, u: Array) -> Curve:
    points = [tuple(float(v) for v in each) for each in (x, y, u)]
    return Curve(scene.region, name, points[0], points[1], points[2], "cy/px", "1", estimator=ESTIMATOR)


def _reading(scene: Scene, one: Wanted, curve: ContrastCurve, grid: Array, value: Array) -> Reading:
    blank = Reading(
        scene.region,
        one.quantity,
        _QUANTITIES[one.quantity].unit,
        None,
        None,
        parameters=one.parameters,
        part=one.part,
        estimator=ESTIMATOR,
        method=REFERENCES[0],
    )
    if one.part != "system":
        because = "bars measure the whole system; 'edge response' divides pixel and chart out"
        return replace(blank, refusal=Refusal("not defined", because))
    low, high = float(grid[0]), float(grid[-1])
    if one.quantity == "mtf":
        f = one.at["frequency"]
        if not low <= f <= high:
            because = f"{f:g} cy/px lies outside {low:.4f} to {high:.4f} cy/px, which the groups tell something about"
            return replace(blank, refusal=Refusal("not defined", because))
        return _valued(blank, curve, f, 1.0, None)
    level = _CROSSINGS[one.quantity]
    below = np.flatnonzero(value < level)
    if not below.size or below[0] == 0:
        bound = ("below", low) if below.size else ("above", high)
        return replace(blank, bound=bound, flags=(f"no crossing from {low:.4f} to {high:.4f} cy/px",))
    k = int(below[0])
    part = (value[k - 1] - level) / (value[k - 1] - value[k])
    f = float(grid[k - 1] + part * (grid[k] - grid[k - 1]))
    first, last = max(0, k - 3), min(grid.size - 1, k + 2)
    slope = abs(float((value[last] - value[first]) / (grid[last] - grid[first])))
    return _valued(blank, curve, f, 1 / slope, f)


def _valued(blank: Reading, curve: ContrastCurve, f: float, scale: float, value: float | None) -> Reading:
    found, parts = curve.converted(np.array([f]))
    made = []
    for name, each in parts.items():
        shared = name if name in curve.shared else None
        made.append(Component(name, scale * float(each[0]), "B", shared=shared))
    kept = tuple(part for part in made if part.u > 0)
    u = sqrt(sum(part.u**2 for part in kept))
    return replace(blank, value=float(found[0]) if value is None else value, u=u, components=kept)
