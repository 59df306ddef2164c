"""A sequence of real files, from spec to verdict: the unit that loses frames fails, the bad capture is not measured."""

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import tifffile

from runner.cli import run
from runner.exits import Exit
from tests.measure.sequence_samples import noisy

SPEC = """\
probatum-spec: 1
document: {number: WS8-SEQ, revision: A}
unit: {product: WS8, serial: 'WS8-[0-9]{6}'}
camera: {frame_size: 40 x 30 px, bit_depth: 12 bit, black_level: 64 DN, white_level: 4095 DN}
captures:
  live:
    target: frame sequence
    frames: {names: 'live-{repeat}.tif', count: 12}
    limits:
      - {characteristic: 1, quantity: lost_frames, at_most: 0}
      - {characteristic: 2, quantity: repeated_frames, at_most: 0}
      - {characteristic: 3, quantity: reordered_frames, at_most: 0}
      - {characteristic: 4, quantity: torn_frames, at_most: 0}
      - {characteristic: 5, quantity: level_drift, at_least: -2 %, at_most: 2 %}
      - {characteristic: 6, quantity: timing_jitter, at_most: 2 ms}
"""
Frames = list[np.ndarray]
Notes = list[dict[str, Any]]


def _nothing(frames: Frames, notes: Notes) -> None:
    """Leave the sequence sound."""


def _lost(_frames: Frames, notes: Notes) -> None:
    for note in notes[6:]:
        note["counter"] += 2
        note["time"] = note["time"].replace("00:00:0", "00:00:1")


def _repeated(frames: Frames, notes: Notes) -> None:
    frames[5], notes[5]["counter"] = frames[4].copy(), notes[4]["counter"]


def _swapped(_frames: Frames, notes: Notes) -> None:
    notes[5]["counter"], notes[6]["counter"] = notes[6]["counter"], notes[5]["counter"]


def _torn(frames: Frames, _notes: Notes) -> None:
    frames[5][:12] = frames[4][:12]


def _drifting(frames: Frames, _notes: Notes) -> None:
    for n in range(12):
        frames[n] = noisy(0.4 * (1 + 0.01 * n), n)


def _untold(_frames: Frames, notes: Notes) -> None:
    for note in notes:
        del note["counter"], note["time"]


def _dark(frames: Frames, _notes: Notes) -> None:
    frames[:] = [noisy(0.0, n) for n in range(12)]


def _clipped(frames: Frames, _notes: Notes) -> None:
    frames[7] = noisy(1.05, 7)


def _dead(frames: Frames, _notes: Notes) -> None:
    frames[:] = [np.full((30, 40), 900) for _ in range(12)]


def _other_unit(_frames: Frames, notes: Notes) -> None:
    notes[3]["serial"] = "WS8-000002"


def _nonsense(_frames: Frames, notes: Notes) -> None:
    notes[3]["time"] = "yesterday"


def _run(folder: Path, plant: Callable[[Frames, Notes], None], drop: int | None = None) -> tuple[Exit, dict[str, Any]]:
    unit = folder / "frames" / "WS8-000001"
    unit.mkdir(parents=True)
    frames: Frames = [noisy(0.4, n) for n in range(12)]
    notes: Notes = [{"counter": 100 + n, "time": f"2026-12-01T09:00:00.{40 * n:03d}Z"} for n in range(12)]
    plant(frames, notes)
    for n, (frame, note) in enumerate(zip(frames, notes, strict=True)):
        if n != drop:
            tifffile.imwrite(unit / f"live-{n:02d}.tif", frame.astype(np.uint16))
            (unit / f"live-{n:02d}.json").write_text(json.dumps(note))
    (folder / "spec.yaml").write_text(SPEC)
    out = folder / "out"
    code = run(["run", str(folder / "spec.yaml"), str(folder / "frames"), "--out", str(out), "--quiet"])
    return code, json.loads((out / "WS8-000001" / "results.json").read_bytes())


@pytest.fixture(autouse=True)
def _config(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))


def test_a_sound_sequence_conforms(tmp_path: Path) -> None:
    """Nothing is lost, nothing drifts: the unit conforms."""
    assert _run(tmp_path, _nothing)[0] is Exit.CONFORMS


@pytest.mark.parametrize(
    ("plant", "failed"),
    [
        (_lost, {"1", "6"}),
        (_repeated, {"1", "2"}),
        (_swapped, {"3"}),
        (_torn, {"4"}),
        (_drifting, {"5"}),
    ],
)
def test_each_planted_fault_fails_its_own_limit(
    plant: Callable[[Frames, Notes], None], failed: set[str], tmp_path: Path
) -> None:
    """A unit that loses, repeats, swaps or tears frames, or drifts, does not conform there and is itself at fault."""
    code, document = _run(tmp_path, plant)
    wrong = {str(c["characteristic"]) for c in document["checks"] if c["verdict"] == "does not conform"}

    assert code is Exit.DOES_NOT_CONFORM
    assert failed - {"6"} <= wrong <= failed | {"6"}
    assert document["at_fault"] == "unit"


@pytest.mark.parametrize(
    ("plant", "words", "fault"),
    [
        (_untold, "neither counters nor times of all frames are known", "cannot tell"),
        (_dark, "the level is", "capture"),
        (_clipped, "lie at the white level", "capture"),
        (_dead, "every pixel", "cannot tell"),
        (_other_unit, "the sidecar says unit WS8-000002", "capture"),
    ],
)
def test_a_bad_capture_is_not_measured(
    plant: Callable[[Frames, Notes], None], words: str, fault: str, tmp_path: Path
) -> None:
    """What the frames and their sidecars cannot tell is said, with whose fault it is."""
    code, document = _run(tmp_path, plant)
    said = " ".join([*document["reasons"], *document["remarks"], *(c["reason"] for c in document["checks"])])

    assert code is Exit.NOT_MEASURED
    assert words in said
    assert document["at_fault"] == fault


def test_a_file_that_is_missing_is_missed(tmp_path: Path) -> None:
    """The count of the spec makes a lost file visible: that is the copy's fault, not the camera's."""
    code, document = _run(tmp_path, _nothing, drop=4)

    assert code is Exit.NOT_MEASURED
    assert document["at_fault"] == "capture"


def test_a_time_that_is_no_time_tells_nothing(tmp_path: Path) -> None:
    """The rate is not measured; the counters still tell the order."""
    code, document = _run(tmp_path, _nonsense)
    verdicts = {str(c["characteristic"]): c["verdict"] for c in document["checks"]}

    assert code is Exit.NOT_MEASURED
    assert verdicts["1"] == "conforms"
    assert verdicts["6"] == "not measured"
