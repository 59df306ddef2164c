"""Scenario files: read strictly, all complaints at once, amounts in their units."""

from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.rehearse.flaws import Bands, Defects
from runner.rehearse.scenario import read_scenario
from runner.resources import folder

WALNUT = folder("demo_lots") / "walnut_line" / "scenario.yaml"
SIZER = folder("demo_lots") / "walnut_sizer" / "scenario.yaml"


def _changed(tmp_path: Path, **changes: str) -> Path:
    """Write the walnut line's scenario with some lines changed: first words of the line by new line."""
    lines = WALNUT.read_text(encoding="utf-8").splitlines()
    for key, line in changes.items():
        at = next(i for i, old in enumerate(lines) if old.strip().startswith(f"{key}:"))
        lines[at] = line
    path = tmp_path / "scenario.yaml"
    path.write_text("\n".join(lines), encoding="utf-8")
    return path


def test_walnut_line_is_read_in_physical_units() -> None:
    """Amounts arrive in the units of the records: µm, px, electrons, fractions."""
    scenario = read_scenario(WALNUT)
    unit = scenario.units["WS8-000106"]

    assert len(scenario.units) == 8
    assert unit.lens.focus_error_um == 5000.0
    assert unit.lens.wavelength_um == 0.55
    assert unit.view.mm_per_px == pytest.approx(0.36)
    assert scenario.sensor.quantum_efficiency == 0.6
    assert scenario.chart is not None
    assert scenario.chart.dark == pytest.approx(0.25)
    assert (scenario.stripes, unit.illumination, scenario.delivery.settings) == (None, None, None)


def test_walnut_sizer_is_read_in_physical_units() -> None:
    """Stripes, lens, flaws, station and mishaps arrive in the units of the records: px, DN, electrons, fractions."""
    scenario = read_scenario(SIZER)
    mirrored, banded, flawed = (scenario.units[f"WZ2-00020{n}"] for n in (6, 4, 5))
    assert scenario.stripes is not None
    assert mirrored.illumination is not None

    assert (scenario.stripes.level, scenario.stripes.modulation, len(scenario.stripes.patches)) == (0.5, 0.6, 10)
    assert mirrored.illumination.image_distance_px == pytest.approx(6000 / 4.5)
    assert mirrored.illumination.shift_px == pytest.approx((250 / 4.5, -100 / 4.5))
    assert (mirrored.correction, banded.correction) == ("mirrored", "right")
    assert (banded.bands, mirrored.bands) == (Bands("rows", 2.5, 0.11), None)
    assert flawed.defects == Defects(hot=14, hot_e=900.0, dead=4, stuck=2, weak_columns=1, weakness=0.05)
    assert scenario.delivery.raw == ("dark", "flat")
    assert scenario.delivery.settings == {"exposure": "4 ms", "gain": "0 dB", "temperature": "24.5 degC"}
    assert [u.mishap for u in scenario.units.values()][-2:] == ["other packing", "half copied"]


def test_focus_error_follows_tilt_and_curvature() -> None:
    """The focus error at a place is that of the middle, plus slope × distance, plus the bowl of the field."""
    unit = read_scenario(WALNUT).units["WS8-000103"]

    assert unit.transfer_at(0, 0).focus_error_um == pytest.approx(14.0)
    # tan 0.58° × 800 px × 3 µm, and at (800, 600), the corner, the whole curvature of 4 µm
    assert unit.transfer_at(800, 600).focus_error_um == pytest.approx(14.0 + 24.296 + 4.0, abs=1e-3)


def test_marks_keep_clear_of_the_squares() -> None:
    """No mark stands within a square's side of a square's middle, so that none disturbs a region."""
    chart = read_scenario(WALNUT).chart

    assert chart is not None
    assert len(chart.marks) > 20
    for mark in chart.marks:
        for square in chart.squares.values():
            assert max(abs(mark.x_mm - square.x_mm), abs(mark.y_mm - square.y_mm)) > square.side_mm


def test_all_complaints_come_at_once_with_their_lines(tmp_path: Path) -> None:
    """A wrong unit, an unknown key and a value out of range are all told, each with its line."""
    path = _changed(tmp_path, photons="photons: 11000 lumens", prnu="  prmu: 0.3 %", modulation="  modulation: 160 %")

    with pytest.raises(SpecError, match=r"scenario\.yaml") as caught:
        read_scenario(path)

    text = str(caught.value)
    assert "'11000 lumens' is no amount that fits here; a number and one of: photons" in text
    assert "unknown key 'prmu'; did you mean 'prnu'?" in text
    assert "the key 'prnu' is missing" in text
    assert "modulation: input should be less than 1" in text
    assert "scenario.yaml:6:10" in text


@pytest.mark.parametrize(
    ("key", "line", "sentence"),
    [
        ("lamp", '    lamp: "dim"', "lamp: input should be 'lit' or 'off'"),
        ("repeats", "repeats: {fog: 2}", "fog: input should be 'dark', 'flat', 'chart' or 'stripes'"),
        ("repeats", "repeats: {stripes: 2}", "frames of 'stripes' are asked for, and there is no stripes"),
        ("seed", "seed: lucky", "seed: a whole number is meant"),
        ("photons", "fill: 1 %", "unknown key 'fill'; it stands in the wrong place"),
        ("WS8-000101", "  WS8/000101:", "a serial has letters, digits, - and . only"),
        ("fill", "  fill: 120 %", "fill: input should be less than or equal to 1"),
        ("bit_depth", "  bit_depth: 12", "'12' is no amount that fits here"),
        ("probatum-scenario", "probatum-scenario: 2", "input should be '1'"),
        ("frame_size", "  frame_size: 1600", "'1600' is no frame size"),
        ("aim", "    aim: 3 mm", "aim: two amounts in brackets are meant"),
    ],
)
def test_each_mistake_has_its_sentence(tmp_path: Path, key: str, line: str, sentence: str) -> None:
    """A value that does not fit is refused by name."""
    with pytest.raises(SpecError, match="scenario") as caught:
        read_scenario(_changed(tmp_path, **{key: line}))

    assert sentence in str(caught.value)
