"""Transfer function of a sine star: over all azimuths, sagittal and tangential, and of the worst segment.

Centre, oblique view and bending are fitted to the stripes' phases before anything is read (`numerics.star_geometry`),
so that a centre that is off costs nothing. Modulations are over the star's own, if the spec states it, else over the
modulation at frequency 0, to which that of the outermost stripes is continued.
"""

import re
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from math import atan2, hypot, pi, sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import linearise
from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample, Wanted
from runner.measure.numerics import star_curves as sc
from runner.measure.numerics.star_fit import PER_RING, SEGMENTS, StarFit, TooFewPixels, fit_star, rings
from runner.measure.numerics.star_geometry import Geometry, geometry, refine, ring_pixels
from runner.measure.options import number, read_record
from runner.measure.reading import Component, Curve, Reading, Refusal

NAME = "star response"
TITLE = "Sine star response"
GROUP = "transfer function"
NEEDS = frozenset({"star"})
REFERENCES = (
    "ISO 12233:2014 (s-SFR: spatial frequency response from a sine-modulated star)",
    "C. Loebich, D. Wueller, B. Klingen, A. Jaeger, Proc. SPIE 6502 (2007) 65020N",
    "P. Birch and J. Griffin, Opt. Eng. 54 (2015) 074104 (star off centre)",
    "JCGM 100:2008 (uncertainty)",
)
ESTIMATOR = "star fit"

MOST_CLIPPED = 0.001
"""Share of the pixels looked at that may lie at an end of the range: hot and dead ones stay below."""
MARGIN, MARGIN_SHARE = 3.0, 0.02
"""px, and share of the radius, by which the star's border is avoided."""
MOST_LEFT = 0.25
"""px; stripes that stray so far from their fitted place lose 12 % of their modulation at 0.45 cy/px."""
MOST_HARMONIC = 0.2
"""Third harmonic over the sine's: bars have a third of it."""
TOLD_HARMONIC = 0.02
"""Of the sine, from which a reader is told."""
COARSE = 0.12
"""cy/px; of a star without coarser stripes the modulation at frequency 0 is unknown."""
BIAS = 2.5e-4
"""Bound on the absolute error of a transfer without noise (splines, phases, level; closed-form stars)."""
SEGMENT_BIAS = 6e-4
"""The same for a single segment or two, whose level the smooth surface follows less well (shading of 10 %)."""
LEAST_DIVISOR = 0.1
"""Below, dividing by pixel and chart would multiply every error by ten."""

_WORDS = {
    "": "mean over all azimuths",
    sc.WORST: "lowest of the eight azimuth segments, what noise makes of the lowest taken off",
    "sagittal_": "where spokes lie along the line from the frame's centre (lines radial)",
    "tangential_": "where spokes lie across the line from the frame's centre (lines tangential)",
}
_MTF = re.compile(r"(worst_|sagittal_|tangential_|)mtf([1-9][0-9]?)?")
_PLAIN: Mapping[str, QuantityInfo] = {
    "low_frequency_modulation": QuantityInfo("%", "Modulation of the star's fundamental at frequency 0.", least=0.0),
    "second_harmonic": QuantityInfo(
        "%", "Amplitude at twice the outermost stripes' frequency, in % of the sine's.", least=0.0
    ),
    "third_harmonic": QuantityInfo(
        "%", "Amplitude at three times the outermost stripes' frequency, in % of the sine's.", least=0.0
    ),
    "star_centre_x": QuantityInfo("px", "Column of the star's centre, from the frame's left border."),
    "star_centre_y": QuantityInfo("px", "Row of the star's centre, from the frame's upper border."),
    "diameter_ratio": QuantityInfo(
        "1", "Longest over shortest diameter of what is a circle on the chart: an oblique view.", least=1.0
    ),
}


@dataclass(frozen=True)
class Options:
    """How a star is measured."""

    target_modulation: float | str | None = field(
        default=None,
        metadata={"sentence": "The star's own modulation, e.g. 80 %; without it, that at frequency 0 is taken."},
    )
    target_modulation_uncertainty: float | str = field(
        default=0.0, metadata={"sentence": "Its standard uncertainty, e.g. 0.4 %."}
    )

    def __post_init__(self) -> None:
        """Turn shares into numbers and keep each option inside its meaning."""
        if self.target_modulation is not None:
            own = number("target_modulation", self.target_modulation, "%", 0.001, 1.0)
            object.__setattr__(self, "target_modulation", own)
        doubt = number("target_modulation_uncertainty", self.target_modulation_uncertainty, "%", 0.0, 1.0)
        object.__setattr__(self, "target_modulation_uncertainty", doubt)


def read_options(asked: Mapping[str, Any]) -> Options:
    """Read the options from a spec's keys.

    Raises:
        UsageError: A key or value is not allowed.
    """
    return read_record(Options, asked)


