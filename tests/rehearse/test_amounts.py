"""Amounts: a number with its unit, and nothing else."""

import pytest
from pydantic import ValidationError

from runner.rehearse.amounts import CyclesPerPixel, Degrees, Microns, Shape, Share


class _Part(Shape):
    blur: Microns = 0.0
    fill: Share = 1.0
    turn: Degrees = 0.0
    bands: CyclesPerPixel = 0.0


@pytest.mark.parametrize(
    ("key", "text", "value"),
    [
        ("blur", "550 nm", 0.55),
        ("blur", "5 mm", 5000.0),
        ("blur", "1e-1 um", 0.1),
        ("fill", "0.5 %", 0.005),
        ("turn", "-3 deg", -3.0),
        ("bands", "0.11 cy/px", 0.11),
    ],
)
def test_amounts_arrive_in_the_unit_of_the_records(key: str, text: str, value: float) -> None:
    """A number and one of the known units; the record holds µm, fractions, degrees, cy/px."""
    assert getattr(_Part.model_validate({key: text}), key) == pytest.approx(value)


@pytest.mark.parametrize("text", ["550", "nm", "550 px", "five um", "550nm", 550, "nan um", ""])
def test_anything_else_is_refused_with_the_units_that_fit(text: object) -> None:
    """Without a unit, with a foreign one or without a number there is no amount."""
    with pytest.raises(ValidationError, match="blur") as caught:
        _Part.model_validate({"blur": text})

    context = caught.value.errors()[0]["ctx"]
    assert "is no amount that fits here" in context["found"]
    assert context["allowed"] == "a number and one of: um, nm, mm"
