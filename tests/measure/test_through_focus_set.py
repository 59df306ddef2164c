"""A through-focus set of real files, from spec to verdict: edges in every frame, one focal surface, one limit on it."""

import json
import math
from pathlib import Path

import numpy as np
import pytest
import tifffile

from runner.cli import run
from runner.exits import Exit
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian

SPEC = """\
probatum-spec: 1
document: {number: WS8-FOC, revision: A}
unit: {product: WS8, serial: 'WS8-[0-9]{6}'}
camera:
  {frame_size: 320 x 200 px, bit_depth: 16 bit, black_level: 0 DN, white_level: 65535 DN, pixel_pitch: 3 um}
captures:
  focus:
    target: slanted edge
    frames: 'focus-{z}.tif'
    regions:
      row: {position: {left: [25 %, 50 %], right: [75 %, 50 %]}, size: [100 px, 120 px]}
    measure: {edge response: {}, through focus: {frequency: 0.15 cy/px}}
    limits:
      - {characteristic: 1, quantity: best_focus, where: row, nominal: 4 um, tolerance: 2 um}
      - {characteristic: 2, quantity: depth_of_focus, at_least: 10 um}
"""
FOCUS = {"left": 3.0, "right": 5.0}


def _write(folder: Path) -> None:
    """Blurs grow as sqrt(0.6² + (0.045 z)²) px: the transfer at a frequency is a Gaussian of z."""
    rng = np.random.default_rng(1)
    for z in range(-20, 31, 5):
        frame = np.full((200, 320), 8000.0)
        for side, x0 in (("left", 0), ("right", 160)):
            sigma = float(np.hypot(0.6, 0.045 * (z - FOCUS[side])))
            frame[:, x0 : x0 + 160] = EdgeScene(optics=Gaussian(sigma), size=(160, 200), direction=5.0).render()
        noisy = np.clip(frame + rng.normal(0, 100, frame.shape), 0, 65535).round().astype(np.uint16)
        tifffile.imwrite(folder / f"focus-{z}um.tif", noisy)


def test_a_set_of_files_is_judged_by_its_focal_surface(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The mean of both focuses lies at 4 µm and the depth is long enough: the unit conforms."""
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    unit = tmp_path / "frames" / "WS8-000001"
    unit.mkdir(parents=True)
    _write(unit)
    (tmp_path / "spec.yaml").write_text(SPEC)
    out = tmp_path / "out"
    code = run(["run", str(tmp_path / "spec.yaml"), str(tmp_path / "frames"), "--out", str(out), "--quiet"])

    assert code is Exit.CONFORMS
    document = json.loads((out / "WS8-000001" / "results.json").read_bytes())
    values = {(r["quantity"], r["region"]): (r["value"], r["u"]) for r in document["readings"]}
    focus, u = values["best_focus", "row"]
    assert abs(focus - 4.0) <= 3 * u
    depth = 2 * math.sqrt(-math.log(0.8) / (2 * math.pi**2 * 0.15**2)) / 0.045  # of a Gaussian in z
    assert abs(values["depth_of_focus", ""][0] - depth) < 0.02 * depth
    assert ("mtf", "row left") not in values  # a value of one position says nothing about the unit
