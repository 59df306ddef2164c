"""A colour camera's chart from files to verdict: the spec's words, channels of values, and a chart that is mirrored."""

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import tifffile

from runner.cli import run
from runner.exits import Exit
from tests.scenes.colours import LAB, linear_srgb
from tests.scenes.patches import PatchChart, Recorder

ROWS = "\n".join(f"          - [{row[0]:.4f}, {row[1]:.4f}, {row[2]:.4f}]" for row in LAB)
SPEC = f"""\
probatum-spec: 1
document: {{number: WS8-COL, revision: A}}
unit: {{product: WS8, serial: 'WS8-[0-9]{{6}}'}}
camera:
  {{frame_size: 480 x 340 px, bit_depth: 8 bit, black_level: 0 DN, white_level: 255 DN, colour: rgb, tone: srgb,
   processing: [tone mapped]}}
captures:
  chart:
    target: {{colour patches: {{layout: 6 x 4}}}}
    frames: {{names: 'chart-{{repeat}}.tif', count: 2}}
    regions: {{chart: {{position: [50 %, 50 %], size: [100 %, 100 %]}}}}
    measure:
      colour:
        illuminant: D65
        lab_uncertainty: 0.2
        lab:
{ROWS}
    limits:
      - {{characteristic: 1, quantity: mean_ciede2000, where: chart, channel: green, at_most: 3}}
      - {{characteristic: 2, quantity: white_balance_error, where: chart, channel: red, nominal: 0 %, tolerance: 3 %}}
      - {{characteristic: 3, quantity: white_balance_error, where: chart, channel: blue, nominal: 0 %, tolerance: 3 %}}
      - {{characteristic: 4, quantity: ciede2000, parameters: {{patch: 19}}, where: chart, channel: green, at_most: 4}}
"""


def _run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, gains: list[float], mirrored: bool) -> tuple[Exit, Any]:
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    unit = tmp_path / "frames" / "WS8-000001"
    unit.mkdir(parents=True)
    lights = tuple((float(a), float(b), float(c)) for a, b, c in 0.85 * linear_srgb(LAB) * np.array(gains))
    light = PatchChart(lights, 6, (480, 340), pitch=(72, 72), gap=0.1, ground=(0.04,) * 3, turned=2).light()
    light = light[:, ::-1] if mirrored else light
    recorder = Recorder(tone="srgb", bits=8, black=0, white=255, read=0.002)
    for n, codes in enumerate(recorder.codes(light, np.random.default_rng(4), 2), 1):
        tifffile.imwrite(unit / f"chart-{n}.tif", codes.astype(np.uint8), photometric="rgb")
    (tmp_path / "spec.yaml").write_text(SPEC)
    out = tmp_path / "out"
    code = run(["run", str(tmp_path / "spec.yaml"), str(tmp_path / "frames"), "--out", str(out), "--quiet"])
    document = json.loads((out / "WS8-000001" / "results.json").read_bytes())
    return code, {str(c["characteristic"]): c for c in document["checks"]}


@pytest.mark.parametrize(
    ("gains", "mirrored", "code", "verdict"),
    [
        ([1.0, 1.0, 1.0], False, Exit.CONFORMS, "conforms"),
        ([1.1, 1.0, 1.0], False, Exit.DOES_NOT_CONFORM, "does not conform"),
        ([1.0, 1.0, 1.0], True, Exit.NOT_MEASURED, "not measured"),
    ],
    ids=["good", "reddish", "mirrored"],
)
def test_verdicts_on_colour(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, gains: list[float], *, mirrored: bool, code: Exit, verdict: str
) -> None:
    """A true camera conforms, one 10 % too red does not in red's balance, and of a mirrored chart nothing is said."""
    ended, checks = _run(tmp_path, monkeypatch, gains, mirrored)

    assert ended is code, {n: c["reason"] for n, c in checks.items()}
    assert checks["2"]["verdict"] == verdict
    if verdict == "does not conform":
        assert checks["2"]["value"] == pytest.approx(10, abs=0.5)
        assert checks["3"]["verdict"] == "conforms"
    if verdict == "not measured":
        assert checks["1"]["at_fault"] == "capture"
        assert "as if the chart were mirrored left to right" in checks["1"]["reason"]
