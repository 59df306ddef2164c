"""A tone curve through measured steps: codes against light, monotone, with exponent, inverse and uncertainty.

Steps are joined in logarithms of light and code by monotone cubic pieces: a straight line or a power law, of whatever
exponent, is met exactly, and no wiggle is invented between steps. Beyond the brightest step the curve goes on with the
exponent of its last two.

References:
    F. N. Fritsch and R. E. Carlson, SIAM J. Numer. Anal. 17 (1980) 238 (monotone piecewise cubic interpolation).
    F. N. Fritsch and J. Butland, SIAM J. Sci. Stat. Comput. 5 (1984) 300 (slopes from harmonic means).
    M. Ayer et al., Ann. Math. Stat. 26 (1955) 641 (pooling neighbours that are out of order).
    JCGM 100:2008 5.1.3, note 2 (sensitivities from small changes of the inputs).
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]

CURVED = 0.4
"""Share of what a cubic piece departs from a straight one that it may itself be wrong by, in logarithms."""
BENT = 0.15
"""Share of the change of the exponent over three steps that it may be wrong by between them."""


@dataclass(frozen=True)
class Figure:
    """A value with its standard uncertainty by where it comes from."""

    value: float
    """The value."""
    noise: float
    """From the steps' codes."""
    light: float
    """From the steps' lights."""
    shape: float
    """From what the curve may do between steps."""


@dataclass(frozen=True)
class ToneCurve:
    """Steps in rising order of light."""

    light: Real
    """Light of the steps."""
    code: Real
    """Their codes over black, all above 0 and rising."""
    code_u: Real
    """Standard uncertainties of the codes."""
    light_u: float = 0.0
    """Standard uncertainty of each light, as a share of it, independent from step to step."""

    def codes(self, light: Real) -> Real:
        """Return the codes at lights."""
        return np.asarray(np.exp(_piecewise(np.log(self.light), np.log(self.code))(np.log(light))))

    def signals(self, light: Real) -> Real:
        """Return light × d code / d light at lights."""
        curve, at = _piecewise(np.log(self.light), np.log(self.code)), np.log(light)
        return np.asarray(np.exp(curve(at)) * curve.derivative()(at))

    def band(self, light: Real) -> Real:
        """Return the standard uncertainties of the codes at lights that the steps' noise gives."""
        x, y = np.log(self.light), np.log(self.code)
        at, middle = np.log(light), self.codes(light)
        steps = np.diag(np.minimum(self.code_u / self.code, 0.3))
        moved = [np.exp(_piecewise(x, y + step)(at)) - middle for step in steps]
        return np.asarray(np.sqrt(np.sum(np.square(moved), axis=0)))

    def code_at(self, light: float) -> Figure:
        """Return the code at a light within the steps."""
        return self._figure(lambda x, y: float(np.exp(_piecewise(x, y)(np.log(light)))), self._bend(light))

    def exponent_at(self, light: float) -> Figure:
        """Return the exponent of code against light, d ln code / d ln light, at a light within the steps."""
        x, y = np.log(self.light), np.log(self.code)
        secants = np.diff(y) / np.diff(x)
        place = int(np.clip(np.searchsorted(x, np.log(light)) - 1, 0, len(secants) - 1))
        around = secants[max(0, place - 1) : place + 2]
        shape = BENT * float(np.ptp(around)) / np.sqrt(3)
        return self._figure(lambda a, b: float(_piecewise(a, b).derivative()(np.log(light))), shape)

    def signal_at(self, light: float) -> Figure:
        """Return light × d code / d light: the signal in codes that noise in codes is held against (ISO 15739:2023)."""

        def signal(x: Real, y: Real) -> float:
            curve = _piecewise(x, y)
            return float(np.exp(curve(np.log(light))) * curve.derivative()(np.log(light)))

        code, exponent = self.code_at(light), self.exponent_at(light)
        return self._figure(signal, float(np.hypot(code.shape * exponent.value, code.value * exponent.shape)))

    def rise_from_dark(self, sure: float = 20.0) -> Figure:
        """Return d code / d light over the darkest steps: as many as rise by `sure` times the noise of their rise."""
        rise, u = self.code - self.code[0], np.hypot(self.code_u, self.code_u[0])
        enough = np.flatnonzero(rise > sure * u)
        last = int(enough[0]) if enough.size else self.code.size - 1

        def slope(x: Real, y: Real) -> float:
            return float((np.exp(y[last]) - np.exp(y[0])) / (np.exp(x[last]) - np.exp(x[0])))

        return self._figure(slope, 0.0)

    def light_at(self, code: float) -> Figure:
        """Return the light that gives a code above the brightest step's, or within the last two steps."""
        x, y = np.log(self.light), np.log(self.code)
        secants = np.diff(y) / np.diff(x)
        change = float(np.ptp(secants[-2:]))
        reach = float(np.log(code) - y[-1])
        value = float(np.exp(x[-1] + reach / secants[-1]))
        bend = float(value * abs(reach) / secants[-1] * change / secants[-1] / np.sqrt(3))
        return self._figure(lambda a, b: float(np.exp(_beyond(a, b, np.log(code)))), bend)

    def _bend(self, light: float) -> float:
        x, y = np.log(self.light), np.log(self.code)
        cubic, straight = float(_piecewise(x, y)(np.log(light))), float(np.interp(np.log(light), x, y))
        return float(np.exp(cubic) * abs(cubic - straight) * CURVED / np.sqrt(3))

    def _figure(self, of: Callable[[Real, Real], float], shape: float) -> Figure:
        x, y = np.log(self.light), np.log(self.code)
        value = of(x, y)
        moved = [of(x, y + step) - value for step in np.diag(np.minimum(self.code_u / self.code, 0.3))]
        noise = float(np.sqrt(np.sum(np.square(moved))))
        shifted = [of(x + step, y) - value for step in np.diag(np.full(x.size, self.light_u))] if self.light_u else []
        return Figure(float(value), noise, float(np.sqrt(np.sum(np.square(shifted)))), float(shape))


