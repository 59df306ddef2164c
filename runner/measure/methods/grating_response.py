"""Modulation, frequency, phase and harmonics of a sinusoidal grating, and the transfer at its frequency.

The stripes of a patch are fitted by least squares (`numerics.grating_fit`). The modulation transfer is the measured
modulation over the target's own, which the spec states; harmonics tell a chain that is not linear, or a target that is
no sine.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field
from math import atan2, degrees, hypot, sqrt

import numpy as np

from runner.capture.frame import Crop, linearise
from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.numerics.grating_fit import GratingFit, GratingLost, Lattice, fit_grating
from runner.measure.numerics.grating_rounding import Rounding, rounding
from runner.measure.numerics.grating_search import picture
from runner.measure.options import lookups, number, reader
from runner.measure.reading import Component, Curve, Map, Reading, Refusal

NAME = "grating response"
TITLE = "Grating response"
GROUP = "transfer function"
NEEDS = frozenset({"grating"})
REFERENCES = (
    "ISO 15529:2010 (modulation transfer of sampled imaging systems)",
    "D. C. Rife and R. R. Boorstyn, IEEE Trans. Inf. Theory 20 (1974) 591",
    "JCGM 100:2008 (uncertainty)",
)
ESTIMATOR = "least squares"

MOST_CLIPPED = 0.001
"""Share of the patch at an end of the range: hot and dead pixels stay below, clipped crests do not."""
LEAST_PERIODS = 2.5
"""Fewer periods over the patch cannot be told from its shading."""
LEAST_APART = 3.0
"""Periods over the patch between a wave and its mirror image: nearer, their lines merge under the search's window."""
MOST_STRANGE = 0.1
"""Power that neither the sine with its harmonics nor noise explains, over the sine's: above, it is another scene."""
MOST_BENT = 0.35
"""rad rms by which the stripes' phase may depart from a plane: what they lose by it is then put back within a tenth."""
STRIP = 32_768
"""Pixels worked on at a time."""
MAP_SIZE = 65
"""Ordinates along each axis of the spectrum's picture."""
DEEPEST = -90.0
"""dB: what lies deeper is drawn as that."""
LOST = 0.1
"""Of what bent stripes lose: its standard uncertainty."""
BIAS = 2e-4
"""Bound on the relative bias of a modulation (shading and amplitude that change by 30 % over the patch)."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "modulation": QuantityInfo("%", "(bright - dark) / (bright + dark) of the fitted sine, at the patch's centre."),
    "modulation_transfer": QuantityInfo("1", "Modulation over the target's own, at the grating's frequency."),
    "grating_frequency": QuantityInfo("cy/px", "Frequency along the stripes' normal."),
    "grating_direction": QuantityInfo(
        "deg", "Direction of the stripes' normal from the rows, -90 to 90, positive clockwise on screen."
    ),
    "grating_phase": QuantityInfo(
        "deg", "Phase of the sine at the region's centre, -180 to 180; 0 is the middle of a bright stripe."
    ),
    "second_harmonic": QuantityInfo("%", "Amplitude at twice the frequency, in % of the sine's."),
    "third_harmonic": QuantityInfo("%", "Amplitude at three times the frequency, in % of the sine's."),
}


@dataclass(frozen=True)
class Options:
    """How a grating is measured."""

    target_modulation: float | str | None = field(
        default=None, metadata={"sentence": "The target's own modulation, e.g. 80 %; needed for modulation_transfer."}
    )
    target_modulation_uncertainty: float | str = field(
        default=0.0, metadata={"sentence": "Its standard uncertainty, e.g. 0.4 %."}
    )
    background: int = field(
        default=1, metadata={"sentence": "Order of the polynomial that the mean light follows over a patch, 0 to 2."}
    )

    def __post_init__(self) -> None:
        """Turn shares into numbers and keep each option inside its meaning."""
        if self.target_modulation is not None:
            own = number("target_modulation", self.target_modulation, "%", 0.001, 1.0)
            object.__setattr__(self, "target_modulation", own)
        doubt = number("target_modulation_uncertainty", self.target_modulation_uncertainty, "%", 0.0, 1.0)
        object.__setattr__(self, "target_modulation_uncertainty", doubt)
        if isinstance(self.background, bool) or self.background not in {0, 1, 2}:
            raise ValueError(f"background is {self.background!r}; allowed are 0, 1 and 2")


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure one patch of one frame in one channel.

    Raises:
        MeasurementRefused: The patch as a whole cannot be measured.
    """
    _refuse_clipped(sample)
    lattices = lattices_of(sample.crop)
    start = (sample.found.geometry["frequency_x"], sample.found.geometry["frequency_y"])
    _refuse_undersampled(sample.crop, start)
    try:
        fit = fit_grating(lattices, start, background=options.background)
    except GratingLost as lost:
        raise MeasurementRefused("another scene", f"the stripes have no single frequency: {lost}") from lost
    _refuse_strange(fit, lattices)
    profile, area = _profile(sample, fit, lattices), _spectrum(sample, fit, lattices)
    whole = _rounding(sample.crop, fit, lattices)
    return Measurement(tuple(_readings(sample, fit, whole, options)), (profile,), (area,))


