"""A hyperbolic wedge of lines: frequency along it, modulation and number of lines from its coarse end to its fine one.

Lines of a hyperbolic wedge lie at y = y_c(z) + k / f(z), with f and y_c straight in the place z along the wedge. Both
are fitted to the phases of the lines, from the coarse end onwards, so that the frequency is known where nothing is seen
any more. In pieces along the wedge the fundamental is fitted by least squares in phase with the coarse lines: negative
where the contrast has reversed. Lines are counted as separate dips of the piece's profile.

References:
    ISO 12233:2014 (visual resolution from hyperbolic wedges, annex).
    CIPA DC-003 (2003) (counting of lines along a wedge; from memory).
"""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy import fft

Real = NDArray[np.float64]
Complex = NDArray[np.complex128]

BLOCKS = 24
"""Pieces in which the frequency is looked for at first."""
NEAR, LEAST_BLOCKS = 0.1, 4
"""Departure from a straight course of frequency, and pieces that must follow it."""
COARSE, EXPLAINED = 8, 0.5
"""Pieces at the coarse end in which the fundamental must explain so much of the light's variance (of lines 81 %)."""
MOST_BESIDE = 0.35
"""Fundamental of what lies beside the lines, over theirs: more, and there are more lines than stated."""
REACH = 0.16
"""cy/px above the coarse end that tell the modulation at frequency 0."""
PIECES = 60
"""Pieces along the wedge that are read."""
BINS = 8
"""Of a line's period, in the profile that lines are counted in."""
DIP = 0.05
"""Depth of a dip between two lines, over the coarse lines' own, that separates them."""
DIP_NOISE = 4.0
"""The same over its standard uncertainty."""


@dataclass(frozen=True)
class WedgeFit:
    """What was read along a wedge, coarse end first."""

    f: Real
    """Frequency across the lines of each piece, cy/px."""
    modulation: Real
    """Amplitude of the fundamental over the level, in phase with the coarse lines; negative where reversed."""
    u: Real
    """Its standard uncertainty."""
    lines: NDArray[np.intp]
    """Lines told apart in each piece."""
    reference: float
    """Modulation at frequency 0, to which that of the coarse lines is continued."""
    reference_u: float
    """Its standard uncertainty."""
    frequency_u: float
    """Relative standard uncertainty of the frequency."""
    width: float
    """Frequency from one piece to the next, cy/px."""


@dataclass(frozen=True)
class _Line:
    """f = a + b z, y_c = c + d z."""

    a: float
    """Frequency at the patch's left border, cy/px."""
    b: float
    """How it rises, cy/px per px."""
    c: float
    """Middle line's row at the left border, px."""
    d: float
    """Its slope."""

    def f(self, z: Real) -> Real:
        """Return the frequency."""
        return np.asarray(np.maximum(self.a + self.b * z, 1e-3))

    def middle(self, z: Real) -> Real:
        """Return the middle line's row."""
        return np.asarray(self.c + self.d * z)


def fit_wedge(values: Real, lines: int, own: NDArray[np.bool_] | None = None) -> WedgeFit | None:
    """Read a wedge whose lines run along the rows, coarse on the left.

    Args:
        values: Rows × columns of light.
        lines: Number of dark (or bright) lines, odd.
        own: Which pixels may be used; None is all.

    Returns:
        What was read, or None where no such wedge is found.
    """
    usable = np.ones(values.shape, dtype=bool) if own is None else own
    start = _start(values, usable, lines)
    if start is None:
        return None
    line, first, last = start
    spread = np.inf
    for share in (0.25, 0.35, 0.5, 0.65, 0.8, 1.0):
        line, spread = _refined(values, usable, lines, line, (first, first + share * (last - first)))
    return _read(values, usable, lines, line, (first, last), spread)


