"""Decision rules: probability of conformity, guard bands, verdicts of one value against its limits.

References:
    JCGM 106:2012, 7 (probability of conformity), 8 (acceptance limits); ISO 14253-1:2017; ILAC-G8:09/2019.
"""

from dataclasses import dataclass
from math import inf, isfinite, isnan

from runner.judge.verdict import CANNOT_DECIDE, CONFORMS, DOES_NOT_CONFORM, NOT_MEASURED
from runner.spec.model import GUARDED_ACCEPTANCE, GUARDED_REJECTION, PROOF_EITHER_WAY, SIMPLE_ACCEPTANCE

SMALL_DOF = 30.0
"""Below this many degrees of freedom the normal distribution is replaced by Student's t (JCGM 100 G.3)."""


@dataclass(frozen=True)
class Limits:
    """A requirement on one value."""

    at_least: float | None
    """Lower limit, or None."""
    at_most: float | None
    """Upper limit, or None."""
    rule: str
    """Decision rule."""
    conformance_probability: float
    """In (0.5, 1)."""

    @property
    def interval(self) -> tuple[float, float]:
        """The tolerance interval, open ends as infinities."""
        return (-inf if self.at_least is None else self.at_least, inf if self.at_most is None else self.at_most)

    def holds(self, value: float) -> bool:
        """Tell whether a value lies inside the limits, ends included; NaN never does."""
        low, high = self.interval
        return isfinite(value) and low <= value <= high


def probability(value: float, u: float, limits: Limits, dof: float = inf) -> float:
    """Return the probability that the true value lies inside the limits.

    Args:
        value: Measured value.
        u: Standard uncertainty; 0 gives 1 inside the limits, ends included, else 0.
        limits: The requirement.
        dof: Effective degrees of freedom.
    """
    if isnan(value) or isnan(u) or not isfinite(u):
        return 0.0
    if u <= 0:
        return 1.0 if limits.holds(value) else 0.0
    low, high = limits.interval
    return _mass((low - value) / u, (high - value) / u, dof)


def acceptance_limits(limits: Limits, u: float, dof: float = inf) -> tuple[float | None, float | None]:
    """Return the limits inside which a measured value is accepted, after the guard band.

    For `guarded acceptance` and `proof either way` the values whose probability of conformity reaches the stated one;
    for `guarded rejection` those whose probability of nonconformity does not; for `simple acceptance` the limits
    themselves. Two close limits need a wider guard band than one alone (it is solved for, not taken from 1.645 u).
    Where no value can be accepted, the two acceptance limits stand crossed.
    """
    if limits.rule == SIMPLE_ACCEPTANCE or u <= 0 or not isfinite(u):
        return limits.at_least, limits.at_most
    needed = limits.conformance_probability
    if limits.rule == GUARDED_REJECTION:
        needed = 1 - needed
    low, high = limits.at_least, limits.at_most
    if low is not None and high is not None:
        return _two_sided(low, high, u, needed, dof)
    guard = _quantile(needed, dof) * u
    return (None if low is None else low + guard, None if high is None else high - guard)


def decide(value: float | None, u: float | None, limits: Limits, dof: float = inf) -> tuple[str, float | None]:
    """Return verdict and probability of conformity of one value; a value that is no number is `not measured`."""
    if value is None or u is None or not isfinite(value) or not isfinite(u) or u < 0:
        return NOT_MEASURED, None
    inside = probability(value, u, limits, dof)
    needed = limits.conformance_probability
    if limits.rule == SIMPLE_ACCEPTANCE:
        return (CONFORMS if limits.holds(value) else DOES_NOT_CONFORM), inside
    if limits.rule == GUARDED_ACCEPTANCE:
        return (CONFORMS if inside >= needed else DOES_NOT_CONFORM), inside
    if limits.rule == GUARDED_REJECTION:
        return (DOES_NOT_CONFORM if 1 - inside >= needed else CONFORMS), inside
    if limits.rule != PROOF_EITHER_WAY:
        msg = f"unknown decision rule {limits.rule!r}"
        raise ValueError(msg)
    if inside >= needed:
        return CONFORMS, inside
    return (DOES_NOT_CONFORM if 1 - inside >= needed else CANNOT_DECIDE), inside


