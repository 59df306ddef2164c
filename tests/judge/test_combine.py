"""Combinations keep their promise: the stated uncertainty covers the truth."""

import numpy as np
import pytest

from runner.judge.combine import Member, combine, combine_bounds
from runner.measure.reading import Component

TRUTHS = {"flat": (0.3, 0.3, 0.3, 0.3), "close": (0.3, 0.302, 0.304, 0.306), "apart": (0.25, 0.27, 0.3, 0.33)}
U, SHARED = 0.003, 0.002


def _members(rng: np.random.Generator, truth: tuple[float, ...]) -> list[Member]:
    common = rng.normal(0, SHARED)
    parts = (Component("noise", U, "A"), Component("chart", SHARED, "B", shared="chart"))
    whole = float(np.hypot(U, SHARED))
    return [Member(f"r{i}", t + common + rng.normal(0, U), whole, parts) for i, t in enumerate(truth)]


def _true(kind: str, truth: tuple[float, ...]) -> float:
    return {
        "range": max(truth) - min(truth),
        "worst": min(truth),
        "mean": float(np.mean(truth)),
        "ratio": float(np.mean(truth[:2]) / np.mean(truth[2:])),
    }[kind]


@pytest.mark.parametrize("kind", ["range", "worst", "mean", "ratio"])
def test_the_truth_is_covered(kind: str) -> None:
    """Over 360 sets of corners, flat to far apart, ±2u holds the truth in at least 93 % (minus 2 sd of the sample)."""
    rng = np.random.default_rng(3)
    held = []
    for truth in TRUTHS.values():
        for _ in range(120):
            members = _members(rng, truth)
            first, second = (members[:2], members[2:]) if kind == "ratio" else (members, [])
            made = combine(kind, first, second, at_least=0.1, at_most=None)
            held.append(abs(made.value - _true(kind, truth)) <= 2 * made.u)

    assert np.mean(held) >= 0.93 - 2 * np.sqrt(0.93 * 0.07 / len(held))


def test_what_members_share_cancels_in_a_range_and_stays_in_a_mean() -> None:
    """A common chart error moves all corners together."""
    parts = (Component("chart", 0.01, "B", shared="chart"),)
    members = [Member(f"r{i}", v, 0.01, parts) for i, v in enumerate((0.2, 0.3))]

    made = combine("range", members, at_least=None, at_most=1.0)
    assert [made.value, made.u] == pytest.approx([0.1, 0.0], abs=1e-9)
    assert combine("mean", members, at_least=None, at_most=1.0).u == pytest.approx(0.01, rel=0.02)


def test_the_range_of_equal_corners_is_not_read_too_large() -> None:
    """The plain range of four equal noisy corners is 2.06 u on average (Tippett 1925); corrected it is far less."""
    rng = np.random.default_rng(5)
    found = []
    for _ in range(60):
        members = [Member(f"r{i}", rng.normal(0.3, 0.01), 0.01) for i in range(4)]
        found.append(combine("range", members, at_least=None, at_most=1.0).value)

    assert np.mean(found) < 1.3 * 0.01
    assert min(found) >= 0


def test_a_range_cut_at_zero_keeps_its_uncertainty() -> None:
    """Four equal values have range 0 with an uncertainty, not 0 ± 0."""
    members = [Member(f"r{i}", 0.3, 0.01) for i in range(4)]
    made = combine("range", members, at_least=None, at_most=1.0)

    assert made.value == 0
    assert made.u > 0.005


def test_worst_is_the_side_of_the_limit() -> None:
    """The worst against a lower limit is the smallest, against an upper the largest, against both the farthest out."""
    members = [Member("a", 0.2, 1e-6), Member("b", 0.5, 1e-6)]

    assert combine("worst", members, at_least=0.1, at_most=None).value == pytest.approx(0.2, abs=1e-5)
    assert combine("worst", members, at_least=None, at_most=1.0).value == pytest.approx(0.5, abs=1e-5)
    assert combine("worst", members, at_least=0.0, at_most=0.6).value == pytest.approx(0.5, abs=1e-5)


def test_a_ratio_to_nothing_is_refused() -> None:
    """A denominator within four u of 0 gives no ratio."""
    with pytest.raises(ZeroDivisionError, match="cannot be told from 0"):
        combine("ratio", [Member("a", 0.2, 0.01)], [Member("b", 0.03, 0.01)], at_least=0.1, at_most=None)


def test_the_same_members_give_the_same_draws() -> None:
    """A combination depends on nothing but its members."""
    members = [Member("a", 0.2, 0.01), Member("b", 0.25, 0.02)]

    assert combine("range", members, at_least=None, at_most=1.0) == combine(
        "range", members, at_least=None, at_most=1.0
    )


@pytest.mark.parametrize(
    ("valued", "bounds", "low", "known"),
    [
        ([0.3], [("above", 0.8)], True, "valued"),
        ([0.9], [("above", 0.8)], True, ("above", 0.8)),
        ([0.3], [("below", 0.1)], True, ("below", 0.1)),
        ([0.3], [("below", 0.5)], True, ("below", 0.3)),
        ([0.3], [("below", 0.1)], False, "valued"),
        ([], [("above", 0.8), ("above", 0.7)], True, ("above", 0.7)),
        ([0.3], [("above", 0.8)], False, ("above", 0.8)),
    ],
)
def test_what_bounds_leave_known(
    valued: list[float], bounds: list[tuple[str, float]], low: bool, known: str | tuple[str, float]
) -> None:
    """The worst of values and bounds is the value that cannot be beaten, or the bound that can."""
    members = [Member("a", v, 0.01) for v in valued]
    ends = {"at_least": 0.1 if low else None, "at_most": None if low else 1.0}

    assert combine_bounds("worst", members, bounds, **ends) == known
    assert combine_bounds("range", members, bounds, **ends) is None
