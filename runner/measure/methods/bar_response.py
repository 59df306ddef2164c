"""Contrast of a group of square-wave bars, the transfer of it, and the transfer of its fundamental.

Harmonics of the bars are fitted by least squares (`numerics.bar_fit`), never read from the highest and lowest pixels. A
region lies within the bars, away from the ends of a group: the series are those of many bars.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field
from math import atan2, degrees, hypot, pi, sqrt
from typing import Any

import numpy as np

from runner.capture.frame import Crop, linearise
from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.methods.grating_response import lattices_of
from runner.measure.numerics.bar_fit import BarFit, fit_bars
from runner.measure.numerics.grating_fit import GratingLost, Lattice
from runner.measure.numerics.grating_rounding import rounding
from runner.measure.options import lookups, number, reader
from runner.measure.reading import Component, Curve, Reading, Refusal

NAME = "bar response"
TITLE = "Bar response"
GROUP = "transfer function"
NEEDS = frozenset({"bars"})
REFERENCES = (
    "J. W. Coltman, J. Opt. Soc. Am. 44 (1954) 468 (square-wave response and its conversion)",
    "N. B. Nill, MITRE MTR 01B0000021 (2001) 3.2",
    "JCGM 100:2008 (uncertainty)",
)
ESTIMATOR = "harmonics"

MOST_CLIPPED = 0.001
"""Share of the region at an end of the range: hot and dead pixels stay below, clipped bars do not."""
LEAST_PERIODS = 3.0
"""Fewer periods in the region cannot be told from its shading and its ends."""
LEAST_APART = 3.0
"""Periods over the region between a wave and its mirror image at the limit of sampling."""
MOST_STRANGE = 0.1
"""Power that neither bars nor noise explains, over the fundamental's."""
MOST_FOLDED = 0.05
"""Part of the contrast that harmonics beyond the sampling may leave open."""
BIAS = 3e-4
"""Bound on the relative bias of a contrast (closed-form bars, 20 % shading)."""
BINS = 64

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "bar_contrast": QuantityInfo("%", "(bar - space) / (bar + space) in their middles.", least=0.0),
    "contrast_transfer": QuantityInfo("1", "That contrast over the target's own: the square-wave response.", least=0.0),
    "modulation_transfer": QuantityInfo(
        "1", "Amplitude of the bars' fundamental over 4/π of the target's contrast, at its frequency.", least=0.0
    ),
    "bar_frequency": QuantityInfo("cy/px", "Frequency along the bars' normal.", least=0.0),
    "bar_direction": QuantityInfo(
        "deg", "Direction of the bars' normal from the rows, -90 to 90, positive clockwise on screen."
    ),
    "second_harmonic": QuantityInfo(
        "%",
        "Amplitude at twice the frequency, in % of the fundamental's; 0 where bars and spaces are equal.",
        least=0.0,
    ),
}


