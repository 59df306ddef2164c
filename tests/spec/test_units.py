"""Units: the closed list, and conversions against published relations."""

from math import pi, radians, tan

import pytest

from runner.spec.model import Amount, Camera, Optics
from runner.spec.units import UNITS, FrequencyContext, UnitsError, canonical, context_of, convert, parse_amount, spell

CONTEXT = FrequencyContext(pixel_pitch_um=3.45, magnification=20.0, frame_height=3000, focal_length_mm=4.2)


def test_nyquist_in_every_unit() -> None:
    """0.5 cy/px on 3000 rows of 3.45 µm: 3000 LW/PH (ISO 12233), 144.93 lp/mm, 20 times that in the object at 20×."""
    assert convert(0.5, "cy/px", "LW/PH", CONTEXT) == pytest.approx(3000, rel=1e-12)
    assert convert(0.5, "cy/px", "lp/mm", CONTEXT) == pytest.approx(144.92753623, rel=1e-9)
    assert convert(0.5, "cy/px", "lp/mm object", CONTEXT) == pytest.approx(20 * 144.92753623, rel=1e-9)


def test_cycles_per_degree_on_the_axis() -> None:
    """One degree at 4.2 mm covers 4.2 mm × tan of it to first order: the small-angle relation of geometry."""
    per_degree = 4.2 * radians(1)
    assert convert(100, "lp/mm", "cy/deg", CONTEXT) == pytest.approx(100 * per_degree, rel=1e-12)
    assert per_degree == pytest.approx(4.2 * tan(radians(1)), rel=2e-4)  # tan x = x + x³/3, x = 0.0175


def test_lengths_ratios_angles_and_times() -> None:
    """Plain factors: 2 px are 6.9 µm on the sensor and 0.345 µm in the object at 20×; 95 % is 0.95 exactly."""
    assert convert(2, "px", "µm", CONTEXT) == pytest.approx(6.9, rel=1e-12)
    assert convert(2, "px", "nm object", CONTEXT) == pytest.approx(345, rel=1e-12)
    assert convert(550, "nm", "µm", FrequencyContext()) == pytest.approx(0.55, rel=1e-15)
    assert convert(95, "%", "1", FrequencyContext()) == 0.95
    assert convert(50, "ppm", "%", FrequencyContext()) == 0.005
    assert convert(pi, "rad", "deg", FrequencyContext()) == pytest.approx(180, rel=1e-15)
    assert convert(1.5, "s", "ms", FrequencyContext()) == 1500


def test_every_pair_of_a_kind_converts_there_and_back() -> None:
    """Within a kind every conversion is a factor, the same for value and uncertainty, and undone by its inverse."""
    for one in UNITS.values():
        for other in UNITS.values():
            if one.kind != other.kind:
                with pytest.raises(UnitsError, match="is no"):
                    convert(1.0, one.symbol, other.symbol, CONTEXT)
                continue
            there = convert(0.3, one.symbol, other.symbol, CONTEXT)
            assert convert(there, other.symbol, one.symbol, CONTEXT) == pytest.approx(0.3, rel=1e-12)
            assert convert(0.6, one.symbol, other.symbol, CONTEXT) == pytest.approx(2 * there, rel=1e-12)


@pytest.mark.parametrize(
    ("unit", "missing"),
    [("lp/mm", "pixel_pitch"), ("LW/PH", "frame_size"), ("lp/mm object", "pixel_pitch"), ("cy/deg", "pixel_pitch")],
)
def test_a_conversion_says_what_it_lacks(unit: str, missing: str) -> None:
    """A conversion without what it needs is refused and names the key to state."""
    with pytest.raises(UnitsError, match=missing):
        convert(0.25, "cy/px", unit, FrequencyContext())


def test_decibels_convert_to_nothing() -> None:
    """A decibel is a logarithm: no factor leads to a ratio, and the sentence says so."""
    with pytest.raises(UnitsError, match="20 log10 of an amplitude ratio"):
        convert(60, "dB", "1", FrequencyContext())


def test_an_empty_unit_keeps_the_value() -> None:
    """A value that is only reported keeps its own unit."""
    assert convert(3.25, "px", "", FrequencyContext()) == 3.25


@pytest.mark.parametrize(
    ("text", "amount"),
    [
        ("0.25 cy/px", Amount(0.25, "cy/px")),
        ("15%", Amount(15.0, "%")),
        ("3.0 um", Amount(3.0, "µm")),
        ("-1e-3 mm", Amount(-0.001, "mm")),
        ("100  cy/mm  object", Amount(100.0, "lp/mm object")),
        ("0.45", Amount(0.45, "1")),
    ],
)
def test_amounts_are_read_and_spelled(text: str, amount: Amount) -> None:
    """An amount is a number and a unit in any spelling; it is written back in shortest digits."""
    assert parse_amount(text) == amount
    assert parse_amount(spell(amount)) == amount


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("cy/px", "'cy/px' is no number with a unit"),
        ("0.25 cy/pix", "unknown unit 'cy/pix'.*did you mean 'cy/px'"),
        ("nan px", "no number with a unit"),
        ("1.2.3 px", "no number with a unit"),
        ("1e999 px", "no number with a unit"),
        ("010 px", "no number with a unit"),
    ],
)
def test_what_is_no_amount_is_refused(text: str, told: str) -> None:
    """A word that is no amount is refused with what is known."""
    with pytest.raises(UnitsError, match=told):
        parse_amount(text)


def test_spellings_have_one_symbol() -> None:
    """Both micro signs and `um` are one unit."""
    assert {canonical(s) for s in ("um", "µm", "μm")} == {"µm"}


def test_the_context_comes_from_camera_and_optics() -> None:
    """What camera and optics state is what conversions know."""
    camera = Camera(1600, 1200, 12, 64.0, 4095.0, pixel_pitch_um=3.0)

    assert context_of(camera, Optics(magnification=2.0, focal_length_mm=8.0)) == FrequencyContext(
        3.0, 2.0, 1200, 1600, 8.0
    )
