"""A report that other versions printed is compared by what it shows, and never more than left open.

`pypdf` takes the words out of PDFs here: the bytes differ, because style or versions do.
"""

from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import pytest

from runner.exits import Exit
from runner.report import page as page_module
from runner.report import pdf as pdf_module
from runner.report.document import canonical
from runner.report.facts import report_facts
from runner.report.page import html_page
from runner.report.verify_record import NO_PAGE, TEXT_ONLY
from tests.report import forge

Restyle = Callable[..., None]


@pytest.fixture
def restyled(monkeypatch: pytest.MonkeyPatch) -> Restyle:
    """A way to print pages as another version would, with more rules of style, or as a liar would, with other words."""
    real = page_module.paper_page

    def restyle(css: str, old: str = "</style>", new: str = "</style>") -> None:
        def paper(document: Mapping[str, Any]) -> tuple[str, dict[str, bytes]]:
            text, drawings = real(document)
            assert "</style>" in text
            assert old in text
            return text.replace(old, new).replace("</style>", css + "</style>", 1), drawings

        monkeypatch.setattr(pdf_module, "paper_page", paper)

    return restyle


def _elsewhere_printed() -> dict[str, Any]:
    """Return results that say they were written with another version of a library."""
    document = forge.document()
    document["program"]["versions"]["weasyprint"] = "69.0"
    return document


MOVED = ".first { padding-top: 20mm } td { letter-spacing: 0.02pt }"
BROKEN = "@page { margin: 30mm } h2 { break-before: page }"


@pytest.mark.parametrize(
    ("css", "accept"), [(MOVED, TEXT_ONLY), (BROKEN, NO_PAGE)], ids=["lines moved", "pages broken elsewhere"]
)
def test_a_pdf_of_another_version_is_compared_by_its_text(
    tmp_path: Path, restyled: Restyle, monkeypatch: pytest.MonkeyPatch, css: str, accept: str
) -> None:
    """Other bytes, the same words: sound, and told apart by whether their order could be compared as well."""
    restyled(css)
    pdf = forge.signed_pdf(_elsewhere_printed())
    monkeypatch.undo()

    outcome = forge.outcome_of(tmp_path, "report.pdf", pdf)

    assert forge.left_open(outcome) == [accept]
    assert forge.outcome_of(tmp_path, "report.pdf", pdf, accept=[accept]).exit is Exit.CONFORMS


def test_the_same_versions_print_the_same_bytes(
    tmp_path: Path, restyled: Restyle, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A page that says it was printed by these very versions, and was not, is refused in spite of its words."""
    restyled(MOVED)
    pdf = forge.signed_pdf(forge.document())
    monkeypatch.undo()

    assert "the same versions print another page from the data" in forge.refusals(
        forge.outcome_of(tmp_path, "report.pdf", pdf)
    )


@pytest.mark.parametrize("css", [MOVED, BROKEN], ids=["lines moved", "pages broken elsewhere"])
@pytest.mark.parametrize("lie", ["verdict", "value"])
def test_a_lie_under_another_versions_name_is_refused(
    tmp_path: Path, restyled: Restyle, monkeypatch: pytest.MonkeyPatch, css: str, lie: str
) -> None:
    """Claiming another version brings a signer no word past the data: every other word is the true page's."""
    true = _elsewhere_printed()
    value = report_facts(true).checks[0].value
    old, new = (value, value.replace("0.2", "0.3", 1)) if lie == "value" else (">conforms<", ">does not conform<")
    restyled(css, old, new)
    pdf = forge.signed_pdf(true)
    monkeypatch.undo()

    found = forge.refusals(forge.outcome_of(tmp_path, "report.pdf", pdf))

    assert f"it shows '{'0.3' if lie == 'value' else 'does not conform'}" in found


def test_what_is_drawn_over_the_words_never_holds(
    tmp_path: Path, restyled: Restyle, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A white sheet over the verdict is not seen by text, so a page compared by text is never more than open."""
    restyled("body::before { content: ''; position: absolute; width: 9cm; height: 9cm; background: #fff }")
    pdf = forge.signed_pdf(_elsewhere_printed())
    monkeypatch.undo()

    assert forge.left_open(forge.outcome_of(tmp_path, "report.pdf", pdf)) == [TEXT_ONLY]


def test_an_html_page_of_another_version_is_compared_by_its_pieces(tmp_path: Path) -> None:
    """White space set otherwise is left open; a letter of another kind is refused."""
    document = _elsewhere_printed()
    html = html_page(document, forge.pictures()).replace("\n", "\n  ").encode()
    (tmp_path / "true").mkdir()
    (tmp_path / "false").mkdir()

    assert forge.left_open(forge.outcome_of_page(tmp_path / "true", html, canonical(document))) == [TEXT_ONLY]
    lie = html.replace(b">conforms<", b">Conforms<", 1)
    assert lie != html
    assert "it shows 'Conforms" in forge.refusals(forge.outcome_of_page(tmp_path / "false", lie, canonical(document)))
