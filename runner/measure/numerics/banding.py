"""Bands along the rows or columns of an even field: the strongest lines in the spectrum of their means.

The means of the rows (or columns) are a profile: shading of low order, lines, and noise,

    p(t) = Σ_j s_j t^j + Σ_i A_i cos(2π f_i t + φ_i) + e(t)

The shading's polynomial is taken off, the spectrum of what remains looked through at quarter steps of a bin, and the
highest ordinate tested. If it is too high for noise, its line joins the model, all frequencies are refined together by
least squares, and the search goes on in the residual. No window is applied: it would cost amplitude and half as much
again in noise, and the joint fit takes care of what one line spills over another.

Detection. An ordinate of white noise is exponential, so that of m independent ones the highest passes z times their
mean with probability 1 - (1 - e^-z)^m. Here the mean is not known but taken from the ordinates' median over ln 2; that
has the scatter of a mean of some d ordinates, which turns e^-z into (1 + z/d)^-d, the law of a ratio of chi-squares.
For noise that is not white the median is no less than those of nearer ordinates; and for shading that is left no less
than what is found below the lowest frequency, falling as f⁻⁴, as the power of light with a bend does at least. m counts
every ordinate looked at; being nearer than a bin they are not independent, so the probability is below what is stated.
At half the sampling frequency there is one phase only, and the law is that of a chi-square of one degree of freedom.
Within half a bin of it amplitude and phase are not told apart: what alternates changes its size along the profile.

Not periodic. A few single values far off their neighbours are defective rows (columns) and no bands: they are replaced
by what their neighbours say. A smooth spot lifts values over a part of the profile: a line that is not there in most of
eight parts of it is passed over.

References:
    A. Schuster, Terr. Magn. 3 (1898) 13 (law of periodogram ordinates).
    R. A. Fisher, Proc. R. Soc. A 125 (1929) 54 (the highest of several).
    D. C. Rife and R. R. Boorstyn, IEEE Trans. Inf. Theory 20 (1974) 591 (bounds of a tone's parameters).
    EMVA Standard 1288 Release 4.0 Linear (2021), spectrograms of flat and dark mean frames.
"""

from dataclasses import dataclass
from math import expm1, log, log1p, pi, sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage, special

Real = NDArray[np.float64]

PADDING = 4
"""Ordinates for each bin: between them a line is at most 2.6 % lower, sinc(1/8)."""
LOSS = 0.974
"""That."""
FALSE_ALARMS = 0.01
"""Probability, for one profile of white noise, that any line is found in it."""
MOST_STEPS = 20
"""Gauss-Newton steps of the frequencies; three are usual."""
SETTLED = 1e-6
"""Step, in bins, at which they stand."""
APART = 1.5
"""Bins between two lines below which they are not told apart: the second is what the first's model leaves."""
WIDE = 1 / 16
"""Share of the spectrum, to both sides, that tells the noise at an ordinate."""
NEAR = 6
"""Bins to both sides that a line must stand out of: shading that is left seldom does."""


LONE = 8.0
"""Times the scatter of values about the median of three pairs of neighbours beyond which it is a defective row's."""
FEW = 0.01
"""Share of the values (three at least) up to which such are replaced: more of them are bands of short pulses."""
PARTS = 8
"""Parts of the profile in which a line is looked for."""
MOST_PASSED = 8
"""Lines passed over before the search ends."""
BEATS = 3.0
"""Times its own noise by which an alternation may change along the profile and still be one of 0.5 cy/px."""


@dataclass(frozen=True)
class Line:
    """One line of a profile's spectrum."""

    frequency: float
    """cy/px."""
    frequency_u: float
    """Its standard uncertainty."""
    amplitude: float
    """Of the sine, half its peak-to-peak, in the profile's unit."""
    amplitude_u: float
    """Its standard uncertainty."""
    false_alarm: float
    """Probability that noise alone gives such a line anywhere in the spectrum."""
    told: bool = True
    """False for what alternates and changes along the profile, within half a bin of 0.5 cy/px: its amplitude is not
    told."""


