"""Contrast of the three bars of an element, their period, and with the table of elements the size of a pixel.

Bars are fitted by least squares (`numerics.three_bars`), never read from the highest and lowest pixels. A companion
capture `flat` (the white frame) divides out what is not of the target, such as the cores of a fibre bundle.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field
from math import degrees, radians, sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.numerics.three_bars import ThreeBarFit, fit_three_bars, smoothed
from runner.measure.options import number, read_record
from runner.measure.reading import Component, Reading, Refusal

NAME = "tri-bar contrast"
TITLE = "Contrast of tri-bar elements"
GROUP = "transfer function"
NEEDS = frozenset({"three bars"})
REFERENCES = ("MIL-STD-150A (1959) 5.1.1.7 (table of elements)", "JCGM 100:2008 (uncertainty)")
ESTIMATOR = "three bars"

MOST_CLIPPED = 0.001
"""Share of the region at an end of the range: hot and dead pixels stay below, clipped bars do not."""
LEAST_FLAT = 0.05
"""Of the flat's mean: below, dividing by it would make noise of twenty times its size."""
BIAS = 1.5e-3
"""Contrast: what a blur that is no Gaussian may move it by (pupils and discs, closed form)."""
PERIOD_BIAS = 5e-4
"""The same of the period, relative."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "tri_bar_contrast": QuantityInfo(
        "%",
        "(bar - space) / (bar + space) in the middles of three bars and two spaces, as the coarse elements have it; "
        "negative where bars and spaces have changed places.",
    ),
    "tri_bar_period": QuantityInfo("px", "From bar to bar.", least=0.0),
    "tri_bar_direction": QuantityInfo(
        "deg", "Direction of the bars' normal from the rows, -90 to 90, positive clockwise on screen."
    ),
    "pixel_in_object": QuantityInfo("µm object", "Size of a pixel on the target, by the element's period.", least=0.0),
}


@dataclass(frozen=True)
class Options:
    """How elements are measured."""

    smoothing: float | str = field(
        default=0.0, metadata={"sentence": "Gaussian that frames are smoothed by first, px (fibre cores); 0 is none."}
    )

    def __post_init__(self) -> None:
        """Keep the smoothing inside its meaning."""
        object.__setattr__(self, "smoothing", number("smoothing", self.smoothing, "px", 0.0, 20.0))


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
    """Measure one element of one frame in one channel.

    Raises:
        MeasurementRefused: The element as a whole cannot be measured.
    """
    _refuse_clipped(sample)
    light, own = _light(sample, float(options.smoothing))
    geometry = sample.found.geometry
    known = (geometry["period"], radians(geometry["turn"])) if geometry["known"] else None
    fit = fit_three_bars(light, own, known)
    if fit is None:
        raise MeasurementRefused("no modulation", "no three bars settle in the region")
    return Measurement(tuple(_readings(sample, fit, known=known is not None)))


def _refuse_clipped(sample: Sample) -> None:
    crop = sample.crop
    codes = crop.codes if crop.sites is None else crop.codes[crop.sites]
    share = float(np.mean((codes >= sample.camera.white_level) | (codes <= 0)))
    if share > MOST_CLIPPED:
        sentence = f"{100 * share:.2f} % of the region's pixels lie at an end of the range, at most 0.1 % may"
        raise MeasurementRefused("clipped", sentence, next_step="give less light, or raise the black level")


def _light(sample: Sample, smoothing: float) -> tuple[NDArray[np.float64], NDArray[np.bool_] | None]:
    """Return the region's light, divided by the flat's where there is one, and which pixels may be used."""
    own = sample.crop.sites
    light = smoothed(sample.crop.signal, smoothing, own)
    if "flat" in sample.lost_companions:
        name = sample.lost_companions["flat"]
        raise MeasurementRefused("missing companion", f"capture '{name}', the flat, gave no frames")
    flats = sample.companions.get("flat", ())
    if not flats:
        return light, own
    flat = smoothed(np.mean([one.signal for one in flats], axis=0), smoothing, own)
    level = float(flat.mean() if own is None else flat[own].mean())
    good = flat > LEAST_FLAT * level
    if level <= 0 or float(good.mean()) < 0.99:
        sentence = f"{100 * (1 - float(good.mean())):.1f} % of the flat lies below {100 * LEAST_FLAT:g} % of its mean"
        raise MeasurementRefused(
            "too dark", sentence, allowed="at most 1 % may", next_step="smooth, or give more light"
        )
    return light / np.where(good, flat, LEAST_FLAT * level), own


def _readings(sample: Sample, fit: ThreeBarFit, *, known: bool) -> list[Reading]:
    sign = sample.found.geometry["sign"]
    flags = ["period and direction taken from the coarser elements"] if known else []
    if fit.excess > 2:
        flags.append(f"neighbouring pixels share noise: {fit.excess:.1f} times a pixel's own (variance)")
    contrast = 100 * sign * fit.contrast
    made = [_reading(sample, "tri_bar_contrast", contrast, 100 * fit.contrast_u, 100 * BIAS, tuple(flags))]
    if known:
        because = "its bars are too weak: the period and direction are the coarser elements'"
        refusal = Refusal("no modulation", because)
        return made + [_refused(sample, name, refusal) for name in list(_QUANTITIES)[1:]]
    period, u = fit.period, fit.period_u
    made.append(_reading(sample, "tri_bar_period", period, u, PERIOD_BIAS * period, tuple(flags)))
    made.append(_reading(sample, "tri_bar_direction", degrees(fit.turn), degrees(fit.turn_u), 0.02, tuple(flags)))
    if "element_frequency" not in sample.found.geometry:
        because = "the spec does not say which element this is: tri-bar elements: {elements: …}"
        return [*made, _refused(sample, "pixel_in_object", Refusal("not defined", because))]
    size = 1e3 / (period * sample.found.geometry["element_frequency"])
    made.append(_reading(sample, "pixel_in_object", size, size * u / period, size * PERIOD_BIAS, tuple(flags)))
    return made


def _reading(sample: Sample, name: str, value: float, noise: float, bias: float, flags: tuple[str, ...]) -> Reading:
    parts = (Component("noise", noise, "A", averages=True), Component("method bias", bias, "B"))
    u, unit = sqrt(noise**2 + bias**2), _QUANTITIES[name].unit
    return Reading(
        sample.found.region,
        name,
        unit,
        float(value),
        u,
        parts,
        estimator=ESTIMATOR,
        method=REFERENCES[0],
        flags=flags,
    )


def _refused(sample: Sample, name: str, refusal: Refusal) -> Reading:
    unit = _QUANTITIES[name].unit
    return Reading(sample.found.region, name, unit, None, None, estimator=ESTIMATOR, refusal=refusal)
