"""The walnut line: each unit's documented verdict follows from the truth, and the whole job finds it."""

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from runner.cli import run
from runner.exits import Exit
from runner.rehearse.expected import Documented, found_in, read_expected
from runner.rehearse.lot import truth
from runner.rehearse.scenario import Scenario, read_scenario
from runner.resources import folder
from runner.spec.build import read_spec
from runner.spec.model import Spec

HOME = folder("demo_lots") / "walnut_line"
EXPECTED = read_expected(HOME / "expected.yaml")
CORNERS = ("upper left", "upper right", "lower left", "lower right")
MARGIN = 5
"""Standard uncertainties, of 1 % at most, by which a documented verdict must be clear of its limit."""


@pytest.fixture(scope="module")
def scenario() -> Scenario:
    """Return the lot as it physically is."""
    return read_scenario(HOME / "scenario.yaml")


@pytest.fixture(scope="module")
def spec() -> Spec:
    """Return the lot's test spec."""
    return read_spec(HOME / EXPECTED.spec)


@pytest.fixture(scope="module")
def demo(tmp_path_factory: pytest.TempPathFactory) -> Iterator[tuple[Exit, str, Path]]:
    """Run the whole demo once in a home of its own; yield exit code, printed text and its folder."""
    import contextlib
    import io

    out = tmp_path_factory.mktemp("demo")
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("HOME", str(out / "home"))
        patch.delenv("XDG_CONFIG_HOME", raising=False)
        patch.delenv("XDG_DATA_HOME", raising=False)
        printed = io.StringIO()
        with contextlib.redirect_stdout(printed):
            code = run(["demo", "walnut_line", "--out", str(out / "demo")])
        yield code, printed.getvalue(), out / "demo"


def test_the_lot_is_the_one_of_the_issue() -> None:
    """Eight units: three verdicts of a measurement, and three units without one for three different reasons."""
    told = [(unit.verdict, unit.at_fault) for unit in EXPECTED.units.values()]

    assert told == [
        ("conforms", None),
        ("conforms", None),
        ("does not conform", "unit"),
        ("does not conform", "unit"),
        ("cannot decide", None),
        ("not measured", "cannot tell"),
        ("not measured", "cannot tell"),
        ("not measured", "capture"),
    ]


def test_scenario_and_spec_speak_of_one_camera(scenario: Scenario, spec: Spec) -> None:
    """What the spec says of the camera is what is physically there."""
    camera, sensor, unit = spec.camera, scenario.sensor, scenario.units["WS8-000101"]

    assert (camera.width, camera.height) == (unit.view.columns, unit.view.rows)
    assert (camera.bit_depth, camera.black_level, camera.white_level) == (12, sensor.black_level, sensor.white_level)
    assert (camera.pixel_pitch_um, camera.fill) == (unit.lens.pitch_um, unit.lens.fill)
    assert (spec.optics.f_number, spec.optics.wavelength_um) == (unit.lens.f_number, unit.lens.wavelength_um)
    assert scenario.repeats == {c.name: c.frames.count for c in spec.captures if c.frames}
    assert set(EXPECTED.units) == set(scenario.units)


@pytest.mark.parametrize("serial", list(EXPECTED.units)[:5])
def test_documented_verdict_follows_from_the_truth(serial: str, scenario: Scenario, spec: Spec) -> None:
    """Each measurable unit lies clear of every limit, on the documented side; the marginal one on the limit itself.

    The uncertainty of a value is taken as 1 % (the tests of the estimator ask for less), clear is five times that.
    """
    squares = truth(scenario, scenario.units[serial])["squares"]
    corners = [squares[name]["mtf50 cy/px"] for name in CORNERS]
    limits = {limit.characteristic: limit for limit in spec.capture("chart").limits}
    failing = EXPECTED.units[serial].characteristics
    values = {"1": squares["centre"]["mtf at 0.25 cy/px"], "2": min(corners), "3": max(corners) - min(corners)}

    for number, value in values.items():
        low, high = limits[number].at_least, limits[number].at_most
        margin = value - low if low is not None else float(high or 0) - value
        if EXPECTED.units[serial].verdict == "cannot decide" and number in failing:
            assert abs(margin) < 0.001 * value
        else:
            assert abs(margin) > MARGIN * 0.01 * max(corners)
            assert (margin < 0) == (number in failing), number


