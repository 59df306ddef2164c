"""A folder of frames as units, attempts and captures: nothing is read here, and nothing is passed over in silence."""

import os
import re
import unicodedata
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import NoReturn

from runner.capture import manifest, sidecar
from runner.capture.manifest import ManifestRef
from runner.capture.patterns import FilePattern, natural, read_pattern
from runner.capture.sidecar import SidecarRef
from runner.errors import UsageError
from runner.spec.model import Capture, Spec
from runner.spec.serials import is_serial

_ATTEMPT = re.compile(r"attempt-0*([1-9][0-9]{0,3})")
_NEVER_FRAMES = re.compile(r"\..*|.*\.(part|partial|tmp|crdownload)|.*~|thumbs\.db|desktop\.ini", re.IGNORECASE)
"""Hidden files, copies still under way and what file managers leave behind."""


@dataclass(frozen=True)
class FrameRef:
    """A file that is to be read for a capture."""

    path: Path
    """Where it lies."""
    file: str
    """Path relative to the attempt's folder, with `/`."""
    axes: Mapping[str, str] = field(default_factory=dict)
    """Named parts of the file pattern."""
    sidecars: tuple[SidecarRef, ...] = ()
    """What says how it was taken, the nearest first."""


@dataclass(frozen=True)
class AttemptFolder:
    """The frames of one attempt."""

    number: int
    """From 1."""
    folder: Path
    """Where they lie."""
    frames: Mapping[str, tuple[FrameRef, ...]]
    """Every capture of the spec by its name, its files sorted by their axes."""
    faults: Mapping[str, tuple[str, ...]]
    """Sentences by capture; a capture with any of them is not measured."""
    manifests: tuple[ManifestRef, ...] = ()
    """What the station says is complete; empty where completeness is inferred."""


@dataclass(frozen=True)
class UnitFolder:
    """One unit's folder."""

    serial: str
    """The unit."""
    folder: Path
    """Where its frames lie."""
    attempts: tuple[AttemptFolder, ...]
    """By number; at least one."""
    faults: tuple[str, ...] = ()
    """Sentences that hold for the whole unit: none of its captures is measured."""
    remarks: tuple[str, ...] = ()
    """Sentences that change no verdict, e.g. a number missing among the attempts."""
    unused: tuple[str, ...] = ()
    """Files that no pattern used, relative to `folder`; a folder that was not entered ends with `/`."""


@dataclass(frozen=True)
class Lot:
    """Everything under FRAMES."""

    root: Path
    """The folder."""
    units: tuple[UnitFolder, ...]
    """Units to judge, sorted by serial."""
    others: tuple[UnitFolder, ...] = ()
    """Units that were not asked for: compared with the others, not judged."""
    unused: tuple[str, ...] = ()
    """Files that no pattern used, relative to `root`; a folder that was not entered ends with `/`."""
    strangers: tuple[str, ...] = ()
    """A sentence for each folder that is not a unit's."""


def find_lot(frames_dir: Path, spec: Spec, units: Sequence[str] = ()) -> Lot:
    """Find the units under a folder, their attempts and the files of every capture.

    Args:
        frames_dir: One folder per unit, named by its serial. With exactly one unit asked for it may hold that unit's
            frames, or its attempts, themselves.
        spec: Serial pattern and captures.
        units: Serials asked for; empty for all.

    Returns:
        The lot, in an order that does not depend on the file system. A lot without units is nothing to judge.

    Raises:
        UsageError: The folder is not there, or a unit asked for is not in it.
    """
    folders, unused, strangers = _sort_entries(frames_dir, spec)
    wanted = sorted(set(units), key=natural)
    for serial in wanted:
        if not is_serial(spec.unit.serial, serial):
            raise UsageError(f"'{serial}' is not a serial of this spec", allowed=f"serials like {spec.unit.serial}")
    missing = [serial for serial in wanted if serial not in folders]
    if len(wanted) == 1 and missing and not folders:
        only = _unit(wanted[0], frames_dir, spec, {})
        if any(attempt.frames[name] for attempt in only.attempts for name in attempt.frames):
            return Lot(frames_dir, (only,), (), only.unused)
    if missing:
        raise UsageError(
            f"no frames of unit {', '.join(missing)}",
            where=str(frames_dir),
            allowed=f"there are {some(sorted(folders, key=natural))}" if folders else "there are no units at all",
            next_step="check the serial and the folder",
        )
    if not folders and is_serial(spec.unit.serial, frames_dir.resolve().name):
        strangers.append(
            f"{frames_dir.name} is itself the folder of a unit: give the folder above, or --unit {frames_dir.name}"
        )
    found = [_unit(serial, folders[serial], spec, folders) for serial in sorted(folders, key=natural)]
    unused += [f"{unit.serial}/{file}" for unit in found for file in unit.unused]
    judged = tuple(unit for unit in found if not wanted or unit.serial in wanted)
    others = tuple(unit for unit in found if wanted and unit.serial not in wanted)
    return Lot(frames_dir, judged, others, tuple(unused), tuple(strangers))


