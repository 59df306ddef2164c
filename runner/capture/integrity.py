"""Looks through every frame of a lot before anything is measured: whole, single, and of this unit.

All units under FRAMES are compared, also those that were not asked for; so order, the number of processes and the
choice of units change nothing. Only digests and small facts are kept, one file at a time is in memory.
"""

import re
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from concurrent.futures import Executor, ProcessPoolExecutor
from dataclasses import dataclass, field, replace
from multiprocessing import get_context
from pathlib import Path
from typing import Any

import numpy as np

from runner.capture.fitness import Field, field_of, unfit
from runner.capture.frame import Frame
from runner.capture.lot import FrameRef, Lot, UnitFolder, count_fault, fold, some
from runner.capture.readers import read_frames
from runner.capture.sentences import Collector, Place
from runner.capture.sidecar import SEQUENCE, SidecarRef, amounts, hear, simulated
from runner.capture.station import StationWords, station_says
from runner.errors import FrameRefused
from runner.spec.model import Camera, Spec
from runner.spec.serials import is_serial

DARK = "dark frame"
"""The target whose frames may honestly be alike: clamped at zero they hold nothing else."""
CLAMPED = 1e-4
"""Share of pixels above zero up to which a dark frame counts as clamped: a few hot pixels. Likewise below white."""

Progress = Callable[[int, int], None]
"""Is told how many files of how many have been read."""
Workers = Callable[[int], Executor]
"""Gives so many worker processes."""


@dataclass(frozen=True)
class PageFacts:
    """What is kept of one frame."""

    pixels_sha256: str
    """Digest of the decoded pixels."""
    constant: float | None
    """The one code that every pixel has, or None."""
    clamped: bool
    """Nearly every pixel is zero."""
    saturated: bool = False
    """Nearly every pixel lies at the white level."""


@dataclass(frozen=True)
class FileFacts:
    """What is kept of one file."""

    serial: str
    """The unit under whose folder it lies."""
    attempt: int
    """Attempt."""
    file: str
    """Path relative to the attempt's folder."""
    captures: tuple[str, ...]
    """Captures that use it with one and the same camera."""
    sha256: str = ""
    """Digest of its bytes; empty if it was refused."""
    pages: tuple[PageFacts, ...] = ()
    """Frame by frame."""
    claims: str = ""
    """Serial that the file's own texts name."""
    simulated: bool = False
    """Marked as a rehearsed frame, by itself or by a sidecar."""
    refusal: str = ""
    """The sentence, if the file was refused."""
    unfit: Mapping[str, str] = field(default_factory=dict)
    """By capture, why it cannot serve as what the capture is: a dark frame that is lit, a flat that is not even."""


@dataclass(frozen=True)
class Survey:
    """What was found out about all files of a lot."""

    files: tuple[FileFacts, ...]
    """Every file, in the order of the lot."""
    sentences: Mapping[Place, tuple[str, ...]]
    """Faults by serial, attempt and capture."""
    marks: Mapping[Place, tuple[str, ...]]
    """Flags by serial, attempt and capture."""
    unused: Mapping[str, tuple[str, ...]]
    """By serial: files that no pattern used."""
    inferred: Mapping[str, tuple[int, ...]] = field(default_factory=dict)
    """By serial: attempts without a manifest, whose completeness is inferred."""
    station: Mapping[str, StationWords] = field(default_factory=dict)
    """By serial: what manifests and sidecars said."""

    def faults(self, serial: str, attempt: int, capture: str) -> tuple[str, ...]:
        """Return everything that makes a capture unusable, also what the lot's folders alone show."""
        return self.sentences.get((serial, attempt, capture), ())

    def flags(self, serial: str, attempt: int, capture: str) -> tuple[str, ...]:
        """Return what a reader of the report should know and what changes no verdict."""
        return self.marks.get((serial, attempt, capture), ())

    def digests(self, serial: str, attempt: int) -> Mapping[str, tuple[str, str]]:
        """Return (digest of the bytes, digest of the first frame's pixels) of every file that was not refused."""
        return {
            f.file: (f.sha256, f.pages[0].pixels_sha256)
            for f in self.files
            if (f.serial, f.attempt) == (serial, attempt) and not f.refusal
        }

    def remarks(self, serial: str) -> tuple[str, ...]:
        """Return what a report says about a unit's files beside faults: every flag, and what was only inferred."""
        places = sorted(place for place in self.marks if place[0] == serial)
        flags = dict.fromkeys(flag for place in places for flag in self.marks[place])
        attempts = ", ".join(map(str, self.inferred.get(serial, ())))
        inferred = f"Without a manifest of attempt {attempts} its completeness is inferred from the files themselves"
        return (*((f"{inferred}.",) if attempts else ()), *(f"{flag}." for flag in flags))

    def said(self, serial: str) -> StationWords:
        """Return what manifests and sidecars said of a unit."""
        return self.station.get(serial, StationWords())

    def simulated(self, serial: str) -> bool:
        """Tell whether one of a unit's frames is marked as rehearsed."""
        return any(f.simulated for f in self.files if f.serial == serial)


