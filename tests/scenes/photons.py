"""A sensor that counts photons: Poisson electrons in finite wells, patterns, read noise, codes; truth as planted.

Shares nothing with the program under test. Every frame is drawn electron by electron, as the physics has it:

    electrons   Poisson(light (1 + response pattern) + dark current × time), at most the well's
    codes       round(K (electrons + offset pattern + read noise) + black), at most the white level
"""

from collections.abc import Callable
from dataclasses import dataclass, field
from functools import cache, cached_property

import numpy as np
from numpy.typing import NDArray
from scipy import stats
from scipy.optimize import minimize_scalar

Values = NDArray[np.float64]


@dataclass(frozen=True)
class Parts:
    """Standard deviations of a pattern by its parts."""

    pixel: float = 0.0
    """White from pixel to pixel."""
    row: float = 0.0
    """Common to a row."""
    column: float = 0.0
    """Common to a column."""

    @property
    def all(self) -> float:
        """Of everything together."""
        return float(np.sqrt(self.pixel**2 + self.row**2 + self.column**2))


@dataclass(frozen=True)
class Drawn:
    """A pattern as drawn."""

    pixel: Values
    """Rows × columns."""
    row: Values
    """Rows × 1."""
    column: Values
    """1 × columns."""

    @cached_property
    def all(self) -> Values:
        """Everything together."""
        return self.pixel + self.row + self.column

    def spread(self, part: str) -> float:
        """Return the standard deviation of `total`, `row`, `column` or `pixel` as drawn."""
        return float(np.std(self.all if part == "total" else getattr(self, part), ddof=1))


def draw(parts: Parts, shape: tuple[int, int], rng: np.random.Generator) -> Drawn:
    """Draw a pattern of rows × columns."""
    rows, columns = shape
    return Drawn(
        parts.pixel * rng.standard_normal((rows, columns)),
        parts.row * rng.standard_normal((rows, 1)),
        parts.column * rng.standard_normal((1, columns)),
    )


@dataclass(frozen=True)
class Sensor:
    """One unit."""

    gain: float = 0.4
    """K, DN/e-."""
    read_noise: float = 5.0
    """Electrons."""
    well: float = 10_000.0
    """Electrons a pixel holds."""
    well_spread: float = 0.0
    """Its standard deviation over pixels, as a share."""
    offset: Parts = field(default_factory=lambda: Parts(2.0))
    """DSNU, electrons."""
    response: Parts = field(default_factory=lambda: Parts(0.01))
    """PRNU, shares."""
    dark_current: float = 0.0
    """Electrons per second."""
    black: float = 100.0
    """Code of no signal."""
    white: float = 65_535.0
    """Highest code."""
    bend: float = 0.0
    """Electrons lost at the well's end as a share, growing with the square of the light: a response that bends."""
    shape: tuple[int, int] = (512, 512)
    """Rows, columns."""
    seed: int = 1
    """Of the patterns."""

    @cached_property
    def dsnu(self) -> Drawn:
        """Offset pattern, electrons."""
        return draw(self.offset, self.shape, np.random.default_rng([self.seed, 1]))

    @cached_property
    def prnu(self) -> Drawn:
        """Response pattern, shares."""
        return draw(self.response, self.shape, np.random.default_rng([self.seed, 2]))

    @cached_property
    def wells(self) -> Values | float:
        """Electrons each pixel holds."""
        if not self.well_spread:
            return self.well
        return self.well * (1 + draw(Parts(self.well_spread), self.shape, np.random.default_rng([self.seed, 3])).all)

    def frame(
        self,
        electrons: float,
        rng: np.random.Generator,
        *,
        time: float = 0.0,
        even: Values | float = 1.0,
        rounded: bool = True,
    ) -> NDArray[np.uint16]:
        """Return the codes of one frame.

        Args:
            electrons: Mean electrons of light per pixel.
            rng: Where noise comes from.
            time: Exposure time for dark current, s.
            even: Factor on the light over the field.
            rounded: Whole codes, else as they come.
        """
        light = self.bent(electrons) * even * (1 + self.prnu.all) + self.dark_current * time
        caught = np.minimum(rng.poisson(np.maximum(light, 0.0), self.shape), self.wells)
        noisy = caught + self.dsnu.all + self.read_noise * rng.standard_normal(self.shape)
        codes = np.clip(self.gain * noisy + self.black, 0, self.white)
        return np.round(codes).astype(np.uint16) if rounded else codes.astype(np.float32)

    def bent(self, electrons: float) -> float:
        """Return the electrons that a bent response makes of light."""
        return electrons * (1 - self.bend * electrons / self.well)

    def linearity_error(self, electrons: Values) -> float:
        """Return the mean size of departures in % from the line of least relative squares through some levels."""
        y = np.array([self.bent(float(e)) for e in electrons])
        slope, start = np.polyfit(electrons, y, 1, w=1 / y)
        return float(np.mean(np.abs(100 * (y / (start + slope * electrons) - 1))))

    def saturation(self) -> float:
        """Return the electrons of light at which the variance over time, mean over pixels, is greatest.

        Exact sums over Poisson's probabilities of a well's clipping; codes clip later than wells here.
        """
        return greatest_variance(self.well, self.response.all, self.well_spread)


@cache
def greatest_variance(well: float, response: float, well_spread: float) -> float:
    """Return where min(Poisson, well) varies most, averaged over a normal response and normal wells."""
    nodes, weights = np.polynomial.hermite_e.hermegauss(15)
    weights = weights / weights.sum()

    def variance(mean: float) -> float:
        total = 0.0
        for x, w in zip(nodes, weights, strict=True):
            size = float(np.hypot(response * mean, well_spread * well))
            total += w * clipped_variance(mean, well - size * x)
        return total

    return _top(variance, 0.85 * well, well)


def clipped_variance(mean: float, well: float) -> float:
    """Return the variance of min(Poisson(mean), well) by summation over the probabilities near its mean."""
    reach = int(12 * np.sqrt(mean)) + 12
    n = np.arange(max(0, int(mean) - reach), int(mean) + reach)
    p = stats.poisson.pmf(n, mean)
    kept = np.minimum(n, well)
    middle = float(p @ kept)
    return float(p @ (kept - middle) ** 2)


def _top(variance: Callable[[float], float], low: float, high: float) -> float:
    found = minimize_scalar(lambda m: -variance(m), bounds=(low, high), method="bounded", options={"xatol": 0.05})
    return float(found.x)
