"""What measuring everything in pairs of 12 MP flats and darks costs, beside reading their files."""

import hashlib
import io
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest
import tifffile

from runner import acceptance
from runner.acceptance import Order
from runner.judge.unit import judge_unit
from tests.benchmarks.fields import lay_out
from tests.benchmarks.side_by_side import Row, best_cpu, show
from tests.benchmarks.timed import timed

if TYPE_CHECKING:
    from collections.abc import Callable

ROUNDS = 7


def _read(files: Sequence[Path]) -> None:
    """Read, digest and decode files, as anyone must who says which files a value is from."""
    for file in files:
        data = file.read_bytes()
        hashlib.sha256(data).hexdigest()
        tifffile.imread(io.BytesIO(data))


@pytest.mark.benchmark
@pytest.mark.parametrize("lit", [True, False], ids=["flats", "darks"])
def test_everything_in_a_pair_of_12_mp_fields(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, *, lit: bool) -> None:
    """All methods with all their quantities, level and clipping included: at most 8 times reading the files."""
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    spec, files = lay_out(tmp_path, lit=lit)
    order = Order(spec=spec, frames=files[0].parents[1], out=tmp_path / "out")
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
    methods = {name: min(turn[name] for turn in spent) for name in spent[0]}
    everything = sum(methods.values())
    rows = [
        Row("read, SHA-256, decode (unit of the ratios)", 1000 * best["read"], "ms"),
        Row("all methods", 1000 * everything, "ms"),
        Row("all methods / read", everything / best["read"], "×", 8),
        *(Row(f"of it: {name}", 1000 * took, "ms") for name, took in methods.items()),
        Row("whole measurement, to the verdict", 1000 * best["measured"], "ms"),
        Row("whole measurement / read", best["measured"] / best["read"], "×", 8),
        Row("of it: looking through the files before", 1000 * best["survey"], "ms"),
        Row(
            "of it: reading again, finding, picture, judging",
            1000 * (best["measured"] - best["survey"] - everything),
            "ms",
        ),
    ]
    show(f"Two 12 MP 12-bit {'flats' if lit else 'darks'}: best CPU time of a warm process", rows)

    assert verdict.verdict == "conforms"
    refused = {r.quantity for r in evidence.readings if r.refusal is not None}
    assert refused <= {"stuck_pixels", "snr_temporal", "snr_fixed_pattern", "snr_total"}
    assert {"level", "temporal_noise", "row_banding", "clusters"} <= {r.quantity for r in evidence.readings}
