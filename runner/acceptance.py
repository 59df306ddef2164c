"""The run: spec → capture → measure → judge → report, for every unit of a lot.

`run` is the whole program as five calls. One unit's trouble stops nobody else's: what goes wrong with a unit is
written into its own report.
"""

import traceback
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from datetime import UTC, datetime
from functools import lru_cache
from hashlib import sha256
from pathlib import Path
from typing import Any

import runner
from runner import processes
from runner.capture import integrity
from runner.capture.frame import Frame
from runner.capture.lot import AttemptFolder, Lot, UnitFolder, find_lot
from runner.errors import FrameRefused, StorageError, UsageError
from runner.exits import Exit, most_serious
from runner.judge import verdict
from runner.judge.unit import judge_unit
from runner.measure import session
from runner.measure.companions import Loader
from runner.measure.evidence import CaptureEvidence, RegionFact, UnitEvidence
from runner.measure.plan import Plan, bind
from runner.report import glyphs, store
from runner.report.document import RunFacts, to_document
from runner.report.station_words import station_data
from runner.spec.build import read_spec
from runner.spec.model import Spec, Station
from runner.spec.station import read_station

RUN_AGAIN = "make room, or bring the folder back, and run again; finished units are kept"
"""What to do when results cannot be written."""


@dataclass(frozen=True)
class Order:
    """What one run is asked to do."""

    spec: Path
    """Test spec."""
    frames: Path
    """Folder with a folder per unit."""
    out: Path
    """Folder for results."""
    units: tuple[str, ...] = ()
    """Only these serials; empty for all."""
    lot: str = ""
    """Lot."""
    operator: str = ""
    """Operator."""
    station: Path | None = None
    """Station file."""
    time: str | None = None
    """Time of the verdicts, ISO 8601; None is now."""
    key: Path | None = None
    """Signing key; None is the local station key."""
    passphrase: bytes | None = field(default=None, repr=False)
    """Its pass phrase."""
    timestamp_url: str | None = None
    """RFC 3161 server, or None."""
    jobs: int = 1
    """Processes."""


@dataclass(frozen=True)
class UnitResult:
    """What a run says about one unit when it is done with it."""

    serial: str
    """The unit."""
    verdict: str
    """One of the four words."""
    at_fault: str | None
    """Who is."""
    because: str
    """Why."""
    next: str
    """What the operator does now."""
    exit: Exit
    """Its part in the exit code."""
    folder: Path
    """Where its report lies."""
    kept: bool = False
    """An earlier, complete and unchanged result was kept."""


@dataclass(frozen=True)
class Outcome:
    """How a run ended."""

    units: tuple[UnitResult, ...]
    """By serial."""
    lot: Mapping[str, Any]
    """Contents of `lot.json`."""
    documents: Callable[[], Iterator[dict[str, Any]]]
    """Reads the units' results one by one."""
    unused: tuple[str, ...]
    """Files that no pattern used, and folders that are no units."""
    exit: Exit
    """The most serious of all units."""


@dataclass(frozen=True)
class Job:
    """Everything a worker process needs for its units."""

    order: Order
    """The order, its time fixed."""
    plan: Plan
    """The bound spec."""
    facts: RunFacts
    """What every unit's document states."""
    survey: integrity.Survey
    """What was found out about all files before anything is measured."""


Announce = Callable[[UnitResult, int, int], None]
"""Is told each unit's result with the number done and the number of all."""


def run(order: Order, announce: Announce = lambda _result, _done, _all: None) -> Outcome:
    """Judge every unit found under the frames' folder and write its reports.

    Raises:
        UsageError: Spec, station or folders cannot be used; nothing is judged then.
        SigningError: The key cannot be used; nothing is judged then.
        ShelfError: A target or method module cannot be used.
    """
    if order.jobs > 1:
        processes.warm_up()
    plan, facts = read(order)
    lot, survey = gather(order, plan)
    job = Job(replace(order, time=facts.time), plan, facts, survey)
    results = tuple(accept_units(job, lot.units, announce))
    return conclude(job, lot, results)


