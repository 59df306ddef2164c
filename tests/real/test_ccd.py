"""Level and noise of a real CCD's overscan against figures that NumPy alone gives; see ccd/README.md."""

from pathlib import Path

import numpy as np
import pytest

from runner.capture.frame import Box, Codes
from runner.capture.readers import read_frames
from runner.measure.methods import banding, defects, frame_noise
from runner.spec.model import Camera
from tests.measure.flat_samples import read, sample, value

FILE = Path(__file__).resolve().parent / "ccd" / "a8280271.fits"
LEVEL, NOISE = 214.05, 3.04
"""ADU: bias and read noise, outliers clipped."""
CAMERA = Camera(width=536, height=520, bit_depth=16, black_level=0, white_level=65535)


def _codes() -> Codes:
    (frame,) = read_frames(FILE, CAMERA)
    return frame.codes


def test_the_reader_undoes_the_files_offset() -> None:
    """Signed words with BZERO 32768 are the sensor's own codes: 187 to 1715, 536 columns of 520 rows."""
    codes = _codes()

    assert codes.shape == (520, 536)
    assert (int(codes.min()), int(codes.max())) == (187, 1715)


def test_level_and_noise_of_the_overscan() -> None:
    """Even and odd columns are two captures of one bias: level within 0.05 ADU, noise within 2 u of 3.04 ADU.

    Clipping and plain means differ by 0.02 ADU. Columns that differ are a fixed pattern, so the noise from one column
    to the next is the temporal one; 2080 pairs tell it within 1.6 %.
    """
    overscan = _codes()[:, 4:12]
    frames = [overscan[:, 0::2], overscan[:, 1::2]]
    of = Camera(width=4, height=520, bit_depth=16, black_level=0, white_level=65535)
    found = read(frame_noise.measure(sample(frames, of, lit=False), frame_noise.Options(shading_order=0)))

    assert value(found["mean_level"]) == pytest.approx(LEVEL, abs=0.05)
    assert value(found["temporal_noise"]) == pytest.approx(NOISE, abs=2 * (found["temporal_noise"].u or 0))
    assert (found["temporal_noise"].u or 0) == pytest.approx(NOISE / np.sqrt(2 * 2080), rel=0.1)
    plain = np.sqrt(np.mean((frames[0].astype(float) - frames[1]) ** 2) / 2)
    assert value(found["temporal_noise"]) == pytest.approx(plain, rel=0.01)


def test_the_overscan_has_no_lines_of_its_own() -> None:
    """Means of 10 columns scatter by 3.03/√10 = 0.96 ADU; the strongest ordinate of their spectrum is 0.27 ADU.

    That is 3.8 times the median ordinate, as of noise: nothing is told, and the bound lies above what is there.
    """
    codes = _codes()
    found = read(banding.measure(sample([codes], CAMERA, lit=False, box=Box(3, 0, 13, 520)), banding.Options()))

    assert found["row_banding"].bound is not None
    assert 0.27 < found["row_banding"].bound[1] < 0.6
    assert found["column_banding"].refusal is not None


def test_a_sky_is_no_clean_dark() -> None:
    """Asked for as a dark, the sky (the header's trim region) has a hundred hot pixels and more, for stars are that."""
    codes = _codes()
    sky = read(defects.measure(sample([codes], CAMERA, lit=False, box=Box(16, 0, 528, 520)), defects.Options()))

    assert value(sky["hot_pixels"]) > 100
