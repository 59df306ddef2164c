"""Figures of a linear sensor from its points of photon transfer, each with the parts of its uncertainty.

A figure is a value with components, or a bound where it is not told from zero or lies beyond the series; what cannot be
known is refused with the reason.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure import planes
from runner.measure.numerics import photon_transfer as law
from runner.measure.numerics.saturation import Saturation, saturation
from runner.measure.numerics.stack_noise import Parts, Spread
from runner.measure.photon_levels import Dark, Point
from runner.measure.reading import Component

Real = NDArray[np.float64]

MOST_AWAY = 0.2
"""Temporal variance of a fitted level may be off the line by this share: more is no photon noise."""
MOST_BENT = 10.0
"""Departure of a level from a straight response, %, from which on the sensor is not linear: Release 4.0 General."""
LEAST_LEVELS = 5
"""Levels that tell departures from a line, which takes two of them away."""
SAME = 0.005
"""Levels of different light that differ by no more are all saturated."""
SURE = 6.0
"""Standard uncertainties that no chance explains."""


@dataclass(frozen=True)
class Figure:
    """One figure: a value with components, or a bound."""

    value: float | None
    """The value; None where only bounded."""
    parts: tuple[Component, ...] = ()
    """Components of its standard uncertainty."""
    bound: tuple[str, float] | None = None
    """(`above`, x) or (`below`, x) in place of a value."""
    flags: tuple[str, ...] = ()
    """Remarks."""

    @property
    def u(self) -> float:
        """Combined standard uncertainty."""
        return hypot(*(part.u for part in self.parts))


@dataclass(frozen=True)
class Transfer:
    """What a light series tells at once."""

    points: tuple[Point, ...]
    """All levels, by light."""
    light_in: str
    """Unit of their light; empty where it is not known."""
    dark: Dark
    """Darks of the shortest exposure."""
    rounding: float
    """Variance of rounding, DN²; 0 where values are no whole codes."""
    gain: Figure
    """System gain, DN/e-."""
    saturation: Saturation
    """Where the variance is greatest, DN over dark."""
    fitted: tuple[Point, ...]
    """Levels that the gain was fitted to."""
    response: float | None
    """Signal for one unit of light, DN; None where signals are not in proportion to what is said of the light."""
    drift: float
    """Drift of the lamp from frame to frame, as a share."""

    @property
    def k(self) -> float:
        """System gain, DN/e-."""
        return float(self.gain.value or 0.0)

    @property
    def top(self) -> float:
        """Signal at saturation, or the highest of the series, DN over dark."""
        return self.saturation.at_least if self.saturation.value is None else self.saturation.value

    @property
    def rounded(self) -> bool:
        """Rounding hides the temporal dark noise."""
        return self.rounding > 0 and self.dark.variance < law.LEAST_VARIANCE

    @property
    def dark_variance(self) -> tuple[float, float]:
        """Temporal variance of darks and its standard uncertainty; the least one where rounding hides it."""
        return (law.LEAST_VARIANCE, 0.0) if self.rounded else (self.dark.variance, self.dark.variance_u)


def transfer(points: Sequence[Point], darks: Sequence[Dark], light_in: str) -> Transfer:
    """Fit the gain and find where the sensor saturates.

    Raises:
        MeasurementRefused: Too much light, or a level whose noise is no photon noise.
    """
    dark = darks[0]
    whole = points[0].frames.crops[0].codes.dtype.kind in "iu"
    brightest = max(points, key=lambda one: one.variance - one.dark.variance)
    _refuse_noiseless(points, brightest)
    fitted = tuple(one for one in points if 0 < one.signal <= law.TOP * brightest.signal)
    if not fitted:
        fitted = _alone(points, brightest)
    for one in fitted:
        _refuse_ends(one)
    gain, slope = _gain(fitted, dark)
    _refuse_excess(points, gain)
    drift = _drift(points)
    response = _response(fitted) if light_in else None
    signal = np.array([one.signal for one in points])
    linear = signal if response is None else np.array([response * (one.light or 0.0) for one in points])
    excess = np.array([one.variance - one.dark.variance + dark.variance for one in points])
    spread = np.array([one.variance_u for one in points])
    pattern = np.array([one.pattern for one in points])
    end = saturation(signal, linear, excess, spread, pattern, gain=slope, dark=dark.variance)
    return Transfer(tuple(points), light_in, dark, law.ROUNDING if whole else 0.0, gain, end, fitted, response, drift)


def _response(fitted: Sequence[Point]) -> float | None:
    """Return the signal for one unit of light; None where it is not the same for all levels."""
    top = max(one.signal for one in fitted)
    lit = [(one.light, one.signal) for one in fitted if one.light and one.signal > law.LINEAR_FROM * top]
    if not lit:
        return None
    x, y = (np.array(column, dtype=np.float64) for column in zip(*lit, strict=True))
    found = law.slope(x, y, y).value
    return found if np.all(np.abs(y - found * x) <= MOST_BENT / 100 * y) else None


def _alone(points: Sequence[Point], brightest: Point) -> tuple[Point, ...]:
    """Return the levels next to the brightest, if even that is plainly not at the end of the range.

    Raises:
        MeasurementRefused: It may be.
    """
    near = tuple(one for one in points if one.signal > 0)
    if brightest is not points[-1] or brightest.signal > law.TOP * _room(brightest) or not near:
        raise _all_bright(points, brightest)
    return near


def _room(point: Point) -> float:
    """Return the codes from dark to the white level."""
    return point.frames.crops[0].camera.white_level - point.dark.level


def _all_bright(points: Sequence[Point], brightest: Point) -> MeasurementRefused:
    return MeasurementRefused(
        "too bright",
        f"no level lies between darkness and {100 * law.TOP:g} % of saturation: the lowest has "
        f"{min(one.signal for one in points):.4g} DN over dark, the noise is greatest at {brightest.signal:.4g} DN",
        next_step="begin the series with less light",
    )


def _refuse_noiseless(points: Sequence[Point], brightest: Point) -> None:
    """Refuse a series without photon noise: all too bright, or no frames of a sensor."""
    extra = brightest.variance - brightest.dark.variance
    if extra > SURE * hypot(brightest.variance_u, brightest.dark.variance_u):
        return
    signals = [one.signal for one in points]
    alike = len(points) > 1 and max(signals) - min(signals) <= SAME * max(signals)
    if alike or min(signals) > law.TOP * _room(points[0]):
        raise _all_bright(points, brightest)
    raise MeasurementRefused(
        "no picture",
        f"light adds no noise: at most {extra:.3g} DN² over that of the darks, at {brightest.signal:.4g} DN",
        next_step="give frames as the sensor delivers them, not averaged, not copies of one another",
    )


def _refuse_ends(point: Point) -> None:
    most = planes.MOST_CLIPPED
    planes.refuse_clipped(planes.stack(point.frames.crops), most_high=most, most_low=most)


def _drift(points: Sequence[Point]) -> float:
    """Return the lamp's drift from frame to frame, pooled over levels."""
    freedom = sum(one.count - 1 for one in points if one.signal > 0)
    return sqrt(sum((one.count - 1) * one.drift**2 for one in points) / max(1, freedom))


