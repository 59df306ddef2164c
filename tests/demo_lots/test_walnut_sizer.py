"""The walnut sizer: flats, darks and stripes of each unit end as documented and agree with what is there."""

import contextlib
import io
import json
import shutil
from collections.abc import Iterator
from math import log10, sqrt
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from runner.cli import run
from runner.exits import Exit
from runner.rehearse.expected import found_in, read_expected
from runner.rehearse.illumination import gains
from runner.rehearse.lot import truth
from runner.rehearse.scenario import Scenario, Unit, read_scenario
from runner.resources import folder
from runner.spec.build import read_spec
from runner.spec.model import Spec

HOME = folder("demo_lots") / "walnut_sizer"
EXPECTED = read_expected(HOME / "expected.yaml")
MEASURED = list(EXPECTED.units)[:6]
"""Units whose frames may be used."""
SOUND = ("WZ2-000201", "WZ2-000203")
"""Units without a flaw of sensor or readout."""
TRANSFER = {"0.05": "18", "0.15": "19", "0.25": "20", "0.35": "21", "0.45": "22"}
"""Characteristic of the patches of each frequency."""


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
    """Run the whole demo once, on two processes, in a home of its own; yield exit code, printed text and its folder."""
    out = tmp_path_factory.mktemp("demo")
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("HOME", str(out / "home"))
        patch.delenv("XDG_CONFIG_HOME", raising=False)
        patch.delenv("XDG_DATA_HOME", raising=False)
        printed = io.StringIO()
        with contextlib.redirect_stdout(printed):
            code = run(["demo", "walnut_sizer", "--out", str(out / "demo"), "--jobs", "2"])
        yield code, printed.getvalue(), out / "demo"
    shutil.rmtree(out / "demo")  # 80 MB


@pytest.mark.parametrize("serial", list(EXPECTED.units))
def test_every_documented_verdict_is_found(serial: str, demo: tuple[Exit, str, Path]) -> None:
    """Files in, report out: verdict, blame and characteristics are the documented ones, and all are simulated."""
    document = _results(demo[2], serial)

    assert found_in(document) == EXPECTED.units[serial], document["reasons"]
    assert document["simulated"]
    assert all(frame["simulated"] for capture in document["captures"] for frame in capture["frames"])


def test_demo_ends_well(demo: tuple[Exit, str, Path]) -> None:
    """Exit code 0, and every unit `as it is` documented."""
    assert demo[0] == Exit.CONFORMS, demo[1]
    assert demo[1].count("as it is") == 8


@pytest.mark.parametrize("serial", MEASURED)
def test_documented_stripes_follow_from_the_truth(serial: str, scenario: Scenario, spec: Spec) -> None:
    """The true transfer of each patch and the true mtf50 lie clear of their limits, on the documented side.

    The uncertainty is 0.5 % (the target's own modulation); clear is five times that. mtf50 is read off the straight
    line between patches, which a curve leaves by 1 % at most there.
    """
    patches = truth(scenario, scenario.units[serial])["patches"]
    limits = {limit.characteristic: limit.at_least for limit in spec.capture("stripes").limits}
    failing = EXPECTED.units[serial].characteristics
    f, curve = (
        [patches[f"upright {name}"][key] for name in TRANSFER] for key in ("frequency cy/px", "modulation transfer")
    )
    half = float(np.interp(-0.5, [-value for value in curve], f))
    least = limits["25"]
    assert least is not None
    assert abs(half - least) > 5 * 0.01 * half
    assert (half < least) == ("25" in failing)

    for frequency, number in TRANSFER.items():
        low = limits[number]
        assert low is not None
        for way in ("upright", "level"):
            value = patches[f"{way} {frequency}"]["modulation transfer"]
            assert abs(value - low) > 5 * 0.005 * value
            assert (value < low) == (number in failing), (way, frequency)


