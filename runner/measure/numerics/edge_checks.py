"""What a fitted edge must show before a value is given: enough of it, straight enough, alone, with both levels seen."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure.numerics.edge_curves import Curves, Gradient
from runner.measure.numerics.edge_fit import EdgeFit
from runner.measure.numerics.edge_geometry import edge_length
from runner.measure.numerics.edge_readouts import crossing, edge_width
from runner.measure.numerics.line_spread import Array

LEAST_TILT = 1.95
"""Degrees: 2° as promised, less the angle's own uncertainty."""
LEAST_CROSSINGS = 0.95
"""Whole pixels that the edge must pass across the sampling: with fewer, some phases of the pixel are never seen."""
WIDEST_GAP = 0.75
"""px along the normal between neighbouring samples: 45° has 0.707; wider gaps leave frequencies open below 0.67."""
LEAST_STEP = 4.0
"""Step over noise of a pixel: below, the start is chance."""
LEAST_KNOWN = 0.20
"""Greatest relative u of MTF50: a value known worse says nothing about a lens."""
MOST_WAVES = 0.01
"""Relative loss of modulation at MTF50 by departures from the fitted curve: greater ones are refused."""
CERTAIN = 4.0
"""Standard deviations from which chance is no longer the explanation."""
STRANGE = 0.15
"""Departure from the plateau, as a share of the step, of 4 × 4 px means that belong to something else."""
MOST_STRANGE = 0.4
"""The same where such squares usually depart by that much: a bar of any width departs by more."""
STRANGE_SHARE = 0.02
"""That share of strange squares is a second edge; dust stays below."""
LEAST_REACH = 1.2
"""Plateau must be seen out to this many 10-90 % widths from the edge (three sigma of a Gaussian)."""
MOST_EXTRAPOLATED = 0.08
"""Share of the fitted step that may lie outside the levels seen; the widest tails reach 2 % in small regions."""
MOST_UNEVEN = 0.01
"""Rms of a structure beside the edge as a share of the step: 1 % left in costs about 1 % of MTF50."""
MOST_SHADED = 0.01
"""Relative change of MTF50 that a free shading would bring, if light certainly changes along the edge: more is to be
measured, not guessed."""
MOST_SHADED_ACROSS = 0.03
"""The same where light changes across the edge only: there a diffraction tail looks much alike, and up to this change
u bears it."""


@dataclass(frozen=True)
class Straightness:
    """Departures of the edge from its fitted curve along its length, beyond those that noise makes."""

    variance: float
    """Mean squared departure, px², noise taken off; never negative."""
    certain: bool
    """Too great for chance."""


def straightness(fit: EdgeFit) -> Straightness:
    """Measure local departures in segments of about 8 px along the edge.

    A small displacement e of the edge changes the signal by -slope · e, so e = -Σ w r slope / Σ w slope².
    """
    pixels, linear = fit.pixels, fit.linear
    count = int(np.clip(2 * fit.parts.line.half / 8, 4, 30))
    segment = np.clip(((pixels.v / fit.parts.line.half + 1) / 2 * count).astype(np.intp), 0, count - 1)
    slope, weight = linear.model.slope[linear.index], linear.weights[linear.index]
    information = np.bincount(segment, weight * slope * slope, minlength=count)
    pull = np.bincount(segment, weight * slope * linear.residual, minlength=count)
    good = information > 0.2 * information.max()
    variance = fit.of_means / fit.excess / information[good]
    shift = -pull[good] / information[good]
    freedom = max(1, shift.size - fit.parts.line.coefficients.size)
    chi = float((shift**2 / variance).sum())
    excess = float((shift**2).sum() / freedom - variance.mean())
    return Straightness(max(0.0, excess), chi > freedom + CERTAIN * float(np.sqrt(2 * freedom)))