@dataclass(frozen=True)
class Options:
    """How bars are measured."""

    target_contrast: float | str | None = field(
        default=None, metadata={"sentence": "The target's own contrast, e.g. 90 %; needed for transfers."}
    )
    target_contrast_uncertainty: float | str = field(
        default=0.0, metadata={"sentence": "Its standard uncertainty, e.g. 0.5 %."}
    )

    def __post_init__(self) -> None:
        """Turn shares into numbers and keep each option inside its meaning."""
        if self.target_contrast is not None:
            own = number("target_contrast", self.target_contrast, "%", 0.001, 1.0)
            object.__setattr__(self, "target_contrast", own)
        doubt = number("target_contrast_uncertainty", self.target_contrast_uncertainty, "%", 0.0, 1.0)
        object.__setattr__(self, "target_contrast_uncertainty", doubt)


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure one group of bars of one frame in one channel.

    Raises:
        MeasurementRefused: The group as a whole cannot be measured.
    """
    crop = sample.crop
    _refuse_clipped(sample)
    lattices = lattices_of(crop)
    start = sample.found.geometry["frequency_x"], sample.found.geometry["frequency_y"]
    _refuse_undersampled(crop, start)
    try:
        fit = fit_bars(lattices, start)
    except GratingLost as lost:
        raise MeasurementRefused(
            "another scene", f"the bars have no single frequency ({lost}); the region must lie within the group"
        ) from lost
    _refuse_strange(fit, lattices)
    return Measurement(tuple(_readings(sample, fit, lattices, options)), (_profile(sample, fit, lattices),))


def _refuse_clipped(sample: Sample) -> None:
    crop = sample.crop
    codes = crop.codes if crop.sites is None else crop.codes[crop.sites]
    share = float(np.mean((codes >= sample.camera.white_level) | (codes <= 0)))
    if share > MOST_CLIPPED:
        sentence = f"{100 * share:.2f} % of the region's pixels lie at an end of the range, at most 0.1 % may"
        raise MeasurementRefused("clipped", sentence, next_step="give less light, or raise the black level")


def _refuse_undersampled(crop: Crop, frequency: tuple[float, float]) -> None:
    """Refuse too few periods, and bars that the channel's own pixels fold onto their mirror image."""
    rows, columns = crop.codes.shape
    periods = abs(frequency[0]) * columns + abs(frequency[1]) * rows
    if periods < LEAST_PERIODS:
        sentence = f"{periods:.1f} periods lie in the region, at least {LEAST_PERIODS:g} are needed"
        raise MeasurementRefused("too few crossings", sentence)
    steps = [(1, 0), (0, 1)]
    if crop.sites is not None:  # the nearest green neighbours lie diagonally, those of red and blue two px away
        steps = [(1, 1), (1, -1)] if crop.sites[:2, :2].sum() == 2 else [(2, 0), (0, 2)]
    far = []
    for across, down in steps:
        turns = 2 * (frequency[0] * across + frequency[1] * down)
        reach = min(columns / abs(across) if across else np.inf, rows / abs(down) if down else np.inf)
        far.append((turns - round(turns)) * reach)
    if hypot(*far) < LEAST_APART:
        sentence = (
            f"at {hypot(*frequency):.4f} cy/px the bars lie {hypot(*far):.1f} periods over the region from the limit "
            f"of sampling, at least {LEAST_APART:g} are needed"
        )
        raise MeasurementRefused("undersampled", sentence)


def _refuse_strange(fit: BarFit, lattices: list[Lattice]) -> None:
    grating = fit.grating
    first = abs(grating.amplitudes[0])
    if grating.level <= 0 or first < 5 * grating.amplitude_u[0]:
        sentence = f"the bars' fundamental is {100 * first / abs(grating.level or 1):.2f} % of the mean level, less "
        raise MeasurementRefused("no modulation", sentence + "than five times its uncertainty")
    fine = sum(float(np.mean(_bend(one) ** 2)) / 6 * one.values.size for one in lattices) / grating.count
    strange = max(0.0, grating.noise**2 - fine) / (first**2 / 2)
    if strange > MOST_STRANGE:
        sentence = (
            f"bars explain the region badly: what is left has {100 * strange:.0f} % of their power, at most "
            f"{100 * MOST_STRANGE:g} % may; the region must lie within the group"
        )
        raise MeasurementRefused("another scene", sentence)
    if fit.folded > MOST_FOLDED * fit.contrast:
        sentence = (
            f"the pixels' grid folds harmonics of {fit.frequency:.4f} cy/px onto the fundamental, which leaves "
            f"{100 * fit.folded / fit.contrast:.0f} % of the contrast open, at most {100 * MOST_FOLDED:g} % may be"
        )
        raise MeasurementRefused("undersampled", sentence, next_step="turn the bars by a few degrees")


def _bend(lattice: Lattice) -> Any:
    """Return second differences, which a slow scene hardly enters."""
    return lattice.values[:, 2:] - 2 * lattice.values[:, 1:-1] + lattice.values[:, :-2]


def _readings(sample: Sample, fit: BarFit, lattices: list[Lattice], options: Options) -> list[Reading]:
    contrast, first = fit.contrast, fit.fundamental
    codes = _rounding(sample.crop, fit, lattices)
    odd = float(np.linalg.norm(fit.signs * codes)) / fit.grating.level
    c_parts = (fit.contrast_u, hypot(fit.folded, BIAS * contrast), odd)
    m_parts = (fit.fundamental_u, BIAS * first, float(codes[0]) / fit.grating.level)
    fx, fy = fit.grating.frequency
    f = fit.frequency
    along, across = np.array([fx, fy]) / f, np.array([-fy, fx]) / f
    u_f, u_turn = (sqrt(float(v @ fit.grating.frequency_cov @ v)) for v in (along, across))
    sign = -1.0 if fx < 0 or (fx == 0 and fy < 0) else 1.0  # one of two opposite normals, so that it is within ±90°
    return [
        _reading(sample, "bar_contrast", 100 * contrast, tuple(100 * each for each in c_parts)),
        _transfer(sample, "contrast_transfer", contrast, c_parts, options, 1.0),
        _transfer(sample, "modulation_transfer", first, m_parts, options, 4 / pi),
        _reading(sample, "bar_frequency", f, (u_f, 1e-6, 0.0)),
        _reading(sample, "bar_direction", degrees(atan2(sign * fy, sign * fx)), (degrees(u_turn / f), 1e-4, 0.0)),
        _second(sample, fit, float(codes[1])),
    ]