def quantity(name: str) -> QuantityInfo | None:
    """Return what a quantity name means, or None."""
    if name in _PLAIN:
        return _PLAIN[name]
    match = _MTF.fullmatch(name)
    if match is None:
        return None
    words = _WORDS[match[1]]
    if match[2]:
        sentence = f"First frequency at which the modulation transfer falls to {match[2]} %, {words}."
        return QuantityInfo("cy/px", sentence, least=0.0)
    sentence = f"Modulation transfer at a frequency, {words}."
    return QuantityInfo("1", sentence, {"frequency": "cy/px"}, ceiling=True, least=0.0)


def quantities() -> Mapping[str, QuantityInfo]:
    """Return the quantities for listings."""
    names = [f"{family}{one}" for family in _WORDS for one in ("mtf", "mtf50", "mtf30", "mtf10")]
    return {name: info for name in (*names, *_PLAIN) if (info := quantity(name)) is not None}


@dataclass(frozen=True)
class _Star:
    """A fitted star with what its readings need."""

    sample: Sample
    """The region."""
    at: Geometry
    """Phase; positions from the crop's first pixel."""
    fit: StarFit
    """Its modulation."""
    first: float | None
    """Direction from the frame's centre to the star's, rad; None where the star covers the frame's centre."""
    own: float
    """Modulation that is 1."""
    own_parts: tuple[Component, ...]
    """Its relative uncertainties."""
    finest: float
    """cy/px."""


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure one star of one frame in one channel.

    Raises:
        MeasurementRefused: The star as a whole cannot be measured.
    """
    star = _fitted(sample, options)
    plain = [Wanted(name, {}, {}) for name, info in quantities().items() if not info.parameters]
    wishes: dict[tuple[object, ...], Wanted] = {}
    for one in (*sample.wanted, *plain):
        key = one.quantity, one.part, *sorted((k, a.value, a.unit) for k, a in one.parameters.items())
        wishes.setdefault(key, one)
    if star.own == 0.0:
        raise MeasurementRefused("no modulation", "the star has no modulation")
    curves = {part: _curves(star, part) for part in {one.part for one in wishes.values()}}
    readings = tuple(_reading(star, curves[one.part], one) for one in wishes.values())
    return Measurement(readings, _drawn(star, curves["system"]))


def _fitted(sample: Sample, options: Options) -> _Star:
    crop, found = sample.crop, sample.found.geometry
    shape = (crop.codes.shape[0], crop.codes.shape[1])
    centre = found["centre_x"] - crop.box.x0 - 0.5, found["centre_y"] - crop.box.y0 - 0.5
    outer = found["outer_radius"] * (1 - MARGIN_SHARE) - MARGIN
    g = round(found["cycles"])
    sites = crop.sites
    share = 1.0 if sites is None else float(sites[:2, :2].mean())
    # the nearest pixels of one colour lie 1 px apart, of green √2 px along diagonals, of red and blue 2 px
    finest = {1.0: 0.5, 0.5: 0.5 / sqrt(2), 0.25: 0.25}[share]
    inner = found["inner_radius"] * 1.05 + (MARGIN if found["inner_radius"] else 0.0)
    finest = min(finest, g / (2 * pi * inner)) if inner > 0 else finest
    start = geometry(g, centre, outer, (found["stretch_x"], found["stretch_d"]))
    least = g / (2 * pi * outer)
    if finest < 1.5 * least:
        sentence = f"the star's stripes lie at {least:.3f} to {finest:.3f} cy/px only, a factor of 1.5 is needed"
        raise MeasurementRefused("outside the estimator's limits", sentence)

    def values_at(x: NDArray[np.intp], y: NDArray[np.intp]) -> tuple[Any, Any]:
        return linearise(crop.codes[y, x], crop.camera), None if sites is None else sites[y, x]

    at, waves = refine(values_at, shape, start, 0.93 * finest)
    if at.left > MOST_LEFT:
        sentence = (
            f"stripes stray by {at.left:.2f} px rms from the lines of a star, at most {MOST_LEFT:g} px may be: a bent "
            "chart, a wrong region, or distortion"
        )
        raise MeasurementRefused("edge not straight", sentence)
    x, y = ring_pixels(shape, at.centre, rings(at, 1.02 * finest), round(PER_RING / share))
    if sites is not None:
        own = sites[y, x]
        x, y = x[own], y[own]
    codes = crop.codes[y, x]
    _refuse_clipped(sample, codes)
    frame = sample.camera.width / 2, sample.camera.height / 2
    away = found["centre_x"] - frame[0], found["centre_y"] - frame[1]
    first = atan2(away[1], away[0]) if hypot(*away) > outer else None
    try:
        fit = fit_star(
            at,
            waves,
            x.astype(np.float64),
            y.astype(np.float64),
            linearise(codes, crop.camera),
            finest=1.02 * finest,
            first_azimuth=first or 0.0,
        )
    except TooFewPixels as error:
        sentence = f"the star's {x.size} pixels are too few for {SEGMENTS} segments"
        raise MeasurementRefused("outside the estimator's limits", sentence) from error
    _refuse_strange(fit)
    own_modulation, parts = _own(fit, options)
    return _Star(sample, at, fit, first, own_modulation, parts, finest)


def _refuse_clipped(sample: Sample, codes: NDArray[Any]) -> None:
    # without a black level code 0 may be an ordinary one, but troughs that are cut there look the same
    share = float(np.mean((codes >= sample.camera.white_level) | (codes <= 0)))
    if share > MOST_CLIPPED:
        sentence = f"{100 * share:.2f} % of the star's pixels lie at an end of the range, at most 0.1 % may"
        raise MeasurementRefused("clipped", sentence, next_step="give less light, or raise the black level")


def _refuse_strange(fit: StarFit) -> None:
    size, u = fit.mean(np.array([fit.band[0]]))
    if size[0] < 5 * u[0]:
        sentence = f"the outermost stripes' modulation is {100 * size[0]:.2f} %, less than five times its uncertainty"
        raise MeasurementRefused("no modulation", sentence)
    if fit.harmonics[1] > MOST_HARMONIC:
        sentence = (
            f"the stripes are no sine: their third harmonic is {100 * fit.harmonics[1]:.0f} % of it (bars have 33 %), "
            f"at most {100 * MOST_HARMONIC:g} % may be"
        )
        raise MeasurementRefused("another scene", sentence)


def _own(fit: StarFit, options: Options) -> tuple[float, tuple[Component, ...]]:
    """Return the modulation that counts as 1, with its relative uncertainties."""
    if isinstance(options.target_modulation, float):
        own, doubt = options.target_modulation, float(options.target_modulation_uncertainty)
        return own, (Component("target's modulation", doubt / own, "B", shared="target's modulation"),)
    value, noise, bias = sc.low_frequency(fit)
    return value, (
        Component("low-frequency noise", noise / value, "A", averages=True),
        Component("low-frequency reference", bias / value, "B"),
    )


def _curves(star: _Star, part: str) -> sc.Curves:
    """Return modulation over the star's own on a grid; of the lens alone with pixel and chart divided out."""
    end = min(star.fit.band[1], star.finest)
    f = np.append(np.arange(star.fit.band[0], end, sc.STEP), end)
    size, u = star.fit.segment(f)
    divisor = np.full_like(size, star.own)
    if part == "lens":
        side, first = sqrt(star.sample.camera.fill), star.first or 0.0
        turn = first + 2 * pi * np.arange(SEGMENTS)[:, None] / SEGMENTS + (np.arange(-4, 5) * pi / SEGMENTS / 4.5)
        waves = side * f[None, None, :] * np.stack([np.cos(turn), np.sin(turn)])[:, :, :, None]
        divisor *= np.sinc(waves).prod(axis=0).mean(axis=1) * _chart(star.sample, f)
    good = (divisor >= LEAST_DIVISOR * star.own).all(axis=0)
    last = f.size if good.all() else int(np.argmin(good))
    return sc.Curves(f[:last], (size / divisor)[:, :last], (u / divisor)[:, :last])


