"""The transfer of a known texture: the picture's spectrum against the pattern's own, wave by wave.

    H(f) = |Σ Y X*| / Σ |X|²      over all waves around the frequency f

X is the pattern as it lies in the picture without blur, pixel or noise, Y the picture, both over their means and under
a Hann window. Noise, and what processing invents, has no phase in common with X and averages out: a chain that keeps
edges and smears texture reads low. `direct` takes the power of Y in place of its product with X, with the noise taken
off by products of different frames; what processing invents then counts as texture.

References:
    ISO/TS 19567-2:2019 (full-reference and direct forms).
    J. S. Bendat and A. G. Piersol, Random Data (2010), 9: frequency response estimates and their coherence.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import fft

from runner.measure.numerics.pattern_view import Pattern, View

Values = NDArray[np.float64]
Complex = NDArray[np.complex128]

HANN = (35 / 18) ** 2
"""Waves that count as one under a Hann window along both axes: Σw⁴ N / (Σw²)² along each."""
REACH = 0.02
"""cy/px around a frequency whose waves are taken."""
LEAST_WAVES = 120
"""Waves around a frequency, each with its mirror image counted once."""


@dataclass(frozen=True)
class Spectra:
    """Spectra of the frames and of the pattern, on the picture's own frequencies; ordinates rise in frequency."""

    frames: tuple[Complex, ...]
    """Of each frame over its mean, half plane."""
    known: Complex
    """Of the pattern over its mean."""
    f: Values
    """Frequency of each ordinate, cy/px."""
    weight: Values
    """2 where an ordinate stands for its mirror image too, else 1."""


@dataclass(frozen=True)
class Transfer:
    """Transfer at one frequency."""

    value: float
    """Modulus."""
    u: float
    """Standard uncertainty from noise and from what else does not follow the pattern."""
    coherence: float
    """Share of the picture's power that follows the pattern."""


def spectra(pictures: Sequence[Values], pattern: Pattern, view: View) -> Spectra:
    """Return the spectra of pictures and of the pattern as it lies in them.

    Args:
        pictures: Linear light of each frame, rows × columns, shading taken off.
        pattern: The pattern.
        view: How it lies in them.
    """
    rows, columns = pictures[0].shape
    window = np.outer(_hann(rows, 1), _hann(columns, 1))
    finer = max(2, int(np.ceil(2 * view.cells_per_px)))
    x = np.arange(finer * columns) / finer + 0.5
    y = (np.arange(finer * rows) / finer + 0.5)[:, None]
    fine_window = np.outer(_hann(rows, finer), _hann(columns, finer))
    fine = pattern.at(*view.cells(x, y))
    whole = fft.rfft2((fine / np.average(fine, weights=fine_window) - 1) * fine_window) / finer**2
    half = columns // 2 + 1
    known = np.concatenate([whole[: (rows + 1) // 2, :half], whole[-(rows // 2) :, :half]])
    seen = tuple(fft.rfft2((one / np.average(one, weights=window) - 1) * window) for one in pictures)
    f = np.hypot(fft.fftfreq(rows)[:, None], fft.rfftfreq(columns)[None, :])
    weight = np.full(f.shape, 2.0)
    weight[:, 0] = 1.0
    counts = np.ones(f.shape, dtype=bool)
    counts[0, 0] = False
    counts[np.abs(fft.fftfreq(rows)) >= 0.5 - 0.5 / rows] = False
    counts[:, columns // 2 :] = False
    order = np.argsort(f[counts], kind="stable")
    return Spectra(
        tuple(one[counts][order] for one in seen), known[counts][order], f[counts][order], weight[counts][order]
    )


def even_light(picture: Values, pattern: Pattern, view: View) -> Values:
    """Return the light on the pattern as a polynomial of second order over the picture, 1 on its mean.

    Args:
        picture: Linear light, rows × columns.
        pattern: The pattern.
        view: How it lies in the picture.
    """
    x: Values = np.arange(picture.shape[1], dtype=np.float64) + 0.5
    y: Values = (np.arange(picture.shape[0], dtype=np.float64) + 0.5)[:, None]
    some = (slice(None, None, 2), slice(None, None, 2))
    known = pattern.at(*view.cells(x[::2], y[::2]))
    powers = view.powers(x[::2], y[::2])
    design = np.stack([(known * part).ravel() for part in powers], axis=1)
    terms = np.linalg.solve(design.T @ design, design.T @ picture[some].ravel())
    light = sum(c * part for c, part in zip(terms, view.powers(x, y), strict=True))
    return np.asarray(light / np.mean(light))


def cross_transfer(given: Spectra, frequency: float) -> Transfer | None:
    """Return the transfer by products with the pattern; None with too few waves."""
    near = _near(given, frequency)
    if near is None:
        return None
    mean = sum(frame[near] for frame in given.frames) / len(given.frames)
    x, weight, away = given.known[near], given.weight[near], given.f[near] - frequency
    power = weight * np.abs(x) ** 2
    product = weight * mean * x.conj()
    s0, s1, s2 = (float(np.sum(power * away**k)) for k in range(3))
    t0, t1 = complex(np.sum(product)), complex(np.sum(product * away))
    determinant = s0 * s2 - s1 * s1
    level, slope = (s2 * t0 - s1 * t1) / determinant, (s0 * t1 - s1 * t0) / determinant
    left = weight * np.abs(mean - (level + slope * away) * x) ** 2
    variance = HANN / 2 * float(np.sum(left * power)) / s0**2 * (s0 * s2 / determinant)  # only its real part counts
    follows = 1 - float(np.sum(left)) / float(np.sum(weight * np.abs(mean) ** 2))
    return Transfer(abs(level), float(np.sqrt(variance)), follows)


def direct_transfer(given: Spectra, frequency: float) -> Transfer | None:
    """Return the transfer by the power that frames have in common; None with too few waves or a single frame."""
    near = _near(given, frequency)
    count = len(given.frames)
    if near is None or count < 2:
        return None
    total = sum(frame[near] for frame in given.frames)
    alone = sum(np.abs(frame[near]) ** 2 for frame in given.frames)
    common = (np.abs(total) ** 2 - alone) / (count * (count - 1))
    weight, power = given.weight[near], np.abs(given.known[near]) ** 2
    whole = float(np.sum(weight * power))
    square = float(np.sum(weight * common)) / whole
    left = common - square * power
    u_square = float(np.sqrt(2 * HANN * np.sum((weight * left) ** 2) / 2)) / whole
    value = float(np.sqrt(max(0.0, square)))
    u = u_square / (2 * value) if value**2 > 2 * u_square else float(np.sqrt(u_square))
    return Transfer(value, u, float(square > 0))


def _near(given: Spectra, frequency: float) -> slice | None:
    first, last = np.searchsorted(given.f, (frequency - REACH, frequency + REACH))
    return slice(first, last) if float(given.weight[first:last].sum()) / 2 >= LEAST_WAVES else None


def _hann(count: int, finer: int) -> Values:
    return np.asarray(0.5 - 0.5 * np.cos(2 * np.pi * (np.arange(count * finer) / finer + 0.5) / count))
