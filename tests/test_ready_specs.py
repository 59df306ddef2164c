"""Ready specs: read without a complaint, told on the format's page, and judging the demo lots' units as they should."""

import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from runner import acceptance
from runner.measure.plan import bind
from runner.rehearse import bench
from runner.rehearse.bench_captures import BenchCapture, BenchUnit, Step
from runner.rehearse.delivery import deliver
from runner.rehearse.expected import Documented, found_in, read_expected
from runner.rehearse.lot import make_unit
from runner.rehearse.mosaics import Mosaic
from runner.rehearse.scenario import read_scenario
from runner.resources import folder
from runner.spec.build import read_spec

SPECS = sorted(folder("specs").glob("*.yaml"))
MACHINE_VISION = folder("specs") / "machine-vision-camera.yaml"
EXPLAINED = [MACHINE_VISION, folder("specs") / "wide-lens-board-camera.yaml"]
SIZER = folder("demo_lots") / "walnut_sizer"
BANDED = "WZ2-000204"


@pytest.mark.parametrize("path", SPECS, ids=lambda path: path.stem)
def test_every_ready_spec_is_read_without_a_complaint(path: Path) -> None:
    """No error, no warning: neither in its form nor when its quantities are looked up among the methods."""
    spec = read_spec(path)

    assert spec.warnings == ()
    assert bind(spec).spec.warnings == ()


def test_every_ready_spec_is_named_where_people_look() -> None:
    """The format's page and the front page name each of them."""
    for page in (folder("specs") / "FORMAT.md", folder("specs").parent / "README.md"):
        if page.is_file():  # the front page does not travel in the wheel
            text = page.read_text(encoding="utf-8")
            assert [path.name for path in SPECS if path.name not in text] == []


@pytest.mark.parametrize("path", EXPLAINED, ids=lambda path: path.stem)
def test_every_limit_is_explained(path: Path) -> None:
    """A comment stands above each limit, or beside it, or above a run of limits of one quantity or kind."""
    explained = False
    for line in path.read_text(encoding="utf-8").splitlines():
        if line.strip() == "limits:":
            explained = False
        if re.match(r" +# ", line):
            explained = True
        if re.match(r" +- (\{)?characteristic", line):
            assert explained or "#" in line, line


def test_it_asks_what_the_demo_lot_is_tested_by() -> None:
    """With the lens on, its characteristics are those of the walnut sizer's own spec, limit by limit."""
    own = read_spec(SIZER / read_expected(SIZER / "expected.yaml").spec)
    ready = read_spec(MACHINE_VISION)

    assert [c.name for c in ready.captures] == [*(c.name for c in own.captures), "series", "times"]
    for mine, other in zip(ready.captures, own.captures, strict=False):
        assert mine.limits == other.limits
        assert mine.usable_if == other.usable_if
        assert mine.regions == other.regions


def test_lamps_are_left_to_local_codes() -> None:
    """Who is told to light something is told whose rules hold."""
    for path in EXPLAINED:
        text = " ".join(path.read_text(encoding="utf-8").replace("#", " ").split())
        assert "local code" in text
        assert "people licensed for it" in text


def test_it_judges_a_unit_as_it_is(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A unit of the walnut sizer with bands fails by it for its bands alone: every other limit is met."""
    scenario = read_scenario(SIZER / "scenario.yaml")
    make_unit(scenario, scenario.units[BANDED], tmp_path / "frames")

    found, reasons = _judged(tmp_path, monkeypatch, "captures: {series: {remove: true}, times: {remove: true}}\n")

    assert found == read_expected(SIZER / "expected.yaml").units[BANDED], reasons


def test_its_photon_transfer_lets_the_design_pass(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The bare sensor of the walnut sizer, 160 x 120 px of it, conforms: no limit asks more than the design has."""
    scenario, shape = read_scenario(SIZER / "scenario.yaml"), (120, 160)
    unit = scenario.units[BANDED]
    pattern = scenario.sensor.pattern(shape, np.random.default_rng(11))
    camera = bench.Camera(scenario.sensor, Mosaic(), pattern, unit.transfer_at, 1.0, BenchUnit())
    levels = tuple(Step(str(1000 * n), light=n / 20) for n in range(1, 21))
    captures = [
        BenchCapture("dark", (160, 120), 3, None, 0.0),
        BenchCapture("series", (160, 120), 2, None, 1.0, levels),
    ]
    seeds = iter(range(100))
    shots = list(bench.shots(captures, camera, 20000.0, lambda _name: np.random.default_rng(next(seeds))))
    delivery = replace(scenario.delivery, raw=("dark", "series"))
    deliver(tmp_path / "frames" / BANDED, BANDED, shots, delivery, "none", {})

    removed = ", ".join(f"{name}: {{remove: true}}" for name in ("flat", "stripes", "times"))
    variant = f"camera: {{frame_size: 160 x 120 px}}\ncaptures: {{{removed}}}\n"
    found, reasons = _judged(tmp_path, monkeypatch, variant)

    assert found == Documented("conforms", None, ()), reasons


def _judged(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, variant: str) -> tuple[Documented, list[str]]:
    """Judge the one unit there is by a variant of the ready spec, in a home of its own."""
    monkeypatch.setenv("HOME", str(tmp_path / "home"))
    monkeypatch.delenv("XDG_CONFIG_HOME", raising=False)
    monkeypatch.delenv("XDG_DATA_HOME", raising=False)
    (tmp_path / MACHINE_VISION.name).write_bytes(MACHINE_VISION.read_bytes())
    spec = tmp_path / "variant.yaml"
    spec.write_text(f"include: {MACHINE_VISION.name}\n{variant}", encoding="utf-8")
    order = acceptance.Order(spec=spec, frames=tmp_path / "frames", out=tmp_path / "reports")
    (document,) = acceptance.run(order, lambda *_news: None).documents()
    return found_in(document), document["reasons"]
