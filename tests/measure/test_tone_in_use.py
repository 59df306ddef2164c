"""A camera of unknown tone, from files to verdict: its steps are measured, and its edge is linearised by them."""

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import tifffile

from runner.cli import run
from runner.exits import Exit
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian
from tests.scenes.patches import PatchChart, Recorder, grey, wedge

STEPS = wedge(16, 0.13, 0.85)
WHITE = 4095
SPEC = f"""\
probatum-spec: 1
document: {{number: WS8-TON, revision: A}}
unit: {{product: WS8, serial: 'WS8-[0-9]{{6}}'}}
camera: {{frame_size: 360 x 260 px, bit_depth: 12 bit, black_level: 0 DN, white_level: 4095 DN}}
captures:
  edge:
    target: slanted edge
    frames: 'edge.tif'
    uses: {{tone: steps}}
    regions: {{centre: {{position: [50 %, 50 %], size: [80 px, 120 px]}}}}
    limits: [{{characteristic: 1, quantity: mtf50, where: centre, report_only: true}}]
  plain edge:
    target: slanted edge
    same_frames_as: edge
    regions: {{centre: {{position: [50 %, 50 %], size: [80 px, 120 px]}}}}
    limits: [{{characteristic: 2, quantity: mtf50, where: centre, report_only: true}}]
  steps:
    target: {{grey steps: {{layout: 4 x 4, reflectance: [{", ".join(f"{100 * step:.4f} %" for step in STEPS)}]}}}}
    frames: {{names: 'steps-{{repeat}}.tif', count: 2}}
    regions: {{chart: {{position: [50 %, 50 %], size: [90 %, 90 %]}}}}
    measure: {{tone response: {{}}, noise and dynamic range: {{}}}}
    limits:
      - {{characteristic: 3, quantity: gamma, where: chart, nominal: 2.2, tolerance: 0.05}}
      - {{characteristic: 4, quantity: oecf, parameters: {{level: 18 %}}, where: chart, at_least: 45 %, at_most: 47 %}}
      - {{characteristic: 5, quantity: snr_total_iso15739, parameters: {{level: 18 %}}, where: chart, at_least: 25 dB}}
"""


def _write(folder: Path, *, turned: bool = False) -> EdgeScene:
    rng = np.random.default_rng(3)
    lights = grey(STEPS[::-1] if turned else STEPS)
    chart = PatchChart(lights, 4, (360, 260), pitch=(76, 52), gap=0.1, ground=(0.2,), turned=2)
    for n, codes in enumerate(Recorder(black=0, tone="2.2", read=0.001).codes(chart.light(), rng, 2), 1):
        tifffile.imwrite(folder / f"steps-{n}.tif", codes)
    scene = EdgeScene(
        optics=Gaussian(0.6), size=(360, 260), low=0.08 * WHITE, high=0.75 * WHITE, white=WHITE, bits=12, tone=2.2
    )
    noise = np.round(3 * rng.standard_normal((260, 360)))
    tifffile.imwrite(folder / "edge.tif", np.clip(scene.render().astype(float) + noise, 0, WHITE).astype(np.uint16))
    return scene


def _run(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, *, turned: bool = False
) -> tuple[Exit, dict[str, Any], EdgeScene]:
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    unit = tmp_path / "frames" / "WS8-000001"
    unit.mkdir(parents=True)
    scene = _write(unit, turned=turned)
    (tmp_path / "spec.yaml").write_text(SPEC)
    out = tmp_path / "out"
    code = run(["run", str(tmp_path / "spec.yaml"), str(tmp_path / "frames"), "--out", str(out), "--quiet"])
    return code, json.loads((out / "WS8-000001" / "results.json").read_bytes()), scene


def test_an_edge_is_linearised_by_the_steps_of_the_same_run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Through a tone of 1/2.2 the edge's MTF50 is true within 1 % once linearised, and off by more without.

    The unit conforms in gamma, in the code at 18 % (0.18^(1/2.2) is 45.87 %) and in noise. Known from
    theory: gamma left in moves MTF50 by some per cent.
    """
    code, document, scene = _run(tmp_path, monkeypatch)
    values = {(r["capture"], r["quantity"]): r["value"] for r in document["readings"]}

    assert code is Exit.CONFORMS
    truth = scene.mtf50()
    assert values["edge", "mtf50"] == pytest.approx(truth, rel=0.01)
    assert abs(values["plain edge", "mtf50"] / truth - 1) > 3 * abs(values["edge", "mtf50"] / truth - 1)
    assert abs(values["plain edge", "mtf50"] / truth - 1) > 0.02
    assert {c["name"] for c in document["curves"] if c["capture"] == "steps"} >= {"oecf", "grey steps", "snr total"}


def test_a_turned_chart_takes_the_edge_along(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """With the steps upside down neither they nor the edge that needs them are measured, and both say why."""
    code, document, _ = _run(tmp_path, monkeypatch, turned=True)
    checks = {str(c["characteristic"]): c for c in document["checks"]}

    assert code is Exit.NOT_MEASURED
    assert checks["3"]["verdict"] == "not measured"
    assert checks["3"]["at_fault"] == "capture"
    assert "as if the chart were turned by 180°" in checks["3"]["reason"]
    (edge,) = [c for c in document["captures"] if c["name"] == "edge"]
    assert any("capture 'steps' gave no tone curve to linearise this one with" in fault for fault in edge["faults"])
