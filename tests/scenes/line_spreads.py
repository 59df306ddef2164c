"""Line spreads in closed form, each with its transfer function and its edge spread through a square pixel.

Nothing here comes from the program under test. A pixel that an edge crosses at an angle acts along the edge's normal
as the convolution of two boxes (its sides projected on the normal), so the edge spread through the pixel is a second
difference of the twice integrated edge spread of the optics: exact, without sampling. Distances are in px, towards the
bright side; frequencies in cy/px along the normal; H(f) = ∫ l(x) exp(-2πi f x) dx.
"""

from dataclasses import dataclass
from functools import lru_cache
from math import factorial
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.interpolate import BSpline, make_interp_spline
from scipy.special import ndtr

Values = NDArray[np.float64]
Spectrum = NDArray[np.complex128]
Sides = tuple[float, float]
"""The pixel's two sides projected on the normal, px; the first is the longer, the second may be 0."""


class LineSpread(Protocol):
    """Optics as seen across an edge."""

    def transfer(self, frequency: ArrayLike) -> Spectrum:
        """Return H(f) of the optics alone."""
        ...

    def edge(self, distance: ArrayLike, sides: Sides) -> Values:
        """Return the edge spread, from 0 to 1, averaged over a pixel with those projected sides."""
        ...


def boxes_edge(distance: ArrayLike, widths: tuple[float, ...]) -> Values:
    """Return a unit step convolved with unit-area boxes of those widths: a spline of truncated powers, exact."""
    x = np.asarray(distance, dtype=np.float64)
    widths = tuple(w for w in widths if w > 0)
    if not widths:
        return np.asarray(np.where(x > 0, 1.0, np.where(x < 0, 0.0, 0.5)))
    half, order = sum(widths) / 2, len(widths)
    inner = np.clip(x, -half, half)
    total = np.zeros_like(inner)
    for corner in range(2**order):
        signs = [1 if corner >> k & 1 else -1 for k in range(order)]
        shift = sum(s * w / 2 for s, w in zip(signs, widths, strict=True))
        total += np.prod(signs) * np.maximum(inner + shift, 0.0) ** order
    return np.asarray(total / (factorial(order) * np.prod(widths)))


def second_difference(twice_integrated: ArrayLike, sides: Sides) -> Values:
    """Divide the sum f(++) - f(+-) - f(-+) + f(--), given on a leading axis of four, by both sides."""
    f = np.asarray(twice_integrated, dtype=np.float64)
    return np.asarray((f[0] - f[1] - f[2] + f[3]) / (sides[0] * sides[1]))


def corners(distance: ArrayLike, sides: Sides) -> Values:
    """Return the distance shifted by half a side each way, on a leading axis of four."""
    x, (a, b) = np.asarray(distance, dtype=np.float64), sides
    return np.stack([x + (a + b) / 2, x + (a - b) / 2, x - (a - b) / 2, x - (a + b) / 2])


@dataclass(frozen=True)
class Gaussian:
    """Gaussian line spread, transform exp(-2π²σ²f²)."""

    sigma: float
    """Standard deviation, px."""

    def transfer(self, frequency: ArrayLike) -> Spectrum:
        """Return exp(-2π²σ²f²)."""
        f = np.asarray(frequency, dtype=np.float64)
        return np.exp(-2 * (np.pi * self.sigma * f) ** 2).astype(np.complex128)

    def edge(self, distance: ArrayLike, sides: Sides) -> Values:
        """Return the normal distribution averaged over the pixel."""
        x = np.asarray(distance, dtype=np.float64)
        if min(sides) <= 0:
            return np.asarray(_normal_over_box(x, self.sigma, max(sides)))
        # ∬ Φ = ½ [(x² + σ²) Φ(x/σ) + x σ φ(x/σ)]; by symmetry only the small side is computed, so nothing cancels
        z = corners(-np.abs(x), sides) / self.sigma
        density = np.exp(-(z**2) / 2) / np.sqrt(2 * np.pi)
        inner = second_difference(self.sigma**2 * ((z**2 + 1) * ndtr(z) + z * density) / 2, sides)
        return np.where(x > 0, 1 - inner, inner)