def read(order: Order) -> tuple[Plan, RunFacts]:
    """Read spec and station, bind them, see that the key serves, and fix the run's facts in its folder."""
    spec = read_spec(order.spec)
    station = read_station(order.station) if order.station else Station()
    plan = bind(spec, station)
    stated = {"--operator": order.operator, "--lot": order.lot, str(order.spec): spec.expanded}
    glyphs.check(stated | {str(order.station): station.raw})
    _signer(order)
    kept = store.start_run(
        order.out,
        {
            "format": "probatum-run/1",
            "time": _stamp(order.time),
            "digest": spec.digest,
            "program": f"probatum {runner.__version__}",
            "lot": order.lot,
            "operator": order.operator,
            "station": station.digest,
        },
    )
    return plan, RunFacts(str(kept["time"]), order.lot, order.operator, station)


def gather(order: Order, plan: Plan) -> tuple[Lot, integrity.Survey]:
    """Find the units and look through every file, before anything is measured."""
    lot = find_lot(order.frames, plan.spec, order.units)
    return lot, integrity.survey(lot, plan.spec, order.jobs, workers=processes.pool)


def accept_units(job: Job, units: Sequence[UnitFolder], announce: Announce) -> Iterator[UnitResult]:
    """Judge units one after another or on several processes; results come in the order of serials."""
    if job.order.jobs == 1 or len(units) < 2:
        results: Iterator[UnitResult] = (accept_unit(job, unit) for unit in units)
        yield from _announced(results, len(units), announce)
        return
    arguments = (job.order, job.plan.asked, job.facts, job.survey)
    with processes.pool(min(job.order.jobs, len(units)), _start_worker, *arguments) as pool:
        yield from _announced(pool.map(_accept_in_worker, units), len(units), announce)


def accept_unit(job: Job, unit: UnitFolder) -> UnitResult:
    """Measure, judge and report one unit; never raises for what happens to it."""
    try:
        with store.unit_locked(job.order.out, unit.serial):
            return _kept(job, unit) or _accept(job, unit)
    except OSError as error:  # the folder of the run is gone, or cannot be written any more
        return _unwritten(job, unit, error)


def _accept(job: Job, unit: UnitFolder) -> UnitResult:
    try:
        evidence, pictures, tracebacks = measure_unit(job.plan, unit, job.survey, job.facts.time)
    except Exception:  # noqa: BLE001 - a fault of the program leaves this unit not measured and the lot goes on
        evidence, pictures, tracebacks = _fault_evidence(job.plan, unit), {}, [traceback.format_exc()]
    try:
        judgement = judge_unit(job.plan.spec, evidence)
        document = _document(job, unit, evidence, judgement, pictures)
        from runner.report.unit_files import unit_files  # noqa: PLC0415 - heavy: drawing, PDF, signing

        files = unit_files(document, pictures, _signer(job.order), tracebacks, job.order.timestamp_url)
    except Exception as error:  # noqa: BLE001 - as above
        _note_fault(job, unit.serial, [*tracebacks, traceback.format_exc()])
        return _fault_result(job, unit, error)
    folder = store.write_unit(job.order.out, unit.serial, files)
    return _result(document, folder, fault=bool(tracebacks))


def measure_unit(
    plan: Plan, unit: UnitFolder, survey: integrity.Survey, time: str = ""
) -> tuple[UnitEvidence, dict[str, bytes], list[str]]:
    """Measure every attempt of one unit: evidence, pictures by name, tracebacks; charts are due by the run's time."""
    pictures: dict[str, bytes] = {}
    faults = session.Faults()

    def paint(capture: str, attempt: int, frame: Frame, regions: Sequence[RegionFact]) -> None:
        from runner.report.pictures import overview  # noqa: PLC0415 - heavy, and not needed to measure again

        name = picture_name(capture, attempt)
        pictures[name] = overview(frame.codes, plan.spec.capture(capture).camera, [_region(r) for r in regions])

    parts = []
    for attempt in unit.attempts:
        known = {c.capture.name: survey.faults(unit.serial, attempt.number, c.capture.name) for c in plan.captures}
        load = _loader(plan, unit, attempt, survey)
        parts.append(session.measure_attempt(plan, attempt.number, load, known, time, painter=paint, faults=faults))
    marked, said = survey.simulated(unit.serial), survey.said(unit.serial)
    evidence = session.unit_evidence(unit.serial, parts)
    evidence = replace(evidence, remarks=survey.remarks(unit.serial), marked=marked, station=said)
    return evidence, pictures, faults.tracebacks