@pytest.mark.parametrize("serial", MEASURED)
def test_stripes_agree_with_the_truth(serial: str, scenario: Scenario, demo: tuple[Exit, str, Path]) -> None:
    """Transfer, frequency and direction of every patch lie within four standard uncertainties of the truth.

    The target's own modulation is exactly the stated one here, so its share of the uncertainty is left out. Of 180
    values one in 90 runs would lie further off by chance (normal law); the seeds are fixed.
    """
    patches = truth(scenario, scenario.units[serial])["patches"]
    names = {"modulation_transfer": "modulation transfer", "grating_frequency": "frequency cy/px"}
    readings = [r for r in _results(demo[2], serial)["readings"] if r["capture"] == "stripes"]
    compared = [r for r in readings if r["quantity"] in names and r["region"] in patches]

    assert len({(r["region"], r["quantity"]) for r in compared}) >= 10
    for reading in compared:
        true = patches[reading["region"]][names[reading["quantity"]]]
        u = sqrt(sum(c["u"] ** 2 for c in reading["components"] if c["name"] != "target's modulation"))
        assert abs(reading["value"] - true) <= 4 * u + 1e-6, reading["label"]  # the truth is written to 1e-6


@pytest.mark.parametrize("serial", SOUND)
def test_noise_is_that_of_the_photon_transfer_curve(
    serial: str, scenario: Scenario, demo: tuple[Exit, str, Path]
) -> None:
    """Noise and level of a sound unit are K, photons, PRNU, DSNU and read noise, through the firmware's gains.

    EMVA 1288 Release 4.0: var = K² (electrons + read noise²) + 1/12, once more 1/12 for the firmware's own rounding;
    1 % is allowed, for a gain of few codes is not even after rounding.
    """
    sensor, unit = scenario.sensor, scenario.units[serial]
    table, light = _table(unit), _light(unit)
    electrons = sensor.quantum_efficiency * scenario.photons * light
    k = sensor.dn_per_e
    variance = table**2 * (k**2 * (electrons + sensor.read_noise_e**2) + 1 / 12) + 1 / 12
    level = float((k * electrons * table).mean())
    pattern = float(np.mean((table * k) ** 2 * ((sensor.prnu * electrons) ** 2 + sensor.dsnu_e**2)))
    found = _values(_results(demo[2], serial), "flat")

    assert found["mean_level"] == pytest.approx(level, rel=1e-3)
    assert found["temporal_noise"] == pytest.approx(sqrt(float(variance.mean())), rel=0.01)
    assert found["snr_temporal"] == pytest.approx(20 * log10(level / sqrt(float(variance.mean()))), abs=0.09)
    assert found["fixed_pattern_noise"] == pytest.approx(sqrt(pattern), rel=0.01)


def test_bands_are_found_in_light_and_in_the_dark(scenario: Scenario, demo: tuple[Exit, str, Path]) -> None:
    """Their frequency is the planted one; their amplitude is the planted one times the firmware's gain.

    In the dark the firmware rounds products of few codes, which most gains leave as they were: there it lies between
    the planted amplitude and that times the mean gain.
    """
    unit = scenario.units["WZ2-000204"]
    assert unit.bands is not None
    gain = float(_table(unit).mean())
    document = _results(demo[2], unit.serial)
    lit, dark = (_reading(document, capture, "row_banding") for capture in ("flat", "dark"))
    frequency = _reading(document, "flat", "row_banding_frequency")

    assert abs(lit["value"] - gain * unit.bands.amplitude_dn) <= 4 * lit["u"]
    assert unit.bands.amplitude_dn <= dark["value"] <= gain * unit.bands.amplitude_dn + 4 * dark["u"]
    assert abs(frequency["value"] - unit.bands.frequency) <= 4 * frequency["u"]