def survey(
    lot: Lot, spec: Spec, jobs: int = 1, progress: Progress | None = None, workers: Workers | None = None
) -> Survey:
    """Read every frame of every unit once and find what cannot be evidence.

    Args:
        lot: The folders.
        spec: Captures with their cameras.
        jobs: Processes; the result does not depend on it.
        progress: Is told after each file.
        workers: Gives the processes; None starts new ones.
    """
    units = sorted((*lot.units, *lot.others), key=lambda unit: unit.serial)
    tasks = list(_tasks(units, spec))
    files = tuple(_all_facts(tasks, jobs, progress, workers or _new_ones))
    sentences, marks = Collector(), Collector()
    for unit in units:
        _folder_faults(unit, spec, files, sentences)
    for facts in files:
        if facts.refusal:
            _add(sentences, facts, facts.refusal)
        for capture, sentence in facts.unfit.items():
            sentences.put((facts.serial, facts.attempt, capture), sentence)
    _foreign(files, spec, sentences)
    station = {}
    for unit in units:
        digests = {(f.attempt, f.file): f.sha256 for f in files if f.serial == unit.serial and f.sha256}
        station[unit.serial] = station_says(unit, spec, digests, sentences, marks)
    _twice(files, spec, sentences, marks)
    inferred = {u.serial: tuple(a.number for a in u.attempts if not a.manifests) for u in units}
    unused = {unit.serial: unit.unused for unit in units}
    inferred = {serial: numbers for serial, numbers in inferred.items() if numbers}
    return Survey(files, sentences.frozen(), marks.frozen(), unused, inferred, station)


def load(refs: Sequence[FrameRef], camera: Camera, expected: Mapping[str, str]) -> tuple[Frame, ...]:
    """Read the frames of a capture for measuring; they must still be the ones that were looked through.

    Args:
        refs: The files, in order.
        camera: The capture's camera.
        expected: Digest of every file's bytes at the survey.

    Returns:
        All frames in order, with the axes of their file names and pages.

    Raises:
        FrameRefused: A file has changed since, or cannot be evidence.
    """
    frames: list[Frame] = []
    heard: dict[SidecarRef, dict[str, Any]] = {}
    for ref in refs:
        hear(ref.sidecars, heard)
        taken, marked = amounts(ref.sidecars, heard), simulated(ref.sidecars, heard)
        for frame in read_frames(ref.path, camera, name=ref.file, compare=False):  # the survey has compared them
            if frame.sha256 != expected.get(ref.file):
                raise FrameRefused(
                    "the file changed while the run was going on",
                    where=ref.file,
                    next_step="let the copying end, then run again",
                )
            marked = marked or frame.simulated
            frames.append(replace(frame, axes={**ref.axes, **frame.axes}, taken=taken, simulated=marked))
    return tuple(frames)


_Task = tuple[Path, Camera, FileFacts, tuple[Field, ...]]


