"""The screen report: one file for itself, readable without eyes, and nothing in the data becomes markup."""

import base64
import re
from itertools import pairwise

import pytest

from runner.report.page import html_page, inline, paper_page
from tests.report import printed_world as world
from tests.report.html_reader import Page

MARKUP = "<script>alert(1)</script><img src=x onerror=y>\"'&amp; {{ 7*7 }}"


@pytest.fixture(scope="module")
def pages() -> list[Page]:
    """Return a page of each verdict."""
    return [Page(html_page(document, world.pictures())) for document in world.all_four()]


def test_a_page_is_one_file_for_itself(pages: list[Page]) -> None:
    """No script, no address but data and places in the page; the policy in its head forbids all else."""
    for page in pages:
        names = {name for name, _ in page.tags}
        assert not names & {"script", "iframe", "object", "embed", "link", "base", "form", "video", "audio"}
        for name, attributes in page.tags:
            for key, value in attributes.items():
                assert not key.startswith("on"), key
                if key in {"src", "href", "action", "srcset", "data", "poster", "xlink:href"}:
                    assert value.startswith(("data:image/png;base64,", "#")), value[:40]
                if key != "xmlns":
                    assert "://" not in value, (name, key, value[:60])
        style = page.words["style"][0]
        assert not [word for word in ("url(", "@import", "://", "expression(") if word in style]
        policies = [one["content"] for one in page.all("meta") if one.get("http-equiv") == "Content-Security-Policy"]
        assert policies == ["default-src 'none'; img-src data:; style-src 'unsafe-inline'"]


def test_its_pictures_are_the_listed_ones(pages: list[Page]) -> None:
    """The frame's overview lies in the page byte for byte."""
    (image,) = pages[0].all("img")

    assert base64.b64decode(image["src"].partition(",")[2]) == world.picture()


def test_a_page_has_the_order_that_readers_without_eyes_need(pages: list[Page]) -> None:
    """Language, title, one main heading, no level skipped, one main part, unique names, a skip link (WCAG 2)."""
    for page, verdict in zip(pages, ("conforms", "does not conform", "cannot decide", "not measured"), strict=True):
        assert page.wrong == page.open == []
        assert page.all("html")[0]["lang"] == "en"
        assert page.words["title"][0].startswith("Test report WS8-")
        assert page.words["title"][0].endswith(f": {verdict}")
        levels = [int(name[1]) for name, _ in page.tags if name in {"h1", "h2", "h3", "h4"}]
        assert levels.count(1) == 1 == levels[0]
        assert all(after <= before + 1 for before, after in pairwise(levels))
        assert page.words["h1"] == [verdict]
        names = [attributes["id"] for _, attributes in page.tags if "id" in attributes]
        assert len(set(names)) == len(names)
        assert {one["href"].removeprefix("#") for one in page.all("a")} <= set(names)
        assert len(page.all("main")) == 1


def test_tables_and_pictures_explain_themselves(pages: list[Page]) -> None:
    """Every header says what it heads; a picture has words or is an ornament beside a word."""
    for page in pages:
        assert {one.get("scope") for one in page.all("th")} == {"col", "row"}
        assert all(one["alt"] for one in page.all("img"))
        for one in page.all("svg"):
            assert one.get("aria-hidden") == "true" or (one["role"] == "img" and one["aria-label"])


def test_the_page_claims_no_more_than_it_is(pages: list[Page]) -> None:
    """It is no certificate, and the program's name stands only in the command to check it and beneath its end."""
    for page in pages:
        text = page.words["main"][0]
        assert not re.search(r"certif|approv|accredit", text.lower())
        said, end = text.partition("End of report")[::2]
        assert said.replace("probatum verify report.pdf", "").lower().count("probatum") == 0
        assert end.count("probatum") == 1


def test_markup_in_the_data_stays_text() -> None:
    """Serial, lot, operator, title, reason, place and file name are shown as they are and make no tag."""
    plain = world.failing()
    document = world.failing()
    document["unit"] |= {"serial": MARKUP, "lot": MARKUP}
    document |= {"operator": MARKUP, "reasons": [MARKUP], "next": MARKUP, "because": MARKUP}
    document["spec"]["document"]["title"] = MARKUP
    document["captures"][0]["frames"][0]["file"] = MARKUP
    document["checks"][0] |= {"where": MARKUP, "label": MARKUP}
    document["station"]["name"] = MARKUP
    document["unused"] = [MARKUP]
    plain["reasons"], plain["unused"] = ["plain"], ["plain"]

    page = Page(html_page(document, world.pictures()))

    assert {name for name, _ in page.tags} == {name for name, _ in Page(html_page(plain, world.pictures())).tags}
    assert not [key for _, attributes in page.tags for key in attributes if key.startswith("on")]
    assert page.words["body"][0].count(MARKUP) >= 10
    assert page.words["title"][0].startswith(f"Test report {MARKUP}")
    assert "49" not in page.words["title"][0]


def test_paper_holds_each_drawing_once() -> None:
    """Drawings are files of their own on paper, with their words; equal ones share a file, and all are asked for."""
    text, drawings = paper_page(world.failing())
    page = Page(text)
    asked = [one for one in page.all("img") if one["src"].startswith("report:/drawings/")]

    assert {one["src"] for one in asked} == set(drawings)
    assert len(set(drawings.values())) == len(drawings) < len(asked)
    assert "svg" not in {name for name, _ in page.tags}
    curves = [one["alt"] for one in asked if one["alt"].startswith("Transfer curve of ")]
    assert len(curves) == len(world.BOXES)
    assert [one["src"] for one in page.all("img") if one not in asked] == [f"report:/pictures/{world.PICTURE}"]


def test_a_drawing_in_the_page_is_taken_as_it_is() -> None:
    """What `drawing` made is the only text that is not escaped."""
    assert inline("<svg/>") == "<svg/>"
    assert hasattr(inline("<svg/>"), "__html__")


def test_a_curve_without_an_edge_fit_is_drawn_alone() -> None:
    """A transfer curve over patches of stripes has no edge beside it; no empty drawing takes its place."""
    document = world.failing()
    document["curves"] = [curve for curve in document["curves"] if curve["name"] == "mtf"]

    text, drawings = paper_page(document)

    assert text.count('class="curve-box"') == len(document["curves"])
    assert all(drawings.values())
    assert 'src=""' not in text
