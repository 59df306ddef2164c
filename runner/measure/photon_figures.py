"""Every figure that a light series gives, by the quantity's name, worked out when asked for."""

from collections.abc import Callable
from dataclasses import replace
from functools import partial
from math import hypot, sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure.numerics import photon_transfer as law
from runner.measure.photon_levels import SOME, Dark, Point, Unevenness, correlation
from runner.measure.photon_results import Figure, Transfer, beyond, dark_current, linearity, pattern, propagated
from runner.measure.reading import Component

Real = NDArray[np.float64]

PARTS = {"": "total", "_row": "row", "_column": "column", "_pixel": "pixel"}
"""Endings of quantities by the part of the pattern they are of."""
EVEN = 0.03
"""The light may vary so much over the field (EMVA 1288)."""
ALIKE = 0.01
"""Correlation of neighbours' noise from which on it is said."""
HALF = (0.4, 0.6)
"""Levels meant for the pattern at half of saturation."""

Figures = dict[str, Callable[[], Figure]]
"""What gives each figure; it raises MeasurementRefused where there is none."""


def electrons(of: Transfer) -> Figures:
    """Return the figures of the series as a whole: gain, noise, saturation and what follows from them."""
    reached = of.saturation.value is not None

    def dark(k: float, variance: float, _top: float) -> float:
        return law.dark_noise(variance, k, of.rounding)

    def least(k: float, variance: float, _top: float) -> float:
        return law.threshold(law.dark_noise(variance, k, of.rounding), k, of.rounding)

    def full(k: float, _variance: float, top: float) -> float:
        return top / k

    def span(k: float, variance: float, top: float) -> float:
        return full(k, variance, top) / least(k, variance, top)

    def hidden(figure: Figure, side: str) -> Figure:
        return beyond(figure, side) if of.rounded else figure

    def open_ended(figure: Figure) -> Figure:
        return beyond(figure, "above") if of.rounded or not reached else figure

    def top(model: Callable[[float, float, float], float]) -> Figure:
        figure = propagated(of, model)
        return figure if reached else beyond(figure, "above")

    return {
        "system_gain": lambda: replace(of.gain, flags=_about_gain(of)),
        "temporal_dark_noise": lambda: hidden(propagated(of, dark), "below"),
        "temporal_dark_noise_dn": lambda: hidden(_dark_codes(of), "below"),
        "saturation_capacity": lambda: top(full),
        "dynamic_range_emva1288": lambda: open_ended(propagated(of, lambda *x: law.decibels(span(*x)))),
        "dynamic_range_emva1288_bits": lambda: open_ended(propagated(of, lambda *x: law.bits(span(*x)))),
        "absolute_sensitivity_threshold": lambda: hidden(propagated(of, least), "below"),
        "snr_max": lambda: top(lambda *x: law.decibels(sqrt(full(*x)))),
    }


def _dark_codes(of: Transfer) -> Figure:
    variance, u = of.dark_variance
    return Figure(sqrt(variance), (Component("noise", u / (2 * sqrt(variance)), "A"),))


