"""Turns a fitted edge into readings: values in their units, named parts of u, reasons where there is none.

Parts: `noise` (what would scatter over repeated captures; falls with their number), `method bias` (what the data leave
open about the line spread's shape, and departures of the edge from its fitted curve), `shading` (what a fitted shading
leaves open, or a shading too small to refuse), `flat` (the flat frame's noise), `rounding` (to whole codes, where
noise does not average it out), `chart` (its calibration).
"""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from functools import cached_property
from math import sqrt

import numpy as np

from runner.errors import MeasurementRefused
from runner.measure.contract import QuantityInfo, Sample, Wanted
from runner.measure.numerics import edge_model as em
from runner.measure.numerics import edge_readouts as readouts
from runner.measure.numerics.edge_checks import Straightness, shading_effect, shading_shows
from runner.measure.numerics.edge_curves import Curves, Gradient
from runner.measure.numerics.line_spread import GRID, Array, pixel_transfer
from runner.measure.reading import Component, Curve, Reading, Refusal

ESTIMATOR = "joint fit"
METHOD = "joint fit of edge and line spread; frequencies along the edge's normal as in ISO 12233:2014"
LEAST_DIVISOR = 0.1
"""Below, dividing by pixel and chart would multiply every error by ten."""
TOLD_MISFIT = 1.2
"""Factor on the noise variance from which a reader is told; u holds smaller ones just as well."""
CURVE_POINTS = 65
"""Points of the stored transfer function."""

_MTF_LEVEL = re.compile(r"mtf([1-9][0-9]?)")
_FREQUENCY = {"frequency": "cy/px"}
_PLAIN: Mapping[str, tuple[QuantityInfo, Callable[[Curves], Gradient]]] = {
    "edge_width": (
        QuantityInfo("px", "Distance along the edge's normal from 10 to 90 % of the step."),
        readouts.edge_width,
    ),
    "lsf_fwhm": (QuantityInfo("px", "Full width of the line spread at half its maximum."), readouts.full_width),
    "overshoot": (
        QuantityInfo("%", "How far the edge spread rises above the bright level, in % of the step."),
        lambda c: readouts.beyond(c, bright=True),
    ),
    "undershoot": (
        QuantityInfo("%", "How far the edge spread falls below the dark level, in % of the step."),
        lambda c: readouts.beyond(c, bright=False),
    ),
    "edge_angle": (
        QuantityInfo("deg", "Angle of the edge from the nearest pixel axis, -45 to 45, positive clockwise on screen."),
        readouts.angle,
    ),
    "edge_modulation": (
        QuantityInfo("%", "(bright - dark) / (bright + dark) of the two levels next to the edge."),
        readouts.modulation,
    ),
    "lsf_asymmetry": (
        QuantityInfo(
            "%",
            "Kelly's skewness of the line spread, (d90 + d10 - 2 d50) / (d90 - d10) of the edge spread's crossings; "
            "positive when it trails towards the bright side.",
        ),
        readouts.asymmetry,
    ),
    "edge_position": (
        QuantityInfo("px", "Distance of the 50 % point from the region's centre along the normal, positive to bright."),
        readouts.position,
    ),
}
STANDARD = ("mtf50", *_PLAIN, "edge_noise")
"""Quantities that are always read."""


def quantity(name: str) -> QuantityInfo | None:
    """Return what a quantity name means, or None."""
    if name in _PLAIN:
        return _PLAIN[name][0]
    if name == "mtf":
        return QuantityInfo("1", "Modulation transfer at a frequency along the normal.", _FREQUENCY, ceiling=True)
    if name == "phase_transfer":
        sentence = (
            "Phase transfer at a frequency, about the edge spread's 50 % point; negative when the line spread trails "
            "towards the bright side, 180 for reversed contrast."
        )
        return QuantityInfo("deg", sentence, _FREQUENCY)
    if name == "edge_noise":
        return QuantityInfo("%", "Rms noise of a pixel, mid between both levels, in % of the step.")
    if match := _MTF_LEVEL.fullmatch(name):
        return QuantityInfo("cy/px", f"First frequency at which the modulation transfer falls to {match[1]} %.")
    return None


