"""What rounding to whole codes leaves in a fitted grating where the noise is too small to average it out.

A value x (in codes) reads off by Σ_m (-1)^m sin(2πmx) exp(-2π²m²s²) / (πm) in the mean over noise of s codes. Along a
sine these errors do not cancel wholly: of an amplitude of A codes the fundamental is off by some 2 J1(2πA)/π codes, of
A = 1 by a tenth; where the stripes repeat on the pixels' grid after a few pixels, more. The fitted signal is known well
enough for the size of the errors, not for its place between two codes: all places are equally likely, which makes of
each sin(2πmx) a random turn of e^{2πimx}, with half its power. What of the errors changes from pixel to pixel without
order is in the residual, and so in the fit's own uncertainty.

References:
    Widrow and Kollár, Quantization Noise (2008), ch. 9: mean of a rounded normal variable (from memory).
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import exp, pi

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.grating_fit import GratingFit, Lattice

Real = NDArray[np.float64]

MOST_TERMS = 8
"""Terms of the sum; those beyond hold less than 1/64 of its power for a noiseless signal."""
LEAST = 1e-3
"""A term damped below this share of a code is left out."""
DITHERED = 0.62
"""Noise, rounding's own 1/√12 with it, in codes, from which on no term reaches that."""
SWINGS = (-1 / 3, 0.0, 1 / 3)
"""Codes by which the amplitude is varied: rounding itself leaves it open by about so much where few values tell it."""
MOST_PIXELS = 100_000
"""Pixels along which the errors are looked at; of more, the middle rows."""


@dataclass(frozen=True)
class Rounding:
    """Standard uncertainties that rounding brings."""

    modulation: float
    """Of the modulation, relative."""
    phase: float
    """Of the phase at the patch's centre, rad."""
    frequency: Real
    """Covariance of the frequency's components, (cy/px)²."""
    harmonics: Real
    """Rms amplitudes at 1, 2 … times the frequency, light."""


def rounding(fit: GratingFit, lattices: Sequence[Lattice], codes: Real, light: Real) -> Rounding:
    """Return what rounding leaves in a fitted grating.

    Args:
        fit: The grating.
        lattices: Its pixels.
        codes: Rising codes of the tone curve, in steps of one.
        light: The light of each, in the fit's unit, rising.
    """
    orders, steps = len(fit.amplitudes), np.gradient(light)
    reach = fit.level + 2 * abs(fit.amplitudes[0]) * np.array([-1, 0, 1])
    if fit.noise > DITHERED * np.interp(reach, light, steps).max():
        return Rounding(0.0, 0.0, np.zeros((2, 2)), np.zeros(orders))
    turns, x, y = _places(fit, lattices)
    waves = [np.exp(2j * pi * h * turns) for h in range(1, orders + 1)]
    signal = fit.level + sum((c * w).real for c, w in zip(fit.amplitudes, waves, strict=True) if np.isfinite(c))
    at, step = np.interp(signal, light, codes), np.interp(signal, light, steps)
    square = float(np.mean(step**2))
    noise = max(0.0, fit.noise**2 - square / 12) / square
    first, count = fit.amplitudes[0], signal.size
    own = waves[0] * first / abs(first)
    turned = -2 * own.imag / abs(first)
    rows = [2 * own.real / abs(first) - 1 / fit.level, turned]
    moments = np.array([[x @ x, x @ y], [x @ y, y @ y]])
    rows += list(np.linalg.solve(moments, np.array([x, y]) * turned / (2 * pi)) * count)
    weights = np.array(rows) * step / count
    both = np.array([w * step * 2 / count for w in waves])
    covariance, power = np.zeros((len(rows), len(rows))), np.zeros(orders)
    for m in range(1, MOST_TERMS + 1):
        size = exp(-2 * pi**2 * m**2 * noise) / (pi * m)
        if size < LEAST:
            break
        for swing in SWINGS:
            error = np.exp(2j * pi * m * (at + swing * own.real))
            seen = weights @ error
            covariance += size**2 / 2 * np.outer(seen, seen.conj()).real / len(SWINGS)
            power += size**2 / 4 * (np.abs(both @ error) ** 2 + np.abs(both.conj() @ error) ** 2) / len(SWINGS)
    return Rounding(covariance[0, 0] ** 0.5, covariance[1, 1] ** 0.5, covariance[2:, 2:], np.sqrt(power))


def _places(fit: GratingFit, lattices: Sequence[Lattice]) -> tuple[Real, Real, Real]:
    """Return turns of the fundamental and coordinates of the pixels, middle rows if they are many."""
    share = MOST_PIXELS / fit.count
    turns, xs, ys = [], [], []
    for one in lattices:
        rows = one.y.size if share >= 1 else max(2, int(one.y.size * share))
        y = one.y[(one.y.size - rows) // 2 :][:rows]
        turns.append((fit.frequency[0] * one.x[None, :] + fit.frequency[1] * y[:, None]).ravel())
        xs.append(np.tile(one.x, rows))
        ys.append(np.repeat(y, one.x.size))
    return np.concatenate(turns), np.concatenate(xs), np.concatenate(ys)