def band(fit: EdgeFit) -> float:
    """Return the highest frequency that the sampling along this edge's normal supports, cy/px, at most 1.

    Raises:
        MeasurementRefused: `too few crossings` or `undersampled`.
    """
    near = np.sort(fit.pixels.distance[np.abs(fit.pixels.distance) < 1.5])
    gap = float(np.diff(near).max()) if near.size > 2 else np.inf
    shape = fit.pixels.shape
    length = edge_length(shape, fit.parts.line.normal, float(fit.parts.line.coefficients[0]))
    passed = length * abs(float(np.sin(fit.parts.line.tilt)))
    if passed < LEAST_CROSSINGS:
        raise MeasurementRefused(
            "too few crossings",
            f"the edge passes {passed:.2f} px across the sampling in {length:.0f} px of its length",
            allowed="at least one whole pixel",
            next_step="make the region longer along the edge",
        )
    if gap > WIDEST_GAP:
        raise MeasurementRefused(
            "undersampled",
            f"neighbouring samples along the edge's normal lie up to {gap:.2f} px apart",
            allowed=f"at most {WIDEST_GAP:g} px",
            next_step="turn the chart a little",
        )
    return min(1.0, 0.5 / gap) if gap > 0 else 1.0


def check(curves: Curves, *, shading_known: bool) -> tuple[float, Straightness]:
    """Refuse a fit that does not carry a measurement; return the frequency band and the straightness.

    Raises:
        MeasurementRefused: With the cause that fits.
    """
    fit = curves.fit
    tilt = abs(float(np.degrees(fit.parts.line.tilt)))
    if tilt < LEAST_TILT:
        raise MeasurementRefused(
            "edge too near an axis",
            f"the edge lies {tilt:.2f}° from a pixel axis",
            allowed="at least 2°",
            next_step="turn the chart by a few degrees",
        )
    most = band(fit)
    _check_alone(curves)
    _check_noise(curves)
    _check_levels(curves)
    straight = straightness(fit)
    _check_plateaus(curves)
    half = crossing(curves, 0.5, most)
    if half is not None:
        _check_shape(curves, half, straight, shading_known=shading_known)
    return most, straight


def _check_noise(curves: Curves) -> None:
    noise = float(np.sqrt(max(curves.fit.noise.low, curves.fit.noise.high)))
    if curves.rise < LEAST_STEP * noise:
        raise MeasurementRefused(
            "too noisy",
            f"the step is {curves.rise / noise:.1f} times the noise of a pixel",
            allowed=f"at least {LEAST_STEP:g} times",
            next_step="give more light or average frames",
        )


def _check_levels(curves: Curves) -> None:
    """Both plateaus are seen: far enough out, and no step is made up beyond what was seen."""
    linear, nodes = curves.fit.linear, curves.nodes
    counts = linear.counts / np.gradient(nodes)
    seen = counts > 0.25 * np.quantile(counts[np.abs(nodes) < 3], 0.8)
    width = edge_width(curves).value
    reach = min(float(nodes[seen].max()), -float(nodes[seen].min()))
    if reach < LEAST_REACH * width:
        raise MeasurementRefused(
            "outside the estimator's limits",
            f"the edge is {width:.1f} px wide (10-90 %) and the region shows only {reach:.1f} px on one side of it",
            allowed=f"at least {LEAST_REACH:g} edge widths",
            next_step="make the region wider, or focus",
        )
    span = curves.at_nodes[seen]
    outside = 1 - float(span.max() - span.min())
    if outside > MOST_EXTRAPOLATED:
        raise MeasurementRefused(
            "outside the estimator's limits",
            f"{100 * outside:.0f} % of the fitted step lies outside the levels that the region shows",
            allowed=f"at most {100 * MOST_EXTRAPOLATED:g} %",
            next_step="make the region wider",
        )


def strange_share(curves: Curves) -> float:
    """Return the share of 4 × 4 px squares, away from the edge, that lie off their plateau."""
    squares, _, seen = _squares(curves, 4)
    if not seen.any():
        return 0.0
    # noise passes 8 medians (5.4 of its deviations) never, a smooth shading hardly: what does is something else
    usual = 8 * float(np.median(np.abs(squares[seen]))) / curves.rise
    limit = curves.rise * float(np.clip(usual, STRANGE, MOST_STRANGE))
    return float(np.mean((np.abs(squares) > limit) & seen))


def unevenness(curves: Curves) -> tuple[float, bool]:
    """Return the rms of a smooth structure beside the edge, and whether it is certain.

    Neighbouring 8 × 8 px means share a structure, not their noise; so the mean product of neighbours is the
    structure's mean square, however the noise goes together within a few pixels.
    """
    squares, _, seen = _squares(curves, 8)
    squares = np.where(seen, squares, 0.0)
    pairs = int(np.sum(seen[1:] & seen[:-1])) + int(np.sum(seen[:, 1:] & seen[:, :-1]))
    if pairs < 4:
        return 0.0, False
    together = float(np.sum(squares[1:] * squares[:-1]) + np.sum(squares[:, 1:] * squares[:, :-1])) / pairs
    chance = float(np.sum(squares**2)) / int(seen.sum()) / np.sqrt(pairs)
    return float(np.sqrt(max(0.0, together))), together > CERTAIN * chance


