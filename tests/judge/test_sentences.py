"""Values in words: enough digits to see why, no more."""

from dataclasses import replace

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from runner.judge.sentences import combination_steps, consequence, decimals, joined, requirement, show, whole
from runner.judge.verdict import Check

CHECK = Check(
    "1", "chart", "left", "mono", "mtf50", "mtf50", "cy/px", "does not conform", "", 0.19, 0.003, at_least=0.2
)


@pytest.mark.parametrize(
    ("value", "u", "unit", "text"),
    [
        (0.187, 0.003, "cy/px", "0.1870 ± 0.0060 cy/px"),
        (0.4731, 0.0021, "1", "0.4731 ± 0.0042"),
        (12.3456, 0.3, "%", "12.35 ± 0.60 %"),
        (1234.5, 30.0, "DN", "1234 ± 60 DN"),
        (8.0, None, "%", "8 %"),
    ],
)
def test_the_expanded_uncertainty_has_two_digits(value: float, u: float | None, unit: str, text: str) -> None:
    """U = 2u is printed with two significant digits and the value with as many decimals (GUM 7.2.6)."""
    assert show(value, u, unit) == text


def test_digits_are_added_until_the_reason_shows() -> None:
    """0.26996 against a limit of 0.27 is not printed as 0.2700."""
    assert show(0.26996, 0.002, "1") == "0.2700 ± 0.0040"
    assert show(0.26996, 0.002, "1", against=(0.27, None)).startswith("0.26996")


def test_nothing_has_no_sign() -> None:
    """What rounds to zero is not printed as minus zero, unless its side of a limit at zero is what matters."""
    assert show(-0.0004, 0.05, "DN") == "0.00 ± 0.10 DN"
    assert show(-0.0004, 0.05, "DN", against=(0.0,)).startswith("-0.0004 ±")


@given(value=st.floats(0.01, 10), gap=st.floats(1e-8, 0.01), u=st.floats(1e-6, 0.1))
def test_a_printed_value_lies_on_its_own_side_of_the_limit(value: float, gap: float, u: float) -> None:
    """However near a value comes to its limit, the print shows on which side it lies."""
    for near in (value - gap, value + gap):
        assume(near != value)
        shown = float(show(near, u, "1", against=(value,)).split()[0])
        assert (shown < value) == (near < value)


def test_requirements_in_words() -> None:
    """Limits read as at least and at most with their unit."""
    assert requirement(CHECK) == "at least 0.2 cy/px"
    assert requirement(replace(CHECK, at_most=0.3)) == "at least 0.2 and at most 0.3 cy/px"
    assert requirement(replace(CHECK, at_least=None)) == ""


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({}, "the unit is soft there"),
        ({"quantity": "overshoot", "at_least": None, "at_most": 0.1}, "the unit sharpens its edges too much there"),
        ({"quantity": "edge_width", "at_least": None, "at_most": 0.1}, "the unit is soft there"),
        ({"where": "range of corners", "at_least": None, "at_most": 0.1}, "the unit is too uneven over the field"),
        ({"at_least": 0.05, "at_most": 0.1}, "the unit transfers more than it may there"),
        ({"where": ""}, "the unit is soft"),
        ({"where": "", "quantity": "row_banding", "at_least": None, "at_most": 0.1}, "the unit adds bands"),
        ({"quantity": "edge_angle"}, "the unit does not meet the requirement there"),
    ],
)
def test_what_a_failure_says_about_the_unit(change: dict[str, object], words: str) -> None:
    """Trade words per quantity and side; `there` only where there is a place."""
    assert consequence(replace(CHECK, **change)) == words  # type: ignore[arg-type]


def test_lists_in_sentences() -> None:
    """One, two and more names read like English."""
    assert [joined(list("abc")[:n]) for n in range(4)] == ["", "a", "a and b", "a, b and c"]
    assert decimals(0.0, 0.0) == 0


def test_what_has_no_region_names_its_capture() -> None:
    """Banding of darks and of flats have two places; what is taken of all regions is not the whole frame."""
    assert [whole(name, regions=False) for name in ("dark", "flat")] == ["whole frame (dark)", "whole frame (flat)"]
    assert whole("chart", regions=True) == "all regions (chart)"


def test_a_range_tells_what_was_taken_off() -> None:
    """A reader finds the members' own range and what noise alone accounts for, with the digits of the value."""
    check = replace(CHECK, where="range of corners", value=0.0001, u=0.0019)

    told = combination_steps(check, "range", 0.0019, 0.0018)
    assert "largest less smallest member is 0.0019 cy/px; 0.0018 cy/px is taken off" in told
    assert "added" in combination_steps(check, "worst", 0.1881, -0.0012)
    assert combination_steps(check, "mean", 0.3, 0.0).endswith("mean of the members")
