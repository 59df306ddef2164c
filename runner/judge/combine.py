"""Several regions' readings as one value: worst, range, mean, ratio, by Monte Carlo with what they share.

Components of the same `shared` word move together in all members, so they cancel in ranges and ratios and stay in
means. Range and worst pick extremes of noisy values and so read too far out; the excess is estimated by drawing once
more around the measured values (parametric bootstrap), taken off, and a third of its square enters the variance for
what the estimate itself does not know.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import inf, sqrt

import numpy as np
from numpy.typing import NDArray

from runner.measure.reading import Component
from runner.measure.uncertainty import Input, propagate

Values = NDArray[np.float64]


@dataclass(frozen=True)
class Member:
    """One region's reading in the limit's unit."""

    region: str
    """Region's name."""
    value: float
    """Value."""
    u: float
    """Combined standard uncertainty."""
    components: tuple[Component, ...] = ()
    """Its parts in the limit's unit."""


@dataclass(frozen=True)
class Combined:
    """One value of several regions, with the steps that a reader can follow with a pencil."""

    value: float
    """Value, the excess of picking extremes taken off."""
    u: float
    """Standard uncertainty."""
    plain: float
    """The same arithmetic on the members' values, nothing taken off."""
    excess: float = 0.0
    """By how much noise alone makes a range or a worst member read too far out."""


def combine(
    kind: str,
    members: Sequence[Member],
    against: Sequence[Member] = (),
    *,
    at_least: float | None,
    at_most: float | None,
) -> Combined:
    """Return value and standard uncertainty of a combination, and how they came about.

    Args:
        kind: `worst`, `range`, `mean` or `ratio`.
        members: The regions.
        against: For `ratio`, the regions whose mean is the denominator.
        at_least: Lower limit; `worst` is the smallest member when only this is given.
        at_most: Upper limit; `worst` is the largest member when only this is given.

    Raises:
        ZeroDivisionError: The denominator of a ratio is not clearly different from 0.
    """
    everyone = [*members, *against]
    values = np.array([m.value for m in everyone])
    n = len(members)
    if kind == "ratio" and abs(values[n:].mean()) <= 4 * max(m.u for m in against):
        msg = "the denominator cannot be told from 0"
        raise ZeroDivisionError(msg)

    def model(x: Values) -> Values:
        if kind == "range":
            return np.asarray(x[:n].max(axis=0) - x[:n].min(axis=0))
        if kind == "mean":
            return np.asarray(x[:n].mean(axis=0))
        if kind == "ratio":
            return np.asarray(x[:n].mean(axis=0) / x[n:].mean(axis=0))
        return _worst(x[:n], at_least, at_most)

    plain = float(model(values[:, None])[0])
    drawn = propagate(model, [_input(m) for m in everyone], label=kind)
    u = drawn.u
    if kind not in {"range", "worst"}:
        return Combined(plain, u, plain)
    excess = drawn.mean - plain if n > 1 else 0.0  # one member alone is picked from nothing
    value = max(0.0, plain - excess) if kind == "range" else plain - excess
    return Combined(value, sqrt(u**2 + excess**2 / 3), plain, plain - value)


def _worst(x: Values, at_least: float | None, at_most: float | None) -> Values:
    if at_most is None:
        return np.asarray(x.min(axis=0))
    if at_least is None:
        return np.asarray(x.max(axis=0))
    farthest = np.abs(x - (at_least + at_most) / 2).argmax(axis=0)
    return np.asarray(np.take_along_axis(x, farthest[None, :], axis=0)[0])


def _input(member: Member) -> Input:
    shared: dict[str, float] = {}
    for c in member.components:
        if c.shared:
            shared[c.shared] = shared.get(c.shared, 0.0) + c.u
    own = sqrt(max(0.0, member.u**2 - sum(u**2 for u in shared.values())))
    return Input(member.value, own, shared)


def combine_bounds(
    kind: str,
    valued: Sequence[Member],
    bounds: Sequence[tuple[str, float]],
    *,
    at_least: float | None,
    at_most: float | None,
) -> tuple[str, float] | str | None:
    """Say what can be known of a combination of which some members are only bounded.

    Returns:
        `valued` when the bounded members cannot be the worst, a bound of the combination, or None when it is unknown.
    """
    if kind != "worst" or (at_least is None) == (at_most is None):
        return None
    lower = at_most is None
    good, bad = ("above", "below") if lower else ("below", "above")
    pick = min if lower else max
    ends = [end for _, end in bounds]
    if any(side == bad for side, _ in bounds):
        return bad, pick([*[end for side, end in bounds if side == bad], *[m.value for m in valued]])
    nearest = pick(ends)
    reach = pick((m.value for m in valued), default=inf if lower else -inf)
    if (lower and reach <= nearest) or (not lower and reach >= nearest):
        return "valued"
    return good, nearest
