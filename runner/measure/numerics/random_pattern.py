"""Stochastic patterns as they are drawn: noise of a known spectrum, and dead leaves; exactly known from their numbers.

Both are squares of `cells` × `cells`, continued periodically, with reflectance between `low` and `high` of the ground.
Their random numbers come from `RandomState`, whose stream numpy keeps for ever, so that a chart drawn today is known in
every later version.

`noise` is the trigonometric polynomial with amplitudes |k|^(-slope/2) over the wave vectors 0 < |k| ≤ cells/2 (cycles
over the square) and random phases, scaled to a standard deviation of 0.09 × (high - low) about their mean. It is
known between its cells too: nothing of it lies beyond half a cycle per cell.

`dead leaves` are opaque discs of one grey each, the first in front: radii with a density of r⁻³ from `smallest` to
`largest` cells, centres and greys uniform. Their borders are one cell wide.

References:
    G. Matheron, Éléments pour une théorie des milieux poreux (1967): the dead leaves model.
    ISO/TS 19567-2:2019 (texture by stochastic patterns).
"""

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

Raster = NDArray[np.float64]

COVERED = 1e-3
"""Light that still passes all leaves where drawing ends."""
MOST_LEAVES = 400_000
DEVIATION = 0.09
"""Standard deviation of noise over high - low: five and a half of them reach either end."""


@lru_cache(maxsize=4)
def noise(seed: int, cells: int, slope: float, low: float, high: float) -> Raster:
    """Return noise of a power spectrum |k|^-slope, cells × cells, at the cells' centres."""
    rng = np.random.RandomState(seed)  # its stream is frozen: artwork must stay what it was
    k = np.fft.fftfreq(cells) * cells
    size = np.hypot(k[:, None], k[None, :])
    phases = np.fft.fft2(rng.standard_normal((cells, cells)))
    phases /= np.maximum(np.abs(phases), 1e-300)
    inside = (size > 0) & (size < cells / 2)
    amplitude = np.where(inside, np.where(inside, size, 1.0) ** (-slope / 2), 0.0)
    field = np.fft.ifft2(amplitude * phases).real
    field *= DEVIATION * (high - low) / field.std()
    out = np.asarray((low + high) / 2 + field)
    out.flags.writeable = False
    return out


@lru_cache(maxsize=4)
def dead_leaves(seed: int, cells: int, smallest: float, largest: float, low: float, high: float) -> Raster:
    """Return dead leaves, cells × cells, at the cells' centres."""
    rng = np.random.RandomState(seed)
    light, through = np.zeros((cells, cells)), np.ones((cells, cells))
    for _ in range(MOST_LEAVES // 1000):
        draws = rng.random_sample((1000, 4))
        radii = (smallest**-2 - draws[:, 0] * (smallest**-2 - largest**-2)) ** -0.5
        for (_, u, v, grey), radius in zip(draws, radii, strict=True):
            _leaf(light, through, (u * cells, v * cells), radius, low + grey * (high - low))
        if through.max() < COVERED:
            break
    out = np.asarray(light + through * (low + high) / 2)
    out.flags.writeable = False
    return out


def _leaf(light: Raster, through: Raster, centre: tuple[float, float], radius: float, grey: float) -> None:
    """Lay one leaf behind those that lie already."""
    cells = light.shape[0]
    reach = int(radius + 1.5)
    rows = np.arange(int(centre[1]) - reach, int(centre[1]) + reach + 1)
    columns = np.arange(int(centre[0]) - reach, int(centre[0]) + reach + 1)
    place = np.ix_(rows % cells, columns % cells)
    free = through[place]
    if free.max() < COVERED:
        return
    distance = np.hypot(rows[:, None] + 0.5 - centre[1], columns[None, :] + 0.5 - centre[0])
    cover = np.clip(radius - distance + 0.5, 0.0, 1.0)
    light[place] += free * cover * grey
    through[place] = free * (1 - cover)
