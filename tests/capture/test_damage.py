"""Damaged and lying files end in one sentence or in frames of the camera: no other error, no hang, no gigabytes."""

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from tests.capture.damage import damaged, liars

ROOT = Path(__file__).resolve().parents[2]


def test_damage_ends_in_a_sentence(tmp_path: Path) -> None:
    """3000 damaged files and every kind of lie are refused in one line or read, each at once and in little memory.

    128 MB is far below what the smallest lie asks for (0.5 GB), and far above what a frame of 38 kB needs; 5 s is far
    above the milliseconds that a file takes, and far below a hang.
    """
    call = [sys.executable, "-m", "tests.capture.damage", str(tmp_path), "20260101", "3000"]
    done = subprocess.run(call, cwd=ROOT, env={**os.environ, "PYTHONPATH": str(ROOT)}, capture_output=True, check=True)
    found = json.loads(done.stdout)

    assert found["wrong"] == []
    assert found["longest"] < 5
    assert found["grown"] < 128
    outcomes = found["outcomes"]
    assert outcomes["lying read"] == 1  # 2^32 - 1 rows a strip, which is the default of TIFF 6.0 and means all rows
    assert outcomes["damaged refused"] > 2000
    assert sum(outcomes.values()) == 3000 + len(list(liars()))


def test_the_damage_is_damage() -> None:
    """The staged damage is not the same file over and over, and leaves hardly a file as it was."""
    from tests.capture.test_readers import CUT

    files = [(name, data) for name, data, _ in damaged(1, 600)]

    assert len({data for _, data in files}) > 590
    assert sum(data == CUT[name][0] for name, data in files) < 12  # zeros written over zeros


@pytest.mark.skipif(not Path("/proc/self/status").exists(), reason="the system does not tell a process its memory")
def test_the_memory_of_a_lie_would_be_seen() -> None:
    """The measure of memory sees a gigabyte that is set aside and never touched."""
    code = (
        "import numpy as np; from tests.capture.damage import _most_memory as m; "
        "a = m(); np.empty(2**30, np.uint8); print(m() - a)"
    )
    done = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, check=True)

    assert int(done.stdout) >= 1000