def lattices_of(crop: Crop) -> list[Lattice]:
    """Return a crop's own pixels as rectangular lattices, coordinates from the crop's centre."""
    rows, columns = crop.signal.shape
    x, y = np.arange(columns) - (columns - 1) / 2, np.arange(rows) - (rows - 1) / 2
    if crop.sites is None:
        return [Lattice(crop.signal, x, y)]
    return [Lattice(crop.signal[i::2, j::2], x[j::2], y[i::2]) for i in (0, 1) for j in (0, 1) if crop.sites[i, j]]


def _refuse_clipped(sample: Sample) -> None:
    codes = sample.crop.codes if sample.crop.sites is None else sample.crop.codes[sample.crop.sites]
    # without a black level code 0 may be an ordinary one, but troughs that are cut there look the same
    at_end = (codes >= sample.camera.white_level) | ((codes <= 0) if sample.camera.black_level > 0 else (codes == 0))
    share = float(np.mean(at_end))
    if share > MOST_CLIPPED:
        sentence = f"{100 * share:.2f} % of the patch's pixels lie at an end of the range, at most 0.1 % may"
        raise MeasurementRefused("clipped", sentence)


def _refuse_undersampled(crop: Crop, frequency: tuple[float, float]) -> None:
    """Refuse too few periods, and a frequency that the channel's own pixels fold onto its mirror image."""
    rows, columns = crop.codes.shape
    periods = abs(frequency[0]) * columns + abs(frequency[1]) * rows
    if periods < LEAST_PERIODS:
        sentence = f"{periods:.1f} periods lie in the patch, at least {LEAST_PERIODS:g} are needed"
        raise MeasurementRefused("too few crossings", sentence)
    steps = [(1, 0), (0, 1)]
    if crop.sites is not None:  # the nearest green neighbours lie diagonally, those of red and blue two px away
        steps = [(1, 1), (1, -1)] if crop.sites[:2, :2].sum() == 2 else [(2, 0), (0, 2)]
    far = []
    for across, down in steps:  # a wave and its mirror image are one where half turns come out whole along both steps
        turns = 2 * (frequency[0] * across + frequency[1] * down)
        number = min(columns / abs(across) if across else np.inf, rows / abs(down) if down else np.inf)
        far.append((turns - round(turns)) * number)
    if hypot(*far) < LEAST_APART:
        sentence = (
            f"at {hypot(*frequency):.4f} cy/px the stripes lie {hypot(*far):.1f} periods over the patch from the limit "
            f"of sampling, at least {LEAST_APART:g} are needed"
        )
        raise MeasurementRefused("undersampled", sentence)


