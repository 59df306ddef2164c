"""What stands under `bench` in a scenario is read as it is meant, or refused with the place and the reason."""

from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.rehearse.patches import PatchChart
from runner.rehearse.scenario import Scenario, read_scenario
from runner.resources import folder

WHOLE = (folder("demo_lots") / "walnut_bench" / "scenario.yaml").read_text(encoding="utf-8")


def _read(tmp_path: Path, old: str = "", new: str = "") -> Scenario:
    assert old in WHOLE
    (tmp_path / "scenario.yaml").write_text(WHOLE.replace(old, new, 1), encoding="utf-8")
    return read_scenario(tmp_path / "scenario.yaml")


def test_captures_keep_their_order_and_amounts(tmp_path: Path) -> None:
    """Names, windows, steps of light and scenes are those of the file."""
    captures = {capture.name: capture for capture in _read(tmp_path).bench}

    assert list(captures)[:3] == ["black", "series", "star"]
    assert captures["series"].window == (96, 96)
    assert not captures["series"].firmware
    assert (captures["series"].steps[1].label, captures["series"].steps[1].light) == ("25", 0.25)
    assert captures["sequence"].rate_hz == 30
    assert isinstance(captures["glare"].scene, PatchChart)


def test_a_unit_is_read_with_its_lens_against_the_whole_sensor(tmp_path: Path) -> None:
    """Distortion counts from half the diagonal of the sensor, 300 px for 480 x 360."""
    unit = _read(tmp_path).units["WB4-000302"].bench

    assert unit.lens.half_diagonal_px == 300
    assert unit.lens.colours == (1.006, 1.0, 0.995)
    assert _read(tmp_path).units["WB4-000306"].bench.mirrored == {"dots"}


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("window: 96 x 96 px", "window: 98 x 96 px", "multiples of 4"),
        ("    rate: 30 Hz", "    rate: 30", "no amount that fits here"),
        ("star: {cycles: 72,", "star: {spokes: 72,", "unknown key 'spokes'"),
        ("    rate: 30 Hz", "    rate: 30 Hz\n    dots: {columns: 1, rows: 1, pitch: 1 mm}", "'diameter' is missing"),
    ],
)
def test_what_is_not_meant_is_refused(tmp_path: Path, old: str, new: str, said: str) -> None:
    """Each with a sentence that names it."""
    with pytest.raises(SpecError, match=said):
        _read(tmp_path, old, new)


def test_a_capture_has_one_scene(tmp_path: Path) -> None:
    """A star and patches cannot stand in one frame."""
    with pytest.raises(SpecError, match="one scene at most"):
        _read(
            tmp_path,
            "    star: {cycles",
            "    texture: {seed: 1, cells: 64, side: 9 mm, slope: 2, low: 1 %, high: 9 %}\n    star: {cycles",
        )
