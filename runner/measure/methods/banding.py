"""Bands along the rows or columns of an even field: strongest line of each, its amplitude and frequency.

Each frame is measured by itself, so that bands that move from frame to frame are seen as well as those that stand. The
means of the rows are looked through for lines of bands that run along the rows, the means of the columns for bands that
run along the columns. Where no line stands out of the noise, the amplitude is only bounded, and there is no frequency.

Of a mosaic each channel is sampled coarser: red and blue up to 0.25 cy/px of the frame, above which a band shows at its
mirror frequency. The means of green's columns are taken at every column, those of odd rows between those of even ones;
a difference between the greens beside red and beside blue alternates from row to row, and so does a band of
0.5 cy/px: it is taken off, and that one frequency is not looked at.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from math import exp, pi, sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.measure import planes
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.evenness import refuse_uneven
from runner.measure.numerics.banding import banding
from runner.measure.options import lookups, reader
from runner.measure.reading import Component, Curve, Reading, Refusal

Real = NDArray[np.float64]

NAME = "banding"
TITLE = "Banding along rows and columns"
GROUP = "uniformity and noise"
NEEDS = frozenset({"uniform"})
REFERENCES = (
    "EMVA Standard 1288 Release 4.0 Linear (2021), spectrograms of row and column means",
    "A. Schuster, Terr. Magn. 3 (1898) 13; R. A. Fisher, Proc. R. Soc. A 125 (1929) 54 (significance of a line)",
    "D. C. Rife and R. R. Boorstyn, IEEE Trans. Inf. Theory 20 (1974) 591 (uncertainty of a tone)",
)
ESTIMATOR = "least squares"

MOST_ORDER = 8
"""Highest order of the shading taken off a profile."""
LEAST_VALUES = 32
"""Rows or columns that a profile needs, and four for each order of the shading."""
DITHERED = 0.62
"""Noise of a pixel in codes, rounding's own 1/√12 with it, from which on rounding changes an amplitude by less than
0.4 %: √2 exp(-2π² s²) of it, s the noise before."""
MOST_OPEN = 0.5
"""Share of an amplitude that rounding may leave open: with more, a weak band may be lost altogether."""
BLOCK = 16
"""Width of the blocks whose levels tell how the light is spread over a code."""
MOST_POINTS = 512
"""Points of a curve: each the highest of the ordinates between, so that no line is lost."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "row_banding": QuantityInfo(
        "DN", "Amplitude (half of peak to peak) of the strongest line of bands along the rows."
    ),
    "row_banding_frequency": QuantityInfo("cy/px", "Its frequency, from row to row."),
    "column_banding": QuantityInfo(
        "DN", "Amplitude (half of peak to peak) of the strongest line of bands along the columns."
    ),
    "column_banding_frequency": QuantityInfo("cy/px", "Its frequency, from column to column."),
}


