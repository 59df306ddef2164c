"""Noise of a region, from what is left after its edge is fitted: by level, correlated or not, defect pixels apart."""

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure.numerics.edge_model import Linear, Noise, Residuals
from runner.measure.numerics.line_spread import Array

SIDES = (0.3, 0.7)
"""Edge spread below and above which a pixel counts for the dark and the bright level."""
LEAST_DOF = 10
"""Degrees of freedom on either side."""
NEAR, FAR = 2, 4
"""px; correlation is looked for in lags up to the first, and summed up to the second where it is found."""
LEAST_POWER = 0.5
"""Mean squared residual over its expected variance: below, it is rounding and misfit under the noise floor."""
CERTAIN = 3.0
"""Standard deviations from which correlation is no longer chance."""
DEFECT = 6.0
"""Robust standard deviations from which a pixel is a defect: chance makes one in 10^9."""
MOST_DEFECTS = 0.005
"""Share of defects from which they are structure and stay in."""


def noise_of(found: Residuals, floor: float) -> Noise:
    """Return the scatter of pixels about their bin's mean, apart for dark and bright side.

    No model of the line spread's shape enters it: pixels of one bin have the same distance from the edge.

    Args:
        found: The model against all pixels.
        floor: Least standard deviation of a pixel, fraction of range.

    Raises:
        MeasurementRefused: Too few pixels on one side.
    """
    variances, freedom = [], 0.0
    within = found.within
    for side in (found.spread < SIDES[0], found.spread > SIDES[1]):
        dof = float(np.maximum(found.counts[side] - 1, 0).sum())
        if dof < LEAST_DOF:
            raise MeasurementRefused(
                "outside the estimator's limits",
                "too few pixels lie on one side of the edge",
                next_step="make the region larger, or centre it on the edge",
            )
        variances.append(float(within[side].sum()) / dof)
        freedom += dof
    low, high = (max(v, floor**2) for v in variances)
    return Noise(low, high, max(freedom, 1.0))


def misfit(linear: Linear, freedom: float) -> float:
    """Return the mean squared residual of bins over its expectation, 1 where chance explains it.

    Args:
        linear: A linearisation about the fit.
        freedom: Effective number of fitted parameters.
    """
    chi = float((linear.weights * linear.counts * linear.means**2).sum())
    dof = max(1.0, float(np.count_nonzero(linear.counts)) - freedom)
    ratio = chi / dof
    return ratio if abs(ratio - 1) > CERTAIN * np.sqrt(2 / dof) else 1.0


def correlation(linear: Linear, shape: tuple[int, int]) -> float:
    """Return by how much correlation between pixels raises the variance of means over many, at least 1.

    It is the sum of the noise's autocorrelation; interpolated colours and denoising raise it.
    """
    scaled = (linear.residual * np.sqrt(linear.weights[linear.index])).reshape(shape)
    scaled = scaled - scaled.mean()
    power = float(np.mean(scaled * scaled))
    if not power > LEAST_POWER:
        return 1.0
    near = _summed(scaled, NEAR) / power
    lags = ((2 * NEAR + 1) ** 2 - 1) / 2
    if near < CERTAIN * 2 * np.sqrt(lags / scaled.size):
        return 1.0
    return float(max(1.0, 1 + near, 1 + _summed(scaled, FAR) / power))


def _summed(values: Array, reach: int) -> float:
    """Twice the sum of the autocovariances over one half of all lags up to `reach`, the lag 0 left out."""
    rows, columns = values.shape
    total = 0.0
    for dy in range(min(reach + 1, rows)):
        for dx in range(-reach if dy else 1, min(reach + 1, columns)):
            a = values[dy:, max(dx, 0) : columns + min(dx, 0)]
            b = values[: rows - dy, max(-dx, 0) : columns - max(dx, 0)]
            total += 2 * float(np.mean(a * b))
    return total


def defects(found: Residuals) -> NDArray[np.intp]:
    """Return the places of defect pixels: few, and far outside the noise of their own side of the edge."""
    spread = found.spread[found.index]
    sd = np.empty(2)
    for k, side in enumerate((spread < SIDES[0], spread > SIDES[1])):
        sd[k] = 1.4826 * float(np.median(np.abs(found.residual[side]))) if side.any() else 0.0
    limit = DEFECT * np.maximum(sd[0] + (sd[1] - sd[0]) * np.clip(spread, 0, 1), sd.max() / 4)
    # where the signal is steep, a residual may be the fit's
    places = np.flatnonzero((np.abs(found.residual) > limit) & (limit > 0))
    return places if places.size <= MOST_DEFECTS * found.residual.size else np.zeros(0, dtype=np.intp)
