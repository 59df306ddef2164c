"""Ready specs: read without a complaint, told on the format's page, and judging the demo lots' units as they should."""

import re
from pathlib import Path

import pytest

from runner import acceptance
from runner.measure.plan import bind
from runner.rehearse.expected import found_in, read_expected
from runner.rehearse.lot import make_unit
from runner.rehearse.scenario import read_scenario
from runner.resources import folder
from runner.spec.build import read_spec

SPECS = sorted(folder("specs").glob("*.yaml"))
MACHINE_VISION = folder("specs") / "machine-vision-camera.yaml"
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


def test_every_limit_of_the_machine_vision_spec_is_explained() -> None:
    """A comment stands above each limit, or beside it, or above a run of limits of one quantity or kind."""
    explained = False
    for line in MACHINE_VISION.read_text(encoding="utf-8").splitlines():
        if line.strip() == "limits:":
            explained = False
        if re.match(r" +# ", line):
            explained = True
        if re.match(r" +- (\{)?characteristic", line):
            assert explained or "#" in line, line


def test_it_asks_what_the_demo_lot_is_tested_by() -> None:
    """Its characteristics are those of the walnut sizer's own spec, limit by limit."""
    own = read_spec(SIZER / read_expected(SIZER / "expected.yaml").spec)
    ready = read_spec(MACHINE_VISION)

    assert [c.name for c in ready.captures] == [c.name for c in own.captures]
    for mine, other in zip(ready.captures, own.captures, strict=True):
        assert mine.limits == other.limits
        assert mine.usable_if == other.usable_if
        assert mine.regions == other.regions


def test_it_judges_a_unit_as_it_is(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A unit of the walnut sizer with bands fails by it for its bands alone: every other limit is met."""
    scenario = read_scenario(SIZER / "scenario.yaml")
    make_unit(scenario, scenario.units[BANDED], tmp_path / "frames")
    monkeypatch.setenv("HOME", str(tmp_path / "home"))
    monkeypatch.delenv("XDG_CONFIG_HOME", raising=False)
    monkeypatch.delenv("XDG_DATA_HOME", raising=False)
    order = acceptance.Order(spec=MACHINE_VISION, frames=tmp_path / "frames", out=tmp_path / "reports")

    (document,) = acceptance.run(order, lambda *_news: None).documents()

    assert found_in(document) == read_expected(SIZER / "expected.yaml").units[BANDED], document["reasons"]
