"""Bad captures of every kind of file end as not measured, with their sentence, their blame and the exit code."""

import re
from pathlib import Path

import pytest

from runner import acceptance
from runner.capture import integrity
from runner.capture.lot import find_lot
from runner.judge.unit import judge_unit
from runner.measure.plan import Plan, bind
from runner.report.document import RunFacts, to_document
from runner.spec.build import read_spec
from runner.spec.model import Station
from tests.capture.bad_frames_colour import BAD_COLOUR
from tests.capture.bad_frames_fields import BAD_FIELDS
from tests.capture.bad_frames_raw import BAD_RAW
from tests.capture.bad_frames_station import BAD_STATION
from tests.capture.staged import NEIGHBOUR, UNIT, Kind, Staged, good_lot

ALL = BAD_RAW + BAD_COLOUR + BAD_STATION + BAD_FIELDS
KINDS = {id(bad.kind): bad.kind for bad in ALL}


def _results(root: Path, kind: Kind) -> tuple[Plan, integrity.Survey, dict[str, acceptance.UnitResult]]:
    (root / "spec.yaml").write_text(kind.spec)
    plan = bind(read_spec(root / "spec.yaml"))
    lot = find_lot(root / "frames", plan.spec)
    seen = integrity.survey(lot, plan.spec)
    facts = RunFacts("2026-12-01T09:30:00Z", "", "", Station())
    results = {}
    for unit in lot.units:
        evidence, _, tracebacks = acceptance.measure_unit(plan, unit, seen)
        document = to_document(plan, evidence, judge_unit(plan.spec, evidence), facts)
        results[unit.serial] = acceptance._result(document, root, fault=bool(tracebacks))
    return plan, seen, results


@pytest.mark.parametrize("bad", ALL, ids=lambda bad: bad.name)
def test_a_staged_error_is_told_and_blamed(bad: Staged, tmp_path: Path) -> None:
    """The unit is not measured, for the reason that was staged; its neighbour is measured as if nothing were."""
    good_lot(tmp_path / "frames", bad.kind)
    bad.spoil(tmp_path / "frames" / UNIT)

    _, seen, results = _results(tmp_path, bad.kind)

    sentences = seen.faults(UNIT, 1, bad.capture)
    assert any(re.search(bad.says, sentence) for sentence in sentences), sentences
    assert all("; " in sentence and sentence.isprintable() for sentence in sentences)
    found = results[UNIT]
    assert (found.verdict, found.at_fault, int(found.exit)) == ("not measured", bad.at_fault, bad.exit)
    assert (results[NEIGHBOUR].verdict, int(results[NEIGHBOUR].exit)) == ("conforms", 0)


@pytest.mark.parametrize("kind", KINDS.values(), ids=range(len(KINDS)))
def test_good_lots_of_every_kind_conform(kind: Kind, tmp_path: Path) -> None:
    """What is whole and as declared draws no sentence, and nothing of it is left unused."""
    good_lot(tmp_path / "frames", kind)

    _, seen, results = _results(tmp_path, kind)

    assert seen.sentences == {}
    assert set(seen.unused.values()) == {()}
    assert {int(result.exit) for result in results.values()} == {0}


def test_every_staged_error_has_a_name_and_a_sentence_of_its_own() -> None:
    """There are far more than thirty, and no two are told alike."""
    assert len({bad.name for bad in ALL}) == len(ALL) >= 80
    assert len({bad.says for bad in ALL}) >= 70
