"""Files that appear whole or not at all, and the folder of a run."""

import contextlib
import errno
import fcntl
import json
import os
import shutil
import tempfile
from collections.abc import Iterator, Mapping
from hashlib import sha256
from pathlib import Path
from typing import Any

from runner.errors import StorageError, UsageError

RESULTS = "results.json"
HTML = "report.html"
HTML_SIGNATURE = "report.html.p7s"
PDF = "report.pdf"
PICTURES = "pictures"
EARLIER = "earlier"
RUN = "run.json"
FULL = frozenset({errno.ENOSPC, errno.EDQUOT})
"""What the system says when there is no room left."""
_MAKING = ".making-"
_READY = ".ready"
_RUN_LOCK = ".lock"
_UNITS_LOCK = ".lock-units"


def write_whole(path: Path, data: bytes) -> None:
    """Write a file beside its place, flush it to the disk and rename it into place; folders are made as needed."""
    path.parent.mkdir(parents=True, exist_ok=True)
    _write_beside(path, data)


def _write_beside(path: Path, data: bytes) -> None:
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.")
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(data)
            file.flush()
            os.fsync(file.fileno())
        Path(name).chmod(0o644)
        Path(name).replace(path)
    except BaseException:
        Path(name).unlink(missing_ok=True)
        raise
    _flush_folder(path.parent)


def _flush_folder(folder: Path) -> None:
    """Flush a folder's entries, so that a rename outlives a power cut; some network file systems cannot do it."""
    handle = os.open(folder, os.O_RDONLY)
    try:
        with contextlib.suppress(OSError):
            os.fsync(handle)
    finally:
        os.close(handle)


def write_unit(out: Path, serial: str, files: Mapping[str, bytes]) -> Path:
    """Write a unit's folder whole; an older one moves into the new one's `earlier/<time>/`.

    Args:
        out: Folder of the run.
        serial: The unit.
        files: Contents by path relative to the unit's folder.
    """
    making = out / f"{_MAKING}{serial}"
    finish(out, serial)
    shutil.rmtree(making, ignore_errors=True)
    making.mkdir()  # without its parents: a run's folder that is gone must not come back with half of its units
    for name, data in files.items():
        (making / name).parent.mkdir(exist_ok=True)
        _write_beside(making / name, data)
    (making / _READY).touch()
    return finish(out, serial)


def finish(out: Path, serial: str) -> Path:
    """Bring a folder that was made whole into its place; also one that a killed run left ready.

    An older folder moves below the new one, with all that was below itself. Each step is one rename, and every
    order of steps can be taken up again, so that nothing is lost wherever the run was cut off.
    """
    place, making = out / serial, out / f"{_MAKING}{serial}"
    if not (making / _READY).exists():
        (place / _READY).unlink(missing_ok=True)  # a run that was killed between the last two steps left it
        return place
    (making / EARLIER).mkdir(exist_ok=True)
    if place.exists():
        name = earlier_name(out, serial, taken=making)
        if (place / EARLIER).exists():
            for folder in sorted((place / EARLIER).iterdir()):
                folder.rename(making / EARLIER / folder.name)
            (place / EARLIER).rmdir()
        place.rename(making / name)
    if not any((making / EARLIER).iterdir()):
        (making / EARLIER).rmdir()
    making.rename(place)
    (place / _READY).unlink()
    _flush_folder(out)
    return place


def earlier_name(out: Path, serial: str, *, taken: Path | None = None) -> str:
    """Return where the unit's present files go when new ones take their place, below the unit's folder.

    Args:
        out: Folder of the run.
        serial: The unit.
        taken: Another folder whose names are taken too.
    """
    place = out / serial
    old = read_results(place)
    stamp = "".join(c for c in str(old.get("time", "")) if c.isalnum()) if old else ""
    base = name = f"{EARLIER}/{stamp or 'unreadable'}"
    n = 2
    while (place / name).exists() or (taken is not None and (taken / name).exists()):
        name, n = f"{base}-{n}", n + 1
    return name


def read_results(folder: Path) -> dict[str, Any] | None:
    """Return a unit folder's results, or None when there are none that can be read."""
    try:
        document = json.loads((folder / RESULTS).read_bytes())
    except (OSError, ValueError):
        return None
    return document if isinstance(document, dict) else None


def is_complete(folder: Path, document: Mapping[str, Any]) -> bool:
    """Tell whether every file of a unit's folder is there."""
    names = [RESULTS, HTML, HTML_SIGNATURE, PDF, *(f"{PICTURES}/{p['name']}" for p in document.get("pictures", ()))]
    return all((folder / name).is_file() for name in names)


def each_result(out: Path, digest: str) -> Iterator[dict[str, Any]]:
    """Yield the results of every unit of one spec in a run's folder, in the order of its folders, one at a time."""
    for folder in sorted(p for p in out.iterdir() if p.is_dir() and not p.name.startswith(".")):
        document = read_results(folder)
        if document is not None and document.get("document", {}).get("digest") == digest:
            yield document


@contextlib.contextmanager
def locked(out: Path) -> Iterator[None]:
    """Hold the run folder's lock, so that two runs into one folder do not write the lot's files at once.

    Whoever holds it also clears away what a killed run left half written beside the lot's files.
    """
    with (out / _RUN_LOCK).open("w") as file:
        fcntl.flock(file, fcntl.LOCK_EX)
        for name in out.glob(".*.*.????????"):
            if name.is_file():
                name.unlink(missing_ok=True)
        yield


@contextlib.contextmanager
def unit_locked(out: Path, serial: str) -> Iterator[None]:
    """Hold one unit's lock, so that of two runs into one folder the second waits and finds the unit done.

    It is a byte of one file, at a place that the serial gives; the system lets go of it when a process dies. A process
    holds at most one of them at a time, since closing the file gives up all of its locks.
    """
    place = int.from_bytes(sha256(serial.encode()).digest()[:7], "big")
    with (out / _UNITS_LOCK).open("r+b" if (out / _UNITS_LOCK).exists() else "a+b") as file:
        fcntl.lockf(file, fcntl.LOCK_EX, 1, place)
        yield


def start_run(out: Path, facts: Mapping[str, Any]) -> dict[str, Any]:
    """Fix a run's facts at its first start; a rerun takes them from there.

    Raises:
        UsageError: The folder holds a run of another spec, program or station, or cannot be written.
        StorageError: There is no room in it.
    """
    try:
        out.mkdir(parents=True, exist_ok=True)
        with locked(out):
            path = out / RUN
            if not path.exists():
                write_whole(path, json.dumps(facts, indent=1, sort_keys=True, ensure_ascii=False).encode() + b"\n")
                return dict(facts)
            kept = json.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        kind = StorageError if error.errno in FULL else UsageError
        step = "make room and run again, or choose another --out" if error.errno in FULL else "choose another --out"
        raise kind(f"the folder cannot be written: {error.strerror}", where=str(out), next_step=step) from error
    except ValueError as error:
        raise UsageError(f"{RUN} cannot be read: {error}", where=str(out), next_step="choose another --out") from error
    differing = [k for k in facts if k != "time" and kept.get(k) != facts[k]]
    if differing:
        raise UsageError(
            f"it holds a run with another {', '.join(differing)}",
            where=str(out),
            allowed="one folder keeps one run: the same spec, program, options and station",
            next_step="choose another --out",
        )
    return dict(kept)
