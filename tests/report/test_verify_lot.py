"""A lot's own files, which nobody signs, hold only as what the units' signed results give."""

import json
import shutil
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import pytest

from runner.exits import Exit
from runner.report import verify, verify_lot
from runner.report.verify_record import TEXT_ONLY, Outcome
from runner.report.verify_tools import default_tools
from tests.capture.bad_frames import NEIGHBOUR, UNIT
from tests.report import signed_world as world

TOOLS = world.printed_once(default_tools())


@pytest.fixture
def lot(tmp_path: Path) -> Path:
    """A copy of a real lot that a test may spoil."""
    return Path(shutil.copytree(world.shared_bench().reports, tmp_path / "reports"))


def _verify(lot: Path) -> list[Outcome]:
    roots = [world.shared_bench().authority.root]
    return list(verify.verify(lot, verify.terms_of(roots=roots, tools=TOOLS)))


def _refusals(lot: Path) -> str:
    """Return why the lot's own files are refused; its units hold."""
    *units, own = _verify(lot)
    assert all(unit.exit is Exit.CONFORMS for unit in units)
    assert own.exit is Exit.DOES_NOT_CONFORM
    return "; ".join(check.sentence for check in own.checks if check.held is False)


def _edit(path: Path, change: Callable[[Any], None]) -> None:
    data = json.loads(path.read_bytes())
    change(data)
    text = json.dumps(data, sort_keys=True, ensure_ascii=False, indent=1)
    path.write_text(text + "\n", encoding="utf-8")


def test_a_real_lot_holds(lot: Path) -> None:
    """Two units and then the lot's own four files; what they cannot show is told."""
    *units, own = _verify(lot)

    assert [unit.path.name for unit in units] == [UNIT, NEIGHBOUR]
    assert [unit.exit for unit in units] == [Exit.CONFORMS, Exit.CONFORMS]
    assert (own.path, own.exit, [check.name for check in own.checks]) == (lot, Exit.CONFORMS, list(verify_lot.FILES))
    assert "not signed" in own.remarks[0]


def _counts(data: Any) -> None:
    data["counts"]["conforms"] = 3


def _fewer(data: Any) -> None:
    data["units"].pop()


def _operator(data: Any) -> None:
    data["operator"] = "Kim"


def _version(data: Any) -> None:
    data["program"]["version"] = "0.0.9"
    data["counts"]["conforms"] = 3


@pytest.mark.parametrize("change", [_counts, _fewer, _operator, _version])
def test_an_altered_lot_json_is_refused(lot: Path, change: Callable[[Any], None]) -> None:
    """Counts, units, and what only the file itself states; claiming another version helps nothing."""
    _edit(lot / "lot.json", change)

    assert "lot.json does not follow from the units' results" in _refusals(lot)


@pytest.mark.parametrize(
    ("name", "old", "new"),
    [
        ("lot.csv", b",conforms,", b",does not conform,"),
        ("lot.html", b"conforms", b"conformed"),
        ("lot-values.json", b"0.", b"1."),
        ("lot.csv", b"\r\n", b"\n"),
    ],
)
def test_an_altered_table_page_or_value_is_refused(lot: Path, name: str, old: bytes, new: bytes) -> None:
    """One place changed in any of the lot's files."""
    data = (lot / name).read_bytes()
    assert old in data
    (lot / name).write_bytes(data.replace(old, new, 1))

    assert _refusals(lot) == f"{name} does not follow from the units' results"


def test_a_page_that_claims_another_version_shows_the_same_or_is_refused(lot: Path) -> None:
    """`lot.json` is not signed, so its version excuses other tags and lines, but no other word."""
    _edit(lot / "lot.json", lambda data: data["program"].update(version="0.0.9"))
    page = lot / "lot.html"
    true = page.read_bytes()

    page.write_bytes(true.replace(b"\n", b"\n "))
    *_, own = _verify(lot)
    assert [check.accept for check in own.checks if check.held is None] == [TEXT_ONLY]
    assert own.exit is Exit.CANNOT_DECIDE
    page.write_bytes(true.replace(b"conforms", b"conformed", 1))
    assert "lot.html does not follow" in _refusals(lot)


def test_doubled_keys_are_refused(lot: Path) -> None:
    """Readers differ about which of two keys counts."""
    path = lot / "lot.json"
    path.write_bytes(path.read_bytes().replace(b'"total"', b'"total": 99,\n "total"', 1))

    assert "a key stands twice" in _refusals(lot)