@dataclass(frozen=True)
class Options:
    """How bands are told from shading."""

    shading_order: int = field(
        default=4,
        metadata={
            "sentence": f"Order of the polynomial shading taken off, 0 to {MOST_ORDER}; fewer cycles than that over "
            "the region (at least one) are shading."
        },
    )

    def __post_init__(self) -> None:
        """Keep the order inside its meaning."""
        order = self.shading_order
        if isinstance(order, bool) or not isinstance(order, int) or not 0 <= order <= MOST_ORDER:
            raise ValueError(f"shading_order is {order!r}; allowed are whole numbers from 0 to {MOST_ORDER}")


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure the bands of one frame in one region and channel.

    Raises:
        MeasurementRefused: A frame that is clipped, or one single value.
    """
    frame = planes.stack([sample.crop])
    lit = bool(sample.found.geometry.get("lit", 0.0))
    planes.refuse_clipped(frame, **{"most_high" if lit else "most_low": planes.MOST_CLIPPED})
    refuse_uneven(frame, lit=lit)
    readings: list[Reading] = []
    curves: list[Curve] = []
    whole = _rounding(frame.codes[0])
    for name, (profile, pitch) in zip(("row", "column"), _profiles(frame), strict=True):
        readings += _lines(sample, name, profile, pitch, whole, options)
        if profile.size >= LEAST_VALUES:
            curves.append(_spectrum(sample, name, profile, pitch, options))
    return Measurement(tuple(readings), tuple(curves))


def _profiles(frame: planes.Stack) -> tuple[tuple[Real, int], tuple[Real, int]]:
    """Return the means of rows and of columns, each with its pitch in px of the frame."""
    values, grid = frame.frames[0], frame.grid
    rows = planes.sums(values, 1) / values.shape[1]
    if not grid.shift:
        return (rows, grid.down), (planes.sums(values, 0) / values.shape[0], grid.across)
    pairs = values.shape[0] // 2
    apart = planes.green_balance(values[: 2 * pairs], grid)
    rows[1::2] -= apart
    columns = np.empty(2 * values.shape[1])
    for first in (0, 1):  # even rows lie left of odd ones, or right of them
        right = first if grid.shift > 0 else 1 - first
        columns[right::2] = planes.sums(values[first : 2 * pairs : 2], 0) / pairs - first * apart
    return (rows, 1), (columns, 1)


def _rounding(codes: NDArray[Any]) -> float:
    """Return the relative uncertainty of a weak band's amplitude by rounding; 0 where noise averages it out.

    Rounding's mean error Σ (-1)^m sin(2πmx) exp(-2π²m²s²)/(πm) has the slope 2 (-1)^m cos(2πmx) exp(-2π²m²s²): where
    light of one level leaves all pixels at one place between two codes, the first term changes every small step alike.
    """
    if codes.dtype.kind not in "ui":
        return 0.0
    rows = codes[:: max(1, codes.shape[0] // 256)].astype(np.float64)
    bend = rows[:, 2:] - 2 * rows[:, 1:-1] + rows[:, :-2]
    variance = float(np.mean(bend**2)) / 6
    if variance > DITHERED**2:
        return 0.0
    down, across = (max(1, n // BLOCK) for n in codes.shape)
    some = codes[: down * (codes.shape[0] // down), : across * (codes.shape[1] // across)]
    blocks = some.reshape(down, -1, across, some.shape[1] // across)
    alike = abs(np.mean(np.exp(2j * pi * blocks.mean(axis=(1, 3)))))
    # two codes alone, in 256 pixels, may be those about a border that next to no noise crosses
    still = np.median(blocks.max(axis=(1, 3)) - blocks.min(axis=(1, 3))) <= 1
    return sqrt(2) * exp(-2 * pi**2 * (0.0 if still else max(0.0, variance - 1 / 12))) * float(alike)


def _lines(sample: Sample, name: str, profile: Real, pitch: int, whole: float, options: Options) -> Iterator[Reading]:
    amplitude = _blank(sample, f"{name}_banding")
    frequency = _blank(sample, f"{name}_banding_frequency")
    because = _why_none(name, profile.size, whole, options)
    if because:
        refusal = Refusal("outside the estimator's limits", because)
        yield from (replace(one, refusal=refusal) for one in (amplitude, frequency))
        return
    found = banding(profile, shading_order=options.shading_order)
    most = 1 / (1 - whole)  # what is seen may be as much smaller
    if not found.lines:
        yield replace(amplitude, bound=("below", most * found.bound))
        because = f"no line stands out of the noise; any that is there stays below {most * found.bound:.3g} DN"
        yield replace(frequency, refusal=Refusal("not defined", because))
        return
    line = found.lines[0]
    if not line.told:
        because = (
            f"{name}s alternate by {line.amplitude:.3g} DN on average, which changes over the region: so near to "
            f"{0.5 / pitch:g} cy/px less than a cycle of the beat is seen, which leaves the amplitude open"
        )
        yield from (replace(one, refusal=Refusal("undersampled", because)) for one in (amplitude, frequency))
        return
    others = "; ".join(f"{one.amplitude:.3g} DN at {one.frequency / pitch:.4g} cy/px" for one in found.lines[1:])
    flags = (f"weaker lines: {others}",) if others else ()
    yield replace(_valued(amplitude, line.amplitude, line.amplitude_u, line.amplitude * whole * most), flags=flags)
    yield _valued(frequency, line.frequency / pitch, line.frequency_u / pitch)


def _why_none(name: str, size: int, whole: float, options: Options) -> str:
    """Return why a profile tells no bands, or nothing."""
    least = max(LEAST_VALUES, 4 * options.shading_order)
    if size < least:
        return f"the region has {size} {name}s of its own; {least} are needed to tell bands from shading"
    if whole > MOST_OPEN:
        return (
            f"with so little noise, rounding to whole codes leaves {100 * min(1.0, whole):.0f} % of a weak band's size "
            f"open, at most {100 * MOST_OPEN:g} % may; deliver frames of more bits, or raise the gain"
        )
    return ""


def _spectrum(sample: Sample, name: str, profile: Real, pitch: int, options: Options) -> Curve:
    """Return the amplitude spectrum, shading taken off: a sine of amplitude A in a whole number of cycles shows A."""
    t = np.linspace(-1, 1, profile.size)
    smooth = np.polynomial.legendre.Legendre.fit(t, profile, options.shading_order)
    amplitudes = 2 * np.abs(np.fft.rfft(profile - smooth(t)))[1:] / profile.size
    if profile.size % 2 == 0:
        amplitudes[-1] /= 2  # at half the sampling frequency there is one phase only
    group = -(-amplitudes.size // MOST_POINTS)
    starts = np.arange(0, amplitudes.size, group)
    middles = starts + (np.minimum(starts + group, amplitudes.size) - starts - 1) / 2
    return Curve(
        sample.found.region,
        f"spectrum of {name} means",
        tuple(float(v) for v in (middles + 1) / profile.size / pitch),
        tuple(float(v) for v in np.maximum.reduceat(amplitudes, starts)),
        (),
        "cy/px",
        "DN",
        estimator="highest of each interval" if group > 1 else "",
    )


def _blank(sample: Sample, name: str) -> Reading:
    unit = _QUANTITIES[name].unit
    return Reading(sample.found.region, name, unit, None, None, estimator=ESTIMATOR, method=REFERENCES[0])


def _valued(blank: Reading, value: float, u: float, rounding: float = 0.0) -> Reading:
    # rows' own pattern is part of the noise of a single frame and the same in the next: repeats do not lessen it
    parts = (Component("noise", u, "A"), *((Component("rounding", rounding, "B"),) if rounding else ()))
    return replace(blank, value=value, u=sqrt(sum(part.u**2 for part in parts)), components=parts)
