"""A transfer function from patches of several frequencies: the curve through their modulation transfers.

Each patch gives the transfer at its own frequency (`grating response`). Between neighbouring frequencies the curve is a
cubic through the four patches around; at frequency 0 it is 1 by definition and symmetric. What the cubic adds to a
straight line tells how far any curve can be trusted there: a quarter of it is taken as the standard uncertainty. Beyond
the patches nothing is known.
"""

from collections.abc import Mapping
from dataclasses import dataclass, replace
from math import sqrt
from typing import NoReturn

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample, Scene, Wanted
from runner.measure.options import lookups, reader
from runner.measure.patch_points import SAME, Points, lost_patch, points_of
from runner.measure.reading import Component, Curve, Reading, Refusal

NAME = "transfer curve"
TITLE = "Transfer curve over several patches"
GROUP = "transfer function"
NEEDS = frozenset({"grating"})
GATHERS = True
REFERENCES = ("ISO 15529:2010 (modulation transfer of sampled imaging systems)", "JCGM 100:2008 (uncertainty)")
ESTIMATOR = "patches"

LEAST_FREQUENCIES = 2
TRUST = 0.25
"""Of what the cubic adds to a straight line: its standard uncertainty (blurs of 0.3 to 1.2 px, patches 0.05 apart)."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "mtf": QuantityInfo(
        "1", "Transfer function between the patches.", {"frequency": "cy/px"}, ceiling=True, least=0.0, whole=True
    ),
    "mtf50": QuantityInfo("cy/px", "Lowest frequency at which the curve falls to 50 %.", least=0.0, whole=True),
    "mtf30": QuantityInfo("cy/px", "Lowest frequency at which the curve falls to 30 %.", least=0.0, whole=True),
    "mtf10": QuantityInfo("cy/px", "Lowest frequency at which the curve falls to 10 %.", least=0.0, whole=True),
}
_CROSSINGS = {"mtf50": 0.5, "mtf30": 0.3, "mtf10": 0.1}

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Options:
    """There is nothing to choose."""


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> NoReturn:  # noqa: ARG001 - the contract's form
    """Refuse a single region: a curve needs several.

    Raises:
        MeasurementRefused: Always.
    """
    raise MeasurementRefused("not defined", "one patch alone has no transfer curve")


def gather(scene: Scene, options: Options) -> Measurement:  # noqa: ARG001 - the contract's form
    """Draw the curve through all patches of a capture, or of a group.

    Raises:
        MeasurementRefused: Something is wanted and a patch was not measured, or they have fewer than two frequencies.
    """
    lost = lost_patch(scene, "modulation_transfer", "patch")
    if scene.wanted and lost is not None:
        raise MeasurementRefused(lost.cause, lost.because)
    points = points_of(scene.steps[0].readings, "grating_frequency", "modulation_transfer")
    if points.f.size < LEAST_FREQUENCIES:
        if not scene.wanted:
            return Measurement(())
        found = f"the patches have {points.f.size} frequencies, a curve needs {LEAST_FREQUENCIES}"
        raise MeasurementRefused("not defined", found)
    curve = Curve(
        scene.region,
        "mtf",
        tuple(float(v) for v in points.f),
        tuple(float(v) for v in points.values),
        tuple(float(v) for v in points.u()),
        "cy/px",
        "1",
        estimator=ESTIMATOR,
    )
    wanted = [one for one in scene.wanted if one.quantity in _QUANTITIES]
    asked = {one.quantity for one in wanted}
    if lost is None:  # plain figures are offered whether or not a limit asks
        wanted += [Wanted(name, {}, {}) for name in _CROSSINGS if name not in asked]
    return Measurement(tuple(_reading(scene, one, points) for one in wanted), (curve,))


def _reading(scene: Scene, one: Wanted, points: Points) -> Reading:
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
        return _refused(blank, "not defined", "patches give the transfer of the whole system only")
    if one.quantity == "mtf":
        return _at(blank, one.at["frequency"], points)
    return _crossing(blank, _CROSSINGS[one.quantity], points)


def _at(blank: Reading, f: float, points: Points) -> Reading:
    if not points.f[0] * (1 - SAME) <= f <= points.f[-1] * (1 + SAME):
        found = f"the patches reach from {points.f[0]:.4f} to {points.f[-1]:.4f} cy/px, {f:g} cy/px lies outside"
        return _refused(blank, "not defined", found)
    value, straight, parts = _between(points, f, 1.0)
    return _valued(blank, value, (*parts, Component("curve between patches", TRUST * abs(value - straight), "B")))


def _crossing(blank: Reading, level: float, points: Points) -> Reading:
    below = np.flatnonzero(points.values < level)
    if below.size == 0:
        return replace(blank, bound=("above", float(points.f[-1])))
    i = int(below[0]) - 1
    if i < 0:
        return replace(blank, bound=("below", float(points.f[0])))
    ends = float(points.f[i]), float(points.f[i + 1])
    f = float(brentq(lambda at: _between(points, at, 1.0)[0] - level, *ends))
    tiny = 1e-4 * (ends[1] - ends[0])
    slope = (_between(points, f + tiny, 1.0)[0] - _between(points, f - tiny, 1.0)[0]) / (2 * tiny)
    value, straight, parts = _between(points, f, 1 / abs(slope))
    own = Component("curve between patches", TRUST * abs(value - straight) / abs(slope), "B")
    return _valued(blank, f, (*parts, own))


def _between(points: Points, f: float, scale: float) -> tuple[float, float, tuple[Component, ...]]:
    """Return the curve at a frequency, the straight line's value there, and the scaled parts of its uncertainty."""
    known = np.concatenate([-points.f[:1], [0.0], points.f])  # the first patch again, mirrored; then the 1 at 0
    i = int(np.clip(np.searchsorted(known, f) - 1, 1, known.size - 2))
    near = range(i - 1, min(i + 3, known.size))
    on_known = np.zeros(known.size)
    for k in near:
        on_known[k] = np.prod([(f - known[j]) / (known[k] - known[j]) for j in near if j != k])
    weights, at_zero = on_known[2:].copy(), on_known[1]
    weights[0] += on_known[0]
    value = float(weights @ points.values + at_zero)
    straight = float(np.interp(f, known[1:], np.concatenate([[1.0], points.values])))
    shared = [
        Component(word, scale * abs(float(weights @ part)), "B", shared=word) for word, part in points.shared.items()
    ]
    noise = scale * float(np.sqrt(np.sum((weights * points.own) ** 2)))
    return value, straight, (Component("noise", noise, "A"), *shared)


def _valued(blank: Reading, value: float, parts: tuple[Component, ...]) -> Reading:
    return replace(blank, value=value, u=sqrt(sum(part.u**2 for part in parts)), components=parts)


def _refused(blank: Reading, cause: str, because: str) -> Reading:
    return replace(blank, refusal=Refusal(cause, because))
