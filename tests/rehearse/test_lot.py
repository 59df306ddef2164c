"""Lots of frames: deterministic, one unit or all, one process or two; dead units and dark lamps are what they are."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from runner.errors import UsageError
from runner.rehearse import lot
from runner.rehearse.scenario import Scenario, read_scenario
from runner.rehearse.scene import Square, View
from runner.resources import folder


@pytest.fixture(scope="module")
def small() -> Scenario:
    """Return the walnut line on a sensor of 160 × 120 px with one square and no marks, so that it is quick."""
    whole = read_scenario(folder("demo_lots") / "walnut_line" / "scenario.yaml")
    view = View(160, 120, 0.36)
    units = {s: replace(u, view=view) for s, u in whole.units.items() if s != "WS8-000106"}
    chart = replace(whole.chart, squares={"centre": Square(0, 0, 20, 5)}, marks=())
    return replace(whole, chart=chart, units=units)


def _bytes(place: Path) -> dict[str, bytes]:
    return {str(p.relative_to(place)): p.read_bytes() for p in sorted(place.rglob("*")) if p.is_file()}


def test_jobs_change_nothing(small: Scenario, tmp_path: Path) -> None:
    """Two processes write the same bytes as one; every unit has its frames."""
    lot.make_lot(small, tmp_path / "one")
    lot.make_lot(small, tmp_path / "two", jobs=2)

    assert _bytes(tmp_path / "one") == _bytes(tmp_path / "two")
    assert len(_bytes(tmp_path / "one")) == 7 * 4


def test_one_unit_alone_is_the_same_unit(small: Scenario, tmp_path: Path) -> None:
    """A unit's frames do not depend on the others of its lot."""
    lot.make_lot(small, tmp_path / "all")
    lot.make_unit(small, small.units["WS8-000104"], tmp_path / "alone")

    alone = _bytes(tmp_path / "alone")

    assert alone == {k: v for k, v in _bytes(tmp_path / "all").items() if k.startswith("WS8-000104")}


def test_every_frame_of_a_live_unit_is_its_own(small: Scenario) -> None:
    """Repeats differ by their noise, another seed gives other noise, and the lot is announced unit by unit."""
    unit = small.units["WS8-000101"]
    frames = dict(lot.frames(small, unit))
    other = dict(lot.frames(replace(small, seed=7), unit))

    assert list(frames) == ["dark-1.tif", "dark-2.tif", "chart-1.tif", "chart-2.tif"]
    assert not np.array_equal(frames["chart-1.tif"], frames["chart-2.tif"])
    assert not np.array_equal(frames["chart-1.tif"], other["chart-1.tif"])


def test_dead_unit_gives_one_code(small: Scenario) -> None:
    """A dead unit's frames hold the black level and nothing else."""
    assert {int(v) for _, codes in lot.frames(small, small.units["WS8-000107"]) for v in np.unique(codes)} == {64}


def test_lamp_that_was_off_leaves_live_noise(small: Scenario) -> None:
    """Without the lamp a chart frame is a dark frame: same level within four standard errors, noise alive."""
    frames = dict(lot.frames(small, small.units["WS8-000108"]))
    chart, dark = frames["chart-1.tif"].astype(float), frames["dark-1.tif"].astype(float)

    assert chart.mean() - dark.mean() == pytest.approx(0, abs=4 * chart.std() * np.sqrt(2 / chart.size))
    # read noise 4 e- and DSNU 2 e- at 0.4 DN/e-, rounding 1/12 DN²; a spread from n pixels scatters by 1/sqrt(2n)
    stated = np.sqrt(0.4**2 * (4**2 + 2**2) + 1 / 12)
    assert chart.std() == pytest.approx(stated, rel=4 / np.sqrt(2 * chart.size))


def test_truth_includes_the_firmware(small: Scenario) -> None:
    """The truth of a sharpened unit is lens × pixel × unsharp mask; of any other lens × pixel."""
    sharp, plain = (small.units[s] for s in ("WS8-000104", "WS8-000101"))
    f = np.array([0.25])
    angle = sharp.view.angle(small.chart.squares["centre"])
    assert sharp.sharpening is not None

    ratio = lot.transfer_along(small, sharp, "centre")(f) / sharp.transfer_at(0, 0).along(f, angle)

    assert ratio == pytest.approx(sharp.sharpening.along(f, angle))
    assert lot.transfer_along(small, plain, "centre")(f) == pytest.approx(plain.transfer_at(0, 0).along(f, angle))
    assert set(lot.truth(small, plain)["squares"]) == {"centre"}


def test_announces_each_unit(small: Scenario, tmp_path: Path) -> None:
    """Whoever waits is told each unit with its number and the number of all."""
    told: list[tuple[str, int, int]] = []

    lot.make_lot(small, tmp_path, announce=lambda *news: told.append(news))

    assert told[0] == ("WS8-000101", 1, 7)
    assert told[-1] == ("WS8-000108", 7, 7)


def test_folder_that_cannot_be_written_is_told(small: Scenario, tmp_path: Path) -> None:
    """A file in the folder's place ends in one plain sentence."""
    (tmp_path / "frames").write_text("in the way", encoding="utf-8")

    with pytest.raises(UsageError, match="the frames cannot be written"):
        lot.make_lot(small, tmp_path / "frames")
