"""Lots of frames: deterministic, one unit or all, one process or two; dead units and dark lamps are what they are."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from runner.errors import UsageError
from runner.rehearse import lot
from runner.rehearse.scenario import Scenario, Unit, read_scenario
from runner.rehearse.scene import Square, View
from runner.rehearse.sensor import Codes
from runner.resources import folder


@pytest.fixture(scope="module")
def small() -> Scenario:
    """Return the walnut line on a sensor of 160 × 120 px with one square and no marks, so that it is quick."""
    whole = read_scenario(folder("demo_lots") / "walnut_line" / "scenario.yaml")
    view = View(160, 120, 0.36)
    units = {s: replace(u, view=view) for s, u in whole.units.items() if s != "WS8-000106"}
    assert whole.chart is not None
    chart = replace(whole.chart, squares={"centre": Square(0, 0, 20, 5)}, marks=())
    return replace(whole, chart=chart, units=units)


@pytest.fixture(scope="module")
def sizer() -> Scenario:
    """Return the walnut sizer on a sensor of 160 × 120 px with one patch of stripes, so that it is quick."""
    whole = read_scenario(folder("demo_lots") / "walnut_sizer" / "scenario.yaml")
    assert whole.stripes is not None
    patch = replace(whole.stripes.patches["upright 0.25"], x_mm=0, y_mm=0, side_mm=40)
    units = {s: replace(u, view=View(160, 120, 0.45)) for s, u in whole.units.items()}
    return replace(whole, stripes=replace(whole.stripes, patches={"only": patch}), units=units)


def _frames(scenario: Scenario, unit: Unit) -> dict[str, Codes]:
    return {f"{shot.capture} {shot.repeat}": shot.codes for shot in lot.shots(scenario, unit)}


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
    frames = _frames(small, unit)
    other = _frames(replace(small, seed=7), unit)

    assert list(frames) == ["dark 1", "dark 2", "chart 1", "chart 2"]
    assert not np.array_equal(frames["chart 1"], frames["chart 2"])
    assert not np.array_equal(frames["chart 1"], other["chart 1"])


def test_dead_unit_gives_one_code(small: Scenario) -> None:
    """A dead unit's frames hold the black level and nothing else."""
    dead = _frames(small, small.units["WS8-000107"])

    assert {int(v) for codes in dead.values() for v in np.unique(codes)} == {64}


def test_lamp_that_was_off_leaves_live_noise(small: Scenario) -> None:
    """Without the lamp a chart frame is a dark frame: same level within four standard errors, noise alive."""
    frames = _frames(small, small.units["WS8-000108"])
    chart, dark = frames["chart 1"].astype(float), frames["dark 1"].astype(float)

    assert chart.mean() - dark.mean() == pytest.approx(0, abs=4 * chart.std() * np.sqrt(2 / chart.size))
    # read noise 4 e- and DSNU 2 e- at 0.4 DN/e-, rounding 1/12 DN²; a spread from n pixels scatters by 1/sqrt(2n)
    stated = np.sqrt(0.4**2 * (4**2 + 2**2) + 1 / 12)
    assert chart.std() == pytest.approx(stated, rel=4 / np.sqrt(2 * chart.size))


def test_truth_includes_the_firmware(small: Scenario) -> None:
    """The truth of a sharpened unit is lens × pixel × unsharp mask; of any other lens × pixel."""
    sharp, plain = (small.units[s] for s in ("WS8-000104", "WS8-000101"))
    f = np.array([0.25])
    assert sharp.sharpening is not None
    assert small.chart is not None
    angle = sharp.view.angle(small.chart.squares["centre"])

    ratio = lot.transfer_along(small, sharp, "centre")(f) / sharp.transfer_at(0, 0).along(f, angle)

    assert ratio == pytest.approx(sharp.sharpening.along(f, angle))
    assert lot.transfer_along(small, plain, "centre")(f) == pytest.approx(plain.transfer_at(0, 0).along(f, angle))
    assert set(lot.truth(small, plain)["squares"]) == {"centre"}


def test_flats_have_the_light_of_lens_and_correction(sizer: Scenario) -> None:
    """The mean of a right flat is K × QE × photons everywhere; a mirrored correction tilts it as the two laws say.

    Left over right of the mirrored unit: the fourth power of the ratio of distances from the pupil, squared once by
    the lens and once by the wrong table. Means of n pixels scatter by σ/sqrt(n); four times that is allowed, and a
    twentieth of a code for the firmware's rounding.
    """
    right, mirrored = (
        _frames(sizer, sizer.units[s])["flat 1"].astype(float) - 64 for s in ("WZ2-000201", "WZ2-000206")
    )
    unit = sizer.units["WZ2-000206"]
    assert unit.illumination is not None
    x, d = 70.0, unit.illumination.image_distance_px
    y = -unit.illumination.shift_px[1]

    def lens(place: float) -> float:
        assert unit.illumination is not None
        return float((1 + ((place - unit.illumination.shift_px[0]) ** 2 + y**2) / d**2) ** -2)

    band = mirrored[55:65]
    left, far = band[:, 8:13].mean(), band[:, 147:152].mean()  # around 70 px left and right of the middle
    noise = band.std() / left / np.sqrt(50)
    assert right.mean() == pytest.approx(0.4 * 0.6 * 11000, abs=4 * right.std() / np.sqrt(right.size) + 0.05)
    assert left / far == pytest.approx((lens(-x) / lens(x)) ** 2, rel=4 * np.sqrt(2) * noise)


def test_truth_tells_stripes_bands_and_defects(sizer: Scenario) -> None:
    """Where there are stripes their transfer is lens × pixel at their frequency and direction; flaws are listed."""
    banded, flawed = sizer.units["WZ2-000204"], sizer.units["WZ2-000205"]
    system = banded.transfer_at(*banded.view.shift_px)

    told = lot.truth(sizer, banded)

    assert told["patches"]["only"]["frequency cy/px"] == 0.25
    assert told["patches"]["only"]["modulation transfer"] == pytest.approx(float(system.along(0.25, 3.0)), abs=1e-6)
    assert told["bands"] == {"along": "rows", "amplitude_dn": 2.5, "frequency": 0.11}
    assert "squares" not in told
    assert lot.truth(sizer, flawed)["defects"]["dead"] == 4


def test_every_unit_of_the_sizer_leaves_what_its_station_says(sizer: Scenario, tmp_path: Path) -> None:
    """Ten frames with a sidecar each and a manifest; darks and flats packed, stripes TIFF."""
    place = lot.make_unit(sizer, sizer.units["WZ2-000201"], tmp_path)
    endings = sorted(path.suffix for path in place.iterdir())

    assert endings == 11 * [".json"] + 8 * [".raw"] + 2 * [".tif"]
    assert (place / "flat-5.raw").stat().st_size == 160 * 120 * 3 // 2


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