def _normal_over_box(x: Values, sigma: float, side: float) -> Values:
    if side <= 0:
        return np.asarray(ndtr(x / sigma))
    ends = np.stack([x + side / 2, x - side / 2]) / sigma
    integral = sigma * (ends * ndtr(ends) + np.exp(-(ends**2) / 2) / np.sqrt(2 * np.pi))
    return np.asarray((integral[0] - integral[1]) / side)


@dataclass(frozen=True)
class Boxes:
    """One box (transform sinc) or several convolved; two equal ones are a triangle (transform sinc²)."""

    widths: tuple[float, ...]
    """Full width of each box, px."""

    def transfer(self, frequency: ArrayLike) -> Spectrum:
        """Return the product of sinc(f w)."""
        f = np.asarray(frequency, dtype=np.float64)
        h = np.ones(f.shape, dtype=np.complex128)
        for width in self.widths:
            h = h * np.sinc(f * width)
        return h

    def edge(self, distance: ArrayLike, sides: Sides) -> Values:
        """Return the step through all boxes, the pixel's two among them."""
        return boxes_edge(distance, (*self.widths, *sides))


def box(width: float) -> Boxes:
    """Return a box line spread of that full width, px."""
    return Boxes((width,))


def triangle(base: float) -> Boxes:
    """Return a triangular line spread of that full base, px."""
    return Boxes((base / 2, base / 2))


@dataclass(frozen=True)
class Exponential:
    """Two-sided exponential line spread exp(-|x|/L)/(2L), transform 1/(1 + (2πfL)²), a Lorentzian."""

    length: float
    """Decay length L, px."""

    def transfer(self, frequency: ArrayLike) -> Spectrum:
        """Return 1/(1 + (2πfL)²)."""
        f = np.asarray(frequency, dtype=np.float64)
        return (1 / (1 + (2 * np.pi * f * self.length) ** 2)).astype(np.complex128)

    def edge(self, distance: ArrayLike, sides: Sides) -> Values:
        """Return the step through the pixel plus L² times the second difference of the bare edge spread.

        The line spread obeys l = δ + L² l'', so the twice integrated edge spread is the step's plus L² times itself.
        """
        x = np.asarray(distance, dtype=np.float64)
        if min(sides) <= 0:
            raise ValueError("an exponential line spread is rendered through a pixel with two sides only")
        z = corners(x, sides) / self.length
        bare = np.where(z < 0, np.exp(-np.abs(z)) / 2, 1 - np.exp(-np.abs(z)) / 2)
        return np.asarray(boxes_edge(x, sides) + self.length**2 * second_difference(bare, sides))


@dataclass(frozen=True)
class Pupil:
    """A circular pupil with aberrations: incoherent transfer function along the normal by pupil autocorrelation.

    References:
        J. W. Goodman, Introduction to Fourier Optics, 6.3 and 6.4; H. H. Hopkins, Proc. R. Soc. A 231 (1955) 91.
    """

    cutoff: float
    """Cut-off frequency 1/(λN), cy/px."""
    defocus: float = 0.0
    """W20, waves."""
    coma: float = 0.0
    """W31 along the normal, waves."""
    spherical: float = 0.0
    """W40, waves."""
    wavefront_tilt: float = 0.0
    """W11 along the normal, waves: shifts the line spread, so that coma can be balanced."""

    def transfer(self, frequency: ArrayLike) -> Spectrum:
        """Return the normalised autocorrelation of the pupil function."""
        f = np.atleast_1d(np.asarray(frequency, dtype=np.float64))
        s = np.abs(f) / self.cutoff
        inside = s < 1
        h = np.zeros(f.shape, dtype=np.complex128)
        if (self.defocus, self.coma, self.spherical, self.wavefront_tilt) == (0, 0, 0, 0):
            h[inside] = 2 / np.pi * (np.arccos(s[inside]) - s[inside] * np.sqrt(1 - s[inside] ** 2))
        else:
            h[inside] = self._autocorrelation(s[inside])
        return np.where(f < 0, np.conj(h), h).reshape(np.shape(frequency))

    def _autocorrelation(self, s: Values) -> Spectrum:
        nodes, weights = np.polynomial.legendre.leggauss(64)
        # y = sqrt(1-s²) sin t takes the square-root ends out of the area integral
        t, wt = np.pi / 4 * (nodes + 1), np.pi / 4 * weights
        sq = np.sqrt(1 - s**2)[:, None, None]
        y = sq * np.sin(t)[None, :, None]
        dy = sq * (np.cos(t) * wt)[None, :, None]
        s3 = s[:, None, None]
        half = np.sqrt(1 - y**2) - s3
        x, dx = half * nodes[None, None, :], half * weights[None, None, :]
        difference = 4 * x * s3 * (self.defocus + 2 * self.spherical * (x**2 + s3**2 + y**2))
        difference = difference + self.coma * 2 * s3 * (3 * x**2 + s3**2 + y**2) + 2 * s3 * self.wavefront_tilt
        # positive tilt shifts the line spread by -2 W11/fc, so positive coma trails towards the dark side
        return np.asarray(2 / np.pi * np.sum(np.exp(2j * np.pi * difference) * dx * dy, axis=(1, 2)))

    def edge(self, distance: ArrayLike, sides: Sides) -> Values:
        """Return ½ + (1/π) ∫ Im[H(f) exp(2πi f x)]/f df through the pixel, by Gauss-Legendre quadrature."""
        return fourier_edge(self, self.cutoff, distance, sides)


