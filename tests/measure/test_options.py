"""Options records are read strictly."""

from dataclasses import dataclass

import pytest

from runner.errors import UsageError
from runner.measure.contract import QuantityInfo
from runner.measure.options import describe, lookups, number, read_record, reader


@dataclass(frozen=True)
class _Options:
    order: int = 1
    shading: str = "none"

    def __post_init__(self) -> None:
        if not 1 <= self.order <= 5:
            msg = f"order is {self.order}, 1 to 5 are allowed"
            raise ValueError(msg)


def test_what_is_not_asked_keeps_its_default() -> None:
    """An empty mapping gives the defaults."""
    assert read_record(_Options, {}) == _Options()
    assert read_record(_Options, {"order": 3}).order == 3


def test_an_unknown_key_names_the_nearest() -> None:
    """A typo is answered with the key that was meant."""
    with pytest.raises(UsageError, match="unknown option 'ordre'; known are: order, shading; did you mean 'order'"):
        read_record(_Options, {"ordre": 2})


def test_a_refused_value_keeps_the_records_sentence() -> None:
    """The record's own sentence reaches the user."""
    with pytest.raises(UsageError, match="order is 9, 1 to 5 are allowed"):
        read_record(_Options, {"order": 9})


def test_options_are_told_as_plain_data() -> None:
    """The plan in the results holds every option with its value."""
    assert describe(_Options(order=2)) == {"order": 2, "shading": "none"}


@pytest.mark.parametrize(("asked", "value"), [("80 %", 0.8), (0.25, 0.25), ("0.5", 0.5)])
def test_a_share_may_be_written_in_percent_or_plainly(asked: object, value: float) -> None:
    """80 % and 0.8 are the same share."""
    assert number("dead_below", asked, "%", 0.0, 1.0) == pytest.approx(value)


@pytest.mark.parametrize("asked", ["120 %", "3 px", True, None, "much"])
def test_what_is_no_share_is_told_with_what_is(asked: object) -> None:
    """Another unit, a value outside, a truth value and a word are refused by the option's name."""
    with pytest.raises(ValueError, match="dead_below is"):
        number("dead_below", asked, "%", 0.0, 1.0)


def test_a_modules_usual_functions_come_from_its_records() -> None:
    """`reader` reads the record it was made for; `lookups` knows the named quantities and no others."""
    info = QuantityInfo("DN", "Mean.")
    quantity, quantities = lookups({"mean": info})

    assert reader(_Options)({"order": 3}) == _Options(3)
    with pytest.raises(UsageError, match="unknown option 'oder'"):
        reader(_Options)({"oder": 3})
    assert (quantity("mean"), quantity("median")) == (info, None)
    assert quantities() == {"mean": info}