@dataclass(frozen=True)
class Banding:
    """Lines found in one profile."""

    lines: tuple[Line, ...]
    """The strongest first; empty if none stands out of the noise."""
    bound: float
    """Amplitude that any line not listed stays below at 97.7 %."""
    mean: float
    """Mean of the profile, for amplitudes in % of it."""
    noise: float
    """Rms of the profile without shading and lines."""
    lowest: float
    """Lowest frequency looked at, cy/px."""


@dataclass(frozen=True)
class FrameBanding:
    """Banding of a frame both ways."""

    rows: Banding
    """Bands that run along the rows: lines of the row means; frequencies in cycles per row."""
    columns: Banding
    """Bands that run along the columns: lines of the column means."""


def frame_banding(frame: NDArray[Any], **how: Any) -> FrameBanding:
    """Return the banding of a frame, rows × columns; options as of `banding`."""
    rows, columns = frame.mean(axis=1, dtype=np.float64), frame.mean(axis=0, dtype=np.float64)
    return FrameBanding(banding(rows, **how), banding(columns, **how))


def banding(
    profile: Real,
    *,
    shading_order: int = 4,
    lowest: float | None = None,
    most: int = 3,
    false_alarms: float = FALSE_ALARMS,
) -> Banding:
    """Find the strongest lines of a profile.

    Args:
        profile: Means of rows or columns, any unit; of one frame, of a mean frame (what is fixed) or of a difference
            (what changes).
        shading_order: Order of the polynomial taken off, 0 or more.
        lowest: Fewest cycles along the profile that are bands and not shading; None is the order, at least 1.
        most: Lines looked for.
        false_alarms: Probability allowed for any line to be found in white noise.

    Raises:
        ValueError: A profile too short for what is asked, or with values that are not finite.
    """
    values = np.array(profile, dtype=np.float64)
    cycles = max(1.0, float(shading_order)) if lowest is None else lowest
    if values.ndim != 1 or values.size < max(32, 4 * cycles, 4 * shading_order):
        raise ValueError(
            f"the profile has the shape {values.shape}; one of at least "
            f"{max(32.0, 4 * cycles, 4 * shading_order):g} values is needed"
        )
    if not np.all(np.isfinite(values)):
        raise ValueError("the profile holds values that are not finite numbers")
    grid = np.arange(np.ceil(PADDING * cycles), PADDING * (values.size - 1) / 2 + 1) / (PADDING * values.size)
    grid = np.append(grid, 0.5)
    values = _without_lone(values)
    model = _fit(values, shading_order, [])
    chances: list[float] = []
    passed: list[float] = []
    while len(chances) < most and len(passed) < MOST_PASSED:
        frequency, chance = _highest(grid, model, passed)
        if chance > false_alarms:
            break
        wider = _fit(values, shading_order, [*model.frequencies, frequency])
        shading = min(wider.frequencies) < grid[0]  # which the polynomial does not follow
        if shading or not _is_all_along(wider):
            passed.append(frequency)
            continue
        chances.append(chance)
        model = wider
    ordinates, level = _spectrum(grid, model.residual)
    doubt = np.maximum(level, 2 * _shading_left(grid, model.residual))  # a tone's amplitude, not a noise's mean square
    lines = [
        _line(f, a, float(np.interp(f, grid, doubt)), model.residual, p)
        for f, a, p in zip(model.frequencies, model.amplitudes, chances, strict=True)
    ]
    return Banding(
        lines=tuple(sorted(lines, key=lambda line: -line.amplitude)),
        bound=float(np.max(np.sqrt(ordinates) + 2 * np.sqrt(level / 2))) / LOSS,
        mean=float(values.mean()),
        noise=float(np.sqrt(np.mean(model.residual**2))),
        lowest=float(grid[0]),
    )


