"""Sidecars: small files beside the frames in which the station says how they were taken, held against the spec.

For `chart-1.tif` these are `chart-1.json` (or .yaml, .yml), then `unit.json` of the attempt, then that of the unit;
what the nearest one says counts. Units and numbers are written as in a spec. Fields that are not known are left alone.
"""

import json
from collections.abc import Iterable, Mapping, Sequence
from contextlib import suppress
from dataclasses import dataclass, field
from datetime import UTC, datetime
from hashlib import sha256
from pathlib import Path, PurePosixPath
from typing import Any

from runner.errors import UsageError
from runner.spec import units
from runner.spec.files import FIELDS, Agreed
from runner.spec.model import Amount, Capture
from runner.spec.serials import is_serial
from runner.spec.tree import Complaints, parse, plain_data

ENDINGS = (".json", ".yaml", ".yml")
"""Files of these endings are never frames."""
SHARED = "unit"
"""Stem of the sidecar of all frames of an attempt or unit."""
MAX_BYTES = 1_000_000
MARKED, MARK = "probatum", "simulated frame"
"""Field and value by which a sidecar says that frames are rehearsed: headerless files cannot say so themselves."""
SEQUENCE = "frame sequence"
"""The target that measures lost and repeated frames: their counters are no fault of the capture."""
CAPTURE_AGAIN = "set the station as the spec says, and capture again"
_KINDS = {"exposure": ("time",), "position": ("length",), "gain": ("decibel", "ratio"), "temperature": ("temperature",)}
_EXAMPLES = {
    "exposure": "2 ms",
    "gain": "6 dB",
    "level": "50 %",
    "position": "1.25 mm",
    "temperature": "23.5 degC",
    "counter": "17",
}
_EXAMPLES |= {"time": "2026-12-01T09:30:00Z", "serial": "the unit's serial"}


@dataclass(frozen=True)
class SidecarRef:
    """A sidecar that says something of a frame."""

    path: Path
    """Where it lies."""
    file: str
    """Path relative to the attempt's folder, with `/`; `../` for the unit's."""


@dataclass(frozen=True)
class Said:
    """What a frame's sidecars say together."""

    file: str
    """The frame's file."""
    values: Mapping[str, tuple[Any, str]] = field(default_factory=dict)
    """Value and the sidecar that says it, by field."""


def is_sidecar(file: str) -> bool:
    """Tell whether a file is text about frames and never a frame."""
    return file.lower().endswith(ENDINGS)


def beside(file: str, files: Iterable[str]) -> list[str]:
    """Return the sidecars of one frame among the files of its attempt: its own, then the attempt's."""
    path = PurePosixPath(file)
    own = {str(path.with_suffix(ending)) for ending in ENDINGS} | {f"{file}{ending}" for ending in ENDINGS}
    there = sorted(files)
    return [name for name in there if name in own] + shared(there)


def shared(files: Iterable[str]) -> list[str]:
    """Return the sidecars that speak of every frame of a folder."""
    return [name for name in files if name in {f"{SHARED}{ending}" for ending in ENDINGS}]