def _gain(fitted: Sequence[Point], dark: Dark) -> tuple[Figure, float]:
    x = np.array([one.signal for one in fitted])
    y = np.array([one.variance - one.dark.variance for one in fitted])
    u = np.array([one.variance_u for one in fitted])
    _refuse_strange(fitted, x, y, np.hypot(u, dark.variance_u), dark.variance)
    found = law.slope(x, y, u)
    parts = (
        Component("noise", found.noise, "A", found.dof),
        Component("dark noise", found.offset * dark.variance_u, "A"),
        Component("dark level", abs(found.shift) * dark.level_u, "A"),
    )
    return Figure(found.value, parts), found.value


def _refuse_strange(fitted: Sequence[Point], x: Real, y: Real, u: Real, dark: float) -> None:
    """Refuse levels whose variance over dark is not in proportion to their signal."""
    typical = float(np.median(y / x))
    strange = np.flatnonzero(np.abs(y - typical * x) > MOST_AWAY * (abs(typical) * x + dark) + SURE * u)
    if not strange.size:
        return
    one = fitted[int(strange[0])]
    found = (
        f"{one.label} has a temporal variance of {y[strange[0]]:.4g} DN² over dark, the other levels tell "
        f"{typical * x[strange[0]]:.4g} DN² for its light"
    )
    if strange.size == 1 and one is not fitted[0]:
        raise _disturbed(found)
    raise MeasurementRefused(
        "not defined",
        found,
        allowed=f"{100 * MOST_AWAY:g} % apart",
        next_step="give frames as the sensor delivers them; a sensor that is not linear needs EMVA 1288 General",
    )


