"""The station's manifest: written last, it says which files are complete; where it is there, it is the truth.

Two forms: `manifest.json`, `{"count": 2, "files": [{"name": "chart-1.tif", "size": 38400, "sha256": "…"}, …]}`, and
`manifest.sha256`, the lines of `sha256sum` (GNU Coreutils manual, "md5sum invocation"), which has no sizes.
"""

import json
import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from hashlib import file_digest, sha256
from pathlib import Path
from typing import Any

from runner.errors import UsageError

NAMES = ("manifest.json", "manifest.sha256")
MAX_BYTES = 100_000_000
_LINE = re.compile(r"([0-9a-fA-F]{64}) [ *](.+)")
COPY_AGAIN = "let the copying end, or copy the unit's files again from the station"


@dataclass(frozen=True)
class ManifestRef:
    """A manifest that speaks of an attempt's files."""

    path: Path
    """Where it lies."""
    prefix: str = ""
    """What its names begin with for this attempt, e.g. `attempt-2/`; empty if it lies in the attempt's folder."""


@dataclass(frozen=True)
class Entry:
    """One listed file."""

    sha256: str
    """Digest of its bytes, lower case."""
    size: int | None
    """Its bytes, or None where the form has no sizes."""


def read_manifest(path: Path, seen: dict[Path, str] | None = None) -> dict[str, Entry]:
    """Return the listed files by their names, relative to the manifest's folder.

    Args:
        path: Where it lies.
        seen: Is told the SHA-256 of the bytes that were read.

    Raises:
        UsageError: It cannot be read, or is not whole.
    """
    try:
        with path.open("rb") as stream:
            data = stream.read(MAX_BYTES + 1)
        if seen is not None:
            seen[path] = sha256(data).hexdigest()
        text = data[:MAX_BYTES].decode("utf-8")  # cut, it is refused like any list that is not whole
        pairs = _json(text) if path.suffix == ".json" else _lines(text)
    except (OSError, ValueError, RecursionError) as error:
        reason = error.strerror if isinstance(error, OSError) else " ".join(str(error).split())[:200]
        raise UsageError(
            f"the manifest cannot be used ({str(reason).lower()})", where=path.name, next_step=COPY_AGAIN
        ) from error
    return pairs


def _json(text: str) -> dict[str, Entry]:
    content = json.loads(text)
    files = content.get("files") if isinstance(content, dict) else None
    if not isinstance(files, list) or not isinstance(content.get("count"), int):
        raise ValueError("it has no count and list of files")  # noqa: TRY004 - what is wrong is the file, not a type
    if content["count"] != len(files):
        raise ValueError(f"it counts {content['count']} files and lists {len(files)}")
    return _once(_entry(one) for one in files)


def _entry(one: Any) -> tuple[str, Entry]:
    name, size, digest = (one.get(key) if isinstance(one, dict) else None for key in ("name", "size", "sha256"))
    if not isinstance(name, str) or not isinstance(digest, str) or not re.fullmatch("[0-9a-fA-F]{64}", digest):
        raise ValueError("an entry lacks its name or its sha256 of 64 digits")
    if not isinstance(size, int) or isinstance(size, bool) or size < 0:
        raise ValueError(f"the entry of {name} has no size in bytes")
    return name, Entry(digest.lower(), size)


def _lines(text: str) -> dict[str, Entry]:
    if not text.endswith("\n"):
        raise ValueError("its last line is not complete")
    found = []
    for number, line in enumerate(text.splitlines(), 1):
        match = _LINE.fullmatch(line)
        if match is None:
            raise ValueError(f"line {number} is not a digest of 64 digits and a name")
        found.append((match[2], Entry(match[1].lower(), None)))
    return _once(found)


def _once(pairs: Iterable[tuple[str, Entry]]) -> dict[str, Entry]:
    found: dict[str, Entry] = {}
    for name, entry in pairs:
        plain = name.removeprefix("./")
        if plain in found:
            raise ValueError(f"{plain} is listed twice")
        if plain.startswith("/") or "\\" in plain or any(part in {"", ".", ".."} for part in plain.split("/")):
            raise ValueError(f"'{plain}' is no path inside the folder")
        found[plain] = entry
    if not found:
        raise ValueError("it lists nothing")
    return found


def manifest_faults(
    ref: ManifestRef, used: Iterable[str], digests: Mapping[str, str], seen: dict[Path, str] | None = None
) -> list[str]:
    """Return why an attempt is not what its station finished.

    Args:
        ref: The manifest.
        used: Files of the attempt that captures use, relative to its folder.
        digests: SHA-256 of those that have been read, so that no file is read twice.
        seen: Is told the SHA-256 of the manifest itself.
    """
    name = ref.path.name
    try:
        listed = read_manifest(ref.path, seen)
    except UsageError as error:
        return [str(error)]
    mine = {file.removeprefix(ref.prefix): entry for file, entry in listed.items() if file.startswith(ref.prefix)}
    folder = ref.path.parent / ref.prefix
    found = [
        f"{name}: {file} {words}; {COPY_AGAIN}"
        for file, entry in mine.items()
        if (words := _mismatch(folder / file, entry, digests.get(file)))
    ]
    extra = [file for file in used if file not in mine]
    step = "take it away if it does not belong to the unit, or capture again"
    return found + [f"{name}: {file} is not listed: it came after the station had finished; {step}" for file in extra]


def _mismatch(path: Path, entry: Entry, digest: str | None) -> str:
    """Return what is wrong with one listed file, or nothing."""
    try:
        size = path.stat().st_size
        if not path.is_file():
            return "is listed and not a file"
        if entry.size is not None and size != entry.size:
            return f"has {size} bytes, listed are {entry.size}"
        if digest is None:
            with path.open("rb") as stream:
                digest = file_digest(stream, "sha256").hexdigest()
    except OSError:
        return "is listed and not there, or cannot be read"
    return "" if digest == entry.sha256 else "is not the file that was listed: its SHA-256 differs"
