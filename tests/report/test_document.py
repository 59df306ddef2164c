"""`results.json`: everything goes in, everything comes back, and only canonical bytes are read."""

import json
from pathlib import Path
from typing import Any

import pytest

from runner.errors import VerificationRefused
from runner.judge.verdict import CaptureState, Check, Judgement
from runner.measure.evidence import CaptureEvidence, FrameFact, RegionFact, UnitEvidence
from runner.measure.plan import bind
from runner.measure.reading import Component, Curve, Reading, Refusal
from runner.report.document import RunFacts, canonical, from_document, parse, to_document
from runner.resources import folder
from runner.spec.build import read_spec
from runner.spec.model import Amount, Station

AT = {"frequency": Amount(0.25, "cy/px")}


def _evidence() -> UnitEvidence:
    frame = FrameFact("chart-1.tif", "ab" * 32, (1200, 1600), "uint16", simulated=True)
    region = RegionFact("centre", found=True, box=(1, 2, 3, 4), outline=((1.5, 2.0), (3.0, 4.0)))
    capture = CaptureEvidence("chart", 1, "slanted edge", (frame,), ("chart-2.tif: it is empty",), (region,))
    parts = (Component("noise", 0.002, "A", 4200.0, averages=True), Component("chart", 0.001, "B", shared="chart"))
    readings = (
        Reading("centre", "mtf", "1", 0.4731, 0.0022, parts, AT, estimator="joint fit", capture="chart", flags=("x",)),
        Reading("centre", "mtf10", "cy/px", None, None, bound=("above", 0.8), capture="chart"),
        Reading(
            "left", "mtf50", "cy/px", None, None, refusal=Refusal("no edge", "nothing"), capture="chart", attempt=2
        ),
        Reading("", "hot_pixels", "1", 3.0, 0.0, count=True, trials=100, capture="chart"),
    )
    curves = (Curve("centre", "mtf", (0.0, 0.1), (1.0, 0.9), (0.0, 0.001), "cy/px", "1", "chart"),)
    return UnitEvidence("WS8-000101", (capture,), readings, curves)


def _document() -> dict[str, Any]:
    plan = bind(read_spec(folder("specs") / "board-camera.yaml"))
    check = Check("1", "chart", "centre", "mono", "mtf", "mtf at 0.25 cy/px", "1", "conforms", "It is.", 0.4731, 0.0022)
    states = (CaptureState("chart", 1, usable=False, faults=("gone",), at_fault="capture", because="file"),)
    judgement = Judgement("conforms", None, "", ("It is.",), "Release.", (check,), states)
    facts = RunFacts(
        "2026-12-01T09:30:00Z", "L7", "Kim", Station("bench 2", raw={"name": "bench 2"}, digest="sha256:1")
    )
    return to_document(plan, _evidence(), judgement, facts, unused=("notes.txt",))


def test_the_evidence_comes_back_as_it_went_in() -> None:
    """Readings, curves, captures and spec survive the way through canonical JSON without loss."""
    spec, evidence = from_document(parse(canonical(_document())))

    assert evidence == _evidence()
    assert spec.digest == _document()["document"]["digest"]


def test_a_mark_comes_back_only_where_no_frame_could_tell_it() -> None:
    """A capture of refused files has no frames, so the document's word counts; with all frames there, theirs does."""
    document = _document()
    (frame,) = document["captures"][0]["frames"]

    frame["simulated"] = False
    claimed = from_document(document)[1]
    document["captures"][0]["frames"] = []
    refused = from_document(document)[1]

    assert not claimed.simulated
    assert refused.simulated


def test_the_contracts_keys_are_there() -> None:
    """Other programs hold on to these names at the top, in readings and in checks."""
    document = _document()

    top = "format program document spec plan unit station operator time simulated verdict at_fault because reasons next"
    assert set(f"{top} captures readings checks curves maps pictures".split()) <= set(document)
    reading = (
        "capture region channel quantity parameters label part estimator value measured_in u components method flags"
    )
    assert set(reading.split()) <= set(document["readings"][0])
    check = "characteristic where value u k measured_in at_least at_most acceptance rule probability verdict reason"
    assert set(check.split()) <= set(document["checks"][0])
    assert document["readings"][0]["parameters"] == {"frequency": [0.25, "cy/px"]}
    assert (document["checks"][0]["characteristic"], document["simulated"]) == (1, True)


def test_a_rehearsal_is_named_as_a_deviation() -> None:
    """One simulated frame is told in the deviations."""
    assert any("simulated" in sentence for sentence in _document()["deviations"])


@pytest.mark.parametrize(
    ("change", "sentence"),
    [
        (lambda b: b.replace(b'"format":', b'"format":1,"format":'), "the key 'format' stands twice"),
        (lambda b: b.replace(b'"value":0.4731', b'"value":NaN', 1), "NaN is not allowed"),
        (lambda b: b.replace(b'"value":0.4731', b'"value":0.47310', 1), "not in canonical form"),
        (lambda b: b + b" ", "not in canonical form"),
        (lambda b: b.replace(b"probatum-results/1", b"probatum-results/9"), "its format is 'probatum-results/9'"),
        (lambda b: b[:-9], "it is no strict JSON"),
        (lambda _b: b"[]\n", "its format is 'list'"),
        (lambda b: b.replace(b"Kim", b"\xff\xfe"), "it is no strict JSON"),
    ],
)
def test_only_canonical_bytes_are_read(change: Any, sentence: str) -> None:
    """Bytes that another writer would have made otherwise are refused with the reason."""
    data = canonical(_document())
    assert change(data) != data

    with pytest.raises(VerificationRefused, match=sentence):
        parse(change(data))


def test_a_document_that_lacks_something_is_refused() -> None:
    """A missing key ends in a sentence."""
    document = _document()
    del document["readings"][0]["value"]

    with pytest.raises(VerificationRefused, match="it cannot be read back: KeyError: 'value'"):
        from_document(document)


def test_the_bytes_are_plain_json(tmp_path: Path) -> None:
    """Any JSON reader reads the same figures."""
    (tmp_path / "r.json").write_bytes(canonical(_document()))

    assert json.loads((tmp_path / "r.json").read_text())["readings"][0]["value"] == 0.4731
