"""Noise of a region, from what is left after its edge is fitted: by level, misfit and defect pixels apart."""

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure.numerics.edge_model import Linear, Noise, Pixels, Residuals

SIDES = (0.3, 0.7)
"""Edge spread below and above which a pixel counts for the dark and the bright level."""
LEAST_DOF = 10
"""Degrees of freedom on either side."""
CERTAIN = 3.0
"""Standard deviations from which correlation is no longer chance."""
DEFECT = 6.0
"""Robust standard deviations from which a pixel is a defect: chance makes one in 10^9."""
MOST_OF_A_LINE, MOST_LINES = 0.5, 2
"""Share of a row's or column's pixels that make it a defect line, and how many of them a region may have."""
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


def defects(found: Residuals, pixels: Pixels, floor: float) -> NDArray[np.bool_]:
    """Tell which pixels are defects: few, and far outside the noise of their own side of the edge.

    A row or column most of whose pixels are defects is one as a whole: where the edge crosses it, its value fits.

    Args:
        found: The model against all pixels.
        pixels: The region.
        floor: Least standard deviation of a pixel, fraction of range.
    """
    spread = found.spread[found.index]
    sd = np.empty(2)
    for k, side in enumerate((spread < SIDES[0], spread > SIDES[1])):
        # of few whole codes the median may be none; nine tenths of a normal variable lie within 1.645 deviations
        sd[k] = max(floor, float(np.quantile(np.abs(found.residual[side]), 0.9)) / 1.645 if side.any() else 0.0)
    limit = DEFECT * np.maximum(sd[0] + (sd[1] - sd[0]) * np.clip(spread, 0, 1), sd.max() / 4)
    # where the signal is steep, a residual may be the fit's
    size = np.abs(found.residual) / limit
    bad = np.asarray(size > 1)
    if not bad.any():
        return bad
    where = pixels.picture(bad.astype(np.float64))
    counts = pixels.picture(np.ones(bad.size))
    lines = np.zeros(pixels.shape, dtype=bool)
    for axis in (0, 1):
        whole = where.sum(axis=axis) > MOST_OF_A_LINE * counts.sum(axis=axis)
        if 0 < np.count_nonzero(whole) <= MOST_LINES:
            lines |= np.expand_dims(whole, axis)
    lost = pixels.taken(lines)
    # a few strong ones may have bent the fit so far that it leaves others out: the strong ones first
    for some in (bad, bad & (size > size.max() / 2)):
        if np.count_nonzero(some & ~lost) <= MOST_DEFECTS * bad.size:
            return np.asarray(some | lost)
    return np.asarray(lost)
