"""The walnut bench: every target once, each unit as documented, and readings that agree with what is there."""

import contextlib
import io
import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from runner.cli import run
from runner.exits import Exit
from runner.measure import shelf
from runner.rehearse.bench import Camera, lit
from runner.rehearse.bench_captures import Step
from runner.rehearse.expected import found_in, read_expected
from runner.rehearse.lot import pattern_of
from runner.rehearse.scenario import Scenario, Unit, read_scenario
from runner.resources import folder
from runner.spec.build import read_spec
from runner.spec.model import Spec

HOME = folder("demo_lots") / "walnut_bench"
EXPECTED = read_expected(HOME / "expected.yaml")
SOUND = "WB4-000301"
HUNTING = "WB4-000304"
BENT = "WB4-000302"
SMEARING = "WB4-000303"
PLAIN = (SOUND, BENT, HUNTING, "WB4-000305")
"""Units whose firmware leaves frames alone."""
ELSEWHERE = {"flat field", "sinusoidal grating"}
"""Targets that the walnut sizer stands before."""
TO_COME = {"colour patches"}
"""Targets of which the lot has no capture yet."""


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
            code = run(["demo", "walnut_bench", "--out", str(out / "demo"), "--jobs", "2"])
        yield code, printed.getvalue(), out / "demo"


def test_every_target_is_looked_at_once(spec: Spec) -> None:
    """The lot has a capture of each target on the shelf but those named above, and none twice."""
    targets = [capture.target for capture in spec.captures]

    assert len(targets) == len(set(targets))
    assert set(shelf.targets()) - set(targets) <= ELSEWHERE | TO_COME


@pytest.mark.parametrize("serial", list(EXPECTED.units))
def test_every_documented_verdict_is_found(serial: str, demo: tuple[Exit, str, Path]) -> None:
    """Frames in, report out: verdict, blame and characteristics are the documented ones, and all are simulated."""
    document = _results(demo[2], serial)

    assert found_in(document) == EXPECTED.units[serial], document["reasons"]
    assert document["simulated"]


def test_demo_ends_well(demo: tuple[Exit, str, Path]) -> None:
    """Exit code 0, and every unit `as it is` documented."""
    assert demo[0] == Exit.CONFORMS, demo[1]
    assert demo[1].count("as it is") == len(EXPECTED.units)


def test_the_mirrored_chart_is_named(demo: tuple[Exit, str, Path]) -> None:
    """What blames the capture says that the chart is seen from behind, and of the dots only."""
    document = _results(demo[2], "WB4-000306")
    lost = {check["capture"] for check in document["checks"] if check["verdict"] == "not measured"}

    assert lost == {"dots"}
    assert "mirrored" in " ".join(document["reasons"])


@pytest.mark.parametrize("serial", PLAIN)
def test_transfer_functions_agree_with_the_truth(serial: str, scenario: Scenario, demo: tuple[Exit, str, Path]) -> None:
    """Star, texture and edge against the system's own transfer function, within four standard uncertainties.

    A veil takes its share of contrast from star and texture, whose own modulations are stated. 0.002 is allowed for
    what distortion does to frequencies in the middle of the frame: below 0.1 % of them.
    """
    unit, document = scenario.units[serial], _results(demo[2], serial)
    system, veil = unit.transfer_at(0.0, 0.0), unit.bench.veil
    angles = np.arange(0.0, 180.0, 2.0)
    round_mean = (1 - veil) * float(np.mean([system.along(0.125, a) for a in angles]))

    for capture, label in (("star", "mtf at 0.125 cy/px"), ("texture", "texture mtf at 0.125 cy/px")):
        reading = _reading(document, capture, capture, label)
        assert abs(reading["value"] - round_mean) <= 4 * reading["u"] + 0.002, (label, round_mean)
    edge = _reading(document, "edges", "edges centre", "mtf50")
    f = np.linspace(0.05, 1.0, 2000)
    at = float(np.interp(-0.5, -system.along(f, 5.0), f))
    assert abs(edge["value"] - at) <= 4 * edge["u"] + 0.002 * at


@pytest.mark.parametrize("serial", list(EXPECTED.units))
def test_the_sensor_is_the_one_of_the_scenario(serial: str, scenario: Scenario, demo: tuple[Exit, str, Path]) -> None:
    """Gain, dark noise and patterns in electrons, within four standard uncertainties of what was planted."""
    sensor, document = scenario.sensor, _results(demo[2], serial)
    planted = {
        "system gain": sensor.dn_per_e,
        "temporal dark noise": sensor.read_noise_e,
        "prnu1288": 100 * sensor.prnu,
        "dsnu1288": sensor.dsnu_e,
    }
    for name, truth in planted.items():
        reading = _reading(document, "series", "", name)
        # A pattern of n pixels scatters by 1/√(2n) of itself, 1 % of 4600: the planted one is but one of many.
        own = 0.011 * truth if name.endswith("1288") else 0.0
        assert abs(reading["value"] - truth) <= 4 * np.hypot(reading["u"], own), name