def quantities() -> Mapping[str, QuantityInfo]:
    """Return the quantities for listings."""
    names = ("mtf", "mtf50", "mtf30", "mtf10", "phase_transfer", *_PLAIN, "edge_noise")
    return {name: info for name in names if (info := quantity(name)) is not None}


@dataclass(frozen=True)
class Edge:
    """A fitted edge with everything that its readings need."""

    sample: Sample
    """The region."""
    curves: Curves
    """The fit's curves."""
    band: float
    """Highest frequency that the sampling supports, cy/px."""
    straight: Straightness
    """Departures from the fitted curve."""
    flat: Array | None
    """Covariance of everything fitted that the flat's noise brings; None without a flat."""
    rounding: Array
    """Deviations of all fitted numbers that rounding to codes brings, deviations × numbers."""

    @cached_property
    def covariances(self) -> tuple[Array, Array]:
        """Covariance of everything fitted, and its part over repeated captures, as if the shading were known."""
        fit = self.curves.fit
        return without_shading(fit.covariance, fit.linear.head), without_shading(fit.sampling, fit.linear.head)


def read(edge: Edge, wanted: Wanted) -> Reading:
    """Return one reading, refused with its reason where there is no value."""
    info = quantity(wanted.quantity)
    unit = info.unit if info is not None else "1"
    blank = Reading(
        edge.sample.found.region,
        wanted.quantity,
        unit,
        None,
        None,
        parameters=wanted.parameters,
        part=wanted.part,
        estimator=ESTIMATOR,
        method=METHOD,
    )
    try:
        return _read(edge, wanted, blank)
    except MeasurementRefused as refused:
        return replace(blank, refusal=Refusal(refused.cause, str(refused)))


def _read(edge: Edge, wanted: Wanted, blank: Reading) -> Reading:
    name, curves = wanted.quantity, edge.curves
    if wanted.part == "lens" and name != "mtf" and not _MTF_LEVEL.fullmatch(name):
        raise MeasurementRefused("not defined", f"{name} has no value for the lens alone", allowed="mtf and mtf50 do")
    if name == "edge_noise":
        value, u = readouts.noise(curves)
        return replace(
            blank, value=value, u=u, components=(Component("noise", u, "A", curves.fit.noise.dof, averages=True),)
        )
    if name == "mtf":
        return _mtf(edge, wanted, blank)
    if match := _MTF_LEVEL.fullmatch(name):
        return _crossing(edge, int(match[1]) / 100, wanted, blank)
    if name == "phase_transfer":
        frequency = _in_band(edge, wanted)
        return _valued(edge, blank, readouts.phase(curves, frequency))
    return _valued(edge, blank, _PLAIN[name][1](curves))


def _in_band(edge: Edge, wanted: Wanted) -> float:
    frequency = wanted.at["frequency"]
    if not 0 <= frequency <= edge.band:
        raise MeasurementRefused(
            "undersampled",
            f"{frequency:g} cy/px lies beyond {edge.band:.3f} cy/px, the band that this edge's sampling supports",
        )
    return frequency


def _mtf(edge: Edge, wanted: Wanted, blank: Reading) -> Reading:
    frequency = _in_band(edge, wanted)
    gradient = edge.curves.modulus_at(frequency)
    if wanted.part != "lens":
        return _valued(edge, blank, gradient)
    (divisor,), (chart,) = _divisor(edge, np.array([frequency]))
    if np.isnan(chart):
        raise MeasurementRefused(
            "not defined",
            f"the chart's own transfer function is stated up to {edge.sample.chart.transfer[-1][0]:g} cy/px only, not "
            f"at {frequency:.3f}",
        )
    if divisor < LEAST_DIVISOR:
        raise MeasurementRefused(
            "not defined",
            f"pixel and chart together pass {divisor:.3f} at {frequency:g} cy/px",
            allowed=f"at least {LEAST_DIVISOR:g} to be divided out",
        )
    value = float(gradient.value / divisor)
    lens = Gradient(value, gradient.by / divisor, gradient.flags, float(gradient.least_u / divisor))
    return _valued(edge, blank, lens, _chart(value * edge.sample.chart.transfer_u / float(chart)))


