"""Line spreads in closed form, each with its edge spread and its transfer function, and the lattice they are fitted on.

Three kinds of part make up a fitted line spread (x is the distance along the edge's normal, px):

* pixel aperture ⊗ Gaussian: the square pixel seen along the normal is the trapezoid box(cos t) ⊗ box(sin t);
* a Lorentzian b / (π (x² + b²)), whose 1/x² tail is that of every diffraction-limited line spread;
* narrow Gaussian kernels, which together make any smooth correction.

References:
    Goodman, Introduction to Fourier Optics (2nd ed. 1996), ch. 6: a pupil's sharp rim gives the transfer function a
    finite slope at zero frequency, hence a line spread that falls as 1/x².
"""

from dataclasses import dataclass, replace
from functools import cached_property, lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

Array = NDArray[np.float64]

_THINNEST = 1e-3  # px; below this a side of the pixel, seen along the normal, is no longer told from a line
_ROOT_2PI = float(np.sqrt(2 * np.pi))

WARP = 4.0
"""px (times the lattice's scale); bins and kernels keep their width up to about here and widen in proportion beyond."""
BIN = 0.05
"""Width of the innermost bins, px times scale: the model is interpolated between them to better than 1e-6."""
KERNEL_STEP = 0.35
"""Distance of the innermost kernels, px times scale: together they carry every frequency up to 1.4 cy/px."""
WIDE = 2.0
"""px; line spreads of a greater standard deviation are fitted on a lattice scaled up with them."""
KERNEL_SIGMA = 0.7
"""Kernel sigma in units of its distance to the next: neighbours overlap smoothly, without ripple."""
GRID: Array = 0.005 * np.arange(201.0)
"""Frequencies on which transfer functions are tabulated, cy/px: a parabola between three is good to 1e-6."""


def pixel_gauss(x: Array, sigma: float, sides: tuple[float, float]) -> tuple[Array, Array, Array, Array]:
    """Return edge spread, line spread and its first two derivatives of a square pixel's aperture blurred by a Gaussian.

    Args:
        x: Distances along the normal, px.
        sigma: Standard deviation of the Gaussian, px.
        sides: The pixel's two sides as seen along the normal, px: a·cos t and a·sin t for side a and edge angle t.

    Returns:
        (edge spread from 0 to 1, line spread in 1/px, its derivatives in 1/px² and 1/px³).
    """
    a, b = (max(side, _THINNEST) / 2 for side in sides)
    corners = np.array([a + b, a - b, b - a, -a - b]) / sigma
    z = x[:, None] / sigma + corners[None, :]
    phi = ndtr(z)
    density = np.exp(-0.5 * z * z) / _ROOT_2PI
    signs = np.array([1.0, -1.0, -1.0, 1.0]) / (4 * a * b)
    # antiderivatives of the normal distribution, the second difference of which is the trapezoid's part
    once = z * phi + density
    twice = 0.5 * ((z * z + 1) * phi + z * density)
    return sigma**2 * (twice @ signs), sigma * (once @ signs), phi @ signs, density @ signs / sigma


def pixel_transfer(frequency: Array, sides: tuple[float, float]) -> Array:
    """Return the square pixel's own transfer function along the edge's normal, sinc(f·a·cos t)·sinc(f·a·sin t)."""
    return np.asarray(np.sinc(frequency * sides[0]) * np.sinc(frequency * sides[1]))


def gauss_transfer(frequency: Array, sigma: float) -> Array:
    """Return exp(-2 π² σ² f²)."""
    return np.asarray(np.exp(-2 * (np.pi * sigma * frequency) ** 2))


def tail(x: Array, width: float) -> tuple[Array, Array]:
    """Return edge spread and line spread of a Lorentzian of half-width `width`, px."""
    return 0.5 + np.arctan(x / width) / np.pi, width / (np.pi * (x * x + width * width))


def tail_transfer(frequency: Array, width: float) -> Array:
    """Return exp(-2 π b |f|)."""
    return np.asarray(np.exp(-2 * np.pi * width * np.abs(frequency)))


