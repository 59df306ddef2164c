"""Decision rules: each end, each side, each promise."""

from itertools import product
from math import inf, nan

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from runner.judge.decision_rule import Limits, acceptance_limits, decide, decide_bound, decide_count, probability
from runner.spec.model import GUARDED_ACCEPTANCE, GUARDED_REJECTION, PROOF_EITHER_WAY, RULES, SIMPLE_ACCEPTANCE

YES, NO, OPEN, NONE = "conforms", "does not conform", "cannot decide", "not measured"
SIDES = [(0.2, None), (None, 0.2), (0.2, 0.3)]


@pytest.mark.parametrize(("rule", "side"), list(product(RULES, SIDES)))
def test_without_uncertainty_the_limit_alone_decides(rule: str, side: tuple[float | None, float | None]) -> None:
    """At u = 0 a value on a limit conforms under every rule, one just outside does not."""
    limits = Limits(*side, rule, 0.95)

    for end in (e for e in side if e is not None):
        outside = end - 1e-12 if end == side[0] else end + 1e-12
        assert decide(end, 0.0, limits) == (YES, 1.0)
        assert decide(outside, 0.0, limits) == (NO, 0.0)


@pytest.mark.parametrize(
    ("rule", "words"),
    [
        (SIMPLE_ACCEPTANCE, (NO, NO, YES, YES)),
        (GUARDED_ACCEPTANCE, (NO, NO, NO, YES)),
        (GUARDED_REJECTION, (NO, YES, YES, YES)),
        (PROOF_EITHER_WAY, (NO, OPEN, OPEN, YES)),
    ],
)
def test_each_rule_draws_its_own_lines(rule: str, words: tuple[str, ...]) -> None:
    """Proved outside, just outside, just inside, proved inside: four places tell the four rules apart."""
    limits = Limits(0.2, None, rule, 0.95)

    assert tuple(decide(0.2 + n * 0.01, 0.01, limits)[0] for n in (-2, -1, 1, 2)) == words


@pytest.mark.parametrize(("rule", "side", "dof"), list(product(RULES, SIDES, [inf, 8.0])))
def test_acceptance_limits_are_where_the_verdict_turns(
    rule: str, side: tuple[float | None, float | None], dof: float
) -> None:
    """A value a hair inside an acceptance limit is accepted, one a hair outside is not."""
    limits = Limits(*side, rule, 0.95)
    low, high = acceptance_limits(limits, 0.01, dof)

    for end, inward in ((low, 1e-9), (high, -1e-9)):
        if end is not None:
            assert decide(end + inward, 0.01, limits, dof)[0] == YES
            assert decide(end - inward, 0.01, limits, dof)[0] != YES


def test_a_rule_that_can_never_accept_shows_crossed_limits() -> None:
    """Where no value reaches the probability, the acceptance limits stand crossed and nothing conforms."""
    limits = Limits(0.2, 0.21, GUARDED_ACCEPTANCE, 0.95)
    low, high = acceptance_limits(limits, 0.01)

    assert low is not None
    assert high is not None
    assert low > high
    assert decide(0.205, 0.01, limits)[0] == NO


@pytest.mark.parametrize(("rule", "accepted"), [(SIMPLE_ACCEPTANCE, 0.5), (GUARDED_ACCEPTANCE, 0.05)])
def test_a_unit_at_its_limit_is_accepted_as_often_as_promised(rule: str, accepted: float) -> None:
    """Of units exactly at the limit the rule accepts the share it promises (20000 draws, 4 standard deviations)."""
    values = np.random.default_rng(7).normal(0.2, 0.01, 20000)
    share = np.mean([decide(v, 0.01, Limits(0.2, None, rule, 0.95))[0] == YES for v in values])

    assert share == pytest.approx(accepted, abs=4 * (accepted * (1 - accepted) / 20000) ** 0.5)