@pytest.mark.parametrize("serial", [SOUND, BENT])
def test_the_lens_is_the_one_of_the_scenario(serial: str, scenario: Scenario, demo: tuple[Exit, str, Path]) -> None:
    """Radial term and magnifications of colours; a thousandth of the largest displacement is allowed besides."""
    lens, document = scenario.units[serial].bench.lens, _results(demo[2], serial)
    k1 = _reading(document, "dots", "", "radial k1")
    assert k1["value"] == pytest.approx(lens.k1, abs=0.02 * abs(lens.k1) + 4 * k1["u"])

    for channel, scale in zip(("red", "blue"), (lens.colours[0], lens.colours[2]), strict=True):
        reading = _reading(document, "dots", "", "chromatic magnification", channel)
        assert abs(reading["value"] - scale) <= 4 * reading["u"] + 1e-5, channel


@pytest.mark.parametrize("serial", [SOUND, HUNTING])
def test_elements_tell_the_size_of_a_pixel(serial: str, scenario: Scenario, demo: tuple[Exit, str, Path]) -> None:
    """By the table's periods a pixel sees what the scenario says, to 0.5 %: distortion, and a tenth of a degree."""
    document, truth = _results(demo[2], serial), 1e3 * scenario.units[serial].view.mm_per_px
    for region in ("c up", "c across", "d up", "d across"):
        reading = _reading(document, "elements", region, "pixel in object")
        assert abs(reading["value"] - truth) <= 4 * reading["u"] + 0.005 * truth, region
    contrasts = [_reading(document, "elements", f"{n} up", "tri bar contrast")["value"] for n in "cd"]
    assert 100 * 80 / 90 > contrasts[0] > contrasts[1] > 70  # the target's own, then finer bars lower


@pytest.mark.parametrize("serial", [SOUND, "WB4-000305"])
def test_grey_steps_tell_a_linear_camera(serial: str, demo: tuple[Exit, str, Path]) -> None:
    """Codes are straight in light: departures from the best line lie below 0.5 %, and a veil is an offset."""
    document = _results(demo[2], serial)

    assert _reading(document, "greys", "greys", "linearity error")["value"] < 0.5


def test_the_wedges_end_is_still_resolved(scenario: Scenario, demo: tuple[Exit, str, Path]) -> None:
    """At its fine end, 0.45 cy/px, the system's transfer function lies above 10 %: what is read is a bound."""
    reading = _reading(_results(demo[2], SOUND), "wedge", "wedge", "limiting resolution by modulation")

    assert float(scenario.units[SOUND].transfer_at(0.0, 0.0).along(0.45, 90.0)) > 0.1
    assert reading["value"] is None
    assert reading["bound"] == ["above", pytest.approx(0.45, abs=0.01)]


@pytest.mark.parametrize("serial", PLAIN)
def test_veiling_glare_is_what_reaches_the_black_areas(
    serial: str, scenario: Scenario, demo: tuple[Exit, str, Path]
) -> None:
    """Light of the middle of an area over that around it, in the noiseless frame: 0.1 percentage points."""
    unit, document = scenario.units[serial], _results(demo[2], serial)
    light = _light(scenario, unit, "glare")[::2, 1::2]  # green of even rows
    black, field = light[33:47, 18:32].mean(), light[20:60, 2:8].mean()

    reading = _reading(document, "glare", "areas left", "veiling glare index iso9358")
    assert abs(reading["value"] - 100 * black / field) <= 0.1


def test_the_stream_is_told_as_it_came(scenario: Scenario, demo: tuple[Exit, str, Path]) -> None:
    """Lost and repeated frames by number; flicker with its amplitude and frequency."""
    stream, document = scenario.units[HUNTING].bench.stream, _results(demo[2], HUNTING)

    assert _reading(document, "sequence", "", "lost frames")["value"] == len(stream.lost)
    assert _reading(document, "sequence", "", "repeated frames")["value"] == len(stream.repeated)
    for name, truth in (("level flicker", 100 * stream.flicker), ("flicker frequency", stream.flicker_hz)):
        reading = _reading(document, "sequence", "", name)
        assert abs(reading["value"] - truth) <= 4 * reading["u"], name


def test_only_texture_tells_what_noise_reduction_does(scenario: Scenario, demo: tuple[Exit, str, Path]) -> None:
    """The smearing unit's edges are as sharp as the sound one's to 5 %; half of its texture is gone."""
    smeared, sound = (_results(demo[2], serial) for serial in (SMEARING, SOUND))
    edges = [_reading(one, "edges", "edges centre", "mtf50")["value"] for one in (smeared, sound)]
    textures = [_reading(one, "texture", "texture", "texture mtf at 0.125 cy/px")["value"] for one in (smeared, sound)]

    assert scenario.units[SMEARING].bench.denoising is not None
    assert edges[0] > 0.95 * edges[1]
    assert textures[0] < 0.6 * textures[1]


def _light(scenario: Scenario, unit: Unit, name: str) -> Any:
    (capture,) = (one for one in scenario.bench if one.name == name)
    pattern = pattern_of(scenario, unit)
    camera = Camera(scenario.sensor, scenario.mosaic, pattern, unit.transfer_at, unit.view.mm_per_px, unit.bench)
    return lit(capture, Step(""), camera)


def _reading(document: Any, capture: str, region: str, label: str, channel: str = "green") -> Any:
    (found,) = (
        one
        for one in document["readings"]
        if (one["capture"], one["region"], one["label"], one["channel"]) == (capture, region, label, channel)
    )
    return found


def _results(out: Path, serial: str) -> Any:
    return json.loads((out / "reports" / serial / "results.json").read_text(encoding="utf-8"))
