"""Simulated files say that they are simulated and come out the same each time."""

import json
from pathlib import Path

import numpy as np
import tifffile

from runner.capture.readers import read_frames
from runner.rehearse.frames import tiff_bytes, write_whole
from runner.spec.model import Camera

CODES = np.random.default_rng(0).integers(0, 4096, (30, 40), dtype=np.uint16)


def test_file_carries_the_mark_and_the_truth() -> None:
    """The TIFF description is JSON with the mark, the serial and the truth."""
    import io

    with tifffile.TiffFile(io.BytesIO(tiff_bytes(CODES, "WS8-000101", {"story": "good"}))) as file:
        said = json.loads(file.pages.first.description)
        pixels = file.asarray()

    assert said == {"probatum": "simulated frame", "serial": "WS8-000101", "truth": {"story": "good"}}
    assert np.array_equal(pixels, CODES)


def test_same_frame_gives_the_same_bytes() -> None:
    """No date and no machine goes into the file."""
    assert tiff_bytes(CODES, "A", {"b": 1, "a": 2}) == tiff_bytes(CODES.copy(), "A", {"a": 2, "b": 1})


def test_reader_takes_the_file_for_what_it_is(tmp_path: Path) -> None:
    """The program's reader gives the codes back and knows that they are simulated; no other file is left."""
    write_whole(tmp_path / "A" / "chart-1.tif", tiff_bytes(CODES, "A", {}))

    (frame,) = read_frames(tmp_path / "A" / "chart-1.tif", Camera(40, 30, 12, 64, 4095))

    assert frame.simulated
    assert np.array_equal(frame.codes, CODES)
    assert [p.name for p in (tmp_path / "A").iterdir()] == ["chart-1.tif"]