def _crossing(edge: Edge, modulation: float, wanted: Wanted, blank: Reading) -> Reading:
    if wanted.part == "lens":
        found, most, extra = _lens_crossing(edge, modulation)
    else:
        found, most, extra = readouts.crossing(edge.curves, modulation, edge.band), edge.band, ()
    if found is None:
        return replace(blank, bound=("above", most), flags=(f"no crossing up to {most:.3f} cy/px",))
    return _valued(edge, blank, found, extra)


def _lens_crossing(edge: Edge, modulation: float) -> tuple[Gradient | None, float, tuple[Component, ...]]:
    """Return the crossing, the end of the band where pixel and chart can be divided out, and the chart's part of u."""
    divisor, chart = _divisor(edge, GRID)
    divisor = np.where(divisor >= LEAST_DIVISOR, divisor, np.nan)
    usable = np.isfinite(divisor)
    most = edge.band if usable.all() else min(edge.band, float(GRID[max(int(np.argmin(usable)) - 1, 0)]))
    found = readouts.crossing(edge.curves, modulation, most, divisor)
    if found is None or not edge.sample.chart.transfer_u:
        return found, most, ()
    lens = edge.curves.on_grid[0] / divisor
    near = [found.value - 0.005, found.value + 0.005]
    slope = float(np.diff(np.interp(near, GRID[usable], lens[usable]))[0]) / 0.01
    relative = edge.sample.chart.transfer_u / float(np.interp(found.value, GRID, chart))
    return found, most, _chart(modulation * relative / abs(slope)) if slope else ()


def _divisor(edge: Edge, frequency: Array) -> tuple[Array, Array]:
    """Return pixel × chart, and the chart alone, at some frequencies; NaN beyond the chart's stated ones."""
    pixel, chart = pixel_transfer(frequency, edge.curves.fit.sides), edge.sample.chart
    if not chart.transfer:
        return pixel, np.ones_like(frequency)
    points, values = (np.array(each) for each in zip(*chart.transfer, strict=True))
    if points[0] > 0:
        points, values = np.insert(points, 0, 0.0), np.insert(values, 0, 1.0)
    own = np.interp(frequency, points, values, right=np.nan)
    return pixel * own, own


def _chart(u: float) -> tuple[Component, ...]:
    return (Component("chart", u, "B", shared="chart"),) if u > 0 else ()


def _valued(edge: Edge, blank: Reading, found: Gradient, extra: tuple[Component, ...] = ()) -> Reading:
    components = (*_components(edge, found), *extra)
    u = sqrt(sum(part.u**2 for part in components))
    return replace(blank, value=float(found.value), u=u, components=components, flags=(*found.flags, *_remarks(edge)))


def _remarks(edge: Edge) -> tuple[str, ...]:
    fit = edge.curves.fit
    remarks = []
    if fit.left_out:
        remarks.append(f"defect pixels left out: {fit.left_out}")
    if fit.together is not None:
        remarks.append(f"neighbouring pixels share noise: means vary {fit.together.whole:.2g} times as much (variance)")
    elif fit.excess > TOLD_MISFIT:
        remarks.append(f"noise variance raised {fit.excess:.2g} times for misfit")
    return tuple(remarks)