def _about_gain(of: Transfer) -> tuple[str, ...]:
    said = []
    middle = of.fitted[len(of.fitted) // 2]
    alike = correlation(middle)
    pixels = min(SOME, middle.frames.crops[0].codes.size)
    if max(alike) > max(ALIKE, 4 / sqrt(pixels)):
        lost = 2 * sum(max(0.0, one) for one in alike)  # variance that went to where neighbours have it in common
        low = 100 * lost / (1 + lost)
        said.append(f"noise of neighbours is correlated by {max(alike):.3f}: the gain reads low by some {low:.0f} %")
    processing = middle.frames.crops[0].camera.processing
    if processing:
        said.append(f"the camera's frames are {', '.join(processing)}: EMVA 1288 asks for the sensor's own")
    return tuple(said)


def patterns(of: Transfer, half: Point, uneven: float, shading_order: int) -> Figures:
    """Return DSNU and PRNU and their parts."""
    share = half.signal / of.top
    flags: tuple[str, ...] = ()
    if not HALF[0] <= share <= HALF[1] or of.saturation.value is None:
        of_what = "saturation" if of.saturation.value is not None else "the highest level, saturation was not reached"
        flags = (f"taken at {100 * share:.0f} % of {of_what}",)

    def dark(part: str) -> Figure:
        return pattern(half, of, part)[0]

    def response(part: str) -> Figure:
        if uneven > EVEN and shading_order == 0:
            raise MeasurementRefused(
                "uneven",
                f"at {half.label} the light varies by {100 * uneven:.1f} % over the field, which counts as pattern",
                allowed=f"{100 * EVEN:g} %",
                next_step="light the bare sensor evenly, or take a shading off by shading_order",
            )
        return replace(pattern(half, of, part)[1], flags=flags)

    return {
        **{f"dsnu1288{end}": partial(dark, part) for end, part in PARTS.items()},
        **{f"prnu1288{end}": partial(response, part) for end, part in PARTS.items()},
    }


def total_ratio(of: Transfer, half: Point) -> tuple[Real, Real, Real]:
    """Return electrons of light, the ratio of signal to all noise with both patterns, and its standard uncertainty.

    Raises:
        MeasurementRefused: Patterns cannot be told apart.
    """
    dark, response = pattern(half, of, "total")
    variance, variance_u = of.dark_variance
    signal = np.array([one.signal for one in of.points if 0 < one.signal <= of.top])
    inputs = (of.k, variance, dark.value or 0.0, response.value or 0.0)
    us = (of.gain.u, variance_u, dark.u, response.u)

    def ratio(k: float, temporal: float, offset: float, share: float) -> Real:
        return law.signal_to_noise(
            signal / k, law.dark_noise(temporal, k, of.rounding), k, pattern=offset, response=share / 100
        )

    away = []
    for place, u in enumerate(us):
        low, high = ([*inputs[:place], inputs[place] + side * u, *inputs[place + 1 :]] for side in (-1.0, 1.0))
        away.append((ratio(*high) - ratio(*low)) / 2)
    return signal / of.k, ratio(*inputs), np.sqrt(np.sum(np.square(away), axis=0))


def spread_of_light(light: Unevenness) -> Figure:
    """Return how uneven the light is, in %; a bound where noise of the blocks alone would give half of it.

    Raises:
        MeasurementRefused: The region is too small for blocks.
    """
    if light.blocks < 2:
        raise MeasurementRefused("outside the estimator's limits", "the region has fewer than 4000 pixels of its own")
    u = 100 * sqrt(2) * light.noise
    if light.span < 2 * light.by_noise:
        return Figure(None, bound=("below", 100 * light.span + 2 * u))
    return Figure(100 * light.span, (Component("noise", u, "A"),))


def departure(of: Transfer) -> Figure:
    """Return the linearity error; a bound where noise alone would give as much.

    Raises:
        MeasurementRefused: Light unknown, too few levels, or a response that is no line at all.
    """
    found, used = linearity(of)
    reached = of.saturation.value is not None
    flags = () if reached else ("taken over 5 to 95 % of the highest level, saturation was not reached",)
    if not found.told:
        return Figure(None, bound=("below", found.error + 2 * found.noise), flags=flags)
    parts = (Component("noise", found.noise, "A"), Component("size of noise", found.folding, "B"))
    return Figure(found.error, parts, flags=(*flags, f"{len(used)} levels"))


def photons(of: Transfer, count: float, count_u: float) -> Figures:
    """Return what a known number of photons tells."""

    def rise() -> tuple[float, float, float]:
        x, calibration = _counted(of, count, count_u)
        signal = np.array([one.signal for one in of.fitted])
        u = np.array([hypot(one.signal_u, of.drift * one.signal / sqrt(one.count)) for one in of.fitted])
        found = law.slope(x, signal, u)
        return found.value, found.noise / found.value, calibration

    def per_photon(figure: Figure, noise: float, calibration: float) -> Figure:
        value = float(figure.value or 0.0)
        more = (
            Component("response", value * noise, "A"),
            Component("photons", value * calibration, "B", shared="photons"),
        )
        return replace(figure, parts=(*figure.parts, *more))

    def efficiency() -> Figure:
        response, *more = rise()
        return per_photon(propagated(of, lambda k, _v, _s: 100 * response / k), *more)

    def least() -> Figure:
        response, *more = rise()

        def codes(k: float, variance: float, _top: float) -> float:
            return k * law.threshold(law.dark_noise(variance, k, of.rounding), k, of.rounding)

        figure = per_photon(propagated(of, lambda *x: codes(*x) / response), *more)
        return beyond(figure, "below") if of.rounded else figure

    return {"quantum_efficiency": efficiency, "absolute_sensitivity_threshold_photons": least}


def _counted(of: Transfer, count: float, count_u: float) -> tuple[np.ndarray[Any, np.dtype[np.float64]], float]:
    """Return the photons of the fitted levels and how well they are known.

    Raises:
        MeasurementRefused: They are not known.
    """
    if not count and of.light_in != "photons":
        raise MeasurementRefused(
            "not defined",
            "nothing says how many photons reached a pixel",
            next_step="give the option photons, or levels in photons by a calibrated detector",
        )
    brightest = of.points[-1]
    if len(of.points) > 1 and of.response is None:
        raise MeasurementRefused(
            "not defined",
            "signals are not in proportion to the light that is said of the levels, or nothing is said",
            next_step="give each level its light, by sidecars or the option light",
        )
    light = np.array([one.light or 1.0 for one in of.fitted])
    if of.light_in == "photons":
        return light, count_u
    return count * light / float(brightest.light or 1.0), count_u


def rise_in_darkness(of: Transfer, without: tuple[Dark, ...], *, by_variance: bool) -> Figure:
    """Return the dark current.

    Raises:
        MeasurementRefused: Fewer than three exposure times are known.
    """
    rise, rise_u = dark_current(without, by_variance=by_variance)
    power = 2 if by_variance else 1
    value = rise / of.k**power
    gain = abs(value) * power * of.gain.u / of.k
    return Figure(value, (Component("noise", rise_u / of.k**power, "A"), Component("system gain", gain, "A")))