def _disturbed(found: str) -> MeasurementRefused:
    return MeasurementRefused(
        "another scene", found, next_step="let the lamp settle, let nothing move, and capture it again"
    )


def _refuse_excess(points: Sequence[Point], gain: Figure) -> None:
    """Refuse a level with more noise than its light can have: beyond saturation there is less of it."""
    for one in points:
        most = float(gain.value or 0.0) * max(one.signal, 0.0) + one.dark.variance
        if one.variance > (1 + MOST_AWAY) * most + SURE * one.variance_u:
            raise _disturbed(
                f"{one.label} has a temporal variance of {one.variance:.4g} DN², the other levels tell {most:.4g} DN² "
                "for its light"
            )


def propagated(of: Transfer, model: Callable[[float, float, float], float]) -> Figure:
    """Return a figure that follows from gain, dark variance and signal at saturation.

    Args:
        of: Where they are from.
        model: Takes K (DN/e-), the temporal variance of darks (DN²) and the signal at saturation (DN).
    """
    variance, variance_u = of.dark_variance
    values = of.k, variance, of.top
    gain, noise, *ends = law.spread_by(model, values, (of.gain.u, variance_u, *(u for _, u in of.saturation.parts[:1])))
    parts = [Component("system gain", gain, "A"), Component("dark noise", noise, "A")]
    per_unit = ends[0] / of.saturation.parts[0][1] if ends and of.saturation.parts[0][1] > 0 else 0.0
    parts += [Component(name, per_unit * u, "B") for name, u in of.saturation.parts]
    return Figure(model(*values), tuple(part for part in parts if part.u > 0))


def beyond(figure: Figure, side: str) -> Figure:
    """Return a figure as a bound, its uncertainty taken in."""
    end = float(figure.value or 0.0) + (-2 if side == "above" else 2) * figure.u
    return Figure(None, bound=(side, end), flags=figure.flags)


def linearity(of: Transfer) -> tuple[law.Linearity, Sequence[Point]]:
    """Return how far the response departs from a line, and the levels it was taken from.

    Raises:
        MeasurementRefused: Light unknown, too few levels, or a response that is no line at all.
    """
    if not of.light_in:
        raise MeasurementRefused(
            "not defined",
            "nothing says how much light each level had",
            next_step="number levels by their light, e.g. level-25, give sidecars, or the option light",
        )
    used = [one for one in of.points if law.LINEAR_FROM * of.top <= one.signal <= law.LINEAR_TO * of.top]
    if len(used) < LEAST_LEVELS:
        raise MeasurementRefused(
            "too few frames",
            f"{len(used)} levels lie between 5 and 95 % of saturation",
            allowed=f"{LEAST_LEVELS} at least",
            next_step="capture more levels",
        )
    light, signal = np.array([one.light or 0.0 for one in used]), np.array([one.signal for one in used])
    u = np.array([hypot(one.signal_u, of.drift * one.signal / sqrt(one.count)) for one in used])
    found = law.linearity(light, signal, u)
    worst = int(np.argmax(np.abs(found.deviations)))
    if abs(found.deviations[worst]) > MOST_BENT:
        raise MeasurementRefused(
            "not defined",
            f"at {used[worst].label} the response departs from a straight line by {found.deviations[worst]:+.1f} %: "
            "levels are mixed up, or the sensor is not linear",
            allowed=f"up to {MOST_BENT:g} % EMVA 1288 Linear is meant for",
            next_step="check the light of each level with a reference detector",
        )
    return found, used


