"""Transfer of fine texture: a known stochastic pattern against its picture, frames' noise left out.

The pattern is drawn again from its numbers (`numerics.random_pattern`), found in the picture by registration, and their
spectra are compared wave by wave (`numerics.texture_spectrum`). Noise reduction that keeps edges and smears texture
reads low here and high on an edge.

`texture_acutance` weights the transfer by the contrast sensitivity 75 ν^0.8 exp(-0.2 ν) / 34.05, ν in cycles per degree
of the viewer's field (constants of ISO/TS 19567-2 and IEEE Std 1858, from memory), from 0 to half a cycle per px.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Crop
from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample, Wanted
from runner.measure.numerics import random_pattern
from runner.measure.numerics.pattern_view import Pattern, PatternLost, View, register, start_view
from runner.measure.numerics.texture_spectrum import (
    Spectra,
    Transfer,
    cross_transfer,
    direct_transfer,
    even_light,
    spectra,
)
from runner.measure.options import lookups, number, reader
from runner.measure.reading import Component, Curve, Reading, Refusal

NAME = "texture response"
TITLE = "Texture response"
GROUP = "transfer function"
NEEDS = frozenset({"texture"})
TOGETHER = True
REFERENCES = (
    "ISO/TS 19567-2:2019 (texture analysis using stochastic patterns)",
    "J. S. Bendat and A. G. Piersol, Random Data (2010), 9",
    "JCGM 100:2008 (uncertainty)",
)
PATTERNS = ("dead leaves", "noise")
ESTIMATORS = ("cross", "direct")

MOST_CLIPPED = 0.001
"""Share of pixels at an end of the range."""
MOST_UNEVEN = 0.3
"""Change of the light over the region that a polynomial may take off."""
BIAS = 0.003
"""Bound on a transfer's error without noise: registration, interpolation and the slope inside a band of waves."""
STEP = 0.02
"""cy/px from point to point of the curve."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "texture_mtf": QuantityInfo(
        "1", "Transfer of texture, mean over all directions.", {"frequency": "cy/px"}, ceiling=True, least=0.0
    ),
    "texture_mtf50": QuantityInfo("cy/px", "Lowest frequency at which it falls to 50 %.", least=0.0),
    "texture_acutance": QuantityInfo(
        "1", "Transfer of texture weighted by the eye's contrast sensitivity; needs pixels_per_degree.", least=0.0
    ),
}


@dataclass(frozen=True)
class Options:
    """Which pattern it is, and how it is read."""

    pattern: str = field(default="dead leaves", metadata={"sentence": "dead leaves, or noise."})
    seed: int = field(default=1, metadata={"sentence": "Number that its random numbers start from."})
    cells: int = field(default=512, metadata={"sentence": "Cells along each side of the square."})
    side: float | str | None = field(
        default=None, metadata={"sentence": "Side of the square on the chart, e.g. 60 mm; with a chart that is found."}
    )
    cells_per_px: float | None = field(
        default=None, metadata={"sentence": "About how many cells lie under a pixel; without a chart that is found."}
    )
    slope: float = field(default=1.8, metadata={"sentence": "Of noise: its power falls as frequency to minus this."})
    smallest: float = field(default=2.0, metadata={"sentence": "Of dead leaves: least radius, cells."})
    largest: float | None = field(
        default=None,
        metadata={"sentence": "Of dead leaves: greatest radius, cells; a quarter of the side if not said."},
    )
    low: float | str = field(default=0.1, metadata={"sentence": "Least reflectance, e.g. 10 %."})
    high: float | str = field(default=0.9, metadata={"sentence": "Greatest reflectance, e.g. 90 %."})
    estimator: str = field(
        default="cross", metadata={"sentence": "cross: what follows the pattern; direct: all that frames share."}
    )
    pixels_per_degree: float | None = field(
        default=None, metadata={"sentence": "Pixels to a degree of the viewer's field, for texture_acutance."}
    )

    def __post_init__(self) -> None:
        """Keep each option inside its meaning."""
        for name, allowed in (("pattern", PATTERNS), ("estimator", ESTIMATORS)):
            if getattr(self, name) not in allowed:
                raise ValueError(f"{name} is {getattr(self, name)!r}; allowed are {' and '.join(allowed)}")
        for name, first, last in (("seed", 0, 2**32 - 1), ("cells", 64, 4096)):
            value = getattr(self, name)
            if isinstance(value, bool) or not isinstance(value, int) or not first <= value <= last:
                raise ValueError(f"{name} is {value!r}; allowed are whole numbers from {first} to {last}")
        for name in ("low", "high"):
            object.__setattr__(self, name, number(name, getattr(self, name), "%", 0.0, 1.0))
        object.__setattr__(self, "slope", number("slope", self.slope, "", 0.0, 4.0))
        object.__setattr__(self, "smallest", number("smallest", self.smallest, "", 1.0, 100.0))
        largest = self.cells / 4 if self.largest is None else self.largest
        object.__setattr__(self, "largest", number("largest", largest, "", 2.0, float(self.cells)))
        if float(self.low) >= float(self.high) or self.smallest >= float(self.largest or 0):
            raise ValueError("low lies below high, and smallest below largest")
        if self.side is not None:
            object.__setattr__(self, "side", number("side", self.side, "mm", 0.1, 1e5))
        for name, most in (("cells_per_px", 4.0), ("pixels_per_degree", 1000.0)):
            if getattr(self, name) is not None:
                object.__setattr__(self, name, number(name, getattr(self, name), "", 0.05, most))


@dataclass(frozen=True)
class _Seen:
    """Spectra of one lattice of pixels, and its pitch in px of the frame."""

    given: Spectra
    """Spectra of all frames and of the pattern."""
    pitch: int
    """px of the frame from one pixel of the lattice to the next."""


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def pattern_of(options: Options) -> Pattern:
    """Return the pattern as it is drawn."""
    low, high = float(options.low), float(options.high)
    if options.pattern == "noise":
        return Pattern(random_pattern.noise(options.seed, options.cells, options.slope, low, high))
    leaves = random_pattern.dead_leaves(
        options.seed, options.cells, options.smallest, float(options.largest or 0), low, high
    )
    return Pattern(leaves)


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure one region over all frames of the capture, in one channel.

    Raises:
        MeasurementRefused: The region is clipped, uneven, or shows another scene.
    """
    _refuse_clipped(sample)
    if options.estimator == "direct" and len(sample.frames) < 2:
        found = f"the direct form takes noise off by several frames, the capture holds {len(sample.frames)}"
        raise MeasurementRefused("too few frames", found)
    pattern = pattern_of(options)
    seen = [_spectra(sample, options, pattern, places) for places in _lattices(sample.crop)]
    places = np.arange(STEP, 0.5 / seen[0].pitch, STEP)
    curve = [one for f in places if (one := _at(seen, float(f), options)) is not None]
    if len(curve) < 3:
        raise MeasurementRefused("outside the estimator's limits", "the region is too small for a transfer function")
    at = places[len(places) - len(curve) :]
    drawn = Curve(
        sample.found.region,
        "texture mtf",
        tuple(float(f) for f in at),
        tuple(float(one.value) for one in curve),
        tuple(float(one.u) for one in curve),
        "cy/px",
        "1",
        estimator=options.estimator,
    )
    return Measurement(tuple(_readings(sample, options, seen, at, curve)), (drawn,))