def _refuse_strange(fit: GratingFit, lattices: list[Lattice]) -> None:
    if fit.bend > MOST_BENT:
        sentence = (
            f"the stripes bend over the patch by {fit.bend / (2 * np.pi):.2f} of a period rms, at most "
            f"{MOST_BENT / (2 * np.pi):.2f} may: take a smaller region"
        )
        raise MeasurementRefused("outside the estimator's limits", sentence)
    amplitude = abs(fit.amplitudes[0])
    if fit.level <= 0 or amplitude < 5 * fit.amplitude_u[0]:
        found = 100 * amplitude / abs(fit.level or 1)
        sentence = f"the modulation is {found:.2f} %, less than five times its uncertainty"
        raise MeasurementRefused("no modulation", sentence)
    fine = sum(_fine_power(one) * one.values.size for one in lattices) / fit.count
    strange = max(0.0, fit.noise**2 - fine) / (amplitude**2 / 2)
    if strange > MOST_STRANGE:
        sentence = (
            f"stripes explain the patch badly: what is left has {100 * strange:.0f} % of their power, "
            f"at most {100 * MOST_STRANGE:g} % may"
        )
        raise MeasurementRefused("another scene", sentence)


def _fine_power(lattice: Lattice) -> float:
    """Return the variance of pixel noise from second differences, which a slow scene hardly enters."""
    rows, columns = lattice.values.shape
    if columns < 3:
        return 0.0
    total: float = 0.0
    height = max(1, STRIP // columns)
    for y in range(0, rows, height):  # pieces stay in a processor's cache
        strip = lattice.values[y : y + height]
        bend = strip[:, 1:-1] * -2.0
        bend += strip[:, 2:]
        bend += strip[:, :-2]
        total += float(np.vdot(bend, bend))
    return total / (6 * int(rows * (columns - 2)))


def _rounding(crop: Crop, fit: GratingFit, lattices: list[Lattice]) -> Rounding:
    """Return what rounding to whole codes leaves; nothing, where the codes are no whole numbers."""
    if crop.codes.dtype.kind not in "ui":
        return Rounding(0.0, 0.0, np.zeros((2, 2)), np.zeros(len(fit.amplitudes)))
    codes = np.arange(float(crop.codes.max()) + 2)
    return rounding(fit, lattices, codes, linearise(codes, crop.camera))


def _readings(sample: Sample, fit: GratingFit, whole: Rounding, options: Options) -> list[Reading]:
    amplitude, u_amplitude = abs(fit.amplitudes[0]), float(fit.amplitude_u[0])
    modulation = amplitude / fit.level
    u = modulation * sqrt((u_amplitude / amplitude) ** 2 + (fit.level_u / fit.level) ** 2)
    fx, fy = fit.frequency
    f = hypot(fx, fy)
    along, across = np.array([fx, fy]) / f, np.array([-fy, fx]) / f
    u_f, u_turn = (sqrt(float(v @ fit.frequency_cov @ v)) for v in (along, across))
    sign = -1.0 if fx < 0 or (fx == 0 and fy < 0) else 1.0  # one of two opposite normals, so that it is within ±90°
    phase, direction = degrees(sign * float(np.angle(fit.amplitudes[0]))), degrees(atan2(sign * fy, sign * fx))
    code_f, code_turn = (sqrt(float(v @ whole.frequency @ v)) for v in (along, across))
    lost = LOST * fit.lost
    more = (*_bias(100 * hypot(BIAS, lost) * modulation), *_whole_codes(100 * whole.modulation * modulation))
    turned = _whole_codes(degrees(code_turn / f))
    made = [
        _reading(sample, "modulation", "%", 100 * modulation, 100 * u, more),
        _transfer(sample, modulation, u, hypot(BIAS, lost), whole, options),
        _reading(sample, "grating_frequency", "cy/px", f, u_f, _whole_codes(code_f)),
        _reading(sample, "grating_direction", "deg", direction, degrees(u_turn / f), turned),
        _reading(sample, "grating_phase", "deg", phase, degrees(fit.phase_u), _whole_codes(degrees(whole.phase))),
    ]
    for order, name in ((2, "second_harmonic"), (3, "third_harmonic")):
        made.append(_harmonic(sample, name, order, fit, float(whole.harmonics[order - 1])))
    return made


def _whole_codes(u: float) -> tuple[Component, ...]:
    return (Component("rounding", u, "B"),) if u > 0 else ()


def _transfer(sample: Sample, modulation: float, u: float, bias: float, whole: Rounding, options: Options) -> Reading:
    if not isinstance(options.target_modulation, float):
        because = "the spec does not state the target's own modulation: grating response: {target_modulation: …}"
        return _refused(sample, "modulation_transfer", "1", Refusal("not defined", because))
    own, own_u = options.target_modulation, float(options.target_modulation_uncertainty)
    value = modulation / own
    chart = Component("target's modulation", value * own_u / own, "B", shared="target's modulation")
    more = (*_bias(bias * value), *_whole_codes(whole.modulation * value), chart)
    return _reading(sample, "modulation_transfer", "1", value, u / own, more)


def _harmonic(sample: Sample, name: str, order: int, fit: GratingFit, whole: float) -> Reading:
    size, u = abs(fit.amplitudes[order - 1]), float(fit.amplitude_u[order - 1])
    if not np.isfinite(size):
        because = f"the pixels' grid folds {order} times the frequency onto another term"
        return _refused(sample, name, "%", Refusal("undersampled", because))
    first = abs(fit.amplitudes[0])
    # A modulus is never negative, so noise alone makes it positive: its mean square is taken off, down to zero.
    value = sqrt(max(0.0, size**2 - u**2 - whole**2)) / first
    return _reading(sample, name, "%", 100 * value, 100 * u / first, _whole_codes(100 * whole / first))


def _bias(u: float) -> tuple[Component, ...]:
    return (Component("method bias", u, "B"),)


def _reading(
    sample: Sample, name: str, unit: str, value: float, noise: float, more: tuple[Component, ...] = ()
) -> Reading:
    parts = (Component("noise", noise, "A", averages=True), *more)
    u = sqrt(sum(part.u**2 for part in parts))
    return Reading(sample.found.region, name, unit, float(value), u, parts, estimator=ESTIMATOR, method=REFERENCES[0])


def _refused(sample: Sample, name: str, unit: str, refusal: Refusal) -> Reading:
    return Reading(sample.found.region, name, unit, None, None, estimator=ESTIMATOR, refusal=refusal)


def _profile(sample: Sample, fit: GratingFit, lattices: list[Lattice]) -> Curve:
    """Return the light over one period, means of 48 bins of phase, as a picture of the sine."""
    bins = 48
    total, number = np.zeros(2 * bins), np.zeros(2 * bins)
    start = float(np.angle(fit.amplitudes[0])) / (2 * np.pi)
    for one in lattices:
        across, down = (bins * (f * r % 1.0) for f, r in zip(fit.frequency, (one.x, one.y), strict=True))
        down = (down + bins * start) % bins
        height = max(1, STRIP // one.x.size)
        for y in range(0, one.y.size, height):
            at = (across[None, :] + down[y : y + height, None]).astype(np.intp).ravel()  # both lie in the first period
            total += np.bincount(at, one.values[y : y + height].ravel(), 2 * bins)
            number += np.bincount(at, minlength=2 * bins)
    total, number = (sums[:bins] + sums[bins:] for sums in (total, number))
    there = number > 0
    centres = (np.arange(bins) + 0.5) / bins
    light = total[there] / number[there]
    u = fit.noise / np.sqrt(number[there])
    return Curve(
        sample.found.region,
        "stripe profile",
        tuple(float(v) for v in centres[there]),
        tuple(float(v) for v in light),
        tuple(float(v) for v in u),
        "period",
        "1",
        estimator=ESTIMATOR,
    )


def _spectrum(sample: Sample, fit: GratingFit, lattices: list[Lattice]) -> Map:
    """Return the patch's spectrum in dB below the mean's line, with that line and the sine's two marked."""
    one = lattices[0]
    pitch = float(one.x[1] - one.x[0])
    x, y, decibels = picture(one.values, pitch, MAP_SIZE)
    fx, fy = fit.frequency
    marks = [(0.0, 0.0, "DC"), (fx, fy, "+f"), (-fx, -fy, "-f")]
    reach = 0.5 / pitch
    return Map(
        sample.found.region,
        "spectrum",
        tuple(round(float(v), 5) for v in x),
        tuple(round(float(v), 5) for v in y),
        tuple(tuple(round(float(v), 1) for v in row) for row in np.maximum(decibels, DEEPEST)),
        "cy/px",
        "dB",
        tuple(mark for mark in marks if max(abs(mark[0]), abs(mark[1])) <= reach),
    )