def picture_name(capture: str, attempt: int) -> str:
    """Return the file name of a capture's overview."""
    slug = "".join(c if c.isalnum() else "-" for c in capture)
    return f"{slug}-overview.png" if attempt == 1 else f"{slug}-attempt-{attempt}-overview.png"


def conclude(job: Job, lot: Lot, results: tuple[UnitResult, ...]) -> Outcome:
    """Write the lot's files from all results of this spec in the folder, under a lock."""
    from runner.report.lot_files import write_lot_files  # noqa: PLC0415 - not needed while units are measured

    try:
        with store.locked(job.order.out):
            lot_data = write_lot_files(job.order.out, job.plan.spec, job.facts, lot.unused)
    except OSError as error:
        raise StorageError(
            f"the lot's files cannot be written: {error.strerror}", where=str(job.order.out), next_step=RUN_AGAIN
        ) from error
    serials = {r.serial for r in results}

    def documents() -> Iterator[dict[str, Any]]:
        return (d for d in store.each_result(job.order.out, job.plan.spec.digest) if d["unit"]["serial"] in serials)

    return Outcome(results, lot_data, documents, lot.unused, most_serious([r.exit for r in results]))


def _stamp(time: str | None) -> str:
    try:
        moment = datetime.now(UTC) if time is None else datetime.fromisoformat(time)
    except ValueError as error:
        raise UsageError(
            f"'{time}' is no time", where="--time", allowed="ISO 8601, e.g. 2026-12-01T09:30:00Z"
        ) from error
    if moment.tzinfo is None:
        raise UsageError(f"'{time}' says no time zone", where="--time", allowed="ISO 8601 with Z or an offset")
    return moment.astimezone(UTC).replace(microsecond=0).isoformat().replace("+00:00", "Z")


_worker: list[Job] = []
"""The job of a worker process, set once when it starts."""


def _start_worker(order: Order, spec: Spec, facts: RunFacts, survey: integrity.Survey) -> None:
    """Bind the spec again: modules, of which a plan is made, do not travel between processes."""
    _worker[:] = [Job(order, bind(spec, facts.station), facts, survey)]


def _accept_in_worker(unit: UnitFolder) -> UnitResult:
    return accept_unit(_worker[0], unit)


def _announced(results: Iterator[UnitResult], total: int, announce: Announce) -> Iterator[UnitResult]:
    for done, result in enumerate(results, 1):
        announce(result, done, total)
        yield result


def _loader(plan: Plan, unit: UnitFolder, attempt: AttemptFolder, survey: integrity.Survey) -> Loader:
    digests = survey.digests(unit.serial, attempt.number)

    def load(name: str) -> Sequence[Frame]:
        capture = plan.spec.capture(name)
        refs = attempt.frames.get(capture.same_frames_as or name, ())
        if not refs:
            raise FrameRefused("no file matches its pattern", where=name, next_step="capture again")
        return integrity.load(refs, capture.camera, {file: pair[0] for file, pair in digests.items()})

    return load


def _region(fact: RegionFact) -> dict[str, Any]:
    return {"region": fact.region, "found": fact.found, "box": fact.box, "outline": fact.outline}


def _document(
    job: Job, unit: UnitFolder, evidence: UnitEvidence, judgement: verdict.Judgement, pictures: Mapping[str, bytes]
) -> dict[str, Any]:
    shown = {picture_name(c.name, c.attempt): {"capture": c.name, "attempt": c.attempt} for c in evidence.captures}
    listed = tuple(
        {"name": name, "kind": "regions", "sha256": sha256(data).hexdigest(), **shown[name]}
        for name, data in sorted(pictures.items())
    )
    earlier = store.earlier_name(job.order.out, unit.serial) if (job.order.out / unit.serial).exists() else None
    unused = tuple(f for f in job.survey.unused.get(unit.serial, ()))
    return to_document(job.plan, evidence, judgement, job.facts, unused=unused, pictures=listed, earlier=earlier)


