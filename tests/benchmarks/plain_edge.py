"""The classic edge method as a plain script would do it: four bins per pixel, derivative, Hamming, FFT; no uncertainty.

It is the yardstick for what the program's own edge method costs, not for what it says: no correction for the bins or
for the derivative, no check of the region, no uncertainty.

References:
    ISO 12233:2017, annex D (order of the steps; the code is our own).
"""

from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import fft, signal

Values = NDArray[np.float64]
BINS = 4


def plain_edge(codes: NDArray[Any]) -> tuple[Values, Values]:
    """Return frequencies (cy/px) and the transfer function of a nearly upright edge.

    Args:
        codes: Rows × columns, DN.
    """
    light = codes.astype(np.float64)
    rows, columns = light.shape
    slope = np.diff(light, axis=1) * signal.windows.hamming(columns - 1)
    middles = (slope * (np.arange(columns - 1) + 0.5)).sum(axis=1) / slope.sum(axis=1)
    line = np.polyfit(np.arange(rows), middles, 1)
    distance = np.arange(columns)[None, :] - np.polyval(line, np.arange(rows))[:, None]
    bins = np.round(BINS * (distance - distance.min())).astype(int).ravel()
    counts = np.bincount(bins)
    spread = np.bincount(bins, light.ravel())[counts > 0] / counts[counts > 0]
    line_spread = np.diff(spread)
    centre = np.argmax(np.abs(line_spread))
    half = min(centre, line_spread.size - 1 - centre)
    line_spread = line_spread[centre - half : centre + half + 1]
    spectrum = np.abs(fft.rfft(line_spread * signal.windows.hamming(line_spread.size)))
    return fft.rfftfreq(line_spread.size, 1 / BINS), spectrum / spectrum[0]
