"""Shading of an even field: means of blocks, relative to centre or maximum, extremes, ratios, where the maximum lies.

The frames are light over black of a field lit evenly (or of known unevenness). Each is averaged over a grid of blocks,
as ISO 17957 does for cameras; the same map relative to the centre is the relative irradiance of ISO 13653. The light is
taken to drift from frame to frame by a factor.

Noise of a block's mean: from the differences of two frames within the block, or, of a single frame, from those of a
pixel and its two neighbours (a pattern from pixel to pixel then counts as noise, so u is not too small). Where the
blocks' means scatter from frame to frame beyond that (rows or columns that move together), u is raised to it.

The largest of many noisy values is too large. How much so is taken from draws (JCGM 101): the noise is added once more
and the mean rise of the maximum subtracted. Where one block stands out that is all; where all are alike, extremes grow
as the noise, so adding it twice shows √2 - 1 of the rise and leaves √2 times of what is shown: that is counted in u.

References:
    ISO 17957:2015 (luminance shading of cameras on a block grid).
    ISO 13653:2019 (relative irradiance in the image field, relative to the centre).
    ISO 19056-1:2015 (brightness and uniformity of microscopes in bright field).
    ISO 21073:2019, 4.2 (uniformity of field and centring accuracy).
    JCGM 101:2008 (propagation of distributions).
"""

from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise
from math import hypot, sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.shading_peak import Peak, find_peak

Real = NDArray[np.float64]

DRAWS = 2000
"""Draws of the noise for extremes: u then repeats within 2 %."""
SEED = 17957
"""The draws are the same each time."""
ENOUGH = 2000
"""Pixels of a block that tell the noise within it: 1.6 % of its standard deviation; of larger ones some rows do."""


@dataclass(frozen=True)
class Figure:
    """A value and its standard uncertainty."""

    value: float
    """Best estimate."""
    u: float
    """Standard uncertainty."""


@dataclass(frozen=True)
class Extreme:
    """The block with the most or the least light."""

    light: Figure
    """Its light, what noise adds to an extreme taken off."""
    at: tuple[float, float]
    """Its middle, x and y in px from the frame's outer corner."""


@dataclass(frozen=True)
class ShadingMap:
    """Light of a field by blocks; coordinates in px from the frame's outer corner, x to the right, y down."""

    x: Real
    """Borders of the blocks along x, blocks + 1."""
    y: Real
    """Borders of the blocks along y, blocks + 1."""
    light: Real
    """Mean light of the blocks, rows × columns."""
    light_u: Real
    """Its standard uncertainty from noise."""
    centre: Figure
    """Light of the middle block, or the mean of the two or four middle ones."""
    maximum: Extreme
    """The brightest block."""
    minimum: Extreme
    """The darkest block."""
    ratio: Figure
    """Minimum over maximum (uniformity of ISO 21073 and ISO 19056-1)."""
    peak: Peak | None
    """Where a quadratic surface puts the maximum; None where none lies inside or none can be told."""

    @property
    def contrast(self) -> Figure:
        """Spread (max - min)/(max + min), which is (1 - ratio)/(1 + ratio)."""
        r = self.ratio
        return Figure((1 - r.value) / (1 + r.value), 2 * r.u / (1 + r.value) ** 2)

    @cached_property
    def to_centre(self) -> tuple[Real, Real]:
        """Light relative to the centre and its u, rows × columns (ISO 13653; ISO 17957)."""
        relative = self.light / self.centre.value
        weights = _centre_weights(self.light.shape)
        spread = self.light_u**2 * (1 - 2 * relative * weights) + (relative * self.centre.u) ** 2
        return relative, np.sqrt(np.maximum(0.0, spread)) / self.centre.value

    @cached_property
    def to_maximum(self) -> tuple[Real, Real]:
        """Light relative to the maximum and its u, rows × columns."""
        top = self.maximum.light
        relative = self.light / top.value
        return relative, np.hypot(self.light_u, relative * top.u) / top.value

    @property
    def corners(self) -> tuple[Figure, Figure, Figure, Figure]:
        """Corner blocks relative to the centre: upper left, upper right, lower left, lower right."""
        value, u = self.to_centre
        ends = ((0, 0), (0, -1), (-1, 0), (-1, -1))
        one, two, three, four = (Figure(float(value[end]), float(u[end])) for end in ends)
        return one, two, three, four