def test_planted_defects_are_counted_and_placed(scenario: Scenario, demo: tuple[Exit, str, Path]) -> None:
    """Every planted pixel and column is counted; a stuck pixel is hot in a dark as well."""
    planted = scenario.units["WZ2-000205"].defects
    document = _results(demo[2], "WZ2-000205")
    dark, flat = _values(document, "dark"), _values(document, "flat")

    assert dark["hot_pixels"] == planted.hot + planted.stuck
    assert flat["dead_pixels"] == planted.dead
    assert flat["stuck_pixels"] == planted.stuck
    assert flat["defective_columns"] == planted.weak_columns
    assert _values(_results(demo[2], "WZ2-000202"), "dark")["hot_pixels"] == scenario.units["WZ2-000202"].defects.hot
    assert sum(spot["kind"] == "dead pixel" for spot in document["spots"]) == planted.dead


def test_mirrored_correction_shades_as_the_two_laws_say(scenario: Scenario, demo: tuple[Exit, str, Path]) -> None:
    """Uniformity and darkest corner are those of lens × table over blocks, within four standard uncertainties."""
    unit = scenario.units["WZ2-000206"]
    field = _light(unit) * _table(unit)
    rows, columns = (
        np.linspace(0, size, n + 1).round().astype(int) for size, n in zip(field.shape, (9, 11), strict=True)
    )
    blocks = np.add.reduceat(np.add.reduceat(field, rows[:-1], 0), columns[:-1], 1)
    blocks /= np.outer(np.diff(rows), np.diff(columns))
    document = _results(demo[2], unit.serial)

    for name, true in (
        ("uniformity", 100 * blocks.min() / blocks.max()),
        ("darkest_corner", 100 * blocks[[0, 0, -1, -1], [0, -1, 0, -1]].min() / blocks[4, 5]),
    ):
        reading = _reading(document, "flat", name)
        noise = sqrt(sum(c["u"] ** 2 for c in reading["components"] if c["name"] != "flat source"))
        assert abs(reading["value"] - true) <= 4 * noise + 0.01, name  # 0.01 %: the firmware's rounding


def test_packed_mix_up_names_the_likely_packing(demo: tuple[Exit, str, Path]) -> None:
    """The station's other packing is told by name, every frame of it refused; what it saved as TIFF is measured."""
    document = _results(demo[2], "WZ2-000207")
    told = " ".join(document["reasons"])

    assert "read as 12 bit low bits first" in told
    assert "likely is packing: 12 bit high bits first" in told
    assert [(c["name"], c["usable"]) for c in document["captures"]] == [
        ("dark", False),
        ("flat", False),
        ("stripes", True),
    ]
    assert sum(len(c["faults"]) for c in document["captures"]) == 8


def test_half_copied_file_is_told_from_a_bad_unit(demo: tuple[Exit, str, Path]) -> None:
    """Both the zeros at its end and the manifest speak against the file, and nothing of the attempt is measured."""
    document = _results(demo[2], "WZ2-000208")
    told = " ".join(document["reasons"])

    assert "flat-5.raw: the last 240000 of 480000 pixels are zero" in told
    assert "manifest.json: flat-5.raw is not the file that was listed" in told
    assert {check["verdict"] for check in document["checks"]} == {"not measured"}
    assert {check["at_fault"] for check in document["checks"]} == {"capture"}
    assert document["next"].startswith("Copy again from the station: 'dark', 'flat' and 'stripes'")


def _table(unit: Unit) -> Any:
    table = gains(_light(unit), unit.correction)
    assert table is not None
    return table


def _light(unit: Unit) -> Any:
    assert unit.illumination is not None
    return unit.illumination.picture(unit.view.rows, unit.view.columns)


def _results(out: Path, serial: str) -> Any:
    return json.loads((out / "reports" / serial / "results.json").read_text(encoding="utf-8"))


def _reading(document: Any, capture: str, quantity: str) -> Any:
    return next(r for r in document["readings"] if (r["capture"], r["quantity"]) == (capture, quantity))


def _values(document: Any, capture: str) -> dict[str, float]:
    return {r["quantity"]: r["value"] for r in document["readings"] if r["capture"] == capture}