def _refuse_clipped(sample: Sample) -> None:
    for crop in sample.frames:
        codes = crop.codes if crop.sites is None else crop.codes[crop.sites]
        low = 0 if crop.camera.black_level > 0 else -1
        share = float(np.mean((codes >= crop.camera.white_level) | (codes <= low)))
        if share > MOST_CLIPPED:
            found = f"{crop.file}: {100 * share:.2f} % of the region's pixels lie at an end of the range, 0.1 % may"
            raise MeasurementRefused("clipped", found)


def _lattices(crop: Crop) -> list[tuple[int, int, int]]:
    """Return first row, first column and pitch of the lattices that a channel's pixels make."""
    if crop.sites is None:
        return [(0, 0, 1)]
    return [(i, j, 2) for i in (0, 1) for j in (0, 1) if crop.sites[i, j]]


def _spectra(sample: Sample, options: Options, pattern: Pattern, places: tuple[int, int, int]) -> _Seen:
    row, column, pitch = places
    pictures = [np.ascontiguousarray(crop.signal[row::pitch, column::pitch]) for crop in sample.frames]
    mean = np.asarray(sum(pictures) / len(pictures))
    start, search = _start(sample, options, pattern, (mean.shape[1], mean.shape[0]), pitch)
    try:
        view = register(mean, pattern, start, search=search)
    except PatternLost as lost:
        raise MeasurementRefused("another scene", str(lost)) from lost
    light = even_light(mean, pattern, view)
    change = float(np.ptp(light)) / float(light.mean())
    if change > MOST_UNEVEN:
        found = f"the light changes by {100 * change:.0f} % over the region, at most {100 * MOST_UNEVEN:g} % may"
        raise MeasurementRefused("uneven", found)
    return _Seen(spectra([one / light for one in pictures], pattern, view), pitch)


def _start(sample: Sample, options: Options, pattern: Pattern, size: tuple[int, int], pitch: int) -> tuple[View, bool]:
    """Return where the pattern is believed to lie, and whether turns and scales around must be tried."""
    box, pose = sample.found.box, sample.found.pose
    if pose is None or options.side is None:
        if options.cells_per_px is None:
            found = (
                "the pattern's scale is not known: the spec states neither cells_per_px nor a chart with marks and side"
            )
            raise MeasurementRefused("not defined", found)
        return start_view(size, pitch * options.cells_per_px, 0.0, pattern.cells), True
    x, y = (box.x0 + box.x1) / 2, (box.y0 + box.y1) / 2
    at = pose.to_chart(np.array([[x - 1, y], [x + 1, y], [x, y - 1], [x, y + 1]]))
    across, down = (at[1] - at[0]) / 2, (at[3] - at[2]) / 2
    scale = sqrt(abs(across[0] * down[1] - across[1] * down[0])) * pattern.cells / float(options.side)
    return start_view(size, pitch * scale, float(np.arctan2(across[1], across[0])), pattern.cells), False