@pytest.mark.parametrize("name", verify_lot.FILES)
def test_a_file_taken_away_is_missed(lot: Path, name: str) -> None:
    """Each of the lot's files belongs to it."""
    (lot / name).unlink()

    assert f"{name} is missing" in _refusals(lot)


def test_all_of_them_taken_away_are_missed(lot: Path) -> None:
    """The facts of the run show that there was a lot."""
    for name in verify_lot.FILES:
        (lot / name).unlink()

    assert "lot.json is missing: it was taken away, or the run was cut off" in _refusals(lot)


def test_a_unit_taken_away_is_missed(lot: Path) -> None:
    """The lot's files name a unit whose folder is gone."""
    shutil.rmtree(lot / NEIGHBOUR)

    assert "lot.json does not follow from the units' results" in _refusals(lot)


def test_a_unit_emptied_of_its_reports_is_missed(lot: Path) -> None:
    """A folder that keeps its results and loses what signs them is no unit that holds."""
    for name in ("report.pdf", "report.html", "report.html.p7s"):
        (lot / NEIGHBOUR / name).unlink()

    _good, bad, own = _verify(lot)
    assert (bad.exit, own.exit) == (Exit.DOES_NOT_CONFORM, Exit.DOES_NOT_CONFORM)
    assert "there is no report in it" in bad.checks[0].sentence
    assert "1 of its units do not hold" in own.checks[0].sentence


def test_a_good_report_in_a_bad_units_folder_is_refused(lot: Path) -> None:
    """A good unit's whole folder copied over a bad unit's: each file is true, and the place is not."""
    shutil.rmtree(lot / NEIGHBOUR)
    shutil.copytree(lot / UNIT, lot / NEIGHBOUR)

    _good, bad, own = _verify(lot)
    assert [c.sentence for c in bad.checks if c.held is False] == [
        f"the folder {NEIGHBOUR} holds the report of another unit, {UNIT}"
    ]
    assert own.exit is Exit.DOES_NOT_CONFORM


def test_any_other_name_is_refused_in_a_lot(lot: Path) -> None:
    """In a lot a folder is named by its serial, so that no unit can lie there twice."""
    shutil.copytree(lot / UNIT, lot / "copy")

    outcomes = {outcome.path.name: outcome for outcome in _verify(lot)}
    assert outcomes["copy"].exit is Exit.DOES_NOT_CONFORM
    assert outcomes[UNIT].exit is Exit.CONFORMS


def test_a_report_laid_into_the_lots_own_folder_hides_nothing(lot: Path) -> None:
    """With a good report at the top the units below are still looked at."""
    for name in ("report.pdf", "results.json"):
        shutil.copy(lot / UNIT / name, lot / name)
    (lot / NEIGHBOUR / "results.json").write_bytes(b"{}")

    exits = [outcome.exit for outcome in _verify(lot)]
    assert exits == [Exit.CONFORMS, Exit.CONFORMS, Exit.DOES_NOT_CONFORM, Exit.DOES_NOT_CONFORM]


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"document": {"digest": "sha256:1"}}, f"{NEIGHBOUR} is judged by another spec than {UNIT}"),
        ({"unit": {"serial": NEIGHBOUR, "lot": "L8"}}, f"{NEIGHBOUR} is of lot 'L8', {UNIT} of lot 'L7'"),
        ({"operator": "Kim"}, "states another operator"),
        ({"station": {"name": "Bench 9"}}, "states another station"),
        ({"time": "2026-03-15T09:29:00Z"}, "states another time"),
    ],
)
def test_reports_of_another_run_are_told(tmp_path: Path, change: Mapping[str, Any], words: str) -> None:
    """A lot's files leave out what is not of their spec: a laxer report of a bad unit may not vanish that way."""
    first = world.results(UNIT)
    second = {**world.results(NEIGHBOUR), **change}
    terms = verify.terms_of(tools=world.TOOLS)
    for name, data in world.lot_files({"lot": "L7"}, (first,)).items():
        (tmp_path / name).write_bytes(data)

    (found,) = verify_lot.check_lot(tmp_path, [first, second], terms).checks

    assert found.held is False
    assert words in found.sentence


def test_a_lot_without_units_is_refused(lot: Path) -> None:
    """All unit folders taken away: the lot's files alone prove nothing."""
    for name in (UNIT, NEIGHBOUR):
        shutil.rmtree(lot / name)

    assert _refusals(lot) == "the lot's own files are here, but no unit's report"