@dataclass(frozen=True)
class Lattice:
    """Bins and kernels along the normal, in units of `scale` px; the same arrays serve every edge of that reach."""

    scale: float
    """px per unit."""
    nodes: Array
    """Bin centres, px, rising; bins are equal in asinh(x / warp)."""
    first: float
    """Warped coordinate of the first node."""
    pitch: float
    """Warped distance of the nodes."""
    centres: Array
    """Kernel centres, px."""
    sigmas: Array
    """Kernel sigmas, px."""
    steps: Array
    """Kernel distances, px."""
    spreads: Array
    """Kernels' edge spreads at the nodes, nodes × kernels."""
    densities: Array
    """Kernels' line spreads at the nodes, 1/px, nodes × kernels."""

    def warped(self, x: Array) -> Array:
        """Return positions in units of nodes: 0 at the first node, 1 at the second."""
        return np.asarray((np.arcsinh(x / (WARP * self.scale)) - self.first) / self.pitch)

    @cached_property
    def stretch(self) -> Array:
        """Distance from node to node, px, as the derivative of position to warped position at each node."""
        return np.asarray(self.pitch * np.hypot(WARP * self.scale, self.nodes))

    def interpolate(self, at: Array, values: Array, slopes: Array) -> Array:
        """Cubic Hermite interpolation between nodes; `at` is `warped(x)`, slopes are per px."""
        left = np.clip(at.astype(np.intp), 0, self.nodes.size - 2)
        t = at - left
        slope = slopes * self.stretch
        rise, s0, s1 = np.diff(values), slope[:-1], slope[1:]
        second, third = 3 * rise - 2 * s0 - s1, s0 + s1 - 2 * rise
        return np.asarray(values[left] + t * (s0[left] + t * (second[left] + t * third[left])))

    def transfer(self, frequency: Array) -> NDArray[np.complex128]:
        """Return the kernels' transforms ∫ k(x) exp(-2πi f x) dx, frequencies × kernels."""
        f = frequency[:, None]
        return np.asarray(np.exp(-2 * (np.pi * self.sigmas[None, :] * f) ** 2 - 2j * np.pi * f * self.centres[None, :]))

    @cached_property
    def on_grid(self) -> NDArray[np.complex128]:
        """The same on `GRID`, kept for every edge of this lattice."""
        return self.transfer(GRID)

    def without_kernels(self) -> "Lattice":
        """Return the same bins with no kernels, for a plain edge."""
        none, no_columns = np.zeros(0), np.zeros((self.nodes.size, 0))
        return replace(self, centres=none, sigmas=none, steps=none, spreads=no_columns, densities=no_columns)

    def kernels(self, x: Array) -> tuple[Array, Array]:
        """Return the kernels' edge spreads and line spreads at any x, points × kernels."""
        return _kernels(x, self.centres, self.sigmas)


def lattice_for(reach: float, width: float) -> Lattice:
    """Return the lattice for distances up to `reach` px and line spreads of standard deviation about `width` px.

    Scale and reach go up in steps of a fifth, so that regions of one size share one lattice.
    """
    scale = 1.2 ** max(0, round(np.log(max(width, 0.1) / WIDE) / np.log(1.2)))
    whole = 1.2 ** float(np.ceil(np.log(max(reach, 2.0)) / np.log(1.2)))
    return _lattice(scale, whole)


@lru_cache(maxsize=64)
def _lattice(scale: float, reach: float) -> Lattice:
    end = float(np.arcsinh(reach / (WARP * scale)))
    pitch = BIN / WARP
    count = int(np.ceil(end / pitch)) + 2
    warped = pitch * np.arange(-count, count + 1)
    nodes = WARP * scale * np.sinh(warped)
    spacing = KERNEL_STEP / WARP
    most = int(np.ceil(min(end, float(np.arcsinh(30 / WARP))) / spacing))
    spots = spacing * np.arange(-most, most + 1)
    centres = WARP * scale * np.sinh(spots)
    steps = WARP * scale * np.cosh(spots) * spacing
    spreads, densities = _kernels(nodes, centres, KERNEL_SIGMA * steps)
    return Lattice(scale, nodes, float(warped[0]), pitch, centres, KERNEL_SIGMA * steps, steps, spreads, densities)


def _kernels(x: Array, centres: Array, sigmas: Array) -> tuple[Array, Array]:
    z = (x[:, None] - centres[None, :]) / sigmas[None, :]
    return ndtr(z), np.exp(-0.5 * z * z) / (_ROOT_2PI * sigmas[None, :])