def read_sidecar(ref: SidecarRef, seen: dict[Path, str] | None = None) -> dict[str, Any]:
    """Read a sidecar as plain data.

    Args:
        ref: Where it lies.
        seen: Is told the SHA-256 of the bytes that were read.

    Raises:
        UsageError: It cannot be read, or is no mapping of fields to values.
    """
    step = "let the copying end, or mend what writes it"
    try:
        with ref.path.open("rb") as stream:
            data = stream.read(MAX_BYTES + 1)
        if seen is not None:
            seen[ref.path] = sha256(data).hexdigest()
        text = data.decode("utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        reason = error.strerror if isinstance(error, OSError) else "it is not UTF-8 text"
        raise UsageError(
            f"the sidecar cannot be read ({str(reason).lower()})", where=ref.file, next_step=step
        ) from error
    if len(data) > MAX_BYTES or not text.strip(" \t\r\n\0"):
        found = "is empty" if len(data) <= MAX_BYTES else f"is larger than {MAX_BYTES // 1_000_000} MB"
        raise UsageError(f"the sidecar {found}", where=ref.file, next_step=step)
    try:
        fields = _json(text) if ref.file.lower().endswith(".json") else _yaml(text, ref.file)
    except (ValueError, RecursionError) as error:
        reason = " ".join(str(error).split())[:200]
        raise UsageError(f"the sidecar cannot be read ({reason})", where=ref.file, next_step=step) from error
    if not isinstance(fields, dict):
        raise UsageError("the sidecar is no mapping of fields to values", where=ref.file, next_step=step)
    return fields


def _json(text: str) -> Any:
    def once(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        names = [name for name, _ in pairs]
        for name in names:
            if names.count(name) > 1:
                raise ValueError(f"'{name}' stands twice")
        return dict(pairs)

    return json.loads(text, object_pairs_hook=once)


def _yaml(text: str, label: str) -> Any:
    complaints = Complaints()
    tree = parse(text, label, complaints)
    for complaint in complaints.sorted("error"):
        raise ValueError(complaint.found)
    return plain_data(tree)


def say(file: str, refs: Sequence[SidecarRef], read: Mapping[SidecarRef, Mapping[str, Any]]) -> Said:
    """Return what sidecars say of a frame, the nearest one first."""
    values: dict[str, tuple[Any, str]] = {}
    for ref in refs:
        for name in FIELDS:
            if name in read.get(ref, {}):
                values.setdefault(name, (read[ref][name], ref.file))
    return Said(file, values)


def hear(refs: Sequence[SidecarRef], heard: dict[SidecarRef, dict[str, Any]]) -> None:
    """Read sidecars that have not been heard yet; one that cannot be read says nothing here: the survey tells of it."""
    for ref in refs:
        if ref not in heard:
            heard[ref] = {}
            with suppress(UsageError):
                heard[ref] = read_sidecar(ref)


def simulated(refs: Sequence[SidecarRef], heard: Mapping[SidecarRef, Mapping[str, Any]]) -> bool:
    """Tell whether one of a frame's sidecars marks it as rehearsed; nothing nearer can take the mark away."""
    return any(str(heard[ref].get(MARKED, "")).strip().casefold() == MARK for ref in refs)


def amounts(refs: Sequence[SidecarRef], heard: Mapping[SidecarRef, Mapping[str, Any]]) -> dict[str, Amount]:
    """Return what a frame's sidecars say in numbers, by field."""
    said = say("", refs, heard).values
    found = {name: amount for name, (value, _) in said.items() if (amount := _amount(value)) is not None}
    stamp = _stamp(said["time"][0]) if "time" in said else None
    return found | ({} if stamp is None else {"time": Amount(stamp, "s")})


def _stamp(value: Any) -> float | None:
    """Return a time stamp in seconds since 1970; one without a zone counts as UTC."""
    try:
        said = datetime.fromisoformat(value) if isinstance(value, str) else None
    except ValueError:
        return None
    if said is None:
        return None
    return (said if said.tzinfo else said.replace(tzinfo=UTC)).timestamp()


def faults(said: Sequence[Said], capture: Capture, serial: str, pattern: str) -> list[str]:
    """Return why frames of a capture cannot be evidence by what their sidecars say.

    Args:
        said: By frame, in the order of the capture.
        capture: With what it asks of sidecars.
        serial: The unit with whose frames they lie.
        pattern: What serials of units look like.
    """
    found: dict[str, None] = {}
    rule = capture.sidecar
    needed = {*rule.require, *(one.name for one in rule.agreed), *(["counter"] if rule.consecutive else [])}
    for one in said:
        for name in FIELDS:
            if name not in one.values:
                if name in needed:
                    found[f"{one.file}: no sidecar says its {name}; write {name} beside it and capture again"] = None
                continue
            value, source = one.values[name]
            sentence = _serial(value, source, serial, pattern, strict=name in needed) if name == "serial" else ""
            if name in needed and name != "serial":
                sentence = _form(name, value, source) or _disagreement(name, value, source, capture)
            if sentence:
                found[sentence] = None
    counters, jumps = _counters(said) if capture.target != SEQUENCE else ([], [])
    return [*found, *counters, *(jumps if rule.consecutive else [])]


def remarks(said: Sequence[Said], capture: Capture) -> list[str]:
    """Return jumps of counters that a capture does not refuse."""
    return [] if capture.sidecar.consecutive or capture.target == SEQUENCE else _counters(said)[1]


def _serial(value: Any, source: str, serial: str, pattern: str, *, strict: bool) -> str:
    text = str(value).strip()
    other = text.casefold() != serial.casefold() and (strict or is_serial(pattern, text))
    words = f"{source}: the sidecar says unit {text or '(nothing)'}, the frame lies with {serial}"
    return f"{words}; find out which unit it shows, and capture again" if other else ""


def _amount(value: Any) -> Amount | None:
    if isinstance(value, int | float) and not isinstance(value, bool):
        return Amount(float(value), "1")
    try:
        return units.parse_amount(value) if isinstance(value, str) else None
    except UsageError:
        return None


def _form(name: str, value: Any, source: str) -> str:
    """Return the sentence about a value that is none of its field, or nothing."""
    if name == "counter":
        good = isinstance(value, int) and not isinstance(value, bool)
    elif name == "time":
        try:
            good = isinstance(value, str) and bool(datetime.fromisoformat(value))
        except ValueError:
            good = False
    else:
        amount = _amount(value)
        good = amount is not None and units.UNITS[amount.unit].kind in _KINDS.get(
            name, (units.UNITS[amount.unit].kind,)
        )
    if good:
        return ""
    shown = str(value)[:60]
    return f"{source}: {name} is '{shown}'; write it as in a spec, for example {_EXAMPLES[name]}, and capture again"


def _disagreement(name: str, value: Any, source: str, capture: Capture) -> str:
    agreed = next((one for one in capture.sidecar.agreed if one.name == name), None)
    amount = _amount(value)
    if agreed is None or amount is None:
        return ""
    context = units.context_of(capture.camera, capture.optics)
    try:
        found = units.convert(amount.value, amount.unit, agreed.unit, context)
    except UsageError as error:
        return f"{source}: {name} is {units.spell(amount)}, {error.found}; {CAPTURE_AGAIN}"
    slack = 1e-9 * abs(found)  # decimals that convert do not come out to the last bit
    low = agreed.at_least is not None and found < agreed.at_least - slack
    high = agreed.at_most is not None and found > agreed.at_most + slack
    if not (low or high):
        return ""
    return f"{source}: {name} is {units.spell(amount)}, the spec asks for {agreed_words(agreed)}; {CAPTURE_AGAIN}"


def agreed_words(agreed: Agreed) -> str:
    """Return what a field must be, as a person would write it."""
    low, high = (
        "" if end is None else units.spell(Amount(end, agreed.unit)) for end in (agreed.at_least, agreed.at_most)
    )
    if low == high:
        return low
    return f"{low} to {high}" if low and high else f"at least {low}" if low else f"at most {high}"


def _counters(said: Sequence[Said]) -> tuple[list[str], list[str]]:
    """Return sentences about counters that stand twice, and about those that jump or go back."""
    twice, jumps = [], []
    seen: dict[int, str] = {}
    before: tuple[int, str] | None = None
    for one in said:
        value, source = one.values.get("counter", (None, ""))
        if not isinstance(value, int) or isinstance(value, bool) or PurePosixPath(source).stem == SHARED:
            continue
        if value in seen:
            twice.append(f"{one.file}: counter {value} as in {seen[value]}: one frame twice; capture again")
        elif before is not None and value != before[0] + 1:
            words = f"{value - before[0] - 1} frames are lost" if value > before[0] else "the frames are out of order"
            jumps.append(f"{one.file}: counter {value} follows {before[0]} of {before[1]}: {words}; capture again")
        seen.setdefault(value, one.file)
        before = (value, one.file)
    return twice, jumps