def _without_lone(values: Real) -> Real:
    """Return the values with a few single ones far off their neighbours replaced by what these say."""
    at, pairs = np.arange(values.size), []
    for k in (1, 2, 3):  # at the ends two from one side, continued straight
        before, after = values[np.abs(at - k)], values[np.minimum(at + k, values.size - 1)]
        pairs.append((before + after) / 2)
        pairs[-1][:k] = 2 * values[k : 2 * k] - values[2 * k : 3 * k]
        pairs[-1][-k:] = 2 * values[-2 * k : -k] - values[-3 * k : -2 * k]
    around = np.median(pairs, axis=0)
    away = np.abs(values - around)
    lone = away > LONE * 1.4826 * float(np.median(away))
    if np.count_nonzero(lone) > max(3, FEW * values.size):
        return values
    return np.asarray(np.where(lone, around, values))


def _is_all_along(model: "_Model") -> bool:
    """Tell whether the line fitted last is there in most parts of the profile, at half its size or more."""
    f, wave, t = model.frequencies[-1], model.waves[-1], model.places
    parts = np.array_split((model.residual + wave) * np.exp(-2j * pi * f * t), min(PARTS, max(2, int(f * t.size / 2))))
    sizes = [(1 if f == 0.5 else 2) * abs(part.mean()) for part in parts]
    return float(np.median(sizes)) >= model.amplitudes[-1] / 2


def _line(frequency: float, amplitude: float, level: float, residual: Real, chance: float) -> Line:
    """Return a line with its uncertainties, the bounds in noise of the local level.

    The phase and the frequency found are those where noise adds most: it raises the squared amplitude by u² for each.
    """
    alternating, count = frequency == 0.5, residual.size
    u = sqrt(level / 4 if alternating else level / 2)
    value = amplitude if alternating else sqrt(max(0.0, amplitude**2 - 2 * u**2))
    frequency_u = 0.0 if alternating else sqrt(6 * level) / (2 * pi * amplitude * count)
    told = _is_even(residual, level) if alternating else frequency <= 0.5 - 0.5 / count
    return Line(frequency, frequency_u, value, u, chance, told)


def _is_even(residual: Real, level: float) -> bool:
    """Tell whether what alternates does not change along the profile, by slope and bend in units of their own noise."""
    along = np.polynomial.legendre.legvander(np.linspace(-1, 1, residual.size), 2)[:, 1:]
    changes = along * (-1.0) ** np.arange(residual.size)[:, None]
    noise = np.sqrt(level * residual.size / 4 * (changes**2).sum(axis=0))
    return bool(np.all(np.abs(residual @ changes) <= BEATS * noise))


def _spectrum(grid: Real, residual: Real) -> tuple[Real, Real]:
    """Return squared amplitudes at the grid's frequencies and what noise gives there on average."""
    count = residual.size
    found = np.abs(np.fft.rfft(residual, PADDING * count)[np.rint(grid * PADDING * count).astype(np.intp)])
    ordinates = (2 * found / count) ** 2
    around = _medians(ordinates, int(WIDE * ordinates.size))
    return ordinates, np.maximum(np.median(ordinates), around) / log(2)


def _medians(ordinates: Real, aside: int) -> Real:
    """Return the median of each ordinate and so many to both sides."""
    return np.asarray(ndimage.median_filter(ordinates, 2 * aside + 1, mode="reflect"))


