"""Combining uncertainty: components of one reading, repeats of one reading, and draws where formulas end.

References:
    JCGM 100:2008 5.1.2, 5.2.2 (law of propagation), G.4.1 (Welch-Satterthwaite), G.3.3 (coverage factor from t)
    JCGM 101:2008 5.9, 7 (propagation of distributions), 7.7 (coverage intervals)
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from hashlib import sha256
from math import ceil, inf, isfinite, sqrt

import numpy as np
from numpy.typing import NDArray

from runner.measure.reading import Component, Reading, Refusal
from runner.spec.model import UncertaintyComponent
from runner.spec.units import FrequencyContext, convert

Array = NDArray[np.float64]

DRAWS = 100_000
"""Draws of a propagation: a standard deviation then repeats within 0.3 %, less than its two printed digits show."""
ENOUGH_REPEATS = 20
"""From so many repeats on, their scatter is the noise (its own u is then 16 %); below, it only checks the noise."""
TOO_MUCH_SCATTER = 0.001
"""Significance of that check."""
SCATTER_FLAG = "repeats scatter more than their noise explains"


def combined_u(
    sensitivities: Sequence[float], us: Sequence[float], correlations: Sequence[Sequence[float]] | None = None
) -> float:
    """Return the combined standard uncertainty of a linear model (JCGM 100:2008, equations 10 and 16).

    Args:
        sensitivities: Derivatives of the result by each input.
        us: Standard uncertainties of the inputs.
        correlations: Matrix of correlation coefficients; None for independent inputs.
    """
    parts = np.asarray(sensitivities, float) * np.asarray(us, float)
    if correlations is None:
        return float(np.sqrt(np.sum(parts**2)))
    return sqrt(max(0.0, float(parts @ np.asarray(correlations, float) @ parts)))


def effective_dof(components: Sequence[Component], u: float | None = None) -> float:
    """Return the effective degrees of freedom of independent components (Welch-Satterthwaite), or infinity.

    The formula does not hold for correlated components (JCGM 100:2008, note to H.2); those of one reading are not.

    Args:
        components: Parts of one reading.
        u: Its combined standard uncertainty, if it holds more than these parts.
    """
    whole = combined_u([1.0] * len(components), [c.u for c in components]) if u is None else u
    known = sum(c.u**4 / c.dof for c in components if c.dof is not None and c.dof > 0)
    return whole**4 / known if known > 0 else inf


def coverage_factor(probability: float, dof: float = inf) -> float:
    """Return k of a symmetric coverage interval: the normal's, or t's for few degrees of freedom (cut to an integer).

    Args:
        probability: Coverage probability, in (0, 1).
        dof: Effective degrees of freedom.
    """
    from scipy import special  # noqa: PLC0415 - heavy

    upper = (1 + probability) / 2
    return float(special.ndtri(upper) if dof > 1e6 else special.stdtrit(int(dof), upper))


@dataclass(frozen=True)
class Input:
    """One input of a propagation."""

    value: float
    """Best estimate."""
    u: float
    """Standard uncertainty of what it has for itself."""
    shared: Mapping[str, float] = field(default_factory=dict)
    """Standard uncertainties of what it has in common with other inputs, by that thing's word."""
    shape: str = "normal"
    """`normal` or `rectangular`: the distribution of its own part."""


@dataclass(frozen=True)
class Propagated:
    """Outcome of a propagation of distributions."""

    samples: Array
    """Draws of the result, sorted."""

    @property
    def mean(self) -> float:
        """Mean of the draws."""
        return float(self.samples.mean())

    @property
    def u(self) -> float:
        """Standard deviation of the draws."""
        return float(self.samples.std(ddof=1))

    def interval(self, probability: float) -> tuple[float, float]:
        """Return the probabilistically symmetric coverage interval (JCGM 101:2008 7.7.2)."""
        tail = (1 - probability) / 2
        low, high = np.quantile(self.samples, [tail, 1 - tail])
        return float(low), float(high)

    def shortest(self, probability: float) -> tuple[float, float]:
        """Return the shortest coverage interval (JCGM 101:2008 5.3.4)."""
        inside = ceil(probability * self.samples.size)
        widths = self.samples[inside - 1 :] - self.samples[: self.samples.size - inside + 1]
        first = int(np.argmin(widths))
        return float(self.samples[first]), float(self.samples[first + inside - 1])