def test_only_the_sharpened_unit_overshoots(scenario: Scenario, spec: Spec) -> None:
    """The unsharp mask's overshoot on its own edge lies above the limit by half; lens and pixel alone have none.

    The mask adds amount × (edge - smoothed edge); light is never negative, so an edge without it cannot overshoot.
    """
    unit = scenario.units["WS8-000104"]
    assert unit.sharpening is not None
    distance, spread = unit.transfer_at(0, 0).edge_spread(0.0, 150.0)
    fine = np.arange(-20, 20, 0.01)
    edge = np.interp(fine, distance, spread)
    steps = np.arange(len(unit.sharpening.kernel)) - len(unit.sharpening.kernel) // 2
    smooth = sum(w * np.interp(fine - n, distance, spread) for w, n in zip(unit.sharpening.kernel, steps, strict=True))

    overshoot = 100 * float((edge + unit.sharpening.amount * (edge - smooth)).max() - 1)

    limit = next(limit for limit in spec.capture("chart").limits if limit.quantity == "overshoot")
    assert overshoot > 1.5 * float(limit.at_most or 0)
    assert [s for s, u in scenario.units.items() if u.sharpening] == ["WS8-000104"]


@pytest.mark.parametrize("serial", list(EXPECTED.units))
def test_every_documented_verdict_is_found(serial: str, demo: tuple[Exit, str, Path]) -> None:
    """Frames in, report out: verdict, blame and characteristics are the documented ones."""
    document = _results(demo[2], serial)

    assert found_in(document) == EXPECTED.units[serial], document["because"]


@pytest.mark.parametrize("serial", list(EXPECTED.units)[:5])
def test_measured_values_agree_with_the_truth(serial: str, scenario: Scenario, demo: tuple[Exit, str, Path]) -> None:
    """Every transfer-function value lies within four of its standard uncertainties of the truth.

    Of 25 values one in 16 000 may lie further off by chance; the seeds are fixed. The sharpened unit is left out where
    its firmware's rounding and correlated noise are not in the stated uncertainty.
    """
    squares = truth(scenario, scenario.units[serial])["squares"]
    names = {"mtf": "mtf at 0.25 cy/px", "mtf50": "mtf50 cy/px"}
    readings = [r for r in _results(demo[2], serial)["readings"] if r["quantity"] in names and r["value"] is not None]

    assert len(readings) >= 5
    for reading in readings:
        true = squares[reading["region"].removeprefix("corners ")][names[reading["quantity"]]]
        assert abs(reading["value"] - true) <= 4 * reading["u"], reading["label"]


@pytest.mark.parametrize("serial", ["WS8-000106", "WS8-000107"])
def test_who_cannot_tell_names_the_frame_that_would(serial: str, demo: tuple[Exit, str, Path]) -> None:
    """Where nobody can tell who is at fault, the report says which frame would settle it."""
    document = _results(demo[2], serial)

    assert "frame" in document["because"] + document["next"] + " ".join(document["reasons"])


def test_demo_ends_well_and_says_what_to_open(demo: tuple[Exit, str, Path]) -> None:
    """Exit code 0, every unit `as it is` documented, and the file to open first is there."""
    code, text, out = demo
    first = next(line for line in text.splitlines() if line.startswith("open first:")).split()[2]

    assert code == Exit.CONFORMS, text
    assert text.count("as it is") == 8
    assert Path(first) == out / "reports" / EXPECTED.open_first / "report.html"
    assert Path(first).is_file()
    assert (out / "reports" / "lot.html").is_file()


def test_every_report_says_that_it_is_simulated(demo: tuple[Exit, str, Path]) -> None:
    """No unit of a demo lot can be taken for a real one."""
    assert all(_results(demo[2], serial)["simulated"] for serial in EXPECTED.units)


def test_a_wrong_verdict_is_not_taken_for_the_documented_one() -> None:
    """Verdict, blame and characteristics all count."""
    documented = EXPECTED.units["WS8-000103"]

    assert documented != Documented("does not conform", "unit", ("2",))
    assert documented != Documented("does not conform", "capture", ("2", "3"))
    assert documented != Documented("cannot decide", "unit", ("2", "3"))


def _results(out: Path, serial: str) -> Any:
    return json.loads((out / "reports" / serial / "results.json").read_text(encoding="utf-8"))