@pytest.mark.parametrize("rule", [GUARDED_REJECTION, PROOF_EITHER_WAY])
def test_a_unit_at_its_limit_is_rejected_as_seldom_as_promised(rule: str) -> None:
    """Of units exactly at the limit, 5 % are rejected by a rule that demands proof of nonconformity at 95 %."""
    values = np.random.default_rng(8).normal(0.2, 0.01, 20000)
    share = np.mean([decide(v, 0.01, Limits(0.2, None, rule, 0.95))[0] == NO for v in values])

    assert share == pytest.approx(0.05, abs=4 * (0.05 * 0.95 / 20000) ** 0.5)


@given(
    value=st.sampled_from([nan, inf, -inf, None, 0.25]),
    u=st.sampled_from([nan, inf, -inf, None, -0.01, 0.01]),
    rule=st.sampled_from(RULES),
    side=st.sampled_from(SIDES),
)
def test_what_is_no_number_never_conforms(
    value: float | None, u: float | None, rule: str, side: tuple[float | None, float | None]
) -> None:
    """NaN, infinities, nothing and negative uncertainties end as not measured."""
    if value == 0.25 and u == 0.01:
        return
    assert decide(value, u, Limits(*side, rule, 0.95)) == (NONE, None)


@pytest.mark.parametrize(
    ("side", "end", "limits", "word"),
    [
        ("above", 0.5, (0.2, None), YES),
        ("above", 0.5, (0.5, None), YES),
        ("above", 0.5, (0.6, None), OPEN),
        ("above", 0.5, (None, 0.4), NO),
        ("above", 0.5, (None, 0.6), OPEN),
        ("above", 0.5, (0.2, 0.6), OPEN),
        ("below", 0.1, (0.2, None), NO),
        ("below", 0.1, (None, 0.2), YES),
        ("below", 0.3, (0.2, None), OPEN),
        ("above", nan, (0.2, None), NONE),
    ],
)
def test_a_reading_known_only_by_a_bound(
    side: str, end: float, limits: tuple[float | None, float | None], word: str
) -> None:
    """Lying above a bound conforms to lower limits up to it, fails upper limits below it, else is open."""
    assert decide_bound(side, end, Limits(*limits, PROOF_EITHER_WAY, 0.95)) == word


def test_counts_are_never_judged_by_a_normal_u() -> None:
    """Three defects against at most three conform; an exact bound asks for more room than that."""
    simple = Limits(None, 3.0, PROOF_EITHER_WAY, 0.95)

    assert decide_count(3, None, None, simple)[0] == YES
    assert decide_count(4, None, None, simple)[0] == NO
    assert decide_count(3, None, "poisson", simple)[0] == OPEN
    assert decide_count(0, None, "poisson", simple)[0] == YES  # upper 95 % bound of 0 counts is 2.996 (Garwood 1936)
    assert decide_count(nan, None, None, simple)[0] == NONE


def test_an_exact_binomial_bound_is_clopper_pearsons() -> None:
    """No defect in 22 has the one-sided upper bound 0.127305 at 95 % (Clopper and Pearson 1934)."""
    just_above, just_below = (Limits(None, 22 * p, GUARDED_ACCEPTANCE, 0.95) for p in (0.12731, 0.12730))

    assert decide_count(0, 22, "binomial", just_above)[0] == YES
    assert decide_count(0, 22, "binomial", just_below)[0] == NO


def test_few_degrees_of_freedom_widen_the_guard_band() -> None:
    """Below 30 degrees of freedom Student's t takes the normal's place: t(0.95; 5) = 2.015 (GUM, table G.2)."""
    low, _ = acceptance_limits(Limits(0.2, None, GUARDED_ACCEPTANCE, 0.95), 0.01, 5.0)

    assert low == pytest.approx(0.2 + 2.015 * 0.01, abs=5e-6)


def test_probability_far_inside_keeps_its_digits() -> None:
    """Ten sigma outside an upper limit is a small probability, not zero or negative."""
    assert 0 < probability(1.0, 0.1, Limits(None, 0.0, SIMPLE_ACCEPTANCE, 0.95)) < 1e-22
