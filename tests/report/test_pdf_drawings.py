"""Drawings on paper: what this program writes looks as what the renderer itself makes of the same SVG."""

import io
import re
import subprocess
from pathlib import Path
from unittest.mock import patch

import numpy as np
import pytest
from PIL import Image
from pypdf import PdfReader
from weasyprint import HTML
from weasyprint.text.fonts import FontConfiguration

from runner.report import drawing, pdf
from runner.report.document import canonical
from runner.report.paper_drawing import from_the_left
from runner.report.pdf_drawings import drawn
from tests.report import printed_world as world

STYLE = """<style>@font-face {font-family: "Report"; src: url(report:/f)}
@page {size: 420px 250px; margin: 10px} body {margin: 0} img {display: block; width: 380px; height: 200px}</style>"""
SVG = '<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 100 50" width="100" height="50">{}</svg>'
CURVE = {"x": [0.0, 0.2, 0.4, 0.6, 0.8], "y": [1.0, 0.7, 0.35, 0.1, 0.02], "u": [0.0, 0.02, 0.03, 0.02, 0.01]}
CHECK = {
    "quantity": "mtf",
    "parameters": {"frequency": [0.25, "cy/px"]},
    "measured_in": "1",
    "value": 0.42,
    "u": 0.01,
    "k": 2.0,
    "at_least": 0.4,
    "at_most": None,
    "acceptance": {"at_least": 0.41, "at_most": None},
    "verdict": "conforms",
}
RESIDUAL = {"x": [-2.0, -1.0, 0.0, 1.0, 2.0], "y": [0.5, -0.4, 0.1, -0.2, 0.3]}
STROKES = {
    "transfer": drawing.transfer_picture(CURVE, [CHECK], "a < b"),
    "edge": drawing.edge_picture({"x": [-2.0, 0.0, 2.0], "y": [0.0, 0.5, 1.0]}, RESIDUAL, "edge"),
    "margin": drawing.margin_picture(CHECK, "margin"),
    "cannot decide": drawing.verdict_shape("cannot decide"),
    "path": SVG.format('<path d="M1 1L90 40H20V9h-5v3ZM50 5 L60 9" stroke="#f00" stroke-width="3"/>'),
    "boxes": SVG.format(
        '<rect x="9" y="5" width="30" height="40"/><rect x="50" y="9" width="9" height="8" fill="#abc"/>'
    ),
}


def _pdf(svg: str, *, ours: bool) -> bytes:
    """Return a page with a drawing, made by the renderer or by this program."""
    files = {"report:/d": ("image/svg+xml", svg.encode()), "report:/f": ("font/ttf", pdf._font("DejaVuSans.ttf"))}
    page = HTML(string=f'{STYLE}<img src="report:/d">', base_url="report:/", url_fetcher=pdf._closed(files))
    fonts = FontConfiguration()
    made = drawn(svg.encode(), fonts) if ours else None
    assert made is not None or not ours, "the program's own drawings are known"
    return bytes(page.write_pdf(font_config=fonts, cache={"report:/d": made} if made else {}))


def _light(data: bytes, folder: Path) -> np.ndarray:
    """Return a page as light, rows × columns of 1/96 inch."""
    words = ["pdftocairo", "-png", "-gray", "-r", "96", "-singlefile", "-", "page"]  # moves no line to whole pixels
    subprocess.run(words, input=data, cwd=folder, check=True, timeout=60)
    return np.asarray(Image.open(folder / "page.png"), dtype=float)


def _words(data: bytes) -> list[tuple[str, float, float]]:
    told = subprocess.run(["pdftotext", "-bbox", "-", "-"], input=data, capture_output=True, check=True, timeout=60)
    found = re.findall(r'<word xMin="([^"]*)" yMin="([^"]*)"[^>]*>([^<]*)<', told.stdout.decode())
    return sorted((word, float(x), float(y)) for x, y, word in found)


@pytest.mark.parametrize("name", STROKES)
def test_strokes_and_areas_are_the_renderers_own(name: str, tmp_path: Path) -> None:
    """The same ink at the same places as the renderer's own reading of the SVG: places, widths, dashes, colours.

    A twentieth of black is what rounding to 0.01 px and a small circle's better shape may change at an edge.
    """
    svg = re.sub(r"<text.*?</text>", "", STROKES[name])
    old, new = _light(_pdf(svg, ours=False), tmp_path), _light(_pdf(svg, ours=True), tmp_path)

    assert old.min() < 200, "there is something to see"
    assert np.abs(old - new).max() < 0.05 * 255