def _start(values: Real, own: NDArray[np.bool_], lines: int) -> tuple[_Line, float, float] | None:
    """Return the straight lines of frequency and middle to start from, and where the wedge begins and ends."""
    rows, columns = values.shape
    width = columns // BLOCKS
    if width < 4 or rows < 24:
        return None
    z, f, weight, centre, energy = [], [], [], [], []
    y = np.arange(rows, dtype=np.float64)
    for n in range(BLOCKS):
        part = slice(n * width, (n + 1) * width)
        number = own[:, part].sum(axis=1)
        profile = (values[:, part] * own[:, part]).sum(axis=1) / np.maximum(number, 1)
        ground = float(np.median(np.concatenate([profile[: rows // 8], profile[-(rows // 8) :]])))
        dark = np.abs(profile - ground)
        power = np.abs(fft.rfft((profile - ground) * np.hanning(rows), 8 * rows)) ** 2
        at = fft.rfftfreq(8 * rows)
        allowed = (at > (lines - 1) / rows) & (at < 0.45)
        if not allowed.any() or dark.max() == 0:
            continue
        k = int(np.argmax(np.where(allowed, power * at, 0)))
        z.append((n + 0.5) * width)
        f.append(float(at[k]))
        weight.append(float(power[k] * at[k]))
        centre.append(float((dark**2 @ y) / (dark**2).sum()))
        energy.append(float(dark.sum()))
    if len(z) < BLOCKS // 2:
        return None
    place, frequency, strength = np.array(z), np.array(f), np.sqrt(np.array(weight))
    filled = np.array(energy) > 0.2 * float(np.median(energy))
    best, line = 0.0, None
    for i in range(place.size):
        for j in range(i + 2, place.size):
            b = (frequency[j] - frequency[i]) / (place[j] - place[i])
            a = frequency[i] - b * place[i]
            near = np.abs(frequency - a - b * place) < NEAR * frequency
            score = float(strength[near & filled].sum())
            if b > 0 and near.sum() >= LEAST_BLOCKS and score > best:
                best = score
                line = np.polyfit(place[near], frequency[near], 1), np.polyfit(place[near], np.array(centre)[near], 1)
    if line is None:
        return None
    (b, a), (d, c) = line
    there = place[filled & (a + b * place > 0)]
    if there.size < LEAST_BLOCKS:
        return None
    return _Line(float(a), float(b), float(c), float(d)), float(there[0]), float(there[-1])


def _pixels(
    values: Real, own: NDArray[np.bool_], lines: int, line: _Line, part: slice, *, beside: bool = False
) -> tuple[Real, Real, Real, Real]:
    """Return place, turns from the middle line, frequency and light of the lines' own pixels in some columns.

    With `beside`, of a period on either side of them.
    """
    z = np.arange(part.start, part.stop) + 0.0
    y = np.arange(values.shape[0], dtype=np.float64)[:, None]
    f = line.f(z)[None, :]
    turns = (y - line.middle(z)[None, :]) * f
    # whole periods between the middles of the outermost lines
    inside = np.abs(turns) <= (lines - 1) / 2
    if beside:
        inside = (np.abs(turns) > lines / 2) & (np.abs(turns) <= lines / 2 + 1)
    inside &= own[:, part]
    place = np.broadcast_to(z[None, :], turns.shape)
    return place[inside], turns[inside], np.broadcast_to(f, turns.shape)[inside], values[:, part][inside]


def _wave(turns: Real, light: Real) -> tuple[float, complex, float]:
    """Return level, wave C of level + Re[C e^{2πi turns}], and the variance of its real part."""
    design = np.stack([np.ones_like(turns), np.cos(2 * np.pi * turns), np.sin(2 * np.pi * turns)], axis=1)
    normal = design.T @ design + 1e-9 * turns.size * np.eye(3)
    inverse = np.linalg.inv(normal)
    solved = inverse @ (design.T @ light)
    left = light - design @ solved
    variance = float(left @ left) / max(1, turns.size - 3) * float(inverse[1, 1])
    return float(solved[0]), complex(solved[1], -solved[2]), variance


def _refined(
    values: Real, own: NDArray[np.bool_], lines: int, line: _Line, part: tuple[float, float]
) -> tuple[_Line, float]:
    """Correct frequency and middle by the phases of both halves of the lines; return the relative u of f too."""
    steps = np.linspace(part[0], part[1], 25)
    rows, sides = [], []
    waves: list[tuple[float, float, complex, float, float]] = []
    for low, high in pairwise(steps):
        piece = slice(max(0, int(low)), min(values.shape[1], max(int(high), int(low) + 3)))
        z, turns, f, light = _pixels(values, own, lines, line, piece)
        for half in (turns < 0, turns >= 0):
            if np.count_nonzero(half) >= 12:
                _, wave, variance = _wave(turns[half], light[half])
                waves.append((float(z[half].mean()), float(turns[half].mean()), wave, variance, float(f[half].mean())))
    if len(waves) < 8:
        return line, np.inf
    total = sum(w[2] for w in waves[:6])
    sign = 1.0 if total.real >= 0 else -1.0
    weights = []
    for at, turn, wave, variance, there in waves:
        if abs(wave) ** 2 < 9 * variance:
            continue
        # a reversed contrast is half a turn, and no error of the geometry
        lead = float(np.angle((sign * wave) ** 2)) / (4 * np.pi)
        # turns = (y - c - d z) (a + b z): what da, db, dc, dd change of it
        rows.append([turn / there, turn * at / there, -there, -there * at])
        sides.append(lead)
        weights.append(abs(wave) ** 2 / variance)
    if len(rows) < 8:
        return line, np.inf
    design, lead_, weight = np.array(rows), np.array(sides), np.minimum(np.array(weights), 1e4)
    scale = np.abs(design).max(axis=0)
    normal = (design / scale).T @ (design / scale * weight[:, None])
    solved = (
        np.linalg.solve(normal + 1e-9 * np.trace(normal) * np.eye(4), (design / scale).T @ (weight * lead_)) / scale
    )
    left = lead_ - design @ solved
    spread = float(np.sqrt((weight * left**2).sum() / weight.sum() / len(rows)))
    made = _Line(line.a + solved[0], line.b + solved[1], line.c + solved[2], line.d + solved[3])
    return made, 4 * spread / lines


def _read(
    values: Real, own: NDArray[np.bool_], lines: int, line: _Line, part: tuple[float, float], spread: float
) -> WedgeFit | None:
    steps = np.linspace(part[0], part[1], PIECES + 1)
    f: list[float] = []
    waves: list[complex] = []
    levels: list[float] = []
    variances: list[float] = []
    shares: list[float] = []
    beyond: list[float] = []
    profiles: list[tuple[Real, float]] = []
    for low, high in pairwise(steps):
        piece = slice(max(0, int(low)), min(values.shape[1], int(high) + 1))
        _, turns, local, light = _pixels(values, own, lines, line, piece)
        if light.size < 12:
            return None
        level, wave, variance = _wave(turns, light)
        f.append(float(local.mean()))
        waves.append(wave)
        variances.append(variance)
        levels.append(level)
        shares.append(abs(wave) ** 2 / 2 / max(float(np.var(light)), 1e-300))
        if len(beyond) < COARSE:
            _, turns_, _, light_ = _pixels(values, own, lines, line, piece, beside=True)
            beyond.append(abs(_wave(turns_, light_)[1]) / abs(wave) if light_.size >= 12 else 0.0)
        profiles.append(_profile(turns, light, lines))
    if np.median(shares[:COARSE]) < EXPLAINED or np.median(beyond) > MOST_BESIDE:
        return None
    sign = 1.0 if sum(w.real for w in waves[:6]) >= 0 else -1.0
    means = np.array(levels)
    modulation = sign * np.array([w.real for w in waves]) / means
    u = np.sqrt(np.array(variances)) / means
    places = np.array(f)
    reference, reference_u = _at_zero(places, modulation, u)
    if not reference > 2 * reference_u:
        return None
    counts = [
        _count(sign * profile / base, doubt / base, reference, lines)
        for (profile, doubt), base in zip(profiles, levels, strict=True)
    ]
    return WedgeFit(
        places,
        modulation,
        u,
        np.array(counts),
        reference,
        reference_u,
        spread,
        float(np.mean(np.diff(places))),
    )


def _profile(turns: Real, light: Real, lines: int) -> tuple[Real, float]:
    """Return the light over the lines' phases, in bins, and the standard uncertainty of a bin."""
    count = (lines - 1) * BINS
    at = np.clip(((turns + (lines - 1) / 2) * BINS).astype(np.intp), 0, count - 1)
    number, total = np.bincount(at, minlength=count), np.bincount(at, light, count)
    seen = number > 0
    places = np.arange(count)
    profile = np.interp(places, places[seen], total[seen] / number[seen])
    left = light - profile[at]
    return profile, float(np.sqrt(np.mean(left**2) / max(1.0, light.size / count)))


def _at_zero(f: Real, modulation: Real, u: Real) -> tuple[float, float]:
    """Return the modulation at frequency 0 and its u: its logarithm continued by a parabola from the coarse end.

    How far a cubic goes elsewhere, beyond what noise makes of it, is a part of u.
    """
    near = (f <= f[0] + REACH) & (modulation > 3 * u)
    if np.count_nonzero(near) < 6:
        return 0.0, 1.0
    x, log = f[near], np.log(modulation[near])
    ends, left = [], log
    for order in (2, 3):
        powers = x[:, None] ** np.arange(order + 1)
        inverse = np.linalg.pinv(powers)
        ends.append(inverse[0])
        left = log - powers @ (inverse @ log)
    # what the cubic leaves is the noise, also where lines beat with the pixels' rows
    noise_rms = float(np.sqrt((left**2).sum() / max(1, x.size - 4)))
    value = float(np.exp(ends[0] @ log))
    noise, apart = (noise_rms * float(np.linalg.norm(end)) for end in (ends[0], ends[1] - ends[0]))
    bias2 = float((ends[1] - ends[0]) @ log) ** 2 - apart**2
    return value, value * float(np.sqrt(noise**2 + max(0.0, bias2)))


def _count(profile: Real, doubt: float, reference: float, lines: int) -> int:
    """Return how many lines stand apart: the inner ones, each beyond the spaces beside it, and the two outer halves."""
    least = max(DIP * reference * np.pi / 4, DIP_NOISE * doubt / 1.4)
    smooth = np.convolve(np.pad(profile, 1, mode="edge"), np.ones(3) / 3, mode="valid")
    inner = [smooth[k * BINS - 2 : k * BINS + 2].max() for k in range(1, lines - 1)]
    ends = [smooth[:2].max(), smooth[-2:].max()]
    spaces = [smooth[k * BINS + BINS // 2 - 2 : k * BINS + BINS // 2 + 2].min() for k in range(lines - 1)]
    crests = [ends[0], *inner, ends[1]]
    apart = 1
    for k in range(lines - 1):
        if min(crests[k], crests[k + 1]) - spaces[k] >= least:
            apart += 1
    return apart
