"""What photon transfer over sixteen pairs of 12 MP costs, beside reading their files."""

import hashlib
import io
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
import tifffile

from runner import acceptance
from runner.acceptance import Order
from runner.judge.unit import judge_unit
from tests.benchmarks.side_by_side import Row, best_cpu, show
from tests.benchmarks.timed import timed

if TYPE_CHECKING:
    from collections.abc import Callable

ROUNDS = 3
WIDTH, HEIGHT = 4000, 3000
LEVELS = 16
GAIN, WELL, BLACK = 0.38, 9000.0, 64
SPEC = """\
probatum-spec: 1
document: {number: BENCH-P, revision: A, title: "Benchmark of photon transfer"}
unit: {product: BENCH, serial: 'P-[0-9]{4}'}
camera: {frame_size: 4000 x 3000 px, bit_depth: 12 bit, black_level: 64 DN, white_level: 4095 DN}
captures:
  dark: {target: dark frame, frames: {names: 'dark-{repeat}.tif', count: 2}}
  series:
    target: light series
    frames: {names: 'level-{level}/flat-{repeat}.tif', count: 32}
    uses: {dark: dark}
    limits:
      - {characteristic: P1, quantity: system_gain, nominal: 0.38 DN/e-, tolerance: 0.02 DN/e-}
      - {characteristic: P2, quantity: prnu1288, at_most: 2 %}
"""


def _lay_out(folder: Path) -> list[Path]:
    """Write the spec, a pair of darks and sixteen pairs up to beyond saturation; return all files.

    Photon noise is drawn as normal noise: what it is does not change what its measurement costs.
    """
    (folder / "spec.yaml").write_text(SPEC)
    unit = folder / "frames" / "P-0001"
    unit.mkdir(parents=True)
    rng = np.random.default_rng(1)
    response = 1 + 0.01 * rng.standard_normal((HEIGHT, WIDTH), dtype=np.float32)
    files = []
    for level in range(LEVELS + 1):
        electrons = response * np.float32(1.15 * WELL * level / LEVELS)
        place = unit if level == 0 else unit / f"level-{level}"
        place.mkdir(exist_ok=True)
        for n in (1, 2):
            noise = rng.standard_normal((HEIGHT, WIDTH), dtype=np.float32)
            caught = np.minimum(electrons + np.sqrt(electrons) * noise, WELL)
            caught += 5 * rng.standard_normal((HEIGHT, WIDTH), dtype=np.float32)
            file = place / f"{'dark' if level == 0 else 'flat'}-{n}.tif"
            tifffile.imwrite(file, np.clip(np.round(GAIN * caught + BLACK), 0, 4095).astype(np.uint16))
            files.append(file)
    return files


def _read(files: Sequence[Path]) -> None:
    """Read, digest and decode files, as anyone must who says which files a value is from."""
    for file in files:
        data = file.read_bytes()
        hashlib.sha256(data).hexdigest()
        tifffile.imread(io.BytesIO(data))


@pytest.mark.benchmark
def test_photon_transfer_of_sixteen_pairs_of_12_mp(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """All quantities and curves of 2 × 16 frames and a pair of darks: at most 5 times reading the 34 files."""
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    files = _lay_out(tmp_path)
    order = Order(spec=tmp_path / "spec.yaml", frames=tmp_path / "frames", out=tmp_path / "out")
    plan, _ = acceptance.read(order)
    spent: list[dict[str, float]] = []

    def measured() -> Any:
        lot, seen = acceptance.gather(order, plan)
        spent.append({})
        evidence, _, tracebacks = acceptance.measure_unit(timed(plan, spent[-1]), lot.units[0], seen)
        assert tracebacks == []
        return judge_unit(plan.spec, evidence), evidence

    verdict, evidence = measured()
    contestants: dict[str, Callable[[], object]] = {
        "read": lambda: _read(files),
        "survey": lambda: acceptance.gather(order, plan),
        "measured": measured,
    }
    best = best_cpu(contestants, ROUNDS)
    own = min(turn["photon transfer"] for turn in spent)
    rows = [
        Row("read, SHA-256, decode 34 files (unit of the ratios)", 1000 * best["read"], "ms"),
        Row("photon transfer", 1000 * own, "ms"),
        Row("photon transfer / read", own / best["read"], "×", 5),
        Row("whole measurement, to the verdict", 1000 * best["measured"], "ms"),
        Row("whole measurement / read", best["measured"] / best["read"], "×", 5),
        Row("of it: looking through the files before", 1000 * best["survey"], "ms"),
    ]
    show("Photon transfer over 2 × 16 frames of 12 MP, 12 bit: best CPU time of a warm process", rows)

    assert verdict.verdict == "conforms"
    assert all(reading.refusal is None for reading in evidence.readings)