def _components(edge: Edge, found: Gradient) -> tuple[Component, ...]:
    fit = edge.curves.fit
    known, over_repeats = edge.covariances
    whole = found.u(known)
    scatter = min(found.u(over_repeats), whole)
    shape = sqrt(max(0.0, whole**2 - scatter**2))
    parts = [Component("noise", scatter, "A", fit.noise.dof, averages=True)]
    if found.least_u > 1.001 * whole:  # from draws: which part is noise cannot be told, so none of it averages
        parts = [Component("noise", found.least_u, "A", fit.noise.dof)]
        shape = 0.0
    bias = sqrt(shape**2 + _wave_loss(edge, found) ** 2 + found.bias**2)
    parts.append(Component("method bias", bias, "B"))
    if fit.shading:
        parts.append(Component("shading", sqrt(max(0.0, found.u(fit.covariance) ** 2 - whole**2)), "B"))
    elif shading_shows(fit):
        # too small to refuse, it may or may not be there: a rectangle between none and the free fit's
        parts.append(Component("shading", abs(shading_effect(edge.curves, found.by)) / sqrt(3), "B"))
    if edge.flat is not None:
        parts.append(Component("flat", found.u(edge.flat), "A"))
    if edge.rounding.size:
        parts.append(Component("rounding", float(np.linalg.norm(edge.rounding @ found.by)), "B"))
    return tuple(part for part in parts if part.u > 0 or part.name == "noise")


def without_shading(covariance: Array, head: int) -> Array:
    """Return the covariance given that the fitted shading is known."""
    at = [em.SHADE, head - 1]
    own = covariance[np.ix_(at, at)]
    if not np.all(np.diag(own) > 1e-15):
        return covariance
    across = covariance[:, at]
    return np.asarray(covariance - across @ np.linalg.solve(own, across.T))


def _wave_loss(edge: Edge, found: Gradient) -> float:
    """Standard uncertainty from departures of the edge: they smear like a Gaussian of the same variance."""
    parts = edge.curves.fit.parts
    widening = abs(parts.step) * edge.straight.variance / (2 * parts.sigma**2)
    return abs(float(found.by[em.WIDENING])) * widening / sqrt(3)


def curves_of(edge: Edge) -> tuple[Curve, ...]:
    """Return the transfer function, the edge spread with its data, their residual and the line spread."""
    curves, region = edge.curves, edge.sample.found.region
    fit = curves.fit
    grid = np.linspace(0.0, edge.band, CURVE_POINTS)
    size, u = curves.modulus(grid)
    reach = min(float(curves.nodes[-1]) / 1.2, max(4.0, 3 * readouts.edge_width(curves).value))
    near = np.flatnonzero(np.abs(curves.nodes) <= reach)
    some = near[:: max(1, -(-near.size // 80))]
    edges = np.linspace(-reach, reach, 81)
    where = np.digitize(curves.nodes, edges) - 1
    counts, means, places, values = (
        np.bincount(where[near], each[near], minlength=81)[:80]
        for each in (
            fit.linear.counts,
            fit.linear.counts * fit.linear.means,
            fit.linear.counts * curves.nodes,
            fit.linear.counts * curves.at_nodes,
        )
    )
    seen = counts > 0
    residual = 100 * means[seen] / counts[seen] / curves.rise
    binned = values[seen] / counts[seen] + residual / 100
    at = places[seen] / counts[seen]

    def curve(name: str, x: Array, y: Array, x_in: str, y_in: str, u: Array | None = None) -> Curve:
        stated = () if u is None else tuple(float(v) for v in u)
        points = [tuple(float(v) for v in each) for each in (x, y)]
        return Curve(region, name, points[0], points[1], stated, x_in, y_in, estimator=ESTIMATOR)

    return (
        curve("mtf", grid, size, "cy/px", "1", u),
        curve("edge spread", curves.nodes[some], curves.at_nodes[some], "px", "1"),
        curve("edge spread data", at, binned, "px", "1"),
        curve("residual", at, residual, "px", "%"),
        curve("line spread", curves.nodes[some], curves.density_at_nodes[some], "px", "1/px"),
    )