def propagate(
    model: Callable[[Array], Array], inputs: Sequence[Input], *, draws: int = DRAWS, label: str = ""
) -> Propagated:
    """Propagate distributions through a model by Monte Carlo (JCGM 101:2008).

    The seed is the digest of what is propagated, so that the same inputs give the same draws anywhere.

    Args:
        model: Takes draws of shape (inputs, draws) and returns (draws,).
        inputs: Estimates and uncertainties; parts with the same shared word move together.
        draws: Number of draws.
        label: Enters the seed, so that different uses of the same inputs differ.
    """
    generator = np.random.default_rng(_seed(inputs, draws, label))
    words = sorted({word for one in inputs for word in one.shared})
    common = {word: generator.standard_normal(draws) for word in words}
    rows = np.empty((len(inputs), draws))
    for number, one in enumerate(inputs):
        rows[number] = one.value + one.u * _unit_draws(generator, one.shape, draws)
        for word, u in one.shared.items():
            rows[number] += u * common[word]
    return Propagated(np.sort(np.asarray(model(rows), float)))


def _unit_draws(generator: np.random.Generator, shape: str, draws: int) -> Array:
    if shape == "rectangular":
        return generator.uniform(-sqrt(3), sqrt(3), draws)
    return generator.standard_normal(draws)


def _seed(inputs: Sequence[Input], draws: int, label: str) -> int:
    told = repr([(float(i.value), float(i.u), sorted(i.shared.items()), i.shape) for i in inputs])
    return int.from_bytes(sha256(f"{label}|{draws}|{told}".encode()).digest()[:16], "big")


def with_declared(reading: Reading, components: Sequence[UncertaintyComponent], context: FrequencyContext) -> Reading:
    """Add the declared components that belong to a reading's quantity.

    Of several with one name the last counts: the station's own replaces the spec's default.

    Args:
        reading: A reading in its method's unit; one without a value is returned unchanged.
        components: Declared components of the spec, then of the station.
        context: For absolute components in another unit.

    Raises:
        UnitsError: An absolute component's unit does not convert to the reading's.
    """
    if reading.value is None or reading.u is None:
        return reading
    chosen = {c.name: c for c in components if reading.quantity in c.of}
    added = tuple(Component(c.name, _declared_u(c, reading, context), "B", shared=c.shared) for c in chosen.values())
    if not added:
        return reading
    u = combined_u([1.0] * (len(added) + 1), [reading.u, *(c.u for c in added)])
    return replace(reading, u=u, components=(*reading.components, *added))


def _declared_u(declared: UncertaintyComponent, reading: Reading, context: FrequencyContext) -> float:
    if declared.relative is not None:
        return declared.relative * abs(reading.value or 0.0)
    if declared.absolute is None:
        return 0.0
    return abs(convert(declared.absolute.value, declared.absolute.unit, reading.measured_in, context))


def mean_of_repeats(readings: Sequence[Reading]) -> Reading:
    """Combine repeats of one reading into their mean.

    Components that average fall by 1/√n, others stay as they are. One refused repeat refuses the whole; where every
    repeat gives a bound, the weakest of them stands; where only some do, the bound also covers the others' values.

    Args:
        readings: The same region, quantity and estimator over repeated frames; at least one.
    """
    first = readings[0]
    if len(readings) == 1:
        return first
    refusal = _refusal(readings)
    if refusal is not None:
        return replace(first, value=None, u=None, bound=None, components=(), flags=_flags(readings), refusal=refusal)
    if any(r.bound is not None for r in readings):
        return _bounded(readings)
    values = np.array([r.value for r in readings], float)
    components = _mean_components(readings)
    flags = _flags(readings)
    if len(readings) >= ENOUGH_REPEATS:
        n = len(readings)
        scatter = Component("noise", float(values.std(ddof=1)) / sqrt(n), "A", n - 1, averages=True)
        components = (scatter, *(c for c in components if not c.averages))
    elif _scatters(values, readings):
        flags = (*flags, SCATTER_FLAG)
    return replace(
        first,
        value=float(values.mean()),
        u=combined_u([1.0] * len(components), [c.u for c in components]),
        components=components,
        flags=flags,
        trials=min((r.trials for r in readings if r.trials is not None), default=None),  # the same pixels each time
    )


