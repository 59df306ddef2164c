"""A limit outside what a quantity can be is refused; one at its end, which nothing can fail, is warned of."""

from math import inf
from typing import Any

import pytest

from runner.measure.contract import QuantityInfo
from runner.measure.natural_range import against_range
from runner.spec.model import SIMPLE_ACCEPTANCE, Limit
from runner.spec.units import FrequencyContext

SHARE = QuantityInfo("%", "Share.", least=0.0, most=100.0)


def _limit(unit: str, at_least: float | None, at_most: float | None, **more: Any) -> Limit:
    where = more.pop("where", ("a",))
    return Limit("1", "c", "dark_share", {}, where, "a", unit, at_least, at_most, SIMPLE_ACCEPTANCE, 0.95, **more)


@pytest.mark.parametrize(
    ("limit", "severities", "words"),
    [
        (_limit("1", 1.2, None), ["error"], "cannot lie above 100 %"),
        (_limit("%", None, -1.0), ["error"], "cannot lie below 0 %"),
        (_limit("1", 0.0, None), ["warning"], "never lies below 0 %"),
        (_limit("%", None, 100.0), ["warning"], "never lies above 100 %"),
        (_limit("%", 0.0, 5.0), [], ""),
        (_limit("%", 120.0, None, combine="ratio"), [], ""),
        (_limit("", None, None, report_only=True), [], ""),
    ],
)
def test_limits_against_the_range_of_a_share(limit: Limit, severities: list[str], words: str) -> None:
    """Ends are compared in the method's unit; ratios, ranges and reported values are left alone."""
    found = against_range(limit, SHARE, "here", FrequencyContext())

    assert [one.severity for one in found] == severities
    assert all(words in str(one) for one in found)


def test_a_quantity_without_ends_is_left_alone() -> None:
    """Whatever lies between minus and plus infinity can be asked."""
    assert against_range(_limit("%", 500.0, None), QuantityInfo("%", "S.", most=inf), "here", FrequencyContext()) == []