def _rounding(crop: Crop, fit: BarFit, lattices: list[Lattice]) -> Any:
    """Return what rounding to whole codes leaves in each harmonic's amplitude."""
    if crop.codes.dtype.kind not in "ui":
        return np.zeros(fit.signs.size)
    codes = np.arange(float(crop.codes.max()) + 2)
    return rounding(fit.grating, lattices, codes, linearise(codes, crop.camera)).harmonics


def _transfer(
    sample: Sample, name: str, value: float, parts: tuple[float, float, float], options: Options, ideal: float
) -> Reading:
    if not isinstance(options.target_contrast, float):
        because = "the spec does not state the target's own contrast: bar response: {target_contrast: …}"
        return _refused(sample, name, Refusal("not defined", because))
    own = options.target_contrast * ideal
    doubt = value / own * float(options.target_contrast_uncertainty) / options.target_contrast
    noise, bias, rounded = (part / own for part in parts)
    return _reading(sample, name, value / own, (noise, bias, rounded), doubt)


def _second(sample: Sample, fit: BarFit, rounded: float) -> Reading:
    size, u = abs(fit.grating.amplitudes[1]), float(fit.grating.amplitude_u[1])
    if not np.isfinite(size):
        because = "the pixels' grid folds twice the frequency onto another term"
        return _refused(sample, "second_harmonic", Refusal("undersampled", because))
    first = abs(fit.grating.amplitudes[0])
    # a modulus is never negative, so noise alone makes it positive: its mean square is taken off, down to zero
    value = sqrt(max(0.0, size**2 - u**2 - rounded**2)) / first
    return _reading(sample, "second_harmonic", 100 * value, (100 * u / first, 0.01, 100 * rounded / first))


def _reading(sample: Sample, name: str, value: float, parts: tuple[float, ...], target: float = 0.0) -> Reading:
    noise, bias, rounded = parts
    made = [Component("noise", noise, "A", averages=True), Component("method bias", bias, "B")]
    made.append(Component("rounding", rounded, "B"))
    made.append(Component("target's contrast", target, "B", shared="target's contrast"))
    kept = tuple(part for part in made if part.u > 0 or part.name == "noise")
    u = sqrt(sum(part.u**2 for part in kept))
    unit = _QUANTITIES[name].unit
    return Reading(sample.found.region, name, unit, float(value), u, kept, estimator=ESTIMATOR, method=REFERENCES[0])


def _refused(sample: Sample, name: str, refusal: Refusal) -> Reading:
    unit = _QUANTITIES[name].unit
    return Reading(sample.found.region, name, unit, None, None, estimator=ESTIMATOR, refusal=refusal)


def _profile(sample: Sample, fit: BarFit, lattices: list[Lattice]) -> Curve:
    """Return the light over one period, means of bins of phase, as a picture of the bars."""
    total, number = np.zeros(BINS), np.zeros(BINS)
    start = float(np.angle(fit.grating.amplitudes[0])) / (2 * pi)
    for one in lattices:
        turns = fit.grating.frequency[0] * one.x[None, :] + fit.grating.frequency[1] * one.y[:, None]
        at = np.floor((turns + start) % 1.0 * BINS).astype(int) % BINS
        total += np.bincount(at.ravel(), one.values.ravel(), BINS)
        number += np.bincount(at.ravel(), minlength=BINS)
    there = number > 0
    x, y, u = (
        (np.arange(BINS) + 0.5)[there] / BINS,
        total[there] / number[there],
        fit.grating.noise / np.sqrt(number[there]),
    )
    points = [tuple(float(v) for v in each) for each in (x, y, u)]
    region = sample.found.region
    return Curve(region, "bar profile", points[0], points[1], points[2], "period", "1", estimator=ESTIMATOR)
