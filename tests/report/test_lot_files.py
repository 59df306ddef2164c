"""The lot's files: rebuilt from all results of one spec, the same bytes each time, safe to open elsewhere."""

import csv
import io
import json
from dataclasses import replace
from pathlib import Path
from typing import Any
from xml.etree import ElementTree as ET

import pytest

from runner.errors import UsageError
from runner.report import store
from runner.report.document import RunFacts, canonical
from runner.report.lot_files import write_lot_files
from runner.report.tables import SUMMARY_BYTES, junit_xml, markdown_summary
from runner.spec.model import Station
from tests.report import printed_world as world

NAMES = {"lot.json", "lot.html", "lot.csv", "lot-values.json"}
FACTS = RunFacts(world.TIME, "L7", "Kim", Station("bench 2"))


def _write(out: Path, documents: list[dict[str, Any]]) -> dict[str, Any]:
    for document in documents:
        (out / document["unit"]["serial"]).mkdir()
        (out / document["unit"]["serial"] / store.RESULTS).write_bytes(canonical(document))
    return write_lot_files(out, world.plan().spec, FACTS, ("notes.txt",))


def _files(out: Path) -> dict[str, bytes]:
    return {p.name: p.read_bytes() for p in out.iterdir() if p.is_file()}


def test_the_files_hold_the_whole_lot(tmp_path: Path) -> None:
    """Counts, blame, units, facts of the run and unused files; what is returned is what is written."""
    lot = _write(tmp_path, world.all_four())
    files = _files(tmp_path)

    assert set(files) == NAMES
    assert json.loads(files["lot.json"]) == lot
    assert lot["counts"] == {"conforms": 1, "does not conform": 1, "cannot decide": 1, "not measured": 1}
    assert (lot["total"], lot["exit"], lot["format"]) == (4, 1, "probatum-lot/1")
    assert (lot["lot"], lot["operator"], lot["station"], lot["time"]) == ("L7", "Kim", "bench 2", world.TIME)
    assert (lot["title"], lot["unused"]) == ("Walnut-sorter board camera, outgoing acceptance", ["notes.txt"])
    assert [u["serial"] for u in lot["units"]] == ["WS8-000101", "WS8-000103", "WS8-000105", "WS8-000108"]


def test_the_lots_page_tells_captures_apart(tmp_path: Path) -> None:
    """A count of the darks, which have no regions, and one over all regions of the chart name their captures."""
    document = world.document()
    count = {"where": "", "measured_in": "1", "value": 12.0, "u": 0.0, "at_least": None, "at_most": 8.0}
    count |= {"label": "hot pixels", "reason": "hot pixels 12, at most 8", "verdict": "does not conform"}
    for number, capture in ((8, "dark"), (9, "chart")):
        document["checks"].append(document["checks"][0] | count | {"characteristic": number, "capture": capture})
    lot = _write(tmp_path, [document])
    page = (tmp_path / "lot.html").read_text()

    assert "8. hot pixels, whole frame (dark)" in page
    assert "9. hot pixels, all regions (chart)" in page
    assert [row["margin"] for row in lot["worst"][:2]] == [None, None]
    assert page.count('<td class="num">beyond</td>') == 2


def test_writing_again_gives_the_same_bytes(tmp_path: Path) -> None:
    """The files follow from the results, not from the order in which units were judged or from what lay there."""
    (tmp_path / "one").mkdir()
    (tmp_path / "two").mkdir()
    _write(tmp_path / "one", world.all_four())
    _write(tmp_path / "two", world.all_four()[::-1])
    _write(tmp_path / "two", [])

    assert _files(tmp_path / "one") == _files(tmp_path / "two")


def test_only_results_of_this_spec_count(tmp_path: Path) -> None:
    """Another revision's results, unreadable ones, hidden folders and stray files are left out."""
    other = world.document("WS8-000109")
    other["document"]["digest"] = "sha256:other"
    (tmp_path / "WS8-000110").mkdir()
    (tmp_path / "WS8-000110" / store.RESULTS).write_text("{")
    (tmp_path / ".making-WS8-000111").mkdir()
    (tmp_path / ".making-WS8-000111" / store.RESULTS).write_bytes(canonical(world.document("WS8-000111")))
    (tmp_path / "stray").write_text("")

    assert _write(tmp_path, [world.document(), other])["total"] == 1


