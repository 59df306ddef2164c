"""Noise and level of a real camera's darks and flats against figures that NumPy alone gives; see flats/README.md."""

from pathlib import Path

import h5py
import numpy as np
import pytest

from runner.measure.methods import frame_noise
from runner.measure.reading import Reading
from runner.spec.model import Camera
from tests.measure.flat_samples import read, sample, value

FILE = Path(__file__).resolve().parent / "flats" / "tooth.h5"
DARK, FLAT = 105.18, 27942.0
"""DN: mean levels."""
ROWS, COLUMNS = 32, 40
"""Two rows are too few to tell rows apart. Noise of all pixels and level do not depend on where a pixel lies, as long
as no shading is taken off: the 2 × 640 values are laid out as 32 × 40."""


def _measure(name: str, *, lit: bool) -> dict[str, Reading]:
    with h5py.File(FILE, "r") as file:
        frames = [np.asarray(one).reshape(ROWS, COLUMNS) for one in file[f"exchange/data_{name}"]]
    camera = Camera(width=COLUMNS, height=ROWS, bit_depth=16, black_level=DARK, white_level=65535)
    asked = frame_noise.Options(shading_order=0)
    return read(frame_noise.measure(sample(frames, camera, lit=lit), asked))


def test_levels() -> None:
    """Dark and flat level as a plain mean gives them, to the reference's last digit."""
    dark, flat = _measure("dark", lit=False), _measure("white", lit=True)

    assert value(dark["mean_level"]) + DARK == pytest.approx(105.18, abs=0.005)
    assert value(flat["mean_level"]) + DARK == pytest.approx(FLAT, abs=0.5)


def test_temporal_noise_of_the_darks() -> None:
    """3.12 DN rms from frame to frame: the pixels' own and the drift of the level, which is told apart here."""
    dark = _measure("dark", lit=False)
    both = np.hypot(value(dark["temporal_noise"]), value(dark["level_drift"]))

    assert both == pytest.approx(3.12, abs=0.005)
    assert (dark["temporal_noise"].u or 0) == pytest.approx(
        value(dark["temporal_noise"]) / np.sqrt(2 * 9 * 1280), rel=0.1
    )


def test_photon_transfer() -> None:
    """Variance over level of the same arrays is the conversion factor, 0.651 to 0.653 DN per quantum.

    How the drift of the lamp is taken out differs between the references as much as that.
    """
    dark, flat = _measure("dark", lit=False), _measure("white", lit=True)
    variance = value(flat["temporal_noise"]) ** 2 - value(dark["temporal_noise"]) ** 2

    assert variance / value(flat["mean_level"]) == pytest.approx(0.652, abs=0.0015)
