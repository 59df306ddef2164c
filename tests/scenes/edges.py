"""Slanted-edge scenes in closed form: pixels by exact area integration, with the true transfer function beside them.

Shares nothing with the program under test. Coordinates in px from the picture's outer upper left corner, x to the
right, y down; pixel centres lie at +0.5. The edge's normal points from the dark to the bright side.
"""

from dataclasses import dataclass, field
from math import cos, hypot, radians, sin, sqrt

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import brentq, minimize_scalar

from tests.scenes.line_spreads import Gaussian, LineSpread, Sides, Spectrum, Values

Codes = NDArray[np.uint16]


@dataclass(frozen=True)
class EdgeScene:
    """One slanted edge: optics, geometry, light, and how it becomes codes."""

    optics: LineSpread = field(default_factory=lambda: Gaussian(0.6))
    """Line spread of everything in front of the pixel."""
    size: tuple[int, int] = (80, 120)
    """Width and height, px."""
    direction: float = 5.0
    """Direction of the normal, degrees from +x towards +y: 5 is a nearly vertical edge, bright on the right."""
    offset: float = 0.0
    """Distance of the edge from the picture's centre along the normal, px."""
    curve: tuple[float, ...] = ()
    """Coefficients of t², t³ … (px): the edge leaves its line by Σ c_k (t/T)^(k+2), T half the edge's length."""
    fill: float = 1.0
    """Fraction of the pixel's area that collects light, a centred square."""
    low: float = 8000.0
    """Dark plateau, DN of linear light above 0."""
    high: float = 40000.0
    """Bright plateau, DN of linear light above 0."""
    black: float = 0.0
    """DN without light: where tone and shot noise start from."""
    white: float = 65535.0
    """DN at which codes clip."""
    shading: tuple[float, float, float] = (0.0, 0.0, 0.0)
    """Light is multiplied by 1 + a x + b y + c (x² + y²), x and y from the centre in half sizes of the picture."""
    read_noise: float = 0.0
    """Standard deviation of signal-independent noise, DN of linear light."""
    electrons_per_dn: float | None = None
    """Charge per DN for Poisson noise of the light above black; None for none."""
    bits: int = 16
    """Depth of the codes; white lies below 2^bits."""
    tone: float | str = "linear"
    """`linear`, `srgb`, or the exponent g of code = light^(1/g), between black and white."""

    @property
    def edge_angle(self) -> float:
        """Angle between the edge and the nearest axis, degrees, 0 to 45."""
        return abs((self.direction + 45) % 90 - 45)

    @property
    def sides(self) -> Sides:
        """Sides of the pixel's sensitive square, projected on the normal, px; the longer first."""
        linear, angle = sqrt(self.fill), radians(self.edge_angle)
        return linear * cos(angle), linear * sin(angle)

    def distance(self) -> Values:
        """Return each pixel centre's signed distance from the edge along its local normal, px, rows × columns."""
        width, height = self.size
        x = np.arange(width) + 0.5 - width / 2
        y = (np.arange(height) + 0.5 - height / 2)[:, None]
        c, s = cos(radians(self.direction)), sin(radians(self.direction))
        n, t = x * c + y * s - self.offset, -x * s + y * c
        if not self.curve:
            return n
        bend = np.polynomial.Polynomial([0, 0, *self.curve], domain=[-self.half_length, self.half_length])
        slope, second = bend.deriv(), bend.deriv(2)
        foot = t
        for _ in range(4):  # Newton on the foot point of the perpendicular
            gap = n - bend(foot)
            foot = foot - (foot - t - gap * slope(foot)) / (1 + slope(foot) ** 2 - gap * second(foot))
        return np.asarray(np.sign(n - bend(t)) * np.hypot(foot - t, n - bend(foot)))

    @property
    def half_length(self) -> float:
        """Half the edge's length inside the picture, px, for an edge through the centre."""
        width, height = self.size
        c, s = abs(cos(radians(self.direction))), abs(sin(radians(self.direction)))
        return min(height / 2 / c if c > 0 else np.inf, width / 2 / s if s > 0 else np.inf)

    def field(self) -> Values:
        """Return the shading factor, rows × columns."""
        width, height = self.size
        x = (np.arange(width) + 0.5) / (width / 2) - 1
        y = ((np.arange(height) + 0.5) / (height / 2) - 1)[:, None]
        a, b, c = self.shading
        return np.asarray(1 + a * x + b * y + c * (x**2 + y**2))

    def signal(self) -> Values:
        """Return the noiseless light in DN, rows × columns: black, plateaus, shading, before tone and rounding."""
        light = self.low + (self.high - self.low) * self.esf(self.distance())
        return np.asarray(self.black + (light - self.black) * self.field())

    def flat(self) -> Values:
        """Return the noiseless light of an edgeless field at the bright plateau under the same shading, DN."""
        return np.asarray(self.black + (self.high - self.black) * self.field())

    def render(self, rng: np.random.Generator | None = None, light: Values | None = None) -> Codes:
        """Return codes, rows × columns: noise (with a generator), tone, rounding, clipping at 0 and white.

        Args:
            rng: Draws the noise; None renders without any.
            light: Linear light in DN to render in place of the edge, e.g. `flat()`.
        """
        dn = self.signal() if light is None else light
        if rng is not None:
            if self.electrons_per_dn is not None:
                charge = np.maximum(dn - self.black, 0) * self.electrons_per_dn
                dn = self.black + rng.poisson(charge) / self.electrons_per_dn
            dn = dn + self.read_noise * rng.standard_normal(dn.shape)
        top = min(self.white, 2.0**self.bits - 1)
        return np.clip(np.rint(self._toned(dn)), 0, top).astype(np.uint16)

    def _toned(self, dn: Values) -> Values:
        if self.tone == "linear":
            return dn
        fraction = (dn - self.black) / (self.white - self.black)
        size = np.abs(fraction)
        if self.tone == "srgb":  # IEC 61966-2-1
            code = np.where(size <= 0.0031308, 12.92 * size, 1.055 * size ** (1 / 2.4) - 0.055)
        else:
            code = size ** (1 / float(self.tone))
        return np.asarray(self.black + (self.white - self.black) * np.sign(fraction) * code)

    # --- truth ---

    def transfer(self, frequency: ArrayLike) -> Spectrum:
        """Return the complex transfer function of optics and pixel along the normal, H(0) = 1."""
        f = np.asarray(frequency, dtype=np.float64)
        return np.asarray(self.optics.transfer(f) * np.sinc(f * self.sides[0]) * np.sinc(f * self.sides[1]))

    def mtf(self, frequency: ArrayLike) -> Values:
        """Return |H(f)|."""
        return np.abs(self.transfer(frequency))

    def mtf_crossing(self, level: float) -> float:
        """Return the first frequency at which |H| falls to a level, cy/px.

        Raises:
            ValueError: It does not fall so far below 2 cy/px.
        """
        f = np.linspace(0, 2, 401)
        below = np.flatnonzero(self.mtf(f) < level)
        if below.size == 0:
            raise ValueError(f"the transfer function does not fall to {level} below 2 cy/px")
        low, high = f[below[0] - 1], f[below[0]]
        return float(brentq(lambda v: float(self.mtf(v)) - level, low, high, xtol=1e-13))

    def mtf50(self) -> float:
        """Return the frequency at which |H| first falls to one half, cy/px."""
        return self.mtf_crossing(0.5)

    def esf(self, distance: ArrayLike) -> Values:
        """Return the edge spread through the pixel at those distances, 0 to 1 (beyond, if sharpened)."""
        return self.optics.edge(distance, self.sides)

    def lsf(self, distance: ArrayLike) -> Values:
        """Return the line spread through the pixel, 1/px, by a fourth-order difference of the edge spread."""
        x, h = np.asarray(distance, dtype=np.float64), 1e-3
        near = self.esf(x + h) - self.esf(x - h)
        far = self.esf(x + 2 * h) - self.esf(x - 2 * h)
        return np.asarray((8 * near - far) / (12 * h))

    def edge_width(self, low: float = 0.1, high: float = 0.9) -> float:
        """Return the distance between the levels of the edge spread (10 % and 90 %), px."""
        reach = 12.0
        ends = [brentq(lambda x, v=v: float(self.esf(x)) - v, *self._around(v, reach), xtol=1e-12) for v in (low, high)]
        return float(ends[1] - ends[0])

    def _around(self, level: float, reach: float) -> tuple[float, float]:
        """Return the innermost sampling interval around the crossing of a level, going out from the middle."""
        x = np.linspace(-reach, reach, 4801)
        y = self.esf(x) - level
        change = np.flatnonzero(np.sign(y[:-1]) != np.sign(y[1:]))
        nearest = change[np.argmin(np.abs(x[change]))]
        return float(x[nearest]), float(x[nearest + 1])

    def lsf_fwhm(self) -> float:
        """Return the full width of the line spread at half its maximum, px."""
        x = np.linspace(-12, 12, 4801)
        y = self.lsf(x)
        peak = int(np.argmax(y))
        best = minimize_scalar(lambda v: -float(self.lsf(v)), bounds=(x[peak - 2], x[peak + 2]), method="bounded")
        half = -float(best.fun) / 2
        above = np.flatnonzero(y > half)
        ends = [
            brentq(lambda v: float(self.lsf(v)) - half, x[i], x[j], xtol=1e-12)
            for i, j in ((above[0] - 2, above[0] + 1), (above[-1] - 1, above[-1] + 2))
        ]
        return float(ends[1] - ends[0])

    def overshoot(self) -> float:
        """Return how far the edge spread rises above the bright plateau, as a fraction of the step."""
        x = np.linspace(0, 12, 2401)
        y = self.esf(x)
        peak = int(np.argmax(y))
        if y[peak] <= 1 + 1e-12:
            return 0.0
        ends = x[max(peak - 1, 0)], x[min(peak + 1, x.size - 1)]
        best = minimize_scalar(lambda v: -float(self.esf(v)), bounds=ends, method="bounded", options={"xatol": 1e-9})
        return -float(best.fun) - 1

    @property
    def modulation(self) -> float:
        """Michelson contrast of the two plateaus above black."""
        low, high = self.low - self.black, self.high - self.black
        return (high - low) / (high + low)

    def edge_ends(self) -> tuple[tuple[float, float], tuple[float, float]]:
        """Return where the straight edge enters and leaves the picture's inscribed stretch, (x, y) px."""
        width, height = self.size
        c, s = cos(radians(self.direction)), sin(radians(self.direction))
        foot, reach = (width / 2 + self.offset * c, height / 2 + self.offset * s), self.half_length
        return (foot[0] + reach * s, foot[1] - reach * c), (foot[0] - reach * s, foot[1] + reach * c)


def corner_scene(scene: EdgeScene, second: EdgeScene) -> Values:
    """Return the light of two edges that meet: both edge spreads multiplied, DN, rows × columns."""
    if scene.size != second.size or hypot(scene.offset, second.offset) > max(scene.size):
        raise ValueError("both edges must lie in one picture of the same size")
    product = scene.esf(scene.distance()) * second.esf(second.distance())
    return np.asarray(scene.low + (scene.high - scene.low) * product)


def bar_scene(scene: EdgeScene, width: float) -> Values:
    """Return the light of a bright bar of that width, px, centred on the scene's edge line, DN, rows × columns."""
    d = scene.distance()
    return np.asarray(scene.low + (scene.high - scene.low) * (scene.esf(d + width / 2) - scene.esf(d - width / 2)))