def tone_curve(light: Real, code: Real, code_u: Real, light_u: float = 0.0) -> ToneCurve:
    """Return the curve through steps in any order; steps of one light, and those out of order, are taken together.

    Args:
        light: Relative light, above 0.
        code: Codes over black; steps that do not rise above it by three times their u are left out.
        code_u: Their standard uncertainties.
        light_u: Standard uncertainty of each light, as a share.

    Raises:
        ValueError: Fewer than two steps are left.
    """
    seen = (code > 3 * code_u) & (code > 0)
    order = np.argsort(light[seen], kind="stable")
    pools: list[list[int]] = []
    places = np.flatnonzero(seen)[order].tolist()

    def mean(of: Real, pool: list[int]) -> float:
        return float(np.mean(of[pool]))

    for place in places:
        pools.append([place])
        while len(pools) > 1 and (
            mean(code, pools[-1]) <= mean(code, pools[-2])
            or mean(light, pools[-1]) <= (1 + 1e-4) * mean(light, pools[-2])
        ):
            last = pools.pop()
            pools[-1] += last
    if len(pools) < 2:
        raise ValueError(f"{len(pools)} steps rise above one another and above black; 2 are needed")
    u = np.array([float(np.sqrt(np.sum(code_u[pool] ** 2))) / len(pool) for pool in pools])
    lights, codes = (np.array([mean(of, pool) for pool in pools]) for of in (light, code))
    return ToneCurve(lights, codes, np.maximum(u, 1e-12), light_u)


def _piecewise(x: Real, y: Real) -> Any:
    from scipy.interpolate import PchipInterpolator  # noqa: PLC0415 - heavy

    return PchipInterpolator(x, y, extrapolate=True)


def _beyond(x: Real, y: Real, at: float) -> float:
    return float(x[-1] + (at - y[-1]) * (x[-1] - x[-2]) / (y[-1] - y[-2]))