def _sort_entries(root: Path, spec: Spec) -> tuple[dict[str, Path], list[str], list[str]]:
    """Return the unit folders by serial, loose files, and a sentence per folder that is no unit's."""
    entries = _entries(root)
    folders, unused, strangers = dict[str, Path](), list[str](), list[str]()
    for entry in entries:
        if not entry.is_dir():
            unused.append(entry.name)
        elif entry.name.startswith("."):
            unused.append(f"{entry.name}/")
        elif is_serial(spec.unit.serial, entry.name):
            folders[entry.name] = entry
        else:
            strangers.append(f"{entry.name}/ is not a unit: its name is no serial like {spec.unit.serial}")
    return folders, unused, strangers


def _unit(serial: str, folder: Path, spec: Spec, folders: Mapping[str, Path]) -> UnitFolder:
    """Return a unit with its attempts; `folders` are all units of the lot."""
    faults = [
        f"the folders {serial} and {twin} differ only in case or spelling; find out which unit it is, keep one of them"
        for twin in sorted(folders, key=natural)
        if twin != serial and fold(twin) == fold(serial)
    ]
    attempts, loose, skipped = _attempt_folders(folder)
    if not attempts:
        attempts = [(1, folder)]
    elif any(pattern.match(file) is not None for pattern in _patterns(spec).values() for file in loose):
        faults.append(
            f"frames lie both in the folder of {serial} itself and in its attempt folders; "
            "put each attempt's frames into a folder of its own"
        )
    numbers = [number for number, _ in attempts]
    for number in sorted({n for n in numbers if numbers.count(n) > 1}):
        names = " and ".join(path.name for n, path in attempts if n == number)
        faults.append(f"the folders {names} both claim to be attempt {number}; number the attempts anew")
    gaps = [n for n in range(1, max(numbers)) if n not in numbers]
    remarks = [f"attempt {', '.join(map(str, gaps))} of {serial} is not there"] if gaps else []
    shared = _Shared() if attempts == [(1, folder)] else _shared(folder, loose)
    unused = [] if attempts == [(1, folder)] else [f for f in loose if f not in shared.names] + skipped
    found = []
    for number, place in attempts:
        attempt, left = _attempt(number, place, spec, shared)
        found.append(attempt)
        unused += left if place == folder else [f"{place.name}/{file}" for file in left]
    return UnitFolder(serial, folder, tuple(found), tuple(faults), tuple(remarks), tuple(unused))


def _entries(folder: Path) -> list[Path]:
    """Return what lies in a folder, in people's order."""
    try:
        return sorted(folder.iterdir(), key=lambda entry: natural(entry.name))
    except OSError as error:
        raise _unreadable(error, folder) from error


def _unreadable(error: OSError, folder: Path) -> UsageError:
    return UsageError(
        f"the folder of frames cannot be read: {(error.strerror or 'cannot be read').lower()}",
        where=str(error.filename or folder),
        allowed="a folder with one folder per unit, named by its serial",
        next_step="check that it is there and readable, with all folders in it",
    )


def _attempt_folders(folder: Path) -> tuple[list[tuple[int, Path]], list[str], list[str]]:
    """Return the attempts by number, and what lies beside them: files, and folders that were not entered."""
    attempts, files, skipped = [], [], []
    for entry in _entries(folder):
        number = _ATTEMPT.fullmatch(entry.name)
        if number and entry.is_dir():
            attempts.append((int(number[1]), entry))
        elif entry.is_dir():
            skipped.append(f"{entry.name}/")
        else:
            files.append(entry.name)
    return sorted(attempts), files, skipped


@dataclass(frozen=True)
class _Shared:
    names: tuple[str, ...] = ()
    """Files beside the attempt folders that speak of all of them."""
    sidecars: tuple[SidecarRef, ...] = ()
    """The unit's sidecar."""
    manifests: tuple[Path, ...] = ()
    """The unit's manifests."""


def _shared(folder: Path, loose: Sequence[str]) -> _Shared:
    said = sidecar.shared(loose)
    listed = [name for name in loose if name in manifest.NAMES]
    refs = tuple(SidecarRef(folder / name, f"../{name}") for name in said)
    return _Shared((*said, *listed), refs, tuple(folder / name for name in listed))