def shading_map(frames: Any, blocks: tuple[int, int], *, noise: float | None = None) -> ShadingMap:
    """Measure the shading of an even field.

    Args:
        frames: Frames × rows × columns, or that many arrays of rows × columns; one frame or more, light over black.
        blocks: Blocks along y and along x, 2 or more each.
        noise: Standard deviation of a pixel of one frame, white; None takes it from the frames.

    Raises:
        ValueError: Blocks of less than 2 × 4 pixels, frames of different size, values that are not finite, no light.
    """
    shape = _check(frames, blocks)
    y, x = (np.round(np.linspace(0, size, n + 1)).astype(np.intp) for size, n in zip(shape, blocks, strict=True))
    means = np.array([_block_means(frame, y, x) for frame in frames])
    levels = means.mean(axis=(1, 2))
    if not np.all(np.isfinite(levels)):
        raise ValueError("the frames hold values that are not finite numbers")
    if np.any(levels <= 0):
        raise ValueError(f"the light of a frame is {levels.min():g}; shading needs light over black in each")
    means *= (levels.mean() / levels)[:, None, None]
    light = means.mean(axis=0)
    counts = np.outer(np.diff(y), np.diff(x))
    within = _noise_within(frames, y, x) if noise is None else np.full(blocks, noise**2)
    light_u = np.sqrt(within / counts / len(frames) * _excess(means, within / counts))
    weights = _centre_weights(blocks)
    centre = Figure(float(np.sum(weights * light)), sqrt(float(np.sum((weights * light_u) ** 2))))
    if centre.value <= 0 or light.min() <= 0:
        raise ValueError(f"a block's light is {light.min():g}; shading needs light over black in each")
    middle_y, middle_x = (edges[:-1] / 2 + edges[1:] / 2 for edges in (y, x))
    maximum, minimum, ratio = _extremes(light, light_u, middle_y, middle_x)
    return ShadingMap(
        x=x.astype(np.float64),
        y=y.astype(np.float64),
        light=light,
        light_u=light_u,
        centre=centre,
        maximum=maximum,
        minimum=minimum,
        ratio=ratio,
        peak=find_peak(middle_x, middle_y, light, light_u, (shape[1], shape[0])),
    )


def _check(frames: Any, blocks: tuple[int, int]) -> tuple[int, int]:
    shapes = {tuple(frame.shape) for frame in frames}
    if len(shapes) != 1 or len(next(iter(shapes))) != 2:
        raise ValueError(f"the frames have sizes {sorted(shapes)}; one size of rows × columns is needed")
    rows, columns = next(iter(shapes))
    if min(blocks) < 2 or rows < 2 * blocks[0] or columns < 4 * blocks[1]:
        raise ValueError(
            f"{blocks[0]} × {blocks[1]} blocks of {rows} rows × {columns} columns; 2 or more each way are allowed, "
            "each of at least 2 × 4 pixels"
        )
    return rows, columns


def _block_means(frame: NDArray[Any], y: NDArray[np.intp], x: NDArray[np.intp]) -> Real:
    sums = np.array([frame[a:b].sum(axis=0, dtype=np.float64) for a, b in pairwise(y)])
    return np.asarray(np.add.reduceat(sums, x[:-1], axis=1) / np.outer(np.diff(y), np.diff(x)))


def _noise_within(frames: Any, y: NDArray[np.intp], x: NDArray[np.intp]) -> Real:
    """Return the variance of a pixel of one frame, by blocks."""
    out = np.empty((len(y) - 1, len(x) - 1))
    first, last = frames[0], frames[-1]
    step = max(1, int(np.diff(y).min() * np.diff(x).min()) // ENOUGH)
    for row, (a, b) in enumerate(pairwise(y)):
        if len(frames) > 1:
            apart = np.subtract(first[a:b:step], last[a:b:step], dtype=np.float64) / sqrt(2)
        else:
            one = np.asarray(first[a:b:step], dtype=np.float64)
            apart = np.pad(one[:, 1:-1] - (one[:, :-2] + one[:, 2:]) / 2, ((0, 0), (1, 1)), mode="edge") / sqrt(1.5)
        count = apart.shape[0] * np.diff(x)
        sums = np.add.reduceat(apart.sum(axis=0), x[:-1])
        squares = np.add.reduceat(np.einsum("ij,ij->j", apart, apart), x[:-1])
        out[row] = (squares - sums**2 / count) / (count - 1)
    return np.maximum(0.0, out)


def _excess(means: Real, expected: Real) -> float:
    """Return how far the blocks' means scatter from frame to frame beyond the noise within them, at least 1."""
    n = len(means)
    if n < 2 or not np.all(expected > 0):
        return 1.0
    scatter = float(np.sum((means - means.mean(axis=0)) ** 2 / expected))
    return max(1.0, scatter / ((n - 1) * (expected.size - 1)))


def _centre_weights(blocks: tuple[int, ...]) -> Real:
    rows, columns = (np.arange(n)[(n - 1) // 2 : n // 2 + 1] for n in blocks)
    weights = np.zeros(blocks)
    weights[np.ix_(rows, columns)] = 1 / (rows.size * columns.size)
    return weights


def _extremes(light: Real, u: Real, y: Real, x: Real) -> tuple[Extreme, Extreme, Figure]:
    draws = light + u * np.random.default_rng(SEED).standard_normal((DRAWS, *light.shape))
    high, low = draws.max(axis=(1, 2)), draws.min(axis=(1, 2))
    top, bottom = np.unravel_index(np.argmax(light), light.shape), np.unravel_index(np.argmin(light), light.shape)

    def figure(found: float, own: float, drawn: Real) -> Figure:
        # of many blocks alike the draws' extreme scatters less than the noise that was there before them
        rise = float(drawn.mean()) - found
        return Figure(found - rise, hypot(max(own, float(drawn.std())), sqrt(2) * rise))

    ratio = float(light[bottom] / light[top])
    u_ratio = ratio * hypot(float(u[top] / light[top]), float(u[bottom] / light[bottom]))
    return (
        Extreme(figure(float(light[top]), float(u[top]), high), (float(x[top[1]]), float(y[top[0]]))),
        Extreme(figure(float(light[bottom]), float(u[bottom]), low), (float(x[bottom[1]]), float(y[bottom[0]]))),
        figure(ratio, u_ratio, low / high),
    )
