"""Regions as written, spread into regions with a name and a centre each."""

from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.spec.build import read_spec
from runner.spec.model import Region
from tests.scenes.spec_text import TEXT, write

CORNERS = """\
      corners:
        position: {upper left: [15 %, 15 %], lower right: [85 %, 85 %]}
        size: [80 px, 120 px]
"""


def _regions(folder: Path, text: str) -> dict[str, Region]:
    spec = read_spec(write(folder, TEXT.replace(CORNERS, CORNERS + text)))
    return {region.name: region for region in spec.capture("chart").regions}


def test_a_grid_in_one_line(tmp_path: Path) -> None:
    """A grid names its regions by row and column and spaces their centres evenly, ends included."""
    line = "      field: {grid: {columns: 3, rows: 2, from: [10 %, 20 %], to: [90 %, 80 %]}, size: [40 px, 60 px]}\n"
    found = _regions(tmp_path, line)

    names = [name for name, region in found.items() if region.group == "field"]
    assert names == [f"field r{r}c{c}" for r in (1, 2) for c in (1, 2, 3)]
    assert found["field r1c1"].centre_px(1600, 1200) == (160, 240)
    assert found["field r1c2"].centre_px(1600, 1200) == (800, 240)
    assert found["field r2c3"].centre_px(1600, 1200) == (1440, 960)
    assert found["field r2c3"].size_px(1600, 1200) == (40, 60)


def test_a_grid_with_mixed_units(tmp_path: Path) -> None:
    """Where the ends have different units the positions are in px; a single row lies half way."""
    line = "      field: {grid: {columns: 3, rows: 1, from: [100 px, 20 %], to: [90 %, 80 %]}, size: [40 px, 60 px]}\n"
    found = _regions(tmp_path, line)

    assert [found[f"field r1c{c}"].centre_px(1600, 1200) for c in (1, 2, 3)] == [(100, 600), (770, 600), (1440, 600)]


def test_a_field_height(tmp_path: Path) -> None:
    """Field 0.5 of a 1600 x 1200 frame is 500 px from the centre (half diagonal 1000 px: 3-4-5 triangle), clockwise."""
    points = "right: {field: 0.5, azimuth: 0 deg}, below: {field: 0.4, azimuth: 90 deg}"
    line = f"      rim: {{position: {{{points}}}, size: [8 px, 8 px]}}\n"
    found = _regions(tmp_path, line)

    assert found["rim right"].centre_px(1600, 1200) == pytest.approx((1300, 600), abs=1e-9)
    assert found["rim below"].centre_px(1600, 1200) == pytest.approx((800, 1000), abs=1e-9)


def test_a_border_region_fits_and_one_pixel_more_does_not(tmp_path: Path) -> None:
    """A region may touch the frame's border but not reach over it."""
    _regions(tmp_path, "      rim: {position: [40 px, 60 px], size: [80 px, 120 px]}\n")

    with pytest.raises(SpecError, match="region 'rim' reaches 1 px over the left border of the frame"):
        _regions(tmp_path, "      rim: {position: [39 px, 60 px], size: [80 px, 120 px]}\n")
    with pytest.raises(SpecError, match="reaches 5 px over the right border and 10 px over the bottom border"):
        _regions(tmp_path, "      rim: {position: [1565 px, 1150 px], size: [80 px, 120 px]}\n")


def test_where_may_name_members_in_short(tmp_path: Path) -> None:
    """`upper left` means the only member of that name; when two groups have it, the full name is asked for."""
    text = TEXT.replace("where: centre", "where: [upper left, corners lower right]").replace("0.45", "0.1")
    assert read_spec(write(tmp_path, text)).capture("chart").limits[0].where == (
        "corners upper left",
        "corners lower right",
    )

    more = "      inner: {position: {upper left: [30 %, 30 %]}, size: [80 px, 120 px]}\n"
    with pytest.raises(SpecError, match=r"there is no region 'upper left'; regions: .*inner upper left"):
        read_spec(write(tmp_path, text.replace(CORNERS, CORNERS + more)))


def test_two_regions_of_one_name_are_refused(tmp_path: Path) -> None:
    """A region whose name is that of a group's member would make every report ambiguous."""
    line = "      corners upper left: {position: [50 %, 20 %], size: [80 px, 120 px]}\n"

    with pytest.raises(SpecError, match="two regions have the name 'corners upper left'"):
        _regions(tmp_path, line)
