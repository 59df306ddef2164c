"""What rounding to whole codes leaves in a fitted edge where the noise is too small to average it out.

A signal between two codes reads off by up to half a code, by the same amount in every pixel of its level. Noise of
standard deviation s (in codes) dithers it: the mean error at the fraction x of a code is
Σ (-1)^k sin(2πkx) exp(-2π²k²s²) / (πk). The fitted signal is known well enough for the size of this error along the
edge, not for its phase; so the phases of both levels are varied over a whole code, and the fit's response to each is
one equally likely deviation.

References:
    Widrow and Kollár, Quantization Noise (2008), ch. 9: mean of a rounded normal variable (from memory).
"""

import numpy as np

from runner.errors import MeasurementRefused
from runner.measure.numerics.edge_fit import EdgeFit
from runner.measure.numerics.line_spread import Array

SINGLE = 0.03
"""codes; noise below this changes nothing of a rounded signal but next to the jumps."""
MOST_OPEN = 0.01
"""Share of the step: a level off by so much turns every modulation by as much; without noise that asks for 41 codes."""
NEGLIGIBLE = 1e-5
"""Share of the step below which nothing is added."""
PHASES = (np.arange(6) + 0.5) / 6
"""Fractions of a code that each level is moved by."""


def mean_error(signal: Array, noise: float) -> Array:
    """Return the mean of round(signal + noise) - signal, codes.

    Args:
        signal: Codes, any fraction.
        noise: Standard deviation of the noise, codes.
    """
    if noise < SINGLE:
        return np.asarray(np.rint(signal) - signal)
    error = np.zeros_like(signal)
    # further terms are a thousandth of a code together
    for k in range(1, int(np.ceil(0.6 / noise)) + 1):
        error += (-1) ** k * np.sin(2 * np.pi * k * signal) * np.exp(-2 * (np.pi * k * noise) ** 2) / (np.pi * k)
    return error


def level_error(noise: float) -> float:
    """Return the rms mean error of a rounded level over all fractions of a code, codes.

    Args:
        noise: Standard deviation of the noise before rounding, codes.
    """
    at = (np.arange(200) + 0.5) / 200
    return float(np.sqrt(np.mean(mean_error(at, noise) ** 2)))


def rounding(fit: EdgeFit, codes: tuple[float, float]) -> Array:
    """Return deviations of all fitted numbers whose squares add up to the covariance that rounding brings.

    Args:
        fit: The fitted edge.
        codes: Width of one code at the dark and at the bright level, fraction of range.

    Returns:
        Deviations × numbers; no deviations where noise averages rounding out.

    Raises:
        MeasurementRefused: `no modulation`, rounding leaves too much of the step open.
    """
    rise, variances = abs(fit.parts.rise), (fit.noise.low, fit.noise.high)
    # a level on the border of two codes scatters between them whatever its noise is: the quieter one tells
    noise = min(float(np.sqrt(max(0.0, v / c**2 - 1 / 12))) for v, c in zip(variances, codes, strict=True))
    share = level_error(noise) * float(np.hypot(*codes)) / rise
    if share > MOST_OPEN:
        raise MeasurementRefused(
            "no modulation",
            f"the step is {2 * rise / sum(codes):.0f} codes high and has too little noise to average rounding out: "
            f"{100 * share:.1f} % of it stays open",
            allowed=f"at most {100 * MOST_OPEN:g} %",
            next_step="give more light, or deliver frames of more bits",
        )
    if share < NEGLIGIBLE:
        return np.zeros((0, fit.covariance.shape[0]))
    spread = fit.linear.spread
    bright = np.clip(spread, 0, 1)
    code = codes[0] + (codes[1] - codes[0]) * bright
    moved = []
    for dark_phase in PHASES:
        for bright_phase in PHASES:
            signal = spread * rise / code + dark_phase * (1 - bright) + bright_phase * bright
            error = code * mean_error(signal, noise)
            moved.append(fit.change(fit.pixels.picture(error[fit.linear.index])))
    return np.asarray(np.array(moved) / len(moved) ** 0.5)