def _at(seen: Sequence[_Seen], frequency: float, options: Options) -> Transfer | None:
    """Return the transfer at a frequency of the frame, mean of the channel's lattices."""
    read = cross_transfer if options.estimator == "cross" else direct_transfer
    found = [read(one.given, frequency * one.pitch) for one in seen]
    known = [one for one in found if one is not None]
    if len(known) < len(seen):
        return None
    count = len(known)
    return Transfer(
        sum(one.value for one in known) / count,
        sqrt(sum(one.u**2 for one in known)) / count,
        min(one.coherence for one in known),
    )


def _readings(
    sample: Sample, options: Options, seen: Sequence[_Seen], f: NDArray[np.float64], curve: Sequence[Transfer]
) -> list[Reading]:
    asked = {one.quantity for one in sample.wanted}
    wanted = [*sample.wanted, *(Wanted(n, {}, {}) for n in ("texture_mtf50", "texture_acutance") if n not in asked)]
    made = []
    for one in wanted:
        blank = Reading(
            sample.found.region,
            one.quantity,
            _QUANTITIES[one.quantity].unit,
            None,
            None,
            parameters=one.parameters,
            part=one.part,
            estimator=options.estimator,
            method=REFERENCES[0],
        )
        if one.part != "system":
            made.append(_refused(blank, "not defined", "texture gives the transfer of the whole system only"))
        elif one.quantity == "texture_mtf":
            made.append(_mtf(blank, one.at["frequency"], seen, options))
        elif one.quantity == "texture_mtf50":
            made.append(_crossing(blank, f, curve))
        elif options.pixels_per_degree is not None:
            made.append(_acutance(blank, f, curve, float(options.pixels_per_degree)))
        elif one.quantity in asked:
            because = "the spec does not state pixels_per_degree: texture response: {pixels_per_degree: …}"
            made.append(_refused(blank, "not defined", because))
    return made


def _mtf(blank: Reading, frequency: float, seen: Sequence[_Seen], options: Options) -> Reading:
    found = _at(seen, frequency, options) if frequency < 0.5 / seen[0].pitch else None
    if found is None:
        return _refused(blank, "not defined", f"too few waves of {frequency:g} cy/px lie in the region")
    return _valued(blank, found.value, found.u, BIAS / sqrt(3))


def _crossing(blank: Reading, f: NDArray[np.float64], curve: Sequence[Transfer]) -> Reading:
    values = np.array([one.value for one in curve])
    below = np.flatnonzero(values < 0.5)
    if below.size == 0:
        return replace(blank, bound=("above", float(f[-1])))
    i = int(below[0])
    if i == 0:
        return replace(blank, bound=("below", float(f[0])))
    share = (values[i - 1] - 0.5) / (values[i - 1] - values[i])
    slope = (values[i - 1] - values[i]) / (f[i] - f[i - 1])
    u = hypot((1 - share) * curve[i - 1].u, share * curve[i].u) / slope
    return _valued(blank, float(f[i - 1] + share * (f[i] - f[i - 1])), u, BIAS / sqrt(3) / slope)


def _acutance(blank: Reading, f: NDArray[np.float64], curve: Sequence[Transfer], per_degree: float) -> Reading:
    """Integrate by trapezia from 0, where the transfer is 1, to half a cycle per px, where the last value stands."""
    places = np.concatenate([[0.0], f, [0.5]])
    values = np.concatenate([[1.0], [one.value for one in curve], [curve[-1].value]])
    fine = np.linspace(0.0, 0.5, 1001)
    nu = fine * per_degree
    eye = 75 * nu**0.8 * np.exp(-0.2 * nu) / 34.05
    hats = np.array([np.interp(fine, places, row) for row in np.eye(places.size)])
    weights = (hats @ eye) / eye.sum()
    us = np.concatenate([[0.0], [one.u for one in curve], [0.0]])
    own = weights.copy()
    own[-2] += own[-1]
    u = sqrt(2) * float(np.sqrt(np.sum((own[:-1] * us[:-1]) ** 2)))  # neighbouring bands share half of their waves
    return _valued(blank, float(weights @ values), u, BIAS / sqrt(3))


def _valued(blank: Reading, value: float, noise: float, bias: float) -> Reading:
    parts = (Component("noise", noise, "A"), Component("method bias", bias, "B"))
    return replace(blank, value=float(value), u=hypot(noise, bias), components=parts)


def _refused(blank: Reading, cause: str, because: str) -> Reading:
    return replace(blank, refusal=Refusal(cause, because))
