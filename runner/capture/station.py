"""What the station says of a unit's files, by its manifests and sidecars: read once, compared, and kept with digests.

An auditor who has the frames can so compare again, and sees which words were compared with what the spec asks.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from runner.capture.lot import AttemptFolder, UnitFolder
from runner.capture.manifest import manifest_faults
from runner.capture.sentences import Collector
from runner.capture.sidecar import Said, SidecarRef, faults, read_sidecar, remarks, say
from runner.errors import UsageError
from runner.spec.model import Spec

MANIFEST, SIDECAR = "manifest", "sidecar"
MOST_SHOWN = 80
"""Characters of a value as a report shows it."""


@dataclass(frozen=True)
class StationFile:
    """A file of the station's that spoke of frames."""

    attempt: int
    """Attempt."""
    file: str
    """Path relative to the attempt's folder; `../` for the unit's."""
    kind: str
    """`manifest` or `sidecar`."""
    sha256: str
    """Digest of its bytes; empty where they could not be read."""


@dataclass(frozen=True)
class FrameWords:
    """What the sidecars of one frame said of it."""

    attempt: int
    """Attempt."""
    capture: str
    """Capture."""
    file: str
    """The frame's file."""
    fields: tuple[tuple[str, str, str], ...]
    """Field, value as written, and the sidecar that said it; in the order of `FIELDS`."""


@dataclass(frozen=True)
class StationWords:
    """What the station said of one unit."""

    files: tuple[StationFile, ...] = ()
    """Manifests and sidecars, by attempt and name."""
    frames: tuple[FrameWords, ...] = ()
    """Frame by frame, as far as sidecars spoke of them."""


def station_says(
    unit: UnitFolder, spec: Spec, digests: Mapping[tuple[int, str], str], sentences: Collector, marks: Collector
) -> StationWords:
    """Note where manifests and sidecars speak against the files, or against what the spec asks for.

    Args:
        unit: Its folder.
        spec: What its captures ask of sidecars.
        digests: SHA-256 of the frames' files by attempt and file, so that none is read twice.
        sentences: Takes what makes captures unusable.
        marks: Takes what changes no verdict.
    """
    files: dict[tuple[int, str], StationFile] = {}
    frames: list[FrameWords] = []
    for attempt in unit.attempts:
        known = {file: digest for (number, file), digest in digests.items() if number == attempt.number}
        seen: dict[Path, str] = {}
        _manifests(unit.serial, attempt, spec, known, sentences, seen)
        frames += _sidecars(unit.serial, attempt, spec, sentences, marks, seen)
        refs = [(r.path, f"../{r.path.name}" if r.prefix else r.path.name, MANIFEST) for r in attempt.manifests]
        refs += [(s.path, s.file, SIDECAR) for one in attempt.frames.values() for r in one for s in r.sidecars]
        for path, file, kind in refs:
            files[attempt.number, file] = StationFile(attempt.number, file, kind, seen.get(path, ""))
    return StationWords(tuple(files[key] for key in sorted(files)), tuple(frames))


def _manifests(
    serial: str,
    attempt: AttemptFolder,
    spec: Spec,
    digests: Mapping[str, str],
    sentences: Collector,
    seen: dict[Path, str],
) -> None:
    refs = [ref for capture in spec.captures for ref in attempt.frames[capture.name]]
    used = dict.fromkeys([*(r.file for r in refs), *(s.file for r in refs for s in r.sidecars)])
    inside = [file for file in used if not file.startswith("../")]
    for sentence in [one for ref in attempt.manifests for one in manifest_faults(ref, inside, digests, seen)]:
        for capture in spec.captures:
            sentences.put((serial, attempt.number, capture.name), sentence)


def _sidecars(
    serial: str, attempt: AttemptFolder, spec: Spec, sentences: Collector, marks: Collector, seen: dict[Path, str]
) -> list[FrameWords]:
    read: dict[SidecarRef, Mapping[str, object]] = {}
    broken: dict[SidecarRef, str] = {}
    words = []
    for capture in spec.captures:
        place = (serial, attempt.number, capture.name)
        refs = attempt.frames[capture.name]
        for ref in dict.fromkeys(one for frame in refs for one in frame.sidecars):
            try:
                read[ref] = read.get(ref) or ({} if ref in broken else read_sidecar(ref, seen))
            except UsageError as error:
                broken[ref] = str(error)
            if ref in broken:
                sentences.put(place, broken[ref])
        said = [say(frame.file, frame.sidecars, read) for frame in refs]
        words += [_words(one, attempt.number, capture.name) for one in said if one.values]
        for sentence in faults(said, capture, serial, spec.unit.serial):
            sentences.put(place, sentence)
        for sentence in remarks(said, capture):
            marks.put(place, sentence)
    return words


def _words(said: Said, attempt: int, capture: str) -> FrameWords:
    fields = tuple((name, str(value)[:MOST_SHOWN], source) for name, (value, source) in said.values.items())
    return FrameWords(attempt, capture, said.file, fields)
