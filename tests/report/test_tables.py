"""Results for CI jobs and spreadsheets: names, mapping, sizes, safety."""

import csv
import io
from typing import Any
from xml.etree import ElementTree as ET

import pytest

from runner.report.tables import COLUMNS, SUMMARY_BYTES, junit_xml, lot_csv, markdown_summary

DIGEST = {"number": "WS8-ACC", "revision": "C", "digest": "sha256:0"}


def _check(number: int, verdict: str, **more: Any) -> dict[str, Any]:
    known = {
        "characteristic": number,
        "capture": "chart",
        "where": "centre",
        "channel": "mono",
        "label": "mtf50",
        "part": "system",
        "attempt": 1,
        "value": 0.25,
        "u": 0.01,
        "k": 2.0,
        "measured_in": "cy/px",
        "at_least": 0.2,
        "at_most": None,
        "acceptance": {"at_least": 0.2164, "at_most": None},
        "rule": "proof either way",
        "probability": 0.9999,
        "verdict": verdict,
        "at_fault": None,
        "reason": f"centre: mtf50 {verdict}",
    }
    return known | more


def _unit(serial: str, *checks: dict[str, Any], **more: Any) -> dict[str, Any]:
    known = {
        "unit": {"serial": serial},
        "document": DIGEST,
        "time": "2026-12-01T09:30:00Z",
        "verdict": "conforms",
        "at_fault": None,
        "because": "",
        "next": "Release the unit.",
        "reasons": ["fine"],
        "checks": list(checks),
    }
    return known | more


def _lot(units: list[dict[str, Any]]) -> dict[str, Any]:
    return {"title": "Lot", "document": DIGEST, "counts": {"conforms": len(units)}, "units": units, "worst": []}


ALL = [
    _check(n, v) for n, v in enumerate(("conforms", "does not conform", "cannot decide", "not measured", "report only"))
]


@pytest.mark.parametrize(("undecided", "counts"), [("failure", ("2", "1", "1")), ("skipped", ("1", "1", "2"))])
def test_each_verdict_has_its_junit_word(undecided: str, counts: tuple[str, str, str]) -> None:
    """Failing is failure, not measured is error, undecided is failure or skipped as asked, reports are skipped."""
    root = ET.fromstring(junit_xml([_unit("A", *ALL)], undecided=undecided))  # noqa: S314 - our own bytes

    assert (root.get("failures"), root.get("errors"), root.get("skipped")) == counts
    assert root.get("tests") == "5"


def test_names_are_unique() -> None:
    """Hosts keep only the first of two equal names, so no two are equal."""
    root = ET.fromstring(junit_xml([_unit("A", ALL[0], ALL[0]), _unit("B", ALL[0])]))  # noqa: S314 - our own bytes
    names = [(c.get("classname"), c.get("name")) for c in root.iter("testcase")]

    assert len(set(names)) == len(names) == 3


def test_a_unit_without_checks_is_an_error() -> None:
    """Nothing judged is never a green suite."""
    root = ET.fromstring(junit_xml([_unit("A", because="no limit")]))  # noqa: S314 - our own bytes

    assert (root.get("tests"), root.get("errors")) == ("1", "1")


def test_characters_that_xml_forbids_are_replaced() -> None:
    """A control character in a reason leaves the file well-formed."""
    root = ET.fromstring(junit_xml([_unit("A\x00<&", _check(1, "does not conform", reason="a\x0bb\ud800"))]))  # noqa: S314

    assert root.find(".//failure").get("message") == "a\ufffdb\ufffd"  # type: ignore[union-attr]


def test_a_summary_stays_small() -> None:
    """Five thousand units are cut at 200 kB with a pointer to the rest."""
    units = [_unit(f"WS8-{n:06}", reasons=["x" * 80]) for n in range(5000)]
    text = markdown_summary(_lot(units), units)

    assert len(text.encode()) <= SUMMARY_BYTES
    assert "more units are in lot.html and lot.csv" in text


def test_a_summary_tells_of_counts_beyond_their_limit() -> None:
    """A failing count has no margin in u, and is not left out for it; what is far inside is."""
    rows = [{"serial": "A", "characteristic": n, "reason": f"no. {n}"} for n in (1, 2, 3)]
    lot = _lot([]) | {"worst": [one | {"margin": m} for one, m in zip(rows, (None, -1.25, 40.0), strict=True)]}
    text = markdown_summary(lot, [])

    assert "| A | 1 | beyond | no. 1 |" in text
    assert "| A | 2 | -1.2 | no. 2 |" in text
    assert "no. 3" not in text


def test_a_summary_escapes_what_markdown_would_read() -> None:
    """A serial or reason cannot break the table or bring in markup."""
    text = markdown_summary(_lot([]), [_unit("A|B", reasons=["<img src=x> [a](b) `c`"])])

    assert "A\\|B" in text
    assert "&lt;img" in text
    assert "\\[a\\]" in text


def test_csv_reads_back() -> None:
    """Commas, quotes and line ends survive; one row a check; numbers with dots."""
    rows = list(csv.DictReader(io.StringIO(lot_csv([_unit("A", _check(1, "conforms", reason='a, "b"\nc'))]).decode())))

    assert tuple(rows[0]) == COLUMNS
    assert (rows[0]["reason"], rows[0]["value"], rows[0]["serial"]) == ('a, "b"\nc', "0.25", "A")


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@x", "\tx", "\rx"])
def test_no_cell_is_taken_for_a_formula(text: str) -> None:
    """Text that a spreadsheet would compute is led by an apostrophe; a negative number stays a number."""
    data = lot_csv([_unit(text, _check(1, "conforms", value=-0.5))]).decode()
    row = next(csv.DictReader(io.StringIO(data, newline="")))

    assert row["serial"] == f"'{text}"
    assert row["value"] == "-0.5"
