"""The most memory that a run over sets of 16 large flats ever holds."""

import shutil
from pathlib import Path

import pytest

from tests.benchmarks.fields import lay_out_set
from tests.benchmarks.side_by_side import Row, show
from tests.benchmarks.watched import run

FRAMES = 16
BYTES = {"mono": 2, "mosaic": 2, "rgb": 3}
"""Of a pixel as decoded."""


@pytest.mark.benchmark
def test_sets_of_16_flats(tmp_path: Path) -> None:
    """All methods on 16 flats of 12 MP together: below 700 MB, of which the decoded frames alone take 366 or 549 MB."""
    rows = []
    for kind, size in BYTES.items():
        folder = tmp_path / kind
        folder.mkdir()
        lay_out_set(folder, FRAMES, kind)
        seen = run(folder, ["spec.yaml", "frames", "--out", "out"], {})
        assert seen.code == 0
        rows += [
            Row(f"{kind}: the run's process at most", seen.most, "MB", 700),
            Row(f"{kind}: of it, frames as decoded", FRAMES * 12e6 * size / 2**20, "MB"),
            Row(f"{kind}: CPU time", seen.total, "s"),
        ]
        shutil.rmtree(folder)
    show(f"{FRAMES} flats of 12 MP with all methods, one job", rows)
