"""The normalised curves of a fitted edge with their derivatives to everything that was fitted.

Edge spread and line spread along the normal (dark to bright, px) and transfer function (cy/px along the normal). All
values are of the whole line spread: the edge spread runs from 0 to 1, the transfer function is 1 at zero.
"""

from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np

from runner.measure.numerics import edge_model as em
from runner.measure.numerics.edge_fit import EdgeFit
from runner.measure.numerics.edge_model import Complex
from runner.measure.numerics.line_spread import Array

DRAWS = 400
"""Random draws from the posterior where first order fails: u is then good to 4 %."""


@dataclass(frozen=True)
class Gradient:
    """A value that depends on the fitted numbers, linearised."""

    value: float
    """The value."""
    by: Array
    """Its derivative to every fitted number, in the order of the covariance."""
    flags: tuple[str, ...] = ()
    """Remarks."""
    least_u: float = 0.0
    """Standard uncertainty found by draws from the posterior where first order says less."""
    bias: float = 0.0
    """Standard uncertainty of a bias that the fit's covariance does not hold."""

    def u(self, covariance: Array) -> float:
        """Return the first-order standard uncertainty under a covariance (JCGM 100:2008 5.2.2)."""
        return float(np.sqrt(max(0.0, float(self.by @ covariance @ self.by))))


class Curves:
    """Edge spread, line spread and transfer function of one fit."""

    def __init__(self, fit: EdgeFit) -> None:
        self.fit = fit
        self.areas = np.concatenate([em.AREAS, np.ones(fit.lattice.centres.size)])
        self.rise = fit.parts.rise
        self.shape = fit.parts.shape
        self.index = fit.shape_index
        block = np.ix_(self.index, self.index)
        self.posterior, self.sampling = fit.covariance[block], fit.sampling[block]
        self.nodes = fit.lattice.nodes
        self.at_nodes = (fit.linear.model.value - fit.parts.low) / self.rise
        self.density_at_nodes = fit.linear.model.slope / self.rise
        self.levels: dict[float, Gradient] = {}

    def full(self, by: Array) -> Array:
        """Turn a derivative to the shape into one to every fitted number."""
        whole = np.zeros(self.fit.covariance.shape[0])
        whole[self.index] = by
        return whole

    def at(self, x: Array) -> tuple[Array, Array, Array, Array]:
        """Return edge spread, its derivatives to the shape, line spread and its derivatives at some distances."""
        spreads, densities = em.shape_columns(x, self.fit.parts, self.fit.lattice, self.fit.sides)
        e, d = (columns @ self.shape / self.rise for columns in (spreads, densities))
        by_e, by_d = (
            (columns - value[:, None] * self.areas) / self.rise for columns, value in ((spreads, e), (densities, d))
        )
        return e, by_e, d, by_d

    def transfer(self, frequency: Array | None) -> tuple[Complex, Complex]:
        """Return ∫ line spread · exp(-2πi f x) dx about the fitted edge line, and its derivatives to the shape.

        Args:
            frequency: cy/px; None for the whole `GRID`.
        """
        columns = em.shape_transfers(frequency, self.fit.parts, self.fit.lattice, self.fit.sides)
        value = columns @ self.shape / self.rise
        return value, np.asarray((columns - value[:, None] * self.areas) / self.rise)

    def modulus(self, frequency: Array | None) -> tuple[Array, Array]:
        """Return |H| corrected for its own noise, and its standard uncertainty.

        |H| of a noisy H reads high: E|Ĥ|² = |H|² + the variances of both components, which is taken off. The noise
        is that of repeated captures; what the data leave open about the shape does not make |H| read high.
        """
        size, u, _ = self._modulus(frequency)
        return size, u

    @cached_property
    def on_grid(self) -> tuple[Array, Array]:
        """Return the same on `GRID`."""
        return self.modulus(None)

    def modulus_at(self, frequency: float) -> Gradient:
        """Return the same at one frequency, with its derivatives."""
        (size,), (u,), along = self._modulus(np.array([frequency]))
        return Gradient(float(size), self.full(along[0]), (), float(u))

    def _modulus(self, frequency: Array | None) -> tuple[Array, Array, Array]:
        h, by = self.transfer(frequency)
        # derivatives of H's components along and across its own direction
        unit = np.exp(-1j * np.angle(h))[:, None] * by
        along, across = unit.real, unit.imag
        noise = _quadratic(along, self.sampling) + _quadratic(across, self.sampling)
        size = np.sqrt(np.maximum(0.0, np.abs(h) ** 2 - noise))
        u = _quadratic(along, self.posterior)
        near = np.abs(h) ** 2 < 9 * noise
        if near.any():  # near zero either component may be the one that counts
            u[near] = np.maximum(u[near], _quadratic(across[near], self.posterior))
        return size, np.sqrt(u), along

    @cached_property
    def draws(self) -> Array:
        """Return draws of the shape from the posterior, draws × parts; always the same ones for the same fit."""
        scale = np.sqrt(np.diag(self.posterior))
        values, ways = np.linalg.eigh(self.posterior / (scale[:, None] * scale))
        return np.asarray(self.shape + (_normal(scale.size) * np.sqrt(np.maximum(values, 0))) @ ways.T * scale)


@lru_cache(maxsize=16)
def _normal(size: int) -> Array:
    return np.random.default_rng(12233).standard_normal((DRAWS, size))


def _quadratic(by: Array, covariance: Array) -> Array:
    return np.asarray(np.maximum(0.0, ((by @ covariance) * by).sum(axis=1)))