def _chart(sample: Sample, f: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the chart's own transfer function; 0 beyond what is stated."""
    if not sample.chart.transfer:
        return np.ones_like(f)
    points, values = (np.array(each) for each in zip(*sample.chart.transfer, strict=True))
    if points[0] > 0:
        points, values = np.insert(points, 0, 0.0), np.insert(values, 0, 1.0)
    return np.asarray(np.interp(f, points, values, right=0.0))


def _reading(star: _Star, curves: sc.Curves, one: Wanted) -> Reading:
    info = quantity(one.quantity)
    blank = Reading(
        star.sample.found.region,
        one.quantity,
        info.unit if info is not None else "1",
        None,
        None,
        parameters=one.parameters,
        part=one.part,
        estimator=ESTIMATOR,
        method=REFERENCES[0],
    )
    flags = tuple(
        f"{order} harmonic of {100 * size:.1f} %: another tone curve than stated, or the star is no sine"
        for order, size in zip(("second", "third"), star.fit.harmonics, strict=True)
        if size > TOLD_HARMONIC
    )
    try:
        if one.quantity in _PLAIN:
            return _plain(star, blank)
        family, level = _MTF.fullmatch(one.quantity).groups()  # type: ignore[union-attr]  # the plan has asked before
        made = _transfer(star, curves, one, blank, family, level)
        return replace(made, flags=(*made.flags, *flags))
    except MeasurementRefused as refused:
        return replace(blank, refusal=Refusal(refused.cause, str(refused)))


def _plain(star: _Star, blank: Reading) -> Reading:
    at, fit, box = star.at, star.fit, star.sample.crop.box
    if blank.quantity == "low_frequency_modulation":
        value, noise, bias = sc.low_frequency(fit)
        return _valued(blank, 100 * value, 100 * noise, (Component("method bias", 100 * max(bias, BIAS), "B"),))
    if blank.quantity in {"star_centre_x", "star_centre_y"}:
        axis = 0 if blank.quantity.endswith("x") else 1
        corner = (box.x0, box.y0)[axis]
        return _valued(blank, corner + at.centre[axis] + 0.5, at.doubt, (Component("method bias", 5e-4, "B"),))
    if blank.quantity == "diameter_ratio":
        return _valued(blank, at.ratio, 2 * at.doubt / at.outer, (Component("method bias", 1e-4, "B"),))
    order = 0 if blank.quantity == "second_harmonic" else 1
    noise = 100 * fit.harmonics_u[order]
    return _valued(blank, 100 * fit.harmonics[order], noise, (Component("method bias", 0.02, "B"),))


def _transfer(star: _Star, curves: sc.Curves, one: Wanted, blank: Reading, family: str, level: str | None) -> Reading:
    if family in {"sagittal_", "tangential_"} and star.first is None:
        raise MeasurementRefused("not defined", "the frame's centre lies in the star: sagittal has no direction there")
    reference = 0.0 if level is None else int(level) / 100
    low, high = float(curves.f[0]), float(curves.f[-1])
    if low > COARSE and not any(part.name == "target's modulation" for part in star.own_parts):
        raise MeasurementRefused(
            "not defined",
            f"the star's coarsest stripes have {low:.3f} cy/px, from which the modulation at 0 cannot be told",
            allowed=f"at most {COARSE:g} cy/px",
            next_step="state the star's own: star response: {target_modulation: …}",
        )
    if level is None:
        f = one.at["frequency"]
        if not low <= f <= high:
            words = "beyond the sampling" if f > star.finest else "beyond the star's stripes"
            sentence = f"{f:g} cy/px lies {words}, which hold {low:.3f} to {high:.3f} cy/px"
            raise MeasurementRefused("undersampled" if f > star.finest else "not defined", sentence)
        value, noise = curves.value(family, f)
        return _valued(blank, value, noise, _parts(star, family, value, f, 1.0))
    found = curves.crossing(family, reference)
    if found is None:
        below = curves.value(family, low)[0] < reference
        bound = ("below", low) if below else ("above", high)
        return replace(blank, bound=bound, flags=(f"no crossing from {low:.3f} to {high:.3f} cy/px",))
    f, noise, slope = found
    return _valued(blank, f, noise, _parts(star, family, reference, f, 1 / abs(slope)))


def _parts(star: _Star, family: str, value: float, f: float, scale: float) -> tuple[Component, ...]:
    """Return parts of u of a transfer besides noise, times a scale."""
    stray = value * (pi * f * star.at.left) ** 2
    parts = [Component("method bias", scale * hypot(SEGMENT_BIAS if family else BIAS, stray), "B")]
    parts += [replace(part, u=part.u * value * scale) for part in star.own_parts]
    doubt = star.sample.chart.transfer_u
    if doubt > 0:
        own = float(_chart(star.sample, np.array([f]))[0])
        parts.append(Component("chart", scale * value * doubt / max(own, LEAST_DIVISOR), "B", shared="chart"))
    return tuple(part for part in parts if part.u > 0)


def _valued(blank: Reading, value: float, noise: float, more: tuple[Component, ...]) -> Reading:
    parts = (Component("noise", noise, "A", averages=True), *more)
    return replace(blank, value=float(value), u=sqrt(sum(part.u**2 for part in parts)), components=parts)


def _drawn(star: _Star, curves: sc.Curves) -> tuple[Curve, ...]:
    """Return the mean curve, and each segment's by the direction of its spokes."""
    some = slice(None, None, max(1, curves.f.size // 60))

    def curve(name: str, size: NDArray[np.float64], u: NDArray[np.float64]) -> Curve:
        x, y, doubt = (tuple(float(v) for v in each[some]) for each in (curves.f, size, u))
        return Curve(star.sample.found.region, name, x, y, doubt, "cy/px", "1", estimator=ESTIMATOR)

    made = [curve("mtf", *curves.mean(""))]
    for k in range(SEGMENTS):
        turn = np.degrees((star.first or 0.0) + 2 * pi * k / SEGMENTS) % 360
        made.append(curve(f"mtf, spokes towards {turn:.0f}°", curves.size[k], curves.u[k]))
    return tuple(made)