def _highest(grid: Real, model: "_Model", passed: list[float]) -> tuple[float, float]:
    """Return the frequency that noise gives least of all, and the probability that it gives any such.

    Frequencies of lines known, and those passed over, are left out.
    """
    count = model.residual.size
    ordinates, level = _spectrum(grid, model.residual)
    level = np.maximum(level, _medians(ordinates, PADDING * NEAR) / log(2))
    level = np.maximum(level, _shading_left(grid, model.residual))
    z = ordinates / np.maximum(level, np.finfo(float).tiny)
    d = log(2) ** 2 * count / 2  # a median's variance, 1/n, over ln 2 squared: that of the mean of so many
    chances = (1 + z / d) ** -d
    chances[-1] = 2 * special.stdtr(2 * d, -sqrt(z[-1]))
    for known in (*model.frequencies, *passed):
        chances[np.abs(grid - known) < APART / count] = 1.0
    best = int(np.argmin(chances))
    chance = float(chances[best])
    return float(grid[best]), 1.0 if chance >= 1 else -expm1(grid.size * log1p(-chance))


def _shading_left(grid: Real, residual: Real) -> Real:
    """Return what shading below the lowest frequency leaves at the grid's, falling as f⁻⁴; squared amplitudes."""
    count = residual.size
    below = np.arange(PADDING / 2, grid[0] * PADDING * count) / (PADDING * count)
    if not below.size:
        return np.zeros(grid.size)
    return np.asarray(np.max(_spectrum(below, residual)[0] * below**4) / grid**4)


@dataclass(frozen=True)
class _Model:
    """Shading and lines fitted together."""

    frequencies: list[float]
    """Of the lines, cy/px."""
    amplitudes: list[float]
    """Of the lines."""
    residual: Real
    """What is left of the profile."""
    waves: Real
    """The lines, lines × values."""
    places: Real
    """The values' places from the profile's middle."""


def _fit(values: Real, order: int, start: list[float]) -> _Model:
    """Fit shading and lines together; frequencies by Gauss-Newton, the rest is linear."""
    t: Real = np.arange(values.size, dtype=np.float64) - (values.size - 1) / 2
    shading = np.asarray(np.polynomial.legendre.legvander(2 * t / values.size, order), dtype=np.float64)
    f = np.array(start, dtype=np.float64)
    moving = f < 0.5
    for _ in range(MOST_STEPS):
        terms, fitted = _linear(values, shading, f, t)
        waves = fitted[order + 1 :].reshape(2, -1)
        slopes: Real = 2 * pi * t[:, None] * (waves[1] * np.cos(2 * pi * t[:, None] * f) - waves[0] * _sine(t, f))
        both = np.concatenate([terms, slopes[:, moving]], axis=1)
        step = np.zeros(f.size)
        step[moving] = np.linalg.lstsq(both, values - terms @ fitted, rcond=None)[0][terms.shape[1] :]
        f = np.maximum(0.0, f + np.clip(step, -0.25 / values.size, 0.25 / values.size))
        f[f > 0.5 - 0.25 / values.size] = 0.5  # nearer, cosine and sine are hardly told apart
        if not np.any(np.abs(step) * values.size > SETTLED):
            break
    terms, fitted = _linear(values, shading, f, t)
    factors = fitted[order + 1 :].reshape(2, -1)
    lines = terms[:, order + 1 :].reshape(t.size, 2, -1)
    return _Model(
        frequencies=[float(x) for x in f],
        amplitudes=[float(a) for a in np.hypot(*factors)],
        residual=values - terms @ fitted,
        waves=np.einsum("tki,ki->it", lines, factors),
        places=t,
    )


def _sine(t: Real, f: Real) -> Real:
    return np.asarray(np.sin(2 * pi * t[:, None] * f))


def _linear(values: Real, shading: Real, f: Real, t: Real) -> tuple[Real, Real]:
    """Return the model's terms at given frequencies and their least-squares factors."""
    cosines, sines = np.cos(2 * pi * t[:, None] * f), _sine(t, f)
    alternating = f == 0.5
    cosines[:, alternating] = (-1.0) ** np.arange(t.size)[:, None]
    sines[:, alternating] = 0.0  # the one phase that there is
    terms = np.concatenate([shading, cosines, sines], axis=1)
    return terms, np.linalg.lstsq(terms, values, rcond=None)[0]
