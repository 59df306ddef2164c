"""Sine stars in closed form: a Gaussian blur solved exactly, the mean of each square pixel's area by quadrature.

Shares nothing with the program under test. A star exp(i g φ) keeps its form under a round blur and takes the factor
A(r) = g ∫ J_g(2π f r) M(f) / f df (its Hankel transform), which for M = exp(-2π²σ²f²) is, with z = r²/4σ²,
√(πz/2) e^{-z} (I_{(g-1)/2}(z) + I_{(g+1)/2}(z)) (Weber's integral; Watson, Theory of Bessel Functions, 13.3).
Positions in px, x to the right, y down, pixel centres at +0.5.
"""

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.special import ive

Values = NDArray[np.float64]


@dataclass(frozen=True)
class StarScene:
    """Light = level · (1 + shading) · (1 + modulation · A · cos(g φ + phase)), blurred, over square pixels, noise."""

    size: tuple[int, int] = (320, 300)
    """Width and height, px."""
    centre: tuple[float, float] = (160.3, 149.8)
    """x, y."""
    cycles: int = 72
    """g."""
    outer: float = 140.0
    """Radius, px; beyond it the mean level."""
    sigma: float = 0.5
    """Of the Gaussian blur, px."""
    level: float = 0.5
    """Mean light."""
    modulation: float = 0.7
    """Of the target."""
    phase: float = 0.4
    """rad."""
    affine: tuple[tuple[float, float], tuple[float, float]] = ((1.0, 0.0), (0.0, 1.0))
    """From px of the frame, about the centre, to the star's own plane (an oblique view)."""
    bend: float = 0.0
    """Tangential displacement in px at the outer radius, sin φ · r²: what distortion does to a star off the axis."""
    shading: tuple[float, float] = (0.0, 0.0)
    """Relative change of the light from the centre to the right and to the lower border."""
    cubic: float = 0.0
    """Tone: x → x + cubic · (x - level)³."""
    noise: float = 0.0
    """Standard deviation of white noise."""
    blur_y: float | None = None
    """Another sigma for stripes along x (their frequency along y), for an astigmatic unit; None is round."""

    def transfer(self, f: Values, azimuth: Values) -> Values:
        """Return the transfer function of blur and pixel at a frequency, where spokes lie at an azimuth, rad."""
        fx, fy = f * np.sin(azimuth), f * np.cos(azimuth)
        across = self.sigma if self.blur_y is None else self.blur_y
        blur = np.exp(-2 * np.pi**2 * ((self.sigma * fx) ** 2 + (across * fy) ** 2))
        return np.asarray(blur * np.sinc(fx) * np.sinc(fy))

    def mtf(self, f: float, middle: float = 0.0, width: float = 2 * np.pi) -> float:
        """Return its mean over the azimuths of a sector."""
        azimuth = middle + width * ((np.arange(720) + 0.5) / 720 - 0.5)
        return float(self.transfer(np.full(720, f), azimuth).mean())

    def mtf_crossing(self, level: float) -> float:
        """Return the first frequency at which the mean over all azimuths falls to a level."""
        f = np.arange(0.0, 1.0, 0.0005)
        values = np.array([self.mtf(float(one)) for one in f])
        below = int(np.argmax(values < level))
        part = (values[below - 1] - level) / (values[below - 1] - values[below])
        return float(f[below - 1] + part * 0.0005)

    def light(self, rng: np.random.Generator | None = None) -> Values:
        """Return the frame, rows × columns."""
        out = _quiet(replace(self, noise=0.0))
        return out.copy() if rng is None else out + rng.normal(0, self.noise, out.shape)

    def quiet(self) -> Values:
        """Return the frame without noise, worked out anew."""
        width, height = self.size
        out = np.empty((height, width))
        x = np.arange(width) + 0.5 - self.centre[0]
        for first in range(0, height, 64):
            y = np.arange(first, min(first + 64, height)) + 0.5 - self.centre[1]
            out[first : first + y.size] = self._mean(*np.meshgrid(x, y))
        right, down = np.meshgrid(
            (np.arange(width) + 0.5 - width / 2) / (width / 2), (np.arange(height) + 0.5 - height / 2) / (height / 2)
        )
        out = self.level + self.cubic * (out - self.level) ** 3 + (out - self.level)
        return np.asarray(out * (1 + self.shading[0] * right + self.shading[1] * down))

    def _mean(self, x: Values, y: Values) -> Values:
        """Return means over pixels by Gauss and Legendre: two nodes a side up to 0.08 cy/px, three to 0.2, then five.

        Of a sine of x = π f that leaves x⁴/270, x⁶/20 000 and 1e-9 of it at most.
        """
        out = np.zeros_like(x)
        f = 1.1 * self.cycles / (2 * np.pi * np.maximum(np.hypot(x, y), 1e-9))
        for mask, order in ((f < 0.08, 2), ((f >= 0.08) & (f < 0.2), 3), (f >= 0.2, 5)):
            nodes, weights = np.polynomial.legendre.leggauss(order)
            if not mask.any():
                continue
            u, v = x[mask], y[mask]
            for i in range(order):
                for j in range(order):
                    out[mask] += weights[i] * weights[j] / 4 * self._point(u + nodes[i] / 2, v + nodes[j] / 2)
        return out

    def _point(self, x: Values, y: Values) -> Values:
        (a, b), (c, d) = self.affine
        u, v = a * x + b * y, c * x + d * y
        r, phi = np.hypot(u, v), np.arctan2(v, u)
        turn = self.cycles * (phi + self.bend * np.sin(phi) * r / self.outer**2) + self.phase
        wave = self._amplitude(np.hypot(x, y), x, y, r) * np.cos(turn)
        return np.asarray(np.where(r < self.outer, self.level * (1 + self.modulation * wave), self.level))

    def amplitude(self, r: Values) -> Values:
        """Return A(r) of the round blur."""
        z = r**2 / (4 * self.sigma**2)
        order = (self.cycles - 1) / 2
        return np.asarray(np.sqrt(np.pi * z / 2) * (ive(order, z) + ive(order + 1, z)))

    def _amplitude(self, radius: Values, x: Values, y: Values, r: Values) -> Values:
        if self.affine == ((1.0, 0.0), (0.0, 1.0)) and self.blur_y is None and not self.bend:
            places = np.arange(0.0, float(r.max()) + 0.02, 0.01)  # straight lines between are good to 1e-6
            return np.asarray(np.interp(r, places, self.amplitude(places)))
        (a, b), (c, d) = self.affine
        phi = np.arctan2(c * x + d * y, a * x + b * y)
        bent = 1 + self.bend * np.cos(phi) * r / self.outer**2
        f = self.cycles * (a * d - b * c) * radius * bent / (2 * np.pi * np.maximum(r, 1e-9) ** 2)
        fx, fy = f * y / np.maximum(radius, 1e-9), f * x / np.maximum(radius, 1e-9)
        across = self.sigma if self.blur_y is None else self.blur_y
        return np.asarray(np.exp(-2 * np.pi**2 * ((self.sigma * fx) ** 2 + (across * fy) ** 2)))


@lru_cache(maxsize=24)
def _quiet(scene: StarScene) -> Values:
    return scene.quiet()
