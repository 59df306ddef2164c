"""Bars in closed form: square waves by their Fourier series, three bars by the Gaussian's integral, over square pixels.

Shares nothing with the program under test. Positions in px from the patch's centre, x to the right, y down.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

Values = NDArray[np.float64]


@dataclass(frozen=True)
class SquareScene:
    """Light = level · (1 + shading) · (1 + contrast · square wave), blurred, over square pixels, with noise."""

    size: tuple[int, int] = (120, 100)
    """Width and height, px."""
    frequency: tuple[float, float] = (0.06, 0.01)
    """Components along x and y, cy/px."""
    level: float = 0.5
    """Mean light."""
    contrast: float = 0.6
    """Of the target."""
    sigma: float = 0.5
    """Of the blur, px; 0 is none."""
    phase: float = 0.3
    """Of the fundamental at the centre, rad."""
    duty: float = 0.5
    """Bright part of a period."""
    shading: tuple[float, float] = (0.0, 0.0)
    """Relative change of the light from the centre to the right and to the lower border."""
    noise: float = 0.0
    """Standard deviation of white noise."""

    @property
    def f(self) -> float:
        """Frequency along the normal, cy/px."""
        return float(np.hypot(*self.frequency))

    def transfer(self, f: float) -> float:
        """Return the transfer function of blur and pixel along the bars' normal."""
        x, y = (f * part / self.f for part in self.frequency)
        return float(np.exp(-2 * (np.pi * self.sigma * f) ** 2) * np.sinc(x) * np.sinc(y))

    def term(self, order: int) -> float:
        """Return the amplitude of cos(k θ) of the seen wave: bright bars of width d have 2/(πk) sin(πkd) twice."""
        return 4 / (np.pi * order) * float(np.sin(np.pi * order * self.duty)) * self.transfer(order * self.f)

    def seen_contrast(self, orders: int = 401) -> float:
        """Return (bar - space) / (bar + space) at the middles of bars and spaces."""
        odd = sum(self.term(k) for k in range(1, orders, 2))
        even = sum(self.term(k) for k in range(2, orders, 2))
        mean = 1 + self.contrast * (2 * self.duty - 1)
        return self.contrast * odd / (mean + self.contrast * even)

    def light(self, rng: np.random.Generator | None = None) -> Values:
        """Return the patch, rows × columns; terms below 1e-6 are left out."""
        w, h = self.size
        x, y = np.arange(w) - (w - 1) / 2, np.arange(h) - (h - 1) / 2
        turn = 2 * np.pi * (self.frequency[0] * x[None, :] + self.frequency[1] * y[:, None]) + self.phase
        wave = np.full(turn.shape, 2 * self.duty - 1)
        for order in range(1, 400):
            if abs(self.term(order)) > 1e-6:
                wave += self.term(order) * np.cos(order * turn)
        shade = 1 + self.shading[0] * x[None, :] / (w / 2) + self.shading[1] * y[:, None] / (h / 2)
        out = self.level * (1 + self.contrast * wave) * shade
        return np.asarray(out if rng is None else out + rng.normal(0, self.noise, out.shape))


def blurred_step(distance: Values, sigma: float, sides: tuple[float, float]) -> Values:
    """Return a step blurred by a Gaussian and averaged over a pixel with these projected sides, by quadrature."""
    nodes, weights = np.polynomial.legendre.leggauss(6)
    out = np.zeros_like(distance)
    for u, wu in zip(nodes, weights, strict=True):
        for v, wv in zip(nodes, weights, strict=True):
            out += wu * wv / 4 * ndtr((distance + u * sides[0] / 2 + v * sides[1] / 2) / sigma)
    return out


@dataclass(frozen=True)
class ThreeBars:
    """Three bars five times as long as wide, spaces as wide as bars (MIL-STD-150A), blurred, over square pixels."""

    size: tuple[int, int] = (80, 80)
    """Width and height, px."""
    centre: tuple[float, float] = (0.3, -0.4)
    """Of the middle bar, from the patch's centre, px."""
    period: float = 10.0
    """px."""
    turn: float = 0.1
    """Direction of the bars' normal from the x axis, rad."""
    background: float = 0.2
    """Light around."""
    bars: float = 0.8
    """Light of the bars."""
    sigma: float = 0.6
    """Of the blur, px."""
    noise: float = 0.0
    """Standard deviation of white noise."""

    def profile(self, t: Values) -> Values:
        """Return the blurred bars along their normal, 0 to 1, over pixels."""
        sides = abs(float(np.cos(self.turn))), abs(float(np.sin(self.turn)))
        half, out = self.period / 4, np.zeros_like(t)
        for place in (-self.period, 0.0, self.period):
            out += blurred_step(t - place + half, self.sigma, sides) - blurred_step(t - place - half, self.sigma, sides)
        return out

    def seen_contrast(self) -> float:
        """Return (bar - space) / (bar + space), means of the middles of three bars and of two spaces."""
        rise = self.bars - self.background
        bar = self.background + rise * float(self.profile(self.period * np.array([-1.0, 0.0, 1.0])).mean())
        space = self.background + rise * float(self.profile(self.period * np.array([-0.5, 0.5])).mean())
        return (bar - space) / (bar + space)

    def light(self, rng: np.random.Generator | None = None) -> Values:
        """Return the patch, rows × columns."""
        w, h = self.size
        x = np.arange(w)[None, :] - (w - 1) / 2 - self.centre[0]
        y = np.arange(h)[:, None] - (h - 1) / 2 - self.centre[1]
        t, s = x * np.cos(self.turn) + y * np.sin(self.turn), -x * np.sin(self.turn) + y * np.cos(self.turn)
        half = 1.25 * self.period
        length = ndtr((s + half) / np.hypot(self.sigma, 0.29)) - ndtr((s - half) / np.hypot(self.sigma, 0.29))
        out = self.background + (self.bars - self.background) * self.profile(t) * length
        return np.asarray(out if rng is None else out + rng.normal(0, self.noise, out.shape))
