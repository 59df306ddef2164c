"""Words on paper stand where they stood: measured by another library in the printed PDF and in the font itself."""

import io
import re
import subprocess
from pathlib import Path

from fontTools.ttLib import TTFont
from pypdf import PdfReader
from weasyprint import HTML

from runner.report import drawing
from runner.report.document import canonical
from runner.report.page import html_page
from runner.report.paper_drawing import from_the_left
from runner.report.pdf import _closed, _font, render_pdf
from runner.resources import folder
from tests.report import printed_world as world

STYLE = """<style>@font-face {font-family: "Report"; src: url(report:/f)}
@page {size: 400px 240px; margin: 0} img {display: block}</style>"""


def _width(words: str) -> float:
    """Return the sum of the advances of a font's glyphs, em (OpenType 1.9.1, tables `cmap`, `hmtx`)."""
    font = TTFont(folder("templates") / "fonts" / "DejaVuSans.ttf")
    glyphs = font.getBestCmap()
    return float(sum(font["hmtx"][glyphs[ord(c)]][0] for c in words) / font["head"].unitsPerEm)


def _places(svg: str, tmp_path: Path) -> list[tuple[str, float]]:
    """Return the words of a printed drawing and where each begins, px, as Poppler finds them."""
    page = f'{STYLE}<img src="report:/d">'
    files = {"report:/d": ("image/svg+xml", svg.encode()), "report:/f": ("font/ttf", _font("DejaVuSans.ttf"))}
    HTML(string=page, base_url="report:/", url_fetcher=_closed(files)).write_pdf(tmp_path / "drawing.pdf")
    words = ["pdftotext", "-bbox", "drawing.pdf", "-"]
    told = subprocess.run(words, cwd=tmp_path, capture_output=True, text=True, check=True, timeout=60).stdout
    return sorted((word, float(x) / 0.75) for x, word in re.findall(r'<word xMin="([^"]*)"[^>]*>([^<]*)<', told))


def _picture() -> str:
    curve = {"x": [0.0, 0.25, 0.5], "y": [1.0, 0.6, 0.2], "u": []}
    return drawing.transfer_picture(curve, [], "a < b")


def test_each_word_begins_at_its_place_less_its_share_of_its_width() -> None:
    """Centred words begin half their width before their place, words that end there the whole of it."""
    svg = '<text x="100.0" y="9.0" font-size="10" text-anchor="{}" class="t">{}</text>'

    for words, plain in (("0.25", "0.25"), ("−5e−05", "−5e−05"), ("a &lt; b &amp; c", "a < b & c")):
        for anchor, share in (("middle", 0.5), ("end", 1.0)):
            moved = from_the_left(svg.format(anchor, words))
            x = float(re.findall(r' x="([^"]*)"', moved)[0])
            assert abs(x - (100 - share * 10 * _width(plain))) < 0.05, (words, anchor)
            assert moved.endswith(f' y="9.0" font-size="10" text-anchor="start" class="t">{words}</text>')


def test_words_that_begin_at_their_place_stay() -> None:
    """Everything but the moved words of a drawing is the same text as before."""
    svg = _picture()
    moved = from_the_left(svg)

    assert moved != svg
    assert not re.search(r'text-anchor="(middle|end)"', moved)
    assert re.sub(r"<text[^>]*>", "", moved) == re.sub(r"<text[^>]*>", "", svg)
    assert re.findall(r'<text[^>]*text-anchor="start"[^>]*>[^<]*', svg)[0] in moved
    assert from_the_left(moved) == moved


def test_the_renderer_puts_the_words_where_it_put_them_before(tmp_path: Path) -> None:
    """Each word of a printed curve begins within 0.2 px of where the renderer's own moving puts it."""
    before, after = _places(_picture(), tmp_path), _places(from_the_left(_picture()), tmp_path)

    assert [word for word, _ in after] == [word for word, _ in before]
    assert {"mtf", "spatial", "0", "0.2"} <= {word for word, _ in after}
    assert max(abs(x - y) for (_, x), (_, y) in zip(before, after, strict=True)) < 0.2


def test_only_paper_is_changed() -> None:
    """On a screen, where another font may stand in, words are still centred by whoever shows them."""
    document = world.document()

    assert 'text-anchor="middle"' in html_page(document, world.pictures())
    pdf = PdfReader(io.BytesIO(render_pdf(document, world.pictures(), canonical(document))))
    forms = [o for o in (pdf.get_object(n) for n in range(1, len(pdf.xref[0]) + 1)) if _is_form(o)]
    assert forms == [], "no word is an object of its own"


def _is_form(one: object) -> bool:
    return isinstance(one, dict) and one.get("/Subtype") == "/Form"
