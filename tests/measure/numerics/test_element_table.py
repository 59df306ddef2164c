"""The table of tri-bar elements against the printed one, and how elements are written."""

import pytest

from runner.measure.numerics.element_table import STEP, Element, read_element, read_elements

PRINTED = {
    1: (0.250, 0.500, 1.00, 2.00, 4.00, 8.00, 16.00, 32.0, 64.0, 128.0, 256.0, 512.0),
    2: (0.281, 0.561, 1.12, 2.24, 4.49, 8.98, 17.96, 35.9, 71.8, 143.7, 287.4, 574.7),
    3: (0.315, 0.630, 1.26, 2.52, 5.04, 10.08, 20.16, 40.3, 80.6, 161.3, 322.5, 645.1),
    4: (0.354, 0.707, 1.41, 2.83, 5.66, 11.31, 22.63, 45.3, 90.5, 181.0, 362.0, 724.1),
    5: (0.397, 0.794, 1.59, 3.17, 6.35, 12.70, 25.40, 50.8, 101.6, 203.2, 406.4, 812.7),
    6: (0.445, 0.891, 1.78, 3.56, 7.13, 14.25, 28.51, 57.0, 114.0, 228.1, 456.1, 912.3),
}
"""Line pairs per mm of elements 1 to 6 in groups -2 to 9, as makers of MIL-STD-150A targets print them."""


def test_frequencies_are_the_printed_ones() -> None:
    """All 72 elements, within half a unit of the last printed digit or 0.0006 of the value where it was cut off."""
    for number, row in PRINTED.items():
        for group, printed in zip(range(-2, 10), row, strict=True):
            half = 0.0005 if printed < 1 else 0.005 if printed < 30 else 0.05
            assert Element(group, number, "vertical").frequency == pytest.approx(printed, abs=half + 0.0006 * printed)
    assert pytest.approx(1.1225, abs=1e-4) == STEP
    assert 500 / Element(7, 6, "vertical").frequency == pytest.approx(2.192, abs=1e-3)  # µm, width of its bars


def test_elements_are_written_with_their_bars() -> None:
    """Group, number and how the bars run, with blanks or without; it prints as it is written."""
    assert read_element("6/3 vertical") == Element(6, 3, "vertical")
    assert read_element(" -1 / 2  horizontal ") == Element(-1, 2, "horizontal")
    assert str(read_elements({"a": "6/3 vertical"})["a"]) == "6/3 vertical"


@pytest.mark.parametrize("written", ["6/7 vertical", "6/3", "6.3 vertical", 63, "6/3 diagonal"])
def test_what_is_no_element_is_told(written: object) -> None:
    """A number beyond 6, no bars, another form: refused with an example."""
    with pytest.raises(ValueError, match=r"e\.g\. '6/3 vertical'"):
        read_element(written)


def test_elements_come_as_a_mapping() -> None:
    """A list is refused with the form that is allowed."""
    with pytest.raises(TypeError, match="allowed is a mapping of regions"):
        read_elements(["6/3 vertical"])