def _kept(job: Job, unit: UnitFolder) -> UnitResult | None:
    """Return the earlier result of a unit whose files are complete and whose frames are unchanged."""
    folder = store.finish(job.order.out, unit.serial)
    document = store.read_results(folder)
    if document is None or document.get("document", {}).get("digest") != job.plan.spec.digest:
        return None
    if not store.is_complete(folder, document) or document.get("at_fault") == verdict.AT_FAULT_PROGRAM:
        return None
    then = {(c["attempt"], f["file"]): f["sha256"] for c in document["captures"] for f in c["frames"]}
    now = {
        (a.number, file): pair[0]
        for a in unit.attempts
        for file, pair in job.survey.digests(unit.serial, a.number).items()
    }
    faulty = any(place[0] == unit.serial for place in job.survey.sentences)
    said = station_data(job.survey.said(unit.serial)) != document.get("station_files", [])
    if then != now or faulty or said or any(c["file_faults"] for c in document["captures"]):
        return None
    return replace(_result(document, folder, fault=False), kept=True)


def _result(document: Mapping[str, Any], folder: Path, *, fault: bool) -> UnitResult:
    exits = {
        verdict.CONFORMS: Exit.CONFORMS,
        verdict.DOES_NOT_CONFORM: Exit.DOES_NOT_CONFORM,
        verdict.CANNOT_DECIDE: Exit.CANNOT_DECIDE,
        verdict.NOT_MEASURED: Exit.NOT_MEASURED,
    }
    return UnitResult(
        document["unit"]["serial"],
        document["verdict"],
        document["at_fault"],
        document["because"],
        document["next"],
        Exit.FAULT if fault else exits[document["verdict"]],
        folder,
    )


def _fault_evidence(plan: Plan, unit: UnitFolder) -> UnitEvidence:
    """Return evidence without any reading: the judge calls a limit that has none the program's fault."""
    attempts = [a.number for a in unit.attempts] or [1]
    captures = tuple(CaptureEvidence(c.capture.name, n, c.capture.target, ()) for n in attempts for c in plan.captures)
    return UnitEvidence(unit.serial, captures, (), ())


def _note_fault(job: Job, serial: str, tracebacks: list[str]) -> None:
    try:
        store.write_whole(job.order.out / f"fault-{serial}.txt", "\n\n".join(tracebacks).encode())
    except OSError:
        return  # the disk itself may be what failed; the result says so on the screen


def _unwritten(job: Job, unit: UnitFolder, error: OSError) -> UnitResult:
    because = f"its results cannot be written: {error.strerror or error}"
    where = job.order.out / unit.serial
    what = RUN_AGAIN[:1].upper() + RUN_AGAIN[1:] + "."
    return UnitResult(unit.serial, verdict.NOT_MEASURED, verdict.AT_FAULT_PROGRAM, because, what, Exit.FAULT, where)


def _fault_result(job: Job, unit: UnitFolder, error: Exception) -> UnitResult:
    because = f"the program failed: {type(error).__name__}: {error}"
    what = "Keep the unit and its frames; send fault-….txt to whoever maintains the program."
    where = job.order.out / unit.serial
    return UnitResult(unit.serial, verdict.NOT_MEASURED, verdict.AT_FAULT_PROGRAM, because, what, Exit.FAULT, where)


def _signer(order: Order) -> Any:
    from runner.report.keys import local_station_key  # noqa: PLC0415 - heavy

    if order.key is None:
        return local_station_key()
    return _opened(order.key, order.passphrase, order.key.stat().st_mtime_ns if order.key.exists() else 0)


@lru_cache(maxsize=1)
def _opened(key: Path, passphrase: bytes | None, _changed: int) -> Any:
    """Open a key once, not for every unit: a pass phrase is slow to try on purpose."""
    from runner.report.keys import load_key  # noqa: PLC0415 - heavy

    return load_key(key, passphrase)
