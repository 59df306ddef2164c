"""What a chart's features say need not be said again in the spec."""

from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.measure.plan import bind
from runner.spec.build import read_spec
from tests.scenes.chart_text import CHART, changed, write_chart
from tests.scenes.spec_text import TEXT, write

MORE = """\
  second stripes:
    kind: sinusoidal grating
    position: [0 mm, -35 mm]
    size: [30 mm, 20 mm]
    data: {period: 4 mm, mean: 45 %, target_modulation: 60 %}
"""
CAPTURE = """\
  board:
    target: sinusoidal grating
    frames: 'board-{repeat}.tif'
    chart: {file: chart.yaml}
    regions: {one: {feature: right stripes}, two: {on: chart, position: [0 mm, -35 mm], size: [20 mm, 10 mm]}}
    measure: {grating response: {OPTIONS}}
    limits: [{characteristic: 9, quantity: modulation_transfer, where: [one, two], at_least: 0.1}]
"""


def _plan(folder: Path, chart: str = CHART + MORE, options: str = "") -> tuple[object, dict[str, object], object]:
    write_chart(folder, chart)
    capture = CAPTURE.replace("OPTIONS", options)
    plan = bind(read_spec(write(folder, TEXT.replace("  chart:\n", f"{capture}  chart:\n"))))
    one = next(c for c in plan.captures if c.capture.name == "board")
    method = next(m for m in one.methods if m.method.NAME == "grating response")
    own = {region: options.target_modulation for region, options in method.own.items()}
    return method.options.target_modulation, own, plan.defaults()["captures"]["board"]


def test_each_region_has_its_feature_s_values(tmp_path: Path) -> None:
    """Calibrated values come from the feature that a region names or lies in; they are listed in the results' plan."""
    _, own, plan = _plan(tmp_path)

    assert own == pytest.approx({"one": 0.684, "two": 0.6})
    by_region = plan["by region"]["grating response"]  # type: ignore[index]
    assert by_region["one"]["target_modulation_uncertainty"] == pytest.approx(0.006)


def test_what_the_spec_says_goes_first(tmp_path: Path) -> None:
    """A value in the spec holds in every region."""
    value, own, _ = _plan(tmp_path, options="target_modulation: 50 %")

    assert value == 0.5
    assert own["one"] == 0.5  # with the chart's uncertainty, which the spec does not state
    assert "two" not in own


def test_equal_features_need_no_table(tmp_path: Path) -> None:
    """Features that say the same give one set of options."""
    same = (
        (CHART + MORE)
        .replace("target_modulation: 60 %", "target_modulation: 70 %")
        .replace("    calibrated: {target_modulation: 68.4 %, target_modulation_uncertainty: 0.6 %}\n", "")
    )
    value, own, plan = _plan(tmp_path, same)

    assert (value, own) == (0.7, {})
    assert "by region" not in plan  # type: ignore[operator]


def test_a_wrong_value_names_its_feature(tmp_path: Path) -> None:
    """A value that the method does not take is complained of with the feature's name."""
    with pytest.raises(SpecError, match="feature 'right stripes' of the chart: target_modulation is '300 %'"):
        _plan(tmp_path, changed("target_modulation: 68.4 %", "target_modulation: 300 %") + MORE)
