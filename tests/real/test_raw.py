"""A headerless frame of a real sensor: read as declared, and told apart from every wrong declaration.

The values are those of raw/README.md, computed by NumPy from the file, by nothing of this project.
"""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from runner.capture.mosaic import sites
from runner.capture.readers import read_frames
from runner.errors import FrameRefused
from runner.spec.files import Layout
from runner.spec.model import Camera
from tests.capture.raw_scenes import write

FILE = Path(__file__).parent / "raw" / "DSC_1339_768x512_rggb.raw"
CAMERA = Camera(768, 512, 14, 600, 16383, mosaic="RGGB", layout=Layout("16 bit", "little"))


def test_the_codes_are_the_files() -> None:
    """Lowest and highest code, saturated share and the mean of each of the four sites are the reference values."""
    (frame,) = read_frames(FILE, CAMERA)

    assert (int(frame.codes.min()), int(frame.codes.max())) == (616, 16383)
    means = [frame.codes[y::2, x::2].mean() for y in (0, 1) for x in (0, 1)]
    assert means == pytest.approx([2140.4, 1739.5, 1740.2, 1152.6], abs=0.05)  # printed to one decimal
    assert (frame.codes == 16383).mean() == pytest.approx(0.0011, abs=5e-5)
    red = sites("red", CAMERA, (0, 0), (512, 768))
    assert red is not None
    assert frame.codes[red].mean() == pytest.approx(2140.4, abs=0.05)


@pytest.mark.parametrize(
    ("camera", "says"),
    [
        (replace(CAMERA, layout=Layout("16 bit", "big")), "likely is byte_order: little"),
        (replace(CAMERA, mosaic="GRBG"), "read as GRBG, the two green sites differ .* likely is mosaic: RGGB or BGGR"),
        (replace(CAMERA, mosaic="GBRG"), "read as GBRG, the two green sites differ"),
        (replace(CAMERA, bit_depth=12, white_level=4095), "the highest code is 16383 DN"),
        (replace(CAMERA, bit_depth=16, white_level=65535), "the frame clips as one of 14 bit does"),
        (replace(CAMERA, width=512, height=768), "repeats itself after 768 px, not after the declared 512 px"),
        (replace(CAMERA, layout=Layout("8 bit"), bit_depth=8, white_level=255), "would fit .*frames_per_file: 2"),
    ],
    ids=["byte order", "GRBG", "GBRG", "12 bit", "16 bit", "row length", "8 bit"],
)
def test_wrong_declarations_are_refused(camera: Camera, says: str) -> None:
    """What is not so is told, with what is likely so."""
    with pytest.raises(FrameRefused, match=says):
        read_frames(FILE, camera)


PACKINGS = ["12 bit low bits first", "12 bit high bits first", "12 bit low nibbles in the middle", "MIPI RAW12"]


@pytest.mark.parametrize("written", PACKINGS)
def test_packed_copies_are_told_apart(written: str, tmp_path: Path) -> None:
    """Its upper 12 bit, packed in each way, are read as packed and refused as packed in any other way."""
    codes = np.fromfile(FILE, "<u2").reshape(512, 768) >> 2
    path = tmp_path / "a.raw"
    path.write_bytes(write(codes, Layout(written)))

    for declared in PACKINGS:
        camera = Camera(768, 512, 12, 150, 4095, mosaic="RGGB", layout=Layout(declared))
        if declared == written:
            assert np.array_equal(read_frames(path, camera)[0].codes, codes)
            continue
        with pytest.raises(FrameRefused, match=f"likely is packing: {written}"):
            read_frames(path, camera)
