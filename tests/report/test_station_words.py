"""What the station said goes into the results whole, comes back, and stands on the page."""

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

from runner import acceptance
from runner.capture import integrity
from runner.capture.lot import find_lot
from runner.judge.unit import judge_unit
from runner.measure.plan import bind
from runner.report import verify, verify_frames
from runner.report.document import RunFacts, canonical, from_document, parse, to_document
from runner.report.facts import report_facts
from runner.report.page import html_page
from runner.report.verify_record import Check, Terms
from runner.report.verify_tools import default_tools
from runner.spec.build import read_spec
from tests.capture.bad_frames_station import STATION, said
from tests.capture.staged import UNIT, good_lot, manifest, sha


def _document(root: Path) -> dict[str, Any]:
    (root / "spec.yaml").write_text(STATION.spec)
    plan = bind(read_spec(root / "spec.yaml"))
    lot = find_lot(root / "frames", plan.spec, (UNIT,))
    evidence, _, _ = acceptance.measure_unit(plan, lot.units[0], integrity.survey(lot, plan.spec))
    made = to_document(plan, evidence, judge_unit(plan.spec, evidence), RunFacts("2026-12-01T09:30:00Z"))
    assert from_document(parse(canonical(made)))[1] == evidence
    return made


def test_what_was_demanded_and_found_stands_in_the_results_and_on_the_page(tmp_path: Path) -> None:
    """An auditor sees each compared field beside what was asked, and the digest of every file that said it."""
    good_lot(tmp_path / "frames", STATION)
    folder = tmp_path / "frames" / UNIT

    document = _document(tmp_path)

    (flat,) = document["captures"]
    assert flat["sidecar"]["demanded"] == [
        ["serial", "must be stated"],
        ["exposure", "2 ms"],
        ["gain", "6 dB"],
        ["temperature", "20 °C to 30 °C"],
        ["counter", "consecutive"],
        ["time", "must be stated"],
    ]
    assert ["counter", "42", "flat-2.json"] in flat["sidecar"]["said"][1]["fields"]
    assert {f["file"]: f["sha256"] for f in document["station_files"]} == {
        name: sha((folder / name).read_bytes()) for name in ("flat-1.json", "flat-2.json", "manifest.json")
    }
    page = report_facts(document)
    ((title, rows),) = ((table.title, table.rows) for table in page.said)
    assert title == "flat (flat field)"
    assert rows[0][1].startswith("serial: must be stated, exposure: 2 ms, gain: 6 dB, temperature: 20 °C to 30 °C")
    assert rows[1][0] == "flat-1.tif"
    assert "exposure 2 ms, gain 6 dB" in rows[1][1]
    assert rows[1][1].endswith("(flat-1.json)")
    html = html_page(document, {})
    assert all(f["sha256"] in html for f in document["station_files"])
    assert "Manifests and sidecars" in html


def test_measuring_again_holds_the_station_to_its_words(tmp_path: Path) -> None:
    """A sidecar that says something else now, though nothing that is refused, is not the report's."""
    good_lot(tmp_path / "frames", STATION)
    folder = tmp_path / "frames" / UNIT
    stated = _document(tmp_path)

    def checked() -> dict[str, Check]:
        again = _document(tmp_path)
        return {c.name: c for c in verify_frames.check_frames(stated, folder, _terms(again))}

    assert checked()["manifests and sidecars"].held
    (folder / "flat-2.json").write_text(json.dumps(said(UNIT, 2, temperature="29 degC")))
    manifest(folder)

    check = checked()["manifests and sidecars"]

    assert check.held is False
    assert "attempt 1, flat-2.json; attempt 1, manifest.json" in check.sentence


def _terms(again: dict[str, Any]) -> Terms:
    """Return terms whose measuring gives these results."""
    return verify.terms_of(tools=replace(default_tools(), measure_again=lambda _document, _frames: (again, {})))