def _squares(curves: Curves, side: int) -> tuple[Array, Array, NDArray[np.bool_]]:
    """Mean residuals in squares, their pixels, and which of them lie on a plateau."""
    pixels = curves.fit.pixels
    rows, columns = (n // side * side for n in pixels.shape)

    def sums(values: Array) -> Array:
        kept = pixels.picture(values)[:rows, :columns]
        return np.asarray(kept.reshape(rows // side, side, columns // side, side).sum(axis=(1, 3)))

    counts = sums(np.ones_like(pixels.signal))
    away = edge_width(curves).value + side
    residual, distance = (
        sums(values) / np.maximum(counts, 1) for values in (curves.fit.linear.residual, pixels.distance)
    )
    return residual, counts, (np.abs(distance) > away) & (counts > 0)


def _check_alone(curves: Curves) -> None:
    share = strange_share(curves)
    if share > STRANGE_SHARE:
        raise MeasurementRefused(
            "two edges",
            f"{100 * share:.1f} % of the region lies more than {100 * STRANGE:g} % of the step off the fitted edge",
            allowed=f"at most {100 * STRANGE_SHARE:g} %",
            next_step="make the region smaller, or look for another edge, a corner or dirt in it",
        )


def _check_plateaus(curves: Curves) -> None:
    rms, certain = unevenness(curves)
    if certain and rms > MOST_UNEVEN * curves.rise:
        raise MeasurementRefused(
            "uneven",
            f"the levels beside the edge vary by {100 * rms / curves.rise:.1f} % of the step (rms)",
            allowed=f"at most {100 * MOST_UNEVEN:g} %",
            next_step="set 'shading: {from: ROLE}' with a flat frame, or 'shading: fitted', or clean the chart",
        )


def _check_shape(curves: Curves, crossed: Gradient, straight: Straightness, *, shading_known: bool) -> None:
    half, u = crossed.value, crossed.u(curves.fit.covariance)
    if u > LEAST_KNOWN * half:
        raise MeasurementRefused(
            "too noisy",
            f"the noise leaves MTF50 uncertain by {100 * u / half:.0f} %",
            allowed=f"at most {100 * LEAST_KNOWN:g} %",
            next_step="give more light, average frames or make the region larger",
        )
    loss = 2 * np.pi**2 * half**2 * straight.variance
    if straight.certain and loss > MOST_WAVES:
        rms = float(np.sqrt(straight.variance))
        raise MeasurementRefused(
            "edge not straight",
            f"the edge departs from the fitted curve by {rms:.2f} px rms, which costs {100 * loss:.1f} % of modulation",
            allowed=f"at most {100 * MOST_WAVES:g} %",
            next_step="raise the order of the edge (up to 5) or make the region shorter",
        )
    if not shading_known:
        _check_even(curves, crossed)


def shading_effect(curves: Curves, by: Array) -> float:
    """Return by how much a value would change if shading were fitted, from its derivative to everything fitted."""
    return float(by[curves.index] @ curves.fit.unshaded)


def shading_shows(fit: EdgeFit, deviations: float = 2.0) -> bool:
    """Tell whether a shading fitted freely differs from none by more than this many standard deviations."""
    found, u = fit.shade_free
    return bool(np.any(np.abs(found) > deviations * u))


def _check_even(curves: Curves, crossed: Gradient) -> None:
    (across, along), u = curves.fit.shade_free
    change = abs(shading_effect(curves, crossed.by)) / crossed.value
    limit = MOST_SHADED if abs(along) > CERTAIN * u[1] else MOST_SHADED_ACROSS
    if shading_shows(curves.fit, CERTAIN) and change > limit:
        raise MeasurementRefused(
            "uneven",
            f"illumination changes by {100 * across:.1f} % across and {100 * along:.1f} % along the edge over half its "
            f"length, which may cost {100 * change:.1f} % of MTF50",
            allowed=f"at most {100 * limit:g} %",
            next_step="set 'shading: {from: ROLE}' with a flat frame, or 'shading: fitted'",
        )
