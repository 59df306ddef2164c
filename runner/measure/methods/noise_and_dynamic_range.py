"""Noise, signal-to-noise ratio and dynamic range of a camera from repeated frames of grey steps.

Noise is taken in codes, in every step by itself: temporal noise from what changes between frames, the fixed pattern
from what stays, a shading of second order taken off. What it means in light follows from the slope of the conversion
function at that step: the ratio is L g / σ, with g the codes to a change of light. So it holds for any tone.

The dynamic range is the light that reaches the white level over the light at which the temporal ratio is 1. The noise
in black is that of the companion `dark`, else that of the darkest step.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import hypot, log, sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Box, Crop
from runner.errors import MeasurementRefused
from runner.measure import planes
from runner.measure.contract import Measurement, QuantityInfo, Sample, Wanted
from runner.measure.methods.tone_response import LEAST_STEPS, steps_of
from runner.measure.numerics.stack_noise import Spread, StackNoise, stack_noise
from runner.measure.numerics.tone_curve import ToneCurve, tone_curve
from runner.measure.options import number, read_record
from runner.measure.patch_levels import part
from runner.measure.reading import Component, Curve, Reading, Refusal
from runner.spec.model import Tone

Real = NDArray[np.float64]

NAME = "noise and dynamic range"
TITLE = "Noise and dynamic range"
GROUP = "tone and colour"
TOGETHER = True
NEEDS = frozenset({"grey steps"})
REFERENCES = (
    "ISO 15739:2023, 6.2 (noise), 6.3 (signal-to-noise ratios), 6.4 (dynamic range)",
    "ISO 14524:2009 (opto-electronic conversion function)",
    "EMVA Standard 1288 Release 4.0 Linear (2021), quantisation limit of temporal noise",
    "JCGM 100:2008 (uncertainty)",
)
ESTIMATOR = "mean squares"

LEAST_FRAMES, ISO_FRAMES = 2, 8
"""Frames that tell temporal noise at all, and those that ISO 15739 asks for."""
SHADING_ORDER = 2
"""Order of the polynomial that is no fixed pattern of a patch."""
QUANTISED = sqrt(0.24)
"""Temporal noise below so many codes is mostly that of rounding, and only bounded (EMVA 1288: 0.24 DN²)."""
MOST_DRIFT = 0.05
"""Change of the light from frame to frame: with more, they are not frames of one scene."""
LIT = 0.01
"""Level of a step, share of the range, above which a frame's light departs as a factor, else as an offset."""
LEAST_REACH = 0.5
"""Code of the brightest step, share of the range: from a darker one the light of saturation is not told."""
DECIBEL = 20 / log(10)

_KINDS = {"temporal": "temporal", "fixed_pattern": "fixed", "total": "total"}
_AT = {"level": "%"}
_QUANTITIES: Mapping[str, QuantityInfo] = {
    "temporal_noise_iso15739": QuantityInfo(
        "DN", "Standard deviation of a pixel from frame to frame, at a light (`level`, as the chart states it).", _AT
    ),
    "fixed_pattern_noise_iso15739": QuantityInfo("DN", "Standard deviation over pixels of what stays.", _AT),
    "total_noise_iso15739": QuantityInfo("DN", "Both together, root of the sum of squares.", _AT),
    "snr_temporal_iso15739": QuantityInfo("dB", "Light times slope of the curve over temporal noise, 20 log10.", _AT),
    "snr_fixed_pattern_iso15739": QuantityInfo("dB", "The same over fixed-pattern noise.", _AT),
    "snr_total_iso15739": QuantityInfo("dB", "The same over total noise.", _AT),
    "dynamic_range_iso15739": QuantityInfo(
        "dB", "Light at the white level over the light at which temporal signal-to-noise is 1, 20 log10."
    ),
    "dynamic_range_ev_iso15739": QuantityInfo("EV", "The same ratio as powers of two."),
}


@dataclass(frozen=True)
class Options:
    """How noise is measured."""

    light_uncertainty: float | str = field(
        default=0.0, metadata={"sentence": "Standard uncertainty of each step's light, as a share of it, e.g. 1 %."}
    )
    clipped_steps: int = field(
        default=0,
        metadata={"sentence": "Steps that may lie at an end of the range; they are left out. More refuse the chart."},
    )

    def __post_init__(self) -> None:
        """Turn the share into a number and keep each option inside its meaning."""
        object.__setattr__(
            self, "light_uncertainty", number("light_uncertainty", self.light_uncertainty, "%", 0.0, 0.3)
        )
        count = self.clipped_steps
        if isinstance(count, bool) or not isinstance(count, int) or not 0 <= count <= 100:
            raise ValueError(f"clipped_steps is {count!r}; allowed are whole numbers from 0 to 100")


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