def _tasks(units: Iterable[UnitFolder], spec: Spec) -> Iterator[_Task]:
    """Yield every file once per camera it is to be read with, and what its captures must be."""
    fields = {capture.name: field_of(capture) for capture in spec.captures}
    for unit in units:
        heard: dict[SidecarRef, dict[str, Any]] = {}
        for attempt in unit.attempts:
            marked: set[str] = set()
            users: dict[tuple[Path, str, Camera], list[str]] = {}
            for capture in spec.captures:
                for ref in attempt.frames[capture.name]:
                    users.setdefault((ref.path, ref.file, capture.camera), []).append(capture.name)
                    hear(ref.sidecars, heard)
                    marked |= {ref.file} if simulated(ref.sidecars, heard) else set()
            for (path, file, camera), captures in users.items():
                facts = FileFacts(unit.serial, attempt.number, file, tuple(captures), simulated=file in marked)
                yield path, camera, facts, tuple(one for name in captures if (one := fields[name]) is not None)


def _new_ones(number: int) -> Executor:
    return ProcessPoolExecutor(number, get_context("spawn"))


def _all_facts(tasks: Sequence[_Task], jobs: int, progress: Progress | None, workers: Workers) -> Iterator[FileFacts]:
    if jobs == 1 or len(tasks) < 2:
        yield from _counted(map(_facts, tasks), len(tasks), progress)
        return
    number = min(jobs, len(tasks))
    with workers(number) as pool:
        chunk = max(1, min(8, len(tasks) // (4 * number)))
        yield from _counted(pool.map(_facts, tasks, chunksize=chunk), len(tasks), progress)


def _counted(found: Iterable[FileFacts], total: int, progress: Progress | None) -> Iterator[FileFacts]:
    for done, facts in enumerate(found, 1):
        if progress is not None:
            progress(done, total)
        yield facts


def _facts(task: _Task) -> FileFacts:
    path, camera, facts, fields = task
    try:
        frames = read_frames(path, camera, name=facts.file)
    except FrameRefused as error:
        return replace(facts, refusal=str(error))
    return replace(
        facts,
        sha256=frames[0].sha256,
        pages=tuple(_page_facts(frame, camera) for frame in frames),
        claims=frames[0].metadata.get("serial", ""),
        simulated=facts.simulated or frames[0].simulated,
        unfit={one.capture: words for one in fields for frame in frames[::-1] if (words := unfit(one, frame, camera))},
    )


def _page_facts(frame: Frame, camera: Camera) -> PageFacts:
    codes = frame.codes
    first = codes.flat[0]
    constant = float(first) if first == codes.flat[-1] and bool((codes == first).all()) else None
    clamped = int(np.count_nonzero(codes)) <= CLAMPED * codes.size
    some = codes.reshape(-1)[:: max(1, codes.size // 10_000)]  # few frames are white throughout: the others cost little
    saturated = bool((some >= camera.white_level).mean() > 1 - 100 * CLAMPED) and (
        int(np.count_nonzero(codes < camera.white_level)) <= CLAMPED * codes.size
    )
    return PageFacts(frame.pixels_sha256, constant, clamped, saturated)


def _add(collector: Collector, facts: FileFacts, sentence: str) -> None:
    """Note a sentence for every capture that uses the file."""
    for capture in facts.captures:
        collector.put((facts.serial, facts.attempt, capture), sentence)


def _folder_faults(unit: UnitFolder, spec: Spec, files: Sequence[FileFacts], sentences: Collector) -> None:
    """Note what folders and numbers of frames show: doubled units, lost, surplus and contested files."""
    of_unit = [facts for facts in files if facts.serial == unit.serial]
    for attempt in unit.attempts:
        for capture in spec.captures:
            place = (unit.serial, attempt.number, capture.name)
            for sentence in (*unit.faults, *attempt.faults[capture.name]):
                sentences.put(place, sentence)
            used = [f for f in of_unit if f.attempt == attempt.number and capture.name in f.captures]
            frames = sum(max(1, len(facts.pages)) for facts in used)
            lost = count_fault(capture, attempt.frames[capture.name], frames)
            if lost:
                sentences.put(place, lost)


def _foreign(files: Sequence[FileFacts], spec: Spec, sentences: Collector) -> None:
    """Note every file that names another unit, in its texts or in its name."""
    known = {fold(facts.serial) for facts in files}
    for facts in files:
        claimed = facts.claims if is_serial(spec.unit.serial, facts.claims) else ""
        if claimed and fold(claimed) != fold(facts.serial):
            _add(
                sentences,
                facts,
                f"{facts.file}: the file says that it is of unit {claimed}, it lies with {facts.serial}; "
                "find out which unit it shows, and capture again",
            )
        for named in _serials_in(facts.file, spec.unit.serial):
            if fold(named) != fold(facts.serial) and (fold(named) in known or _alike(named, facts.serial)):
                _add(
                    sentences,
                    facts,
                    f"{facts.file}: the name says unit {named}, the file lies with {facts.serial}; "
                    "find out which unit it shows, and capture again",
                )


def _alike(named: str, serial: str) -> bool:
    """Tell whether a text differs from a serial in digits only, and is more than digits: no date, no counter."""
    digits = re.compile(r"\d")
    return not named.isdigit() and digits.sub("0", fold(named)) == digits.sub("0", fold(serial))


def _serials_in(file: str, pattern: str) -> list[str]:
    """Return the longest serials among the runs of whole words of a file's path."""
    words = [(m.start(), m.end()) for m in re.finditer(r"[^\W_]+", file)]
    found, taken = [], 0
    for first, (start, _) in enumerate(words):
        if start < taken:
            continue
        for _, end in reversed(words[first:]):
            if is_serial(pattern, file[start:end]):
                found.append(file[start:end])
                taken = end
                break
    return found


def _twice(files: Sequence[FileFacts], spec: Spec, sentences: Collector, marks: Collector) -> None:
    """Note frames that hold the same pixels; real frames differ at least in their noise.

    Constant, saturated and clamped dark frames are alike by nature: they are flagged; the methods say what is wrong.
    """
    dark = {capture.name for capture in spec.captures if capture.target == DARK}
    alike: dict[str, dict[tuple[str, int, str, int], FileFacts]] = {}
    for facts in files:
        for number, page in enumerate(facts.pages):
            if page.constant is not None:
                _add(marks, facts, f"{facts.file}: every pixel is {page.constant:g} DN")
            elif page.clamped and dark.issuperset(facts.captures):
                _add(marks, facts, f"{facts.file}: nearly every pixel is 0 DN, the dark signal is clamped")
            elif page.saturated:
                _add(marks, facts, f"{facts.file}: nearly every pixel lies at the white level")
            else:
                same = alike.setdefault(page.pixels_sha256, {})
                same.setdefault((facts.serial, facts.attempt, facts.file, number), facts)
    users = _users(files)
    sequences = {capture.name for capture in spec.captures if capture.target == SEQUENCE}
    for same in alike.values():
        if len(same) < 2:
            continue
        captures = {(key[0], key[1], capture) for key in same for capture in users[key[:3]]}
        if len(captures) == 1 and next(iter(captures))[2] in sequences:
            continue  # frames that come twice are what such a capture measures
        for key, facts in same.items():
            others = [_name(other, key, same[other]) for other in same if other != key]
            which = f", page {key[3] + 1}" if len(facts.pages) > 1 else ""
            for capture in users[key[:3]]:
                sentences.put(
                    (facts.serial, facts.attempt, capture),
                    f"{facts.file}{which}: the same pixels as {some(others)}; "
                    "every frame must be captured anew; capture again what was copied",
                )


def _users(files: Sequence[FileFacts]) -> Mapping[tuple[str, int, str], list[str]]:
    """Return the captures of each file, over all cameras it is read with."""
    users: dict[tuple[str, int, str], list[str]] = {}
    for facts in files:
        users.setdefault((facts.serial, facts.attempt, facts.file), []).extend(facts.captures)
    return users


def _name(other: tuple[str, int, str, int], seen_from: tuple[str, int, str, int], facts: FileFacts) -> str:
    """Name a frame as far as it differs in unit, attempt and page from the one that is spoken of."""
    words = [f"unit {other[0]}"] if other[0] != seen_from[0] else []
    words += [f"attempt {other[1]}"] if other[:2] != seen_from[:2] else []
    words += [other[2]] if other[:3] != seen_from[:3] else []
    words += [f"page {other[3] + 1}"] if len(facts.pages) > 1 else []
    return ", ".join(words)