def test_words_stand_where_they_stood() -> None:
    """Each word of the two large drawings is found at its place, within 0.2 pt, or 1 pt after letters set closer."""
    for name in ("transfer", "edge"):
        svg = from_the_left(STROKES[name])
        old, new = _words(_pdf(svg, ours=False)), _words(_pdf(svg, ours=True))
        assert [word for word, _, _ in new] == [word for word, _, _ in old]
        assert len(new) > 15
        for (word, x, y), (_, left, top) in zip(new, old, strict=True):
            assert abs(y - top) < 0.2, word
            assert abs(x - left) < (0.2 if word[0] in "-.0123456789" else 1.0), word


def test_a_circle_is_round(tmp_path: Path) -> None:
    """Black inside the radius and white outside of it, by Pythagoras, within 0.8 px (half a pixel's diagonal)."""
    light = _light(_pdf(SVG.format('<circle cx="50" cy="25" r="20"/>'), ours=True), tmp_path)
    y, x = np.indices(light.shape) + 0.5
    away = np.hypot(x - (10 + 190), y - (10 + 100)) - 20 * 3.8

    assert light[away < -0.8].max() < 2
    assert light[away > 0.8].min() > 253


def test_a_box_with_round_corners(tmp_path: Path) -> None:
    """Its area is the box's less four corners of (1 - π/4) r² each, and it is its own mirror image."""
    light = _light(_pdf(SVG.format('<rect x="20" y="5" width="60" height="40" rx="8"/>'), ours=True), tmp_path)
    box = light[10:210, 10:390]

    assert abs((1 - box / 255).sum() / 3.8**2 - (60 * 40 - (4 - np.pi) * 8**2)) < 1
    for mirrored in (box[::-1], box[:, ::-1]):
        assert np.abs(box - mirrored).max() < 0.1 * 255, "a pixel's edge is smoothed in steps of about a fifteenth"


def test_dashes_begin_where_svg_says(tmp_path: Path) -> None:
    """The ring of four arcs is the same after a quarter turn, and its first arc begins on the right (SVG 2, 10.3)."""
    light = _light(_pdf(drawing.verdict_shape("not measured"), ours=True), tmp_path)
    ring = light[10:210, 100:300]
    r = 27 * 200 / 64

    assert np.abs(ring - np.rot90(ring)).mean() < 2
    assert ring[102, int(100 + r)] < 150, "ink just below the right end of the horizontal axis"
    assert ring[96, int(100 + r)] > 250, "none just above it"


@pytest.mark.parametrize(
    "inside",
    [
        '<line x1="0" y1="0" x2="9" y2="9"/>',
        '<g><circle cx="9" cy="9" r="4"/></g>',
        '<circle cx="9" cy="9" r="4" opacity="0.5"/>',
        '<circle cx="9" cy="9" r="4" fill="red"/>',
        '<circle cx="9" cy="9" r="40%"/>',
        '<circle cx="9" cy="9"/>',
        '<path d="M1 1C2 2 3 3 4 4"/>',
        '<path d="M1 1 2 2"/>',
        '<path d="1 1"/>',
        '<path d="M1"/>',
        '<text x="9" y="9" font-size="9" text-anchor="end">moved</text>',
        '<text x="9" y="9" font-size="2em">large</text>',
        '<text x="9" y="9" font-size="9"><tspan>part</tspan></text>',
    ],
)
def test_anything_unknown_is_left_to_the_renderer(inside: str) -> None:
    """A drawing is taken over whole or not at all: nothing in it is ever lost without a word."""
    assert drawn(SVG.format('<rect x="1" y="1" width="4" height="4"/>').encode(), None) is not None
    assert drawn(SVG.format(inside).encode(), None) is None
    assert drawn(SVG.format("").replace("0 0 100 50", "5 0 100 50").encode(), None) is None


def test_another_version_of_the_renderer_prints_the_same_page() -> None:
    """A renderer whose inside is not known draws all itself: the same words, the same pictures, only more slowly."""
    document = world.document()
    results = canonical(document)
    ours = pdf.render_pdf(document, world.pictures(), results)
    with patch("weasyprint.__version__", "99.0"):
        assert pdf._ready({"report:/d": ("image/svg+xml", SVG.encode())}, None) == {}
        theirs = pdf.render_pdf(document, world.pictures(), results)

    assert ours != theirs
    for mine, other in zip(PdfReader(io.BytesIO(ours)).pages, PdfReader(io.BytesIO(theirs)).pages, strict=True):
        assert sorted(mine.extract_text().split()) == sorted(other.extract_text().split())
        assert len(mine.images) == len(other.images)