def test_the_values_suffice_to_judge_again(tmp_path: Path) -> None:
    """Every reading of every unit stands in one compact file, with the same numbers as in its results."""
    documents = world.all_four()
    _write(tmp_path, documents)
    values = json.loads((tmp_path / "lot-values.json").read_bytes())

    assert values["format"] == "probatum-values/1"
    for document in documents:
        rows = [dict(zip(values["columns"], row, strict=True)) for row in values["units"][document["unit"]["serial"]]]
        assert rows == [{key: reading[key] for key in values["columns"]} for reading in document["readings"]]
        assert {"value", "u", "region", "quantity", "parameters", "channel", "attempt"} <= set(values["columns"])


def test_the_table_is_safe_to_open(tmp_path: Path) -> None:
    """No text starts a formula, every number reads back exactly, what was not measured is empty."""
    documents = [world.failing(), world.unmeasured()]
    for number, start in enumerate(("=", "+", "-", "@", "\t")):
        documents[0]["checks"][number]["reason"] = f"{start}HYPERLINK(1)"
    documents[0]["checks"][0] |= {"value": -0.5, "where": "-1+1"}
    _write(tmp_path, documents)
    rows = list(csv.DictReader(io.StringIO((tmp_path / "lot.csv").read_text(encoding="utf-8"), newline="")))

    checks = [check for document in documents for check in document["checks"]]
    assert len(rows) == len(checks)
    for row, check in zip(rows, checks, strict=True):
        for key in ("value", "at_least", "at_most", "probability", "k"):
            assert row[key] == ("" if check[key] is None else repr(check[key]))
        text = [cell for key, cell in row.items() if cell and key not in {"value", "margin_in_u"}]
        assert [cell for cell in text if cell.startswith(("=", "+", "-", "@", "\t", "\r"))] == []
    assert (rows[0]["value"], rows[0]["where"], rows[0]["reason"]) == ("-0.5", "'-1+1", "'=HYPERLINK(1)")


def test_simulated_and_real_units_are_never_mixed(tmp_path: Path) -> None:
    """A rehearsed unit among real ones is refused by name, and nothing is written."""
    rehearsed = world.document("WS8-000102") | {"simulated": True}

    with pytest.raises(UsageError, match="the lot mixes simulated and real units; WS8-000102 is simulated"):
        _write(tmp_path, [world.document(), rehearsed])
    assert _files(tmp_path) == {}


def test_a_spec_without_title_is_named_by_its_number(tmp_path: Path) -> None:
    """A lot's page always has a heading."""
    spec = world.plan().spec
    write_lot_files(tmp_path, replace(spec, document=replace(spec.document, title="")), FACTS, ())

    assert b"<title>Lot by WS8-ACC: 0 units</title>" in (tmp_path / "lot.html").read_bytes()


def test_a_big_lot_stays_within_what_ci_hosts_take(tmp_path: Path) -> None:
    """200 units of 50 checks: a summary under 200 kB that names every unit or counts the rest, one case per check."""
    lost = world.unmeasured()
    lost["checks"] = [check | {"characteristic": n} for n in range(10) for check in lost["checks"][:5]]
    lost["reasons"] = [check["reason"] * 10 for check in lost["checks"]]
    units = [lost | {"unit": lost["unit"] | {"serial": f"WS8-{n:06}"}} for n in range(200)]

    text = markdown_summary(_write(tmp_path, units), units)
    suites = ET.fromstring(junit_xml(units))  # noqa: S314 - our own bytes

    told = text.count("\n| WS8-")
    assert len(text.encode()) < SUMMARY_BYTES == 200_000
    assert text.endswith(f"\n{200 - told} more units are in lot.html and lot.csv.\n")
    assert 0 < told < 200
    assert (suites.get("tests"), suites.get("errors"), suites.get("failures")) == ("10000", "10000", "0")
    names = {(case.get("classname"), case.get("name")) for case in suites.iter("testcase")}
    assert len(names) == 200 * 50