def decide_bound(side: str, end: float, limits: Limits) -> str:
    """Return the verdict of a censored reading, known only to lie above or below an end.

    Lying above e conforms to `at_least` up to e, cannot be decided for a higher one, and does not conform to an
    `at_most` below e; lying below is the mirror image.
    """
    if not isfinite(end):
        return NOT_MEASURED
    low, high = limits.interval
    reach = (end, inf) if side == "above" else (-inf, end)
    if low <= reach[0] and reach[1] <= high:
        return CONFORMS
    return DOES_NOT_CONFORM if reach[0] > high or reach[1] < low else CANNOT_DECIDE


def decide_count(count: float, trials: int | None, bound: str | None, limits: Limits) -> tuple[str, float | None]:
    """Return the verdict of a count: simple acceptance, or an exact bound if the limit asks for one.

    The exact bound is the probability that the true rate gives a result no more extreme (Clopper–Pearson for
    `binomial`, Garwood for `poisson`); limits are expected counts (or shares times the trials).
    """
    if not isfinite(count) or count < 0:
        return NOT_MEASURED, None
    if bound is None:
        holds = limits.holds(count)
        return (CONFORMS if holds else DOES_NOT_CONFORM), (1.0 if holds else 0.0)
    inside = _count_probability(round(count), trials, bound, limits)
    needed = limits.conformance_probability
    if limits.rule == SIMPLE_ACCEPTANCE:
        return (CONFORMS if limits.holds(count) else DOES_NOT_CONFORM), inside
    if inside >= needed:
        return CONFORMS, inside
    if limits.rule == GUARDED_ACCEPTANCE:
        return DOES_NOT_CONFORM, inside
    proved = 1 - inside >= needed
    if limits.rule == GUARDED_REJECTION:
        return (DOES_NOT_CONFORM if proved else CONFORMS), inside
    return (DOES_NOT_CONFORM if proved else CANNOT_DECIDE), inside


def _count_probability(count: int, trials: int | None, bound: str, limits: Limits) -> float:
    from scipy import special  # noqa: PLC0415 - heavy

    low, high = limits.interval

    def below(rate: float, *, proving_high: bool) -> float:
        """Confidence that the true expected count lies below `rate`."""
        if rate == inf:
            return 1.0
        if rate <= 0:
            return 0.0
        k = count + 1 if proving_high else count
        if bound == "binomial" and trials:
            share = min(rate / trials, 1.0)
            return float(special.betainc(k, trials - k + 1, share)) if 0 < k <= trials else float(k == 0)
        return float(special.gammainc(k, rate)) if k > 0 else 1.0

    return max(0.0, below(high, proving_high=True) - below(low, proving_high=False))


def _mass(a: float, b: float, dof: float) -> float:
    from scipy import special  # noqa: PLC0415 - heavy

    if a > 0:  # both ends in the upper tail: mirror, so that small probabilities keep their digits
        a, b = -b, -a
    if dof >= SMALL_DOF:
        return max(0.0, float(special.ndtr(b)) - float(special.ndtr(a)))
    return max(0.0, float(special.stdtr(dof, b)) - float(special.stdtr(dof, a)))


def _quantile(p: float, dof: float) -> float:
    from scipy import special  # noqa: PLC0415 - heavy

    return float(special.ndtri(p) if dof >= SMALL_DOF else special.stdtrit(dof, p))


def _two_sided(low: float, high: float, u: float, needed: float, dof: float) -> tuple[float, float]:
    from scipy import optimize  # noqa: PLC0415 - heavy

    middle = (low + high) / 2
    half = (high - low) / 2

    def excess(offset: float) -> float:
        return _mass((low - middle - offset) / u, (high - middle - offset) / u, dof) - needed

    if excess(0.0) < 0:
        return high, low  # crossed: no value is accepted
    far = half + (abs(_quantile(needed, dof)) + 10) * u
    offset = optimize.brentq(excess, 0.0, far, xtol=1e-14 * max(1.0, abs(middle), half))
    return middle - offset, middle + offset
