"""What measuring 25 edges in a 12 MP frame costs, beside reading the file and beside a plain script."""

import hashlib
import io
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
import tifffile

from runner import acceptance
from runner.acceptance import Order
from runner.capture.integrity import Survey
from runner.capture.lot import Lot
from runner.judge.unit import judge_unit
from tests.benchmarks.plain_edge import plain_edge
from tests.benchmarks.side_by_side import Row, best_cpu, show
from tests.benchmarks.timed import timed
from tests.benchmarks.workload import REGION, SIGMAS, centres, lay_out

if TYPE_CHECKING:
    from collections.abc import Callable

ROUNDS = 15


def _read(path: Path) -> np.ndarray:
    """Read, digest and decode a file, as anyone must who says which file a value is from."""
    data = path.read_bytes()
    hashlib.sha256(data).hexdigest()
    return np.asarray(tifffile.imread(io.BytesIO(data)))


def _plain(path: Path) -> None:
    codes, (width, height) = _read(path), REGION
    for x, y in centres():
        plain_edge(codes[y - height // 2 : y + height // 2, x - width // 2 : x + width // 2])


@pytest.mark.benchmark
def test_25_edges_of_a_12_mp_frame(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Reading, looking through, finding, measuring, picturing and judging: at most 40 times reading the file."""
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    spec, file = lay_out(tmp_path)
    order = Order(spec=spec, frames=tmp_path / "frames", out=tmp_path / "out")
    plan, _ = acceptance.read(order)
    spent: list[dict[str, float]] = []

    def survey() -> tuple[Lot, Survey]:
        return acceptance.gather(order, plan)

    def measured() -> Any:
        lot, seen = survey()
        spent.append({})
        evidence, _, tracebacks = acceptance.measure_unit(timed(plan, spent[-1]), lot.units[0], seen)
        assert tracebacks == []
        return judge_unit(plan.spec, evidence)

    verdict = measured()
    contestants: dict[str, Callable[[], object]] = {
        "read": lambda: _read(file),
        "survey": survey,
        "measured": measured,
        "plain": lambda: _plain(file),
    }
    best = best_cpu(contestants, ROUNDS)
    edge, other = (min(turn[name] for turn in spent) for name in ("edge response", "exposure"))
    script = best["plain"] - best["read"]
    rest = best["measured"] - best["survey"] - edge - other
    rows = [
        Row("read, SHA-256, decode (unit of the ratios)", 1000 * best["read"], "ms"),
        Row("whole measurement, to the verdict", 1000 * best["measured"], "ms"),
        Row("whole measurement / read", best["measured"] / best["read"], "×", 40),
        Row("edge method alone, per region", 1000 * edge / len(centres()), "ms", 30),
        Row("plain script alone, per region", 1000 * script / len(centres()), "ms"),
        Row("edge method / plain script", edge / script, "×"),
        Row("whole measurement / script that reads and measures", best["measured"] / best["plain"], "×"),
        Row("of it: looking through the file before", 1000 * best["survey"], "ms"),
        Row("of it: level and clipping, 25 regions", 1000 * other, "ms"),
        Row("of it: reading again, finding, picture, judging", 1000 * rest, "ms"),
    ]
    show("One 12 MP 16-bit TIFF with 25 edge regions of 100 × 160 px: best CPU time of a warm process", rows)

    assert verdict.verdict == "conforms"
    assert len(verdict.checks) == 2 * len(centres())


@pytest.mark.benchmark
def test_the_plain_script_measures_what_it_is_compared_for(tmp_path: Path) -> None:
    """The script's mtf50 is the scene's within 10 %: bins and derivative, uncorrected, cost it some per cent."""
    _, file = lay_out(tmp_path)
    codes, (width, height) = _read(file), REGION

    for (x, y), sigma in zip(centres(), SIGMAS, strict=True):
        frequency, mtf = plain_edge(codes[y - height // 2 : y + height // 2, x - width // 2 : x + width // 2])
        found = np.interp(0.5, mtf[frequency <= 0.5][::-1], frequency[frequency <= 0.5][::-1])
        true = _crossing(sigma)
        assert abs(found / true - 1) < 0.1, (sigma, found, true)


def _crossing(sigma: float) -> float:
    """Where a Gaussian of that sigma behind a full square pixel falls to one half, cy/px."""
    f = np.linspace(0, 0.6, 60_001)
    return float(np.interp(0.5, (np.exp(-2 * (np.pi * sigma * f) ** 2) * np.sinc(f))[::-1], f[::-1]))