def _refusal(readings: Sequence[Reading]) -> Refusal | None:
    """Return why the repeats have no mean: a refused member, or one without a finite value, u or bound."""
    found: list[Refusal] = []
    for reading in readings:
        if reading.refusal is not None:
            found.append(reading.refusal)
        elif not _is_finite(reading):
            found.append(Refusal("fault", "a repeat holds no finite value with its uncertainty, and no reason"))
    if not found:
        directions = {r.bound[0] for r in readings if r.bound is not None}
        if len(directions) > 1:
            return Refusal("not defined", "one repeat bounds the value from above, another from below")
        return None
    worst = next((one for one in found if one.cause == "fault"), found[0])
    return Refusal(worst.cause, f"{len(found)} of {len(readings)} repeats: {worst.because}")


def _is_finite(reading: Reading) -> bool:
    if reading.bound is not None:
        return isfinite(reading.bound[1])
    return all(x is not None and isfinite(x) for x in (reading.value, reading.u))


def _flags(readings: Sequence[Reading]) -> tuple[str, ...]:
    return tuple(dict.fromkeys(flag for reading in readings for flag in reading.flags))


def _bounded(readings: Sequence[Reading]) -> Reading:
    """Return the weakest bound; a repeat with a value counts with the end of its 95 % interval."""
    direction = next(r.bound[0] for r in readings if r.bound is not None)
    above = direction == "above"
    ends = [
        r.bound[1] if r.bound is not None else float(r.value or 0.0) + (-2 if above else 2) * float(r.u or 0.0)
        for r in readings
    ]
    flags = _flags(readings)
    some = sum(r.bound is not None for r in readings)
    if some < len(readings):
        flags = (*flags, f"{some} of {len(readings)} repeats give only a bound")
    return replace(
        readings[0],
        value=None,
        u=None,
        components=(),
        bound=(direction, min(ends) if above else max(ends)),
        flags=flags,
    )


def _parts(reading: Reading) -> tuple[Component, ...]:
    """Return a reading's components; a u that names none is one part that does not average."""
    return reading.components or (Component("not told apart", float(reading.u or 0.0), "B"),)


def _mean_components(readings: Sequence[Reading]) -> tuple[Component, ...]:
    groups: dict[tuple[str, str | None, bool], list[Component]] = {}
    for reading in readings:
        for part in _parts(reading):
            groups.setdefault((part.name, part.shared, part.averages), []).append(part)
    return tuple(_mean_component(parts, len(readings)) for parts in groups.values())


def _mean_component(parts: Sequence[Component], n: int) -> Component:
    us = [part.u for part in parts]
    if parts[0].averages:
        u = sqrt(sum(x**2 for x in us)) / n
        dof = effective_dof(parts)
    else:  # the same departure in every repeat
        u = sum(us) / n
        dof = min((part.dof for part in parts if part.dof is not None), default=inf)
    return replace(parts[0], u=u, dof=dof if isfinite(dof) else None)


def _scatters(values: Array, readings: Sequence[Reading]) -> bool:
    """Tell whether repeats scatter beyond their stated noise (chi-square test)."""
    from scipy import special  # noqa: PLC0415 - heavy

    noise = np.array([sqrt(sum(c.u**2 for c in _parts(r) if c.averages)) for r in readings])
    if np.any(noise == 0):
        return bool(np.ptp(values) > 0 and np.all(noise == 0) and any(c.averages for c in _parts(readings[0])))
    weights = noise**-2
    mean = np.average(values, weights=weights)
    excess = special.chdtrc(len(values) - 1, float(np.sum(weights * (values - mean) ** 2)))
    return bool(excess < TOO_MUCH_SCATTER)
