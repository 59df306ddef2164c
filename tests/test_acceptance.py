"""The whole run on real files: bad input loses nothing and stops nobody else's unit."""

import json
from pathlib import Path

import pytest
import tifffile

from runner import acceptance
from runner.acceptance import Order
from runner.capture import integrity
from runner.capture.lot import find_lot
from runner.errors import SigningError, SpecError, StorageError, UsageError
from runner.exits import Exit
from runner.judge.unit import judge_unit
from runner.measure.methods import edge_response
from runner.measure.plan import bind
from runner.report import keys, store
from runner.spec.build import read_spec
from tests.capture.bad_frames import BAD_CAPTURES, NEIGHBOUR, SPEC_TEXT, UNIT, BadCapture, chart_codes, good_lot

TIME = "2026-12-01T09:30:00Z"


@pytest.fixture(autouse=True)
def _own_home(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Keep the local station key of these tests in their own folder."""
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))


def _order(tmp_path: Path, **more: object) -> Order:
    spec, frames = tmp_path / "spec.yaml", tmp_path / "frames"
    if not spec.exists():
        spec.write_text(SPEC_TEXT)
    if not frames.exists():
        frames.mkdir()
        good_lot(frames)
    return Order(spec=spec, frames=frames, out=tmp_path / "out", time=TIME, **more)  # type: ignore[arg-type]


@pytest.mark.parametrize("bad", BAD_CAPTURES, ids=lambda bad: bad.name)
def test_a_bad_capture_is_never_judged_and_stops_nobody_else(bad: BadCapture, tmp_path: Path) -> None:
    """Each staged bad capture ends its unit as not measured, and the neighbour is measured as if nothing were."""
    good_lot(tmp_path)
    bad.spoil(tmp_path)
    (tmp_path / "spec.yaml").write_text(SPEC_TEXT)
    plan = bind(read_spec(tmp_path / "spec.yaml"))
    lot = find_lot(tmp_path, plan.spec)
    seen = integrity.survey(lot, plan.spec)
    verdicts = {}

    for unit in lot.units:
        evidence, _, tracebacks = acceptance.measure_unit(plan, unit, seen)
        judgement = judge_unit(plan.spec, evidence)
        verdicts[unit.serial] = judgement.verdict
        assert tracebacks == []
        assert judgement.verdict == "conforms" or judgement.at_fault in {"capture", "cannot tell"}

    both = bad.capture == "chart" and verdicts[NEIGHBOUR] != "conforms"  # the same pixels in two units blame both
    assert verdicts[UNIT] == "not measured" or bad.capture == "dark"
    assert both or verdicts[NEIGHBOUR] == "conforms"


def test_a_good_lot_conforms_and_leaves_its_files(tmp_path: Path) -> None:
    """Each unit gets results, signed pages and pictures; the lot its summary; the exit code is 0."""
    told: list[tuple[str, int, int]] = []
    outcome = acceptance.run(_order(tmp_path), lambda r, done, total: told.append((r.serial, done, total)))

    assert outcome.exit is Exit.CONFORMS
    assert told == [(UNIT, 1, 2), (NEIGHBOUR, 2, 2)]
    files = sorted(p.relative_to(tmp_path / "out" / UNIT).as_posix() for p in (tmp_path / "out" / UNIT).rglob("*.*"))
    pictures = ["pictures/chart-overview.png", "pictures/dark-overview.png"]
    assert files == [*pictures, "report.html", "report.html.p7s", "report.pdf", "results.json"]
    for name in ("lot.json", "lot.html", "lot.csv", "lot-values.json", "run.json"):
        assert (tmp_path / "out" / name).stat().st_size > 100


def test_one_bad_unit_leaves_the_others_report_and_exits_4(tmp_path: Path) -> None:
    """A truncated frame ends in its own report with its own sentence; the neighbour conforms."""
    order = _order(tmp_path)
    frame = order.frames / UNIT / "chart-1.tif"
    frame.write_bytes(frame.read_bytes()[:9000])

    outcome = acceptance.run(order)

    assert outcome.exit is Exit.NOT_MEASURED
    assert [(u.verdict, u.at_fault) for u in outcome.units] == [("not measured", "capture"), ("conforms", None)]
    results = json.loads((tmp_path / "out" / UNIT / "results.json").read_bytes())
    assert "chart-1.tif" in results["captures"][1]["faults"][0]


def test_a_key_that_does_not_serve_stops_before_the_first_frame(tmp_path: Path) -> None:
    """A wrong pass phrase is nobody's fault but the caller's: no unit is judged, no folder is made, the exit is 2."""
    authority, word = tmp_path / "authority", b"walnut hazel"
    keys.make_authority(authority, "Demo authority", b"apple pear plum")
    station = keys.make_station(tmp_path / "station", "Bench 2", authority, b"apple pear plum", word)

    for wrong, said in ((b"walnut pecan", "the pass phrase does not open it"), (None, "pass phrase")):
        with pytest.raises(SigningError, match=said):
            acceptance.run(_order(tmp_path, key=station, passphrase=wrong))
    with pytest.raises(UsageError, match="it cannot be read"):
        acceptance.run(_order(tmp_path, key=tmp_path / "nothing.p12", passphrase=word))
    assert not (tmp_path / "out").exists()
    assert acceptance.run(_order(tmp_path, key=station, passphrase=word)).exit is Exit.CONFORMS


def test_a_rerun_keeps_what_is_done_and_does_anew_what_changed(tmp_path: Path) -> None:
    """A complete unit with unchanged frames is kept; a re-captured one is judged again and its old report kept."""
    order = _order(tmp_path)
    acceptance.run(order)
    frames = order.frames / UNIT
    tifffile.imwrite(frames / "chart-1.tif", chart_codes(seed=99))

    again = acceptance.run(order)

    assert [u.kept for u in again.units] == [False, True]
    results = json.loads((tmp_path / "out" / UNIT / "results.json").read_bytes())
    assert results["earlier"] == "earlier/20261201T093000Z"
    assert (tmp_path / "out" / UNIT / results["earlier"] / "results.json").is_file()
    assert [u.kept for u in acceptance.run(order).units] == [True, True]


def test_the_same_inputs_give_the_same_bytes_whatever_jobs(tmp_path: Path) -> None:
    """Results, pages and lot files are equal from one process and from two; only signatures differ."""
    one = _order(tmp_path)
    acceptance.run(one)
    two = Order(spec=one.spec, frames=one.frames, out=tmp_path / "two", time=TIME, jobs=2)
    acceptance.run(two)

    names = [p.relative_to(one.out) for p in sorted(one.out.rglob("*.*")) if p.suffix not in {".p7s", ".pdf"}]
    assert [n for n in names if (one.out / n).read_bytes() != (two.out / n).read_bytes()] == []


def test_one_unit_may_be_asked_for(tmp_path: Path) -> None:
    """With one serial only that unit is judged, and its frames may lie in the folder itself."""
    order = _order(tmp_path)
    flat = Order(spec=order.spec, frames=order.frames / UNIT, out=tmp_path / "flat", time=TIME, units=(UNIT,))

    assert [u.serial for u in acceptance.run(_order(tmp_path, units=(UNIT,))).units] == [UNIT]
    assert [(u.serial, u.verdict) for u in acceptance.run(flat).units] == [(UNIT, "conforms")]


def test_an_empty_folder_is_no_success(tmp_path: Path) -> None:
    """Nothing to judge ends as not measured."""
    (tmp_path / "frames").mkdir()

    assert acceptance.run(_order(tmp_path)).exit is Exit.NOT_MEASURED


def test_a_fault_of_the_program_is_named_and_the_lot_goes_on(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A method that crashes leaves its unit not measured by the program's fault; the run ends 70."""

    def crash(_sample: object, _options: object) -> object:
        raise ZeroDivisionError

    monkeypatch.setattr(edge_response, "measure", crash)
    outcome = acceptance.run(_order(tmp_path))

    assert outcome.exit is Exit.FAULT
    assert {(u.verdict, u.at_fault) for u in outcome.units} == {("not measured", "program")}
    assert "ZeroDivisionError" in (tmp_path / "out" / UNIT / "fault.txt").read_text()


def test_a_fault_while_reporting_is_caught_too(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """When a report cannot be made the unit ends by the program's fault and the traceback is kept."""

    def broken(*_: object) -> None:
        raise ZeroDivisionError

    monkeypatch.setattr("runner.report.unit_files.unit_files", broken)
    outcome = acceptance.run(_order(tmp_path))

    assert outcome.exit is Exit.FAULT
    assert outcome.units[0].at_fault == "program"
    assert "ZeroDivisionError" in (tmp_path / "out" / f"fault-{UNIT}.txt").read_text()


def test_a_full_disk_is_no_fault_of_the_programs_logic(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Results that cannot be written end their unit with a plain sentence and what to do; the rerun completes."""
    write_unit = store.write_unit

    def full(out: Path, serial: str, files: dict[str, bytes]) -> Path:
        if serial == UNIT:
            raise OSError(28, "No space left on device")
        return write_unit(out, serial, files)

    monkeypatch.setattr(store, "write_unit", full)
    outcome = acceptance.run(_order(tmp_path))

    assert outcome.exit is Exit.FAULT
    assert outcome.units[0].because == "its results cannot be written: No space left on device"
    assert "run again" in outcome.units[0].next
    monkeypatch.undo()
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    assert [u.kept for u in acceptance.run(_order(tmp_path)).units] == [False, True]


def test_lot_files_that_cannot_be_written_are_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A disk that fills up at the very end raises the error that the command line turns into a sentence and 70."""

    def full(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("runner.report.lot_files.write_lot_files", full)
    with pytest.raises(StorageError, match="the lot's files cannot be written: No space left on device"):
        acceptance.run(_order(tmp_path))


@pytest.mark.parametrize(
    ("time", "sentence"), [("noon", "'noon' is no time"), ("2026-12-01T09:30:00", "says no time zone")]
)
def test_a_time_must_be_one(tmp_path: Path, time: str, sentence: str) -> None:
    """A time that is none, or has no zone, is refused before anything is judged."""
    order = _order(tmp_path)

    with pytest.raises(UsageError, match=sentence):
        acceptance.run(Order(spec=order.spec, frames=order.frames, out=order.out, time=time))


def test_a_wrong_spec_stops_before_the_first_frame(tmp_path: Path) -> None:
    """A spec error leaves no report behind."""
    order = _order(tmp_path)
    order.spec.write_text(SPEC_TEXT.replace("quantity: mtf50", "quantity: mtf5O"))

    with pytest.raises(SpecError, match="unknown quantity 'mtf5O'"):
        acceptance.run(order)
    assert not order.out.exists()


def test_picture_names_are_plain() -> None:
    """Names of captures become file names without surprises."""
    assert acceptance.picture_name("far chart/2", 1) == "far-chart-2-overview.png"
    assert acceptance.picture_name("chart", 3) == "chart-attempt-3-overview.png"
