"""The lot's page: every unit once with a way to its report, what is nearest first, readable without eyes."""

from itertools import pairwise
from typing import Any
from xml.etree import ElementTree as ET

import pytest

from runner.judge.lot import judge_lot
from runner.report import lot_page
from tests.report import printed_world as world
from tests.report.html_reader import Page

MARKUP = "<script>x</script>\"'&amp;"


def _lot(documents: list[dict[str, Any]], **more: Any) -> dict[str, Any]:
    known: dict[str, Any] = {
        "document": documents[0]["document"] if documents else {"number": "D", "revision": "A", "digest": "sha256:0"},
        "title": "Walnut-sorter board camera",
        "product": "WS8",
        "lot": "L7",
        "operator": "Kim",
        "station": "bench 2",
        "time": world.TIME,
        "unused": [],
    }
    return dict(judge_lot(documents)) | known | more


def _rings(picture: str) -> list[tuple[float, str]]:
    """Return place and class of each ring of a strip."""
    rings = ET.fromstring(picture).iter("{http://www.w3.org/2000/svg}circle")  # noqa: S314 - our own text
    return [(float(ring.get("cx", "")), ring.get("class", "")) for ring in rings]


def test_every_unit_has_its_row_and_every_verdict_its_count() -> None:
    """Four units, one of each verdict; why, who is at fault and what next come from their results."""
    documents = world.all_four()
    facts = lot_page.lot_facts(_lot(documents), documents)

    assert [(fact.word, number) for fact, number in facts.counts] == [
        ("conforms", "1"),
        ("does not conform", "1"),
        ("cannot decide", "1"),
        ("not measured", "1"),
    ]
    assert facts.total == "4 units"
    assert facts.blame == (("cannot tell", "1"), ("unit", "1"))
    rows = {row.serial: row for row in facts.units}
    assert list(rows) == sorted(d["unit"]["serial"] for d in documents)
    for document in documents:
        row = rows[document["unit"]["serial"]]
        assert (row.verdict.word, row.next) == (document["verdict"], document["next"])
        assert row.why.rstrip(".") == document["reasons"][0].rstrip(".")
        assert row.fault == (document["at_fault"] or "–")


def test_counts_keep_the_order_of_verdicts() -> None:
    """Read back from a file with sorted keys, the lot looks the same."""
    documents = world.all_four()
    lot = _lot(documents)
    lot["counts"] = dict(sorted(lot["counts"].items()))

    assert lot_page.html(lot, documents) == lot_page.html(_lot(documents), documents)


@pytest.mark.parametrize(
    ("serial", "link"),
    [("WS8-000101", "WS8-000101/report.html"), ("A 1#?%", "A%201%23%3F%25/report.html"), ("Ж", "%D0%96/report.html")],
)
def test_links_lead_to_the_reports(serial: str, link: str) -> None:
    """A serial with characters that addresses reserve still leads to its folder (RFC 3986)."""
    documents = [world.document(serial)]
    facts = lot_page.lot_facts(_lot(documents), documents)

    assert [(row.serial, row.link) for row in facts.units] == [(serial, link)]
    assert facts.total == "1 unit"


def test_each_unit_shows_its_value_nearest_to_the_limit() -> None:
    """Of four corners the worst is drawn, in its own verdict's colour; units keep the order of their values."""
    documents = [world.document(), world.failing()]
    strips = {strip.title: _rings(strip.picture) for strip in lot_page.lot_facts(_lot(documents), documents).strips}

    assert list(strips) == [
        "1. mtf at 0.25 cy/px, centre",
        "2. mtf50, 4 places, cy/px",
        "3. mtf50, range of corners, cy/px",
        "4. overshoot, centre, %",
    ]
    (good, good_class), (bad, bad_class) = strips["2. mtf50, 4 places, cy/px"]
    assert (good_class, bad_class) == ("s-conforms", "s-does-not-conform")
    # 0.1732, the limit 0.2 and 0.2904 on a scale that pads a tenth on both sides of 388 px
    assert good - bad == pytest.approx(388 / 1.2, abs=0.2)


def test_requirements_are_never_mixed_on_one_scale() -> None:
    """One characteristic with two limits, or in two units, has two strips."""
    document = world.document()
    document["checks"][1] |= {"characteristic": 1}
    document["checks"][2] |= {"at_least": 0.1, "where": "corners upper right"}
    strips = lot_page.lot_facts(_lot([document]), [document]).strips

    titles = [strip.title for strip in strips]
    assert titles[:2] == ["1. mtf at 0.25 cy/px, centre", "1. mtf50, corners upper left, cy/px"]
    assert titles.count("2. mtf50, 2 places, cy/px") == 1
    assert titles.count("2. mtf50, corners upper right, cy/px") == 1


def test_what_is_nearest_to_its_limit_comes_first() -> None:
    """One row a characteristic, sorted by margin in u, with a sign that never hides behind a zero."""
    documents = world.all_four()
    facts = lot_page.lot_facts(_lot(documents), documents)
    margins = [float(margin) for _, margin, _ in facts.worst]

    assert all(a <= b for a, b in pairwise(margins))
    # (0.4498 - 0.45) / 0.0041
    assert [(serial, margin) for serial, margin, why in facts.worst if why.startswith("centre: mtf")] == [
        ("WS8-000105", "-0.05")
    ]
    assert lot_page.margin_text(-0.0004) == "-0.0004"
    assert lot_page.margin_text(None) == "beyond", "a count that does not conform"
    assert lot_page.margin_text(12.34) == "+12.3"


def test_the_page_is_whole_and_in_order() -> None:
    """One file without addresses but its reports', language, title, headings in order, tables with heads (WCAG 2)."""
    documents = world.all_four()
    page = Page(lot_page.html(_lot(documents, simulated=True, unused=["notes.txt"]), documents))

    assert page.wrong == page.open == []
    assert page.all("html")[0]["lang"] == "en"
    assert page.words["title"] == ["Walnut-sorter board camera: 4 units"]
    levels = [int(name[1]) for name, _ in page.tags if name in {"h1", "h2", "h3"}]
    assert levels[0] == 1 == levels.count(1)
    assert all(after <= before + 1 for before, after in pairwise(levels))
    assert {one.get("scope") for one in page.all("th")} == {"col", "row"}
    assert not {name for name, _ in page.tags} & {"script", "img", "link", "iframe", "object"}
    assert [one["href"] for one in page.all("a")] == [
        "#units",
        *(f"{d['unit']['serial']}/report.html" for d in sorted(documents, key=lambda d: str(d["unit"]["serial"]))),
    ]
    assert all(one.get("aria-hidden") == "true" or one["aria-label"] for one in page.all("svg"))
    assert "no evidence of any unit" in page.words["body"][0]
    assert page.words["li"][-1] == "notes.txt"


def test_markup_in_the_data_stays_text() -> None:
    """Title, serial, reason and file name are shown as they are and make no tag."""
    document = world.document(MARKUP)
    document |= {"reasons": [MARKUP], "next": MARKUP}
    page = Page(lot_page.html(_lot([document], title=MARKUP, unused=[MARKUP], lot=MARKUP), [document]))

    assert "script" not in {name for name, _ in page.tags}
    assert page.words["body"][0].count(MARKUP) >= 6


def test_an_empty_lot_says_so() -> None:
    """No unit is zero units, not an error."""
    facts = lot_page.lot_facts(_lot([]), [])

    assert (facts.total, facts.units, facts.strips) == ("0 units", (), ())
    assert {number for _, number in facts.counts} == {"0"}
