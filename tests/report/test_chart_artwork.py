"""Artwork as files: sizes in mm, tones, the bar to check the print by."""

import re
from dataclasses import replace
from pathlib import Path
from xml.etree import ElementTree as ET

import numpy as np
import pikepdf
import pytest

from runner.errors import UsageError
from runner.measure.numerics.random_pattern import noise
from runner.report.chart_artwork import artwork, artwork_pdf, artwork_svg, bar, code, notes
from runner.spec.chart_model import Feature
from runner.spec.charts import read_chart
from tests.scenes.chart_text import CHART, write_chart
from tests.scenes.prints import printed

READY = sorted((Path(__file__).resolve().parents[2] / "specs" / "charts").glob("*.yaml"))


def test_the_sheet_has_its_size(tmp_path: Path) -> None:
    """SVG states mm; a PDF's page is the sheet in points of 1/72 inch, and printers are told not to scale it."""
    chart = read_chart(write_chart(tmp_path))
    svg = ET.fromstring(artwork_svg(chart))  # noqa: S314 - our own text
    path = tmp_path / "chart.pdf"
    path.write_bytes(artwork_pdf(chart))

    assert (svg.get("width"), svg.get("height"), svg.get("viewBox")) == ("200mm", "150mm", "0 0 200 150")
    with pikepdf.open(path) as pdf:
        box = [float(x) for x in pdf.pages[0].MediaBox]
        assert box == pytest.approx([0, 0, 200 / 25.4 * 72, 150 / 25.4 * 72], abs=1e-5)
        assert str(pdf.Root.ViewerPreferences.PrintScaling) == "/None"


def test_both_forms_show_the_same(tmp_path: Path) -> None:
    """Every mark of the file stands in the SVG, in mm from the sheet's middle; both forms have equally many areas."""
    chart = read_chart(write_chart(tmp_path))
    svg, pdf = artwork_svg(chart), artwork_pdf(chart).decode("latin-1")

    for x, y in chart.marks.at:
        assert svg.count(f'cx="{x:.4f}" cy="{y:.4f}"') == 2
    assert svg.count("<polygon") == len(re.findall(r" m .* h f$", pdf, re.MULTILINE)) - 1 - svg.count("<circle")
    assert artwork_pdf(chart) == artwork_pdf(chart)


def test_tones_are_shares_of_bare_sheet(tmp_path: Path) -> None:
    """Ink is code 0, ground code 1; half is 1.055 · 0.5^(1/2.4) - 0.055 (IEC 61966-2-1)."""
    chart = read_chart(write_chart(tmp_path))

    assert code(0.08, chart) == 0.0
    assert code(0.8, chart) == pytest.approx(1.0)
    assert code((0.08 + 0.8) / 2, chart) == pytest.approx(0.735357, abs=1e-6)


@pytest.mark.parametrize("path", READY, ids=lambda p: p.stem)
def test_the_bar_is_as_long_as_it_says(path: Path) -> None:
    """The bar's outer ends are as far apart as its word says, on free ground of the sheet."""
    chart = read_chart(path)
    areas = bar(chart)
    xs = [x for area in areas for x, _ in area.points]
    ys = [y for area in areas for _, y in area.points]
    words, foot, size = notes(chart)[0]

    assert float(words.split(" mm")[0]) == pytest.approx(max(xs) - min(xs), abs=1e-9)
    assert max(xs) - min(xs) >= 20
    assert chart.serial in words
    for one in chart.features.values():
        (x, y), (w, h) = one.position, one.size
        apart = min(xs) > x + w / 2 or max(xs) < x - w / 2 or min(ys) > y + h / 2 or foot[1] + size / 3 < y - h / 2
        assert apart, one.name


def test_other_endings_are_refused(tmp_path: Path) -> None:
    """Artwork is PDF or SVG, in whatever case the ending is written."""
    chart = read_chart(write_chart(tmp_path))
    with pytest.raises(UsageError, match=r"cannot be written as '\.png'; \.pdf or \.svg"):
        artwork(chart, ".png")
    assert artwork(chart, ".SVG").startswith(b"<svg")


def test_no_room_for_a_bar_is_told(tmp_path: Path) -> None:
    """A sheet whose every free place is taken has no bar to check its print by, and is not drawn without."""
    chart = read_chart(write_chart(tmp_path))
    full = Feature("all", "flat field", (0.0, 0.0), chart.size, {"reflectance": "40 %"})
    with pytest.raises(UsageError, match="no free ground for a bar to check the print by"):
        artwork(replace(chart, features={"all": full}), ".pdf")


def test_a_random_pattern_is_printed_cell_by_cell(tmp_path: Path) -> None:
    """Rendered at four dots a cell, every cell's middle has the reflectance that the pattern is measured with.

    Codes are whole 255ths of sRGB: near white one step is 0.9 % of the range.
    """
    text = CHART + (
        "  fine:\n    kind: random pattern\n    position: [0, -35 mm]\n    size: [20 mm, 20 mm]\n"
        "    data: {pattern: noise, seed: 4, cells: 64, side: 16 mm, low: 20 %, high: 70 %}\n"
    )
    chart = read_chart(write_chart(tmp_path, text))
    path = tmp_path / "art.pdf"
    path.write_bytes(artwork_pdf(chart))
    dpi = round(4 * 64 / 16 * 25.4)
    sheet = printed(path, dpi, chart.ink, chart.ground)
    scale = dpi / 25.4
    left, top = (side / 2 + place - 8 for side, place in zip(chart.size, (0.0, -35.0), strict=True))
    cells = (np.arange(64) + 0.5) * 16 / 64
    seen = sheet[np.ix_(((top + cells) * scale).astype(int), ((left + cells) * scale).astype(int))]

    assert np.abs(seen - noise(4, 64, 1.8, 0.2, 0.7)).max() < 0.01
    assert artwork_svg(chart).count("data:image/png;base64,") == 1


def test_a_pattern_that_does_not_fit_its_box(tmp_path: Path) -> None:
    """A side longer than the box is told, with both lengths."""
    text = CHART + (
        "  fine:\n    kind: random pattern\n    position: [0, -35 mm]\n    size: [20 mm, 20 mm]\n"
        "    data: {cells: 64, side: 30 mm, largest: 20}\n"
    )
    with pytest.raises(UsageError, match="a side of 30 mm in a box of 20 mm"):
        artwork_svg(read_chart(write_chart(tmp_path, text)))
