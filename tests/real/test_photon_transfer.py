"""Photon transfer of a real camera's darks and flats, from its file to readings; see flats/README.md."""

import shutil
from pathlib import Path

import h5py
import numpy as np
import pytest

from runner import acceptance
from runner.acceptance import Order
from runner.errors import MeasurementRefused
from runner.measure.methods import photon_transfer
from runner.measure.reading import Reading
from tests.measure.photon_samples import Shot, camera, measure, sample, value

FILE = Path(__file__).resolve().parent / "flats" / "tooth.h5"
GAIN = {"all": 0.651, "pairs": 0.653}
"""DN per quantum, by NumPy from the arrays: of ten frames at once, and mean of five pairs."""
SPEC = """\
probatum-spec: 1
document: {number: REAL-F, revision: A, title: "Flats and darks of a beamline"}
unit: {product: BEAM, serial: 'B-[0-9]'}
camera: {frame_size: 640 x 2 px, bit_depth: 16 bit, black_level: 105 DN, white_level: 65535 DN}
captures:
  dark:
    target: dark frame
    frames: 'dark.h5'
    camera: {layout: {dataset: exchange/data_dark}}
  flat:
    target: light series
    frames: 'flat.h5'
    camera: {layout: {dataset: exchange/data_white}}
    uses: {dark: dark}
    limits:
      - {characteristic: 1, quantity: system_gain, nominal: 0.65 DN/e-, tolerance: 0.1 DN/e-}
"""


def _frames(name: str) -> list[np.ndarray]:
    with h5py.File(FILE, "r") as file:
        return [np.asarray(one) for one in file[f"exchange/data_{name}"]]


def _gain(flats: list[np.ndarray]) -> Reading:
    shots = [Shot(one, {"repeat": str(n)}) for n, one in enumerate(flats)]
    darks = [Shot(one, {"repeat": str(n)}) for n, one in enumerate(_frames("dark"))]
    return measure(shots, darks, of=camera(flats[0], black_level=105))["system_gain"]


def test_gain_of_all_frames_and_of_pairs() -> None:
    """The gain of ten frames lies at 0.651 DN per quantum, the mean of five pairs at 0.653, each within its u.

    That neighbours share noise, as behind a scintillator, is said: binned by 2 × 2, they still do.
    """
    flats = _frames("white")
    every = _gain(flats)
    pairs = [_gain(flats[n : n + 2]) for n in range(0, 10, 2)]

    assert abs(value(every) - GAIN["all"]) < (every.u or 0)
    u = np.sqrt(sum((p.u or 0) ** 2 for p in pairs)) / 5
    assert abs(np.mean([value(p) for p in pairs]) - GAIN["pairs"]) < 2 * u
    assert "noise of neighbours is correlated by 0.25" in every.flags[0]


def test_dark_noise_of_the_file() -> None:
    """3.12 DN rms hold the drift of the level too, which EMVA 1288 takes off; both together within 2 u."""
    darks = _frames("dark")
    shots = [Shot(one, {"repeat": str(n)}) for n, one in enumerate(_frames("white"))]
    found = measure(shots, [Shot(one) for one in darks], of=camera(darks[0], black_level=105))["temporal_dark_noise_dn"]
    drift = np.std([one.mean(dtype=np.float64) for one in darks], ddof=1)

    assert np.mean(darks, dtype=np.float64) == pytest.approx(105.18, abs=0.005)
    assert abs(np.hypot(value(found), drift) - 3.12) < 2 * (found.u or 0)


def test_the_file_goes_through_a_whole_run(tmp_path: Path) -> None:
    """Two rows of 640 values in HDF5, darks and flats as two captures: a gain, and why there are no patterns."""
    unit = tmp_path / "frames" / "B-1"
    unit.mkdir(parents=True)
    for name in ("dark", "flat"):
        shutil.copy(FILE, unit / f"{name}.h5")
    (tmp_path / "spec.yaml").write_text(SPEC)
    order = Order(spec=tmp_path / "spec.yaml", frames=tmp_path / "frames", out=tmp_path / "out")
    plan, _ = acceptance.read(order)
    lot, seen = acceptance.gather(order, plan)
    evidence, _, tracebacks = acceptance.measure_unit(plan, lot.units[0], seen)
    found = {r.quantity: r for r in evidence.readings if r.capture == "flat"}

    assert tracebacks == []
    assert value(found["system_gain"]) == pytest.approx(GAIN["all"], abs=found["system_gain"].u)
    refusal = found["prnu1288"].refusal
    assert refusal is not None
    assert refusal.because == "the region has too few rows or columns to tell its patterns apart"
    assert (found["saturation_capacity"].bound or ("",))[0] == "above"


def test_a_series_without_its_darks_is_refused() -> None:
    """Flats alone have no level to count from."""
    shots = [Shot(one, {"repeat": str(n)}) for n, one in enumerate(_frames("white"))]
    with pytest.raises(MeasurementRefused, match="nothing was captured without light"):
        photon_transfer.measure(
            sample(shots, of=camera(shots[0].codes, black_level=105)), photon_transfer.read_options({})
        )