def pattern(lit: Point, of: Transfer, part: str) -> tuple[Figure, Figure]:
    """Return DSNU in electrons and PRNU in % of one part of the pattern.

    Args:
        lit: Level at half of saturation.
        of: The series.
        part: `total`, `row`, `column` or `pixel`.

    Raises:
        MeasurementRefused: The region has too few rows or columns.
    """
    if lit.fixed is None or lit.dark.fixed is None:
        raise MeasurementRefused(
            "outside the estimator's limits", "the region has too few rows or columns to tell its patterns apart"
        )
    rows, columns = planes.stack(lit.frames.crops[:1]).shape
    members = {"row": rows, "column": columns}.get(part, rows * columns)
    dark, dark_u = _squared(lit.dark.fixed, part)
    bright, bright_u = _squared(lit.fixed, part)
    chance = 2 * sqrt(max(0.0, dark) * max(0.0, bright - dark) / members)
    response = _root(bright - dark, (("noise", bright_u), ("dark pattern", hypot(dark_u, chance))), lit.signal / 100)
    return _dsnu(of, lit.dark.fixed, part), response


def _dsnu(of: Transfer, fixed: Parts, part: str) -> Figure:
    spread = _spread(fixed, part)
    if spread.value is None or spread.u is None:
        return Figure(None, bound=("below", float(spread.bound or 0.0) / of.k))
    parts = Component("noise", spread.u / of.k, "A"), Component("system gain", spread.value * of.gain.u / of.k**2, "A")
    return Figure(spread.value / of.k, parts)


def _spread(fixed: Parts, part: str) -> Spread:
    return {"total": fixed.total, "row": fixed.row, "column": fixed.column, "pixel": fixed.pixel}[part]


def _squared(fixed: Parts, part: str) -> tuple[float, float]:
    """Return a part's variance and its standard uncertainty; what is not told from zero is zero, within its bound."""
    spread = _spread(fixed, part)
    if spread.value is None or spread.u is None:
        return 0.0, float(spread.bound or 0.0) ** 2 / 2
    return spread.value**2, 2 * spread.value * spread.u


def _root(variance: float, parts: Sequence[tuple[str, float]], scale: float) -> Figure:
    """Turn a variance into a standard deviation over a scale; a bound where it is not told from zero."""
    u = hypot(*(part for _, part in parts))
    if variance < 2 * u:
        return Figure(None, bound=("below", sqrt(max(0.0, variance) + 2 * u) / scale))
    value = sqrt(variance)
    return Figure(value / scale, tuple(Component(name, part / (2 * value * scale), "A") for name, part in parts))


def dark_current(darks: Sequence[Dark], *, by_variance: bool = False) -> tuple[float, float]:
    """Return the rise of the darks' level (DN/s), or of their variance (DN²/s), and its standard uncertainty.

    Raises:
        MeasurementRefused: Fewer than three exposure times are known.
    """
    timed = [one for one in darks if one.exposure is not None]
    times = np.array([float(one.exposure or 0.0) for one in timed])
    if len(set(times.tolist())) < 3:
        raise MeasurementRefused(
            "too few frames",
            f"the darks have {len(set(times.tolist()))} known exposure times",
            allowed="3 at least, EMVA 1288 asks for 6",
            next_step="name them with their unit, e.g. dark-20ms-1.tif for dark-{exposure}-{repeat}.tif",
        )
    if by_variance:
        y, u = ([one.variance for one in timed], [one.variance_u for one in timed])
    else:
        y, u = ([one.level for one in timed], [one.level_u for one in timed])
    rise, rise_u, _ = law.line(times, np.array(y), np.array(u))
    return rise, rise_u