@dataclass(frozen=True)
class Sharpened:
    """Unsharp mask on the continuous line spread: H (1 + g (1 - exp(-2π²σ²f²)))."""

    base: Gaussian | Pupil
    """What is sharpened."""
    gain: float
    """g."""
    sigma: float
    """σ of the mask, px."""

    def transfer(self, frequency: ArrayLike) -> Spectrum:
        """Return the sharpened transfer function."""
        return np.asarray(
            self.base.transfer(frequency) * (1 + self.gain * (1 - Gaussian(self.sigma).transfer(frequency)))
        )

    def edge(self, distance: ArrayLike, sides: Sides) -> Values:
        """Return (1+g) times the base's edge minus g times the base's edge blurred by the mask."""
        if isinstance(self.base, Gaussian):
            blurred = Gaussian(float(np.hypot(self.base.sigma, self.sigma)))
            return (1 + self.gain) * self.base.edge(distance, sides) - self.gain * blurred.edge(distance, sides)
        return fourier_edge(self, self.base.cutoff, distance, sides)


def fourier_edge(spread: "Pupil | Sharpened", cutoff: float, distance: ArrayLike, sides: Sides) -> Values:
    """Return the edge spread of band-limited optics through the pixel; error below 1e-9, tails included."""
    x = np.asarray(distance, dtype=np.float64)
    reach = 16.0 * np.ceil((float(np.max(np.abs(x), initial=1.0)) + 1) / 16)
    return np.asarray(_edge_table(spread, cutoff, reach, sides)(x))


@lru_cache(maxsize=64)
def _edge_table(spread: "Pupil | Sharpened", cutoff: float, reach: float, sides: Sides) -> BSpline:
    """Tabulate the edge spread at 0.05 px (quintic interpolation error below 1e-9 for cut-offs up to 1 cy/px)."""
    x = np.arange(-reach, reach + 0.01, 0.05 * min(1.0, 0.6 / cutoff))
    nodes, weights = np.polynomial.legendre.leggauss(int(6 * cutoff * reach) + 120)
    root, wr = (nodes + 1) / 2, weights / 2
    f = cutoff * (1 - root**2)  # the square root at the cut-off is taken out by f = fc (1 - r²)
    h = spread.transfer(f) * np.sinc(f * sides[0]) * np.sinc(f * sides[1]) * (2 * cutoff * root * wr) / f
    values = np.full(x.shape, 0.5)
    for part in range(0, x.size, 1024):
        phase = 2 * np.pi * np.outer(x[part : part + 1024], f)
        values[part : part + 1024] += (np.sin(phase) @ h.real + np.cos(phase) @ h.imag) / np.pi
    return make_interp_spline(x, values, k=5)