@dataclass(frozen=True)
class _Steps:
    """Noise of every step, in rising order of light."""

    lights: Real
    """Relative light."""
    noise: tuple[StackNoise, ...]
    """Noise in codes."""
    curve: ToneCurve
    """Codes over light."""
    counts: tuple[int, ...]
    """Pixels of each."""

    def of(self, step: int, kind: str) -> Spread:
        """Return one kind of a step's noise, as that of its light and not of these pixels alone."""
        return _of(self.noise[step], kind, self.counts[step])


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure all frames of a capture in one channel.

    Raises:
        MeasurementRefused: Too few frames, clipped or uneven steps, frames that are the same or whose light changes.
    """
    if len(sample.frames) < LEAST_FRAMES:
        raise MeasurementRefused(
            "too few frames",
            f"{len(sample.frames)} frame does not tell what changes from what stays",
            allowed=f"{LEAST_FRAMES} frames of the same scene at least, ISO 15739 asks for {ISO_FRAMES}",
            next_step="capture more, one after another",
        )
    steps = _steps(sample, options)
    flags: tuple[str, ...] = ()
    if len(sample.frames) < ISO_FRAMES:
        flags = (f"{len(sample.frames)} frames, ISO 15739 asks for {ISO_FRAMES}",)
    readings = [replace(_at(sample, steps, wanted), flags=flags) for wanted in sample.wanted if "level" in wanted.at]
    readings += [replace(r, flags=(*r.flags, *flags)) for r in _dynamic_range(sample, steps)]
    return Measurement(tuple(readings), tuple(_curves(sample, steps)))


def _steps(sample: Sample, options: Options) -> _Steps:
    levels, lights, boxes = steps_of(sample, options.clipped_steps)
    _refuse_drift(sample, boxes[int(np.argmax([level.code for level in levels]))])
    span = sample.camera.white_level - sample.camera.black_level
    order = np.argsort(lights, kind="stable").tolist()
    noise = tuple(_noise(sample.frames, boxes[n], lit=levels[n].code > LIT * span) for n in order)
    if all(one.temporal.total.value == 0 for one in noise):
        raise MeasurementRefused(
            "no picture", f"all {len(sample.frames)} frames are the same: there is no noise at all"
        )
    codes = np.array([one.level for one in noise])
    pattern = [(one.fixed.total.value or 0.0) / sqrt(levels[n].count) for n, one in zip(order, noise, strict=True)]
    u = np.array([hypot(one.level_u, of) for one, of in zip(noise, pattern, strict=True)])
    try:
        curve = tone_curve(lights[order], codes, u, float(options.light_uncertainty))
    except ValueError as few:
        raise MeasurementRefused("too dark", str(few)) from few
    if len(curve.light) < LEAST_STEPS:
        found = f"{len(curve.light)} steps rise above one another and above black"
        raise MeasurementRefused("too dark", found, allowed=f"{LEAST_STEPS} at least")
    return _Steps(lights[order], noise, curve, tuple(levels[n].count for n in order))


def _plain(crop: Crop) -> Crop:
    """Return a crop whose codes are taken as they are."""
    return replace(crop, camera=replace(crop.camera, tone=Tone()))


def _noise(frames: Sequence[Crop], box: Box, *, lit: bool) -> StackNoise:
    """Return the noise of one patch in codes."""
    stack = planes.stack([_plain(part(frame, box)) for frame in frames])
    kinds = 2 if stack.grid.shift else 1
    try:
        return stack_noise(
            stack.frames, black=stack.camera.black_level, shading_order=SHADING_ORDER, gain_drift=lit, kinds=kinds
        )
    except ValueError as error:
        found = f"the clear middle of a patch has {stack.shape[0]} rows and {stack.shape[1]} columns of its own"
        step = "go nearer, or make the margin smaller"
        raise MeasurementRefused("outside the estimator's limits", f"{found}: {error}", next_step=step) from error


def _refuse_drift(sample: Sample, box: Box) -> None:
    """Refuse frames whose brightest step changes: a lamp that is off or warms up, an exposure that settles."""
    black = sample.camera.black_level
    parts = [_own(part(frame, box)) for frame in sample.frames]
    levels = [float(of.mean(dtype=np.float64)) - black for of in parts]
    middle = float(np.median(levels))
    noise = 4 * float(parts[0].std(dtype=np.float64)) / sqrt(parts[0].size) / max(abs(middle), 1e-9)
    off = [abs(level / middle - 1) if middle else 0.0 for level in levels]
    worst = int(np.argmax(off))
    if off[worst] > MOST_DRIFT + noise:
        found = f"the brightest step lies {100 * off[worst]:.0f} % off that of the other frames"
        allowed = f"at most {100 * MOST_DRIFT:g} % may"
        cause = "too dark" if levels[worst] < middle else "too bright"
        step = "let lamp and exposure settle, and capture again"
        raise MeasurementRefused(cause, found, where=sample.frames[worst].file, allowed=allowed, next_step=step)


def _own(crop: Crop) -> NDArray[Any]:
    return np.asarray(crop.codes if crop.sites is None else crop.codes[crop.sites])


# ---- at a level


def _at(sample: Sample, steps: _Steps, wanted: Wanted) -> Reading:
    blank = replace(_blank(sample, wanted.quantity), parameters=wanted.parameters, part=wanted.part)
    light, lights = wanted.at["level"] / 100, steps.lights
    low, high = max(float(lights[0]), float(steps.curve.light[0])), float(lights[-1])
    if not low * (1 - 1e-6) <= light <= high * (1 + 1e-6):
        because = f"the steps reach from {100 * low:.3g} % to {100 * high:.3g} % of light, not to {100 * light:.3g} %"
        return replace(blank, refusal=Refusal("outside the estimator's limits", because))
    ratio = wanted.quantity.startswith("snr_")
    kind = wanted.quantity.removeprefix("snr_").removesuffix("_iso15739").removesuffix("_noise")
    noise = _between(steps, kind, light)
    if not ratio:
        if noise.value is None or noise.u is None:
            return replace(blank, bound=("below", noise.bound or 0.0))
        return _reading(blank, noise.value, {"noise": noise.u})
    signal = steps.curve.signal_at(light)
    if signal.value <= 0:
        return replace(blank, refusal=Refusal("not defined", "the curve does not rise at this light"))
    if noise.value is None or noise.u is None:
        return replace(blank, bound=("above", DECIBEL * log(signal.value / max(noise.bound or 0.0, 1e-9))))
    if noise.value <= 0:
        return replace(blank, refusal=Refusal("not defined", "the noise is zero to the last digit"))
    parts = {"noise": noise.u / noise.value, "signal": signal.noise / signal.value}
    parts |= {"light of the steps": signal.light / signal.value, "curve between steps": signal.shape / signal.value}
    return _reading(blank, DECIBEL * log(signal.value / noise.value), {n: DECIBEL * u for n, u in parts.items()})


def _between(steps: _Steps, kind: str, light: float) -> Spread:
    """Return one kind of noise at a light: between steps its logarithm follows a straight line in that of light."""
    lights = steps.lights
    after = int(np.clip(np.searchsorted(lights, light * (1 - 1e-6)), 0, len(lights) - 1))
    one = steps.of(after, kind)
    if after == 0 or lights[after] <= light * (1 + 1e-6) or lights[after] <= lights[after - 1]:
        return one
    other = steps.of(after - 1, kind)
    share = log(light / lights[after - 1]) / log(lights[after] / lights[after - 1])
    if not (one.value and other.value and one.u is not None and other.u is not None):
        ends = [of.bound if of.value is None else of.value + 2 * (of.u or 0.0) for of in (one, other)]
        return Spread(None, None, max(end or 0.0 for end in ends))
    value = one.value**share * other.value ** (1 - share)
    u = value * hypot(share * one.u / one.value, (1 - share) * other.u / other.value)
    return Spread(value, u)


def _of(noise: StackNoise, kind: str, count: int) -> Spread:
    """Return one kind of a step's noise; temporal noise that rounding hides is only bounded.

    Args:
        noise: The step's.
        kind: `temporal`, `fixed_pattern` or `total`.
        count: Its pixels: another part of the sensor under the same light has a pattern that differs by √(2 / count).
    """
    temporal, fixed = noise.temporal.total, noise.fixed.total
    if kind == "temporal":
        hidden = temporal.value is not None and temporal.value < QUANTISED
        return Spread(None, None, QUANTISED) if hidden else temporal
    of = fixed if kind == "fixed_pattern" else noise.total
    if not of.value or of.u is None or fixed.value is None:
        return of
    return Spread(of.value, hypot(of.u, fixed.value**2 / of.value / sqrt(2 * count)))


# ---- dynamic range


def _dynamic_range(sample: Sample, steps: _Steps) -> Iterator[Reading]:
    camera = sample.camera
    span = camera.white_level - camera.black_level
    names = ("dynamic_range_iso15739", "dynamic_range_ev_iso15739")
    units = (DECIBEL, 1 / log(2))
    reach = float(steps.curve.code[-1]) / span
    if reach < LEAST_REACH:
        because = f"the brightest step reaches {100 * reach:.0f} % of the range, {100 * LEAST_REACH:g} % is needed"
        for name in names:
            yield replace(_blank(sample, name), refusal=Refusal("too dark", because))
        return
    black, words = _black(sample, steps)
    saturation, rise = steps.curve.light_at(span), steps.curve.rise_from_dark()
    strength = saturation.value * rise.value
    relative = {
        name: hypot(saturation_u / saturation.value, rise_u / rise.value)
        for name, saturation_u, rise_u in (
            ("signal", saturation.noise, rise.noise),
            ("light of the steps", saturation.light, rise.light),
            ("curve beyond the steps", saturation.shape, rise.shape),
        )
    }
    for name, unit in zip(names, units, strict=True):
        blank = replace(_blank(sample, name), flags=(words,))
        if black.value is None or black.u is None or black.value <= 0:
            yield replace(blank, bound=("above", unit * log(strength / max(black.bound or 0.0, 1e-9))))
            continue
        parts = {"noise": black.u / black.value} | relative
        yield _reading(blank, unit * log(strength / black.value), {n: unit * u for n, u in parts.items()})


def _black(sample: Sample, steps: _Steps) -> tuple[Spread, str]:
    """Return the temporal noise in black, and where it comes from."""
    if "dark" in sample.lost_companions:
        found = f"the dark frames of '{sample.lost_companions['dark']}' cannot be used"
        raise MeasurementRefused("missing companion", found)
    darks = sample.companions.get("dark", ())
    if len(darks) < LEAST_FRAMES:
        light = 100 * float(steps.lights[0])
        words = f"the noise in black is that of the darkest step, {light:.3g} % of light"
        return steps.of(0, "temporal"), words
    whole = _noise(darks, darks[0].box, lit=False)
    return _of(whole, "temporal", 1), f"the noise in black is that of {len(darks)} dark frames"


# ---- curves and readings


def _curves(sample: Sample, steps: _Steps) -> Iterator[Curve]:
    """Yield noise and total signal-to-noise over light, at the steps where they have values."""
    for kind in ("temporal", "fixed_pattern", "total"):
        told = [(x, of) for n, x in enumerate(steps.lights) if (of := steps.of(n, kind)).value is not None]
        rows = [(float(x), float(of.value or 0.0), float(of.u or 0.0)) for x, of in told]
        yield _curve(sample, f"{kind.replace('_', '-')} noise", rows, "DN")
    rows = []
    signals = np.where(steps.lights >= steps.curve.light[0], steps.curve.signals(steps.lights), 0.0)
    for x, signal, noise in zip(steps.lights, signals, steps.noise, strict=True):
        total = noise.total
        if total.value and total.u is not None and signal > 0:
            rows.append((float(x), DECIBEL * log(signal / total.value), DECIBEL * total.u / total.value))
    yield _curve(sample, "snr total", rows, "dB")


def _curve(sample: Sample, name: str, rows: Sequence[tuple[float, float, float]], unit: str) -> Curve:
    x, y, u = (tuple(float(f"{row[n]:.6g}") for row in rows) for n in range(3))
    return Curve(sample.found.region, name, x, y, u, "1", unit, estimator=ESTIMATOR)


def _blank(sample: Sample, name: str) -> Reading:
    unit = _QUANTITIES[name].unit
    return Reading(sample.found.region, name, unit, None, None, estimator=ESTIMATOR, method=REFERENCES[0])


def _reading(blank: Reading, value: float, parts: Mapping[str, float]) -> Reading:
    kinds = {"noise": "A", "signal": "A"}
    shared = {"light of the steps": "grey steps"}
    told = tuple(Component(n, u, kinds.get(n, "B"), shared=shared.get(n)) for n, u in parts.items() if u > 0)
    return replace(blank, value=value, u=sqrt(sum(c.u**2 for c in told)), components=told)