def _attempt(number: int, folder: Path, spec: Spec, shared: _Shared) -> tuple[AttemptFolder, list[str]]:
    everything, left = _files(folder)
    texts = [file for file in everything if sidecar.is_sidecar(file) or file in manifest.NAMES]
    files = [file for file in everything if file not in texts]
    said: set[str] = {file for file in texts if file in manifest.NAMES}
    frames: dict[str, tuple[FrameRef, ...]] = {}
    users: dict[str, list[str]] = {}
    for name, pattern in _patterns(spec).items():
        axes = {file: found for file in files if (found := pattern.match(file)) is not None}
        beside = {file: sidecar.beside(file, (t for t in texts if t not in manifest.NAMES)) for file in axes}
        said.update(*beside.values())
        refs = [
            FrameRef(
                folder / file,
                file,
                found,
                (*(SidecarRef(folder / name, name) for name in beside[file]), *shared.sidecars),
            )
            for file, found in axes.items()
        ]
        frames[name] = tuple(sorted(refs, key=lambda ref: [natural(v) for v in (*ref.axes.values(), ref.file)]))
        for file in axes:
            users.setdefault(file, []).append(name)
    for capture in spec.captures:
        frames.setdefault(capture.name, frames.get(source_of(capture, spec), ()))
    faults = {c.name: tuple(_faults(c, spec, frames[c.name], users)) for c in spec.captures}
    left += [file for file in everything if file not in users and file not in said]
    in_order = {capture.name: frames[capture.name] for capture in spec.captures}
    own = tuple(ManifestRef(folder / name) for name in manifest.NAMES if name in texts)
    above = tuple(ManifestRef(path, f"{folder.name}/") for path in shared.manifests)
    return AttemptFolder(number, folder, in_order, faults, own or above), sorted(left, key=natural)


def _faults(capture: Capture, spec: Spec, refs: Iterable[FrameRef], users: Mapping[str, list[str]]) -> Iterable[str]:
    refs, source = tuple(refs), source_of(capture, spec)
    if not refs:
        pattern = next((c.frames.names for c in spec.captures if c.name == source and c.frames), "")
        yield f"there is no frame '{pattern}'; capture '{capture.name}' again"
    for ref in refs:
        rivals = [name for name in users[ref.file] if name != source]
        if rivals:
            yield (
                f"{ref.file}: the captures '{source}' and '{rivals[0]}' both claim it; "
                "make their file patterns differ, or say same_frames_as in the spec"
            )


def source_of(capture: Capture, spec: Spec) -> str:
    """Return the name of the capture whose files this one uses: its own, or at the end of `same_frames_as`."""
    by_name = {c.name: c for c in spec.captures}
    name, steps = capture.name, 0
    while (onward := by_name[name].same_frames_as) is not None and steps < len(by_name):
        name, steps = onward, steps + 1
    return name


def count_fault(capture: Capture, refs: Sequence[FrameRef], frames: int) -> str | None:
    """Return the sentence about a lost or surplus frame, or None if the count is right or not asked.

    Args:
        capture: With its pattern and count.
        refs: The files found.
        frames: How many frames they hold; each page of a multi-page file is one.
    """
    wanted = capture.frames.count if capture.frames else None
    if wanted is None or frames == wanted or not refs or capture.frames is None:
        return None
    if frames > wanted:
        return f"{frames} frames '{capture.frames.names}', the spec asks for {wanted}; remove what does not belong"
    gap = _gap(read_pattern(capture.frames.names), refs)
    return f"{frames} of {wanted} frames '{capture.frames.names}'{gap}; copy what is missing, or capture again"


def _gap(pattern: FilePattern, refs: Sequence[FrameRef]) -> str:
    """Name what is missing between consecutive whole numbers of a single named part."""
    if len(pattern.axes) != 1:
        return ""
    values = [ref.axes[pattern.axes[0]] for ref in refs]
    if not all(value.isdecimal() and value.isascii() and len(value) < 7 for value in values):
        return ""
    there = {int(value) for value in values}
    lost = [n for n in range(min(1, *there), max(there)) if n not in there]
    return f", {pattern.axes[0]} {some([str(n) for n in lost])} missing" if lost else ""


def _files(folder: Path) -> tuple[list[str], list[str]]:
    """Return every file below a folder that may be a frame, and the rest; linked folders are not entered."""
    files: list[str] = []
    rest: list[str] = []

    def stop(error: OSError) -> NoReturn:  # left to itself, the walk passes over what it cannot read
        raise _unreadable(error, folder) from error

    for place, folders, names in os.walk(folder, onerror=stop):
        prefix = Path(place).relative_to(folder).as_posix()
        prefix = "" if prefix == "." else f"{prefix}/"
        shut = [name for name in folders if name.startswith(".") or (Path(place) / name).is_symlink()]
        folders[:] = [name for name in folders if name not in shut]
        rest += [f"{prefix}{name}/" for name in shut]
        for name in names:
            (rest if _NEVER_FRAMES.fullmatch(name) else files).append(prefix + name)
    return sorted(files, key=natural), rest


def _patterns(spec: Spec) -> dict[str, FilePattern]:
    return {capture.name: read_pattern(capture.frames.names) for capture in spec.captures if capture.frames}


def fold(serial: str) -> str:
    """Return a serial without differences of case and of Unicode spelling."""
    return unicodedata.normalize("NFKC", serial).casefold()


def some(names: Sequence[str]) -> str:
    """Return the first five of some names in one line, and how many more there are."""
    return ", ".join(names[:5]) + (f" and {len(names) - 5} more" if len(names) > 5 else "")
