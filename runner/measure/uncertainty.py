"""Standard uncertainties: combined, declared ones added, repeats averaged, propagated by Monte Carlo.

References:
    JCGM 100:2008 (combination 5.1.2 and 5.2.2, effective degrees of freedom G.4), JCGM 101:2008 (propagation of
    distributions by a Monte Carlo method).
"""

from collections.abc import Callable, Sequence
from dataclasses import replace
from hashlib import sha256
from math import hypot, inf, isfinite, sqrt

import numpy as np
from numpy.typing import NDArray

from runner.measure.reading import Component, Reading, Refusal
from runner.spec import units
from runner.spec.model import UncertaintyComponent
from runner.spec.units import FrequencyContext

Draws = NDArray[np.float64]
DRAWS = 200_000
"""Monte Carlo draws: the standard deviation's own scatter is then 0.16 %."""
SCATTER_ALARM = 0.001
"""Chance of calling repeats too scattered when their stated noise is right."""


def combined(components: Sequence[Component]) -> float:
    """Return the combined standard uncertainty of independent components (JCGM 100, 5.1.2)."""
    return hypot(*(c.u for c in components)) if components else 0.0


def combined_correlated(
    sensitivities: Sequence[float],
    uncertainties: Sequence[float],
    correlation: NDArray[np.float64] | Sequence[Sequence[float]],
) -> float:
    """Return the combined standard uncertainty of correlated inputs (JCGM 100, 5.2.2).

    Args:
        sensitivities: Partial derivatives, one an input.
        uncertainties: Standard uncertainties, one an input.
        correlation: Correlation coefficients, inputs × inputs.
    """
    parts = np.asarray(sensitivities, float) * np.asarray(uncertainties, float)
    return float(sqrt(max(0.0, parts @ np.asarray(correlation, float) @ parts)))


def effective_dof(components: Sequence[Component]) -> float:
    """Return the effective degrees of freedom (Welch–Satterthwaite, JCGM 100 G.4.1); infinite where all are.

    Valid for independent components only.
    """
    weight = sum(c.u**4 / c.dof for c in components if c.dof)
    return combined(components) ** 4 / weight if weight > 0 else inf


def coverage_factor(dof: float, probability: float = 0.95) -> float:
    """Return k for a two-sided interval of that coverage probability (Student's t; normal for infinite dof)."""
    from scipy import stats  # noqa: PLC0415 - heavy

    upper = 0.5 + probability / 2
    return float(stats.norm.ppf(upper) if not isfinite(dof) else stats.t.ppf(upper, dof))


def with_declared(reading: Reading, declared: Sequence[UncertaintyComponent], context: FrequencyContext) -> Reading:
    """Add what spec and station declare for a reading's quantity.

    Raises:
        UsageError: An absolute component's unit does not convert into the reading's.
    """
    if reading.value is None:
        return reading
    mine = [c for c in declared if reading.quantity in c.of]
    if not mine:
        return reading
    parts = [*reading.components]
    for c in mine:
        size = 0.0 if c.relative is None else c.relative * abs(reading.value)
        if c.absolute is not None:
            size = hypot(size, units.convert(c.absolute.value, c.absolute.unit, reading.measured_in, context))
        parts.append(Component(c.name, size, "B", shared=c.shared))
    added = combined(parts[len(reading.components) :])
    return replace(reading, u=hypot(reading.u or 0.0, added), components=tuple(parts))


def mean_of_repeats(readings: Sequence[Reading]) -> Reading:
    """Return the mean of the same reading over repeated frames.

    Components that average fall by 1/√n, all others stay. One refused repeat refuses the mean: dropping it would keep
    only the repeats that went well. Censored repeats give the weakest of their bounds; a mean over values and bounds is
    bounded by the mean with each bound in place of its value.
    """
    first, n = readings[0], len(readings)
    refused = next((r for r in readings if r.refusal is not None), None)
    if refused is not None:
        return refused
    if any(r.bound is not None for r in readings):
        return _censored(readings)
    values = [r.value for r in readings if r.value is not None]
    if len(values) != n:
        return next(r for r in readings if r.value is None)
    names = dict.fromkeys((c.name, c.shared) for r in readings for c in r.components)
    parts = tuple(_mean_component(_named(readings, name)) for name in names)
    rest = sqrt(max(0.0, float(np.mean([(r.u or 0.0) ** 2 - combined(r.components) ** 2 for r in readings]))))
    flags = tuple(dict.fromkeys(flag for r in readings for flag in r.flags))
    if _scatters(values, readings):
        flags = (*flags, "the repeats scatter more than their noise explains")
    return replace(first, value=float(np.mean(values)), u=hypot(combined(parts), rest), components=parts, flags=flags)


def _named(readings: Sequence[Reading], name: tuple[str, str | None]) -> list[Component]:
    """Return one component of every repeat; a repeat that lacks it counts with nothing."""
    found = [next((c for c in r.components if (c.name, c.shared) == name), None) for r in readings]
    some = next(c for c in found if c is not None)
    return [replace(some, u=0.0) if c is None else c for c in found]


def _mean_component(parts: Sequence[Component]) -> Component:
    size = float(np.sqrt(np.mean([p.u**2 for p in parts])))
    dofs = [p.dof for p in parts]
    known = [d for d in dofs if d is not None]
    if parts[0].averages:
        return replace(parts[0], u=size / sqrt(len(parts)), dof=sum(known) if len(known) == len(dofs) else None)
    return replace(parts[0], u=size)


def _censored(readings: Sequence[Reading]) -> Reading:
    sides = {r.bound[0] for r in readings if r.bound is not None}
    bounded = next(r for r in readings if r.bound is not None)
    side = bounded.bound[0] if bounded.bound else "above"
    if len(sides) > 1:
        because = "some repeats lie above the measured band, others below it"
        return replace(bounded, bound=None, refusal=Refusal("not defined", because))
    ends = [r.bound[1] if r.bound is not None else float(r.value or 0.0) for r in readings]
    if all(r.bound is not None for r in readings):
        return replace(bounded, bound=(side, min(ends) if side == "above" else max(ends)))
    flags = (*bounded.flags, "some repeats gave a value, others only a bound")
    return replace(bounded, bound=(side, float(np.mean(ends))), flags=flags)


def _scatters(values: Sequence[float], readings: Sequence[Reading]) -> bool:
    from scipy import stats  # noqa: PLC0415 - heavy

    noise = float(np.sqrt(np.mean([sum(c.u**2 for c in r.components if c.averages) for r in readings])))
    if noise <= 0:
        return False
    spread = float(np.sum((np.asarray(values) - np.mean(values)) ** 2)) / noise**2
    return bool(stats.chi2.sf(spread, len(values) - 1) < SCATTER_ALARM)


def seed_of(*what: object) -> int:
    """Return a seed that depends only on what is propagated: same inputs, same draws, in any order of units."""
    return int.from_bytes(sha256(repr(what).encode()).digest()[:8], "big")


def propagate(model: Callable[[Draws], Draws], draws: Draws) -> tuple[float, float]:
    """Return mean and standard deviation of a model over draws of its inputs (JCGM 101, 7.6).

    Args:
        model: Takes inputs × draws, gives one output a draw.
        draws: Inputs × draws.
    """
    out = model(draws)
    return float(out.mean()), float(out.std(ddof=1))
