"""Noise that neighbouring pixels share: found in what a fit leaves over, carried into the fitted numbers' covariance.

Interpolated colours, denoising and sharpening make it. The fit stays what it is; its covariance over repeated captures
becomes A C Aᵀ, A the fit's linear response to the pixels and C the noise as it is (Huber 1967, the sandwich).

References:
    Huber, Proc. Fifth Berkeley Symp. Math. Statist. Prob. 1 (1967) 221 (from memory).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import sparse

from runner.measure.numerics.edge_model import Linear, Pixels, information
from runner.measure.numerics.line_spread import Array, Lattice

NEAR, FAR = 2, 4
"""px; correlation is looked for in lags up to the first, and summed up to the second where it is found."""
HALF = tuple((dy, dx) for dy in range(FAR + 1) for dx in range(-FAR if dy else 1, FAR + 1))
"""Lags (rows, columns) up to the far ones, one of each pair that differ in sign only."""
LEAST_POWER = 0.5
"""Mean squared residual over its expected variance: below, it is rounding and misfit under the noise floor."""
CERTAIN = 4.0
"""Standard deviations from which correlation is no longer chance."""
SINGLE = 3.0
"""The same for one single lag beyond the near ones."""
LEAST_SUM = 0.1
"""Sharpening takes noise away at low frequencies; a tenth of the variance is left by any that is used."""


@dataclass(frozen=True)
class Correlation:
    """Autocorrelation of a region's noise, lag zero left out."""

    lags: NDArray[np.intp]
    """Lags × (rows, columns), either sign."""
    shares: Array
    """Covariance at each lag over the variance."""

    @property
    def whole(self) -> float:
        """Factor on the variance of means over many pixels: the noise power at frequency zero over that of white."""
        return max(LEAST_SUM, 1 + float(self.shares.sum()))

    def within_band(self, normal: float) -> float:
        """Return the mean noise power from 0 to 0.5 cy/px along a normal (rad) over that of white noise."""
        return max(LEAST_SUM, 1 + float(self.shares @ np.sinc(self.along(normal))))

    @property
    def squared(self) -> float:
        """Factor by which the variance of a variance grows."""
        return 1 + float(self.shares @ self.shares)

    def along(self, normal: float) -> Array:
        """Return the lags' parts along a normal (rad from +x towards +y), px."""
        return np.asarray(self.lags @ np.array([np.sin(normal), np.cos(normal)]))


def correlation(linear: Linear, pixels: Pixels, raised: float) -> Correlation | None:
    """Return how pixels' noise goes together, or None where chance explains it.

    Args:
        linear: A linearisation about the fit.
        pixels: The region.
        raised: Factor by which the variances behind its weights exceed the noise of single pixels.
    """
    scaled = linear.residual * np.sqrt(raised * linear.weights[linear.index])
    scaled = scaled - scaled.mean()
    power = float(np.mean(scaled * scaled))
    if not power > LEAST_POWER:
        return None
    picture = pixels.picture(scaled / np.sqrt(power))
    used = None if pixels.kept is None else pixels.picture(np.ones_like(scaled))
    shares, pairs = np.array([_shared(picture, used, lag) for lag in HALF]).T
    near = np.array([max(abs(dy), abs(dx)) <= NEAR for dy, dx in HALF])
    deviations = shares * np.sqrt(pairs)
    count = int(np.count_nonzero(near & (pairs > 0)))
    squares, total = float((deviations[near] ** 2).sum()), abs(float(deviations[near].sum()))
    if squares < count + CERTAIN * np.sqrt(2 * count) and total < CERTAIN * np.sqrt(count):
        return None
    kept = near | (np.abs(deviations) > SINGLE)
    half = np.array(HALF)[kept]
    return _possible(np.concatenate([half, -half]), np.tile(shares[kept], 2))


def _possible(lags: NDArray[np.intp], shares: Array) -> Correlation:
    """Return the nearest correlation whose noise power falls below `LEAST_SUM` of white noise's at no frequency.

    Single lags, each with its chance, need not make a possible one.
    """
    grid = np.zeros((2 * FAR + 1, 2 * FAR + 1))
    grid[0, 0] = 1.0
    grid[lags[:, 0], lags[:, 1]] = shares
    power = np.maximum(np.fft.fft2(grid).real, LEAST_SUM)
    grid = np.fft.ifft2(power / power.mean()).real
    half = np.array(HALF)
    return Correlation(np.concatenate([half, -half]), np.tile(grid[half[:, 0], half[:, 1]], 2))


def _shared(picture: Array, used: Array | None, lag: tuple[int, int]) -> tuple[float, float]:
    """Mean product of all pairs of pixels at a lag, and their number; (0, 0) where there are none."""

    def product(values: Array) -> float:
        (rows, columns), (dy, dx) = values.shape, lag
        a = values[dy:, max(dx, 0) : columns + min(dx, 0)]
        b = values[: rows - dy, max(-dx, 0) : columns - max(dx, 0)]
        return float(np.vdot(a, b))

    rows, columns = picture.shape
    pairs = float(max(0, rows - lag[0]) * max(0, columns - abs(lag[1]))) if used is None else product(used)
    return (product(picture) / pairs, pairs) if pairs else (0.0, 0.0)


def correlated_information(
    linear: Linear, pixels: Pixels, lattice: Lattice, found: Correlation, normal: float
) -> Array:
    """Return Jᵀ W½ R W½ J, R the noise's correlation, which is Jᵀ W J where the noise is white.

    Pixels at a lag lie a fixed distance further along the normal, so R mixes the columns of the design node by node.
    """
    size = lattice.nodes.size
    rows = np.tile(np.arange(size), found.shares.size + 1)
    places = lattice.nodes[None, :] + np.append(0.0, found.along(normal))[:, None]
    at = np.clip(lattice.warped(places.ravel()), 0, size - 1)
    left = np.minimum(at.astype(np.intp), size - 2)
    share = np.repeat(np.append(1.0, found.shares), size)
    entries = np.concatenate([share * (1 - at + left), share * (at - left)])
    mix = sparse.csr_array((entries, (np.tile(rows, 2), np.concatenate([left, left + 1]))), shape=(size, size))
    mixed = information(pixels, linear, linear.weights, mix)
    return np.asarray((mixed + mixed.T) / 2)
