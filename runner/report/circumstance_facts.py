"""The circumstances as they appear on a page: captures, frames, methods, uncertainty, deviations, machine."""

from collections.abc import Mapping, Sequence
from typing import Any

from runner.judge.sentences import extent

MOST_ROWS = 60
"""Rows of a table on paper; all others stand in results.json."""
LATIN_ENDS = 0x250
"""Characters up to here are printed as they are."""

Document = Mapping[str, Any]
Pair = tuple[str, str]


def sentence(text: str) -> str:
    """Return words with a full stop at their end."""
    plain = text.strip()
    return plain if not plain or plain[-1] in ".!?" else f"{plain}."


def capital(text: str) -> str:
    """Return words with a capital letter at their begin."""
    return text[:1].upper() + text[1:]


def first_attempts(document: Document) -> list[Mapping[str, Any]]:
    """Return each capture once, by its first attempt."""
    seen: dict[str, Mapping[str, Any]] = {}
    for capture in document["captures"]:
        seen.setdefault(capture["name"], capture)
    return list(seen.values())


def capture_title(capture: Mapping[str, Any]) -> str:
    """Return a capture's name with its target."""
    return f"{capture['name']} ({capture['target']})"


def station_fact(document: Document) -> tuple[Pair, ...]:
    """Return what the station file states."""
    station = document["station"]
    rows = [(k.replace("_", " "), str(v)) for k, v in station.items() if isinstance(v, str) and v]
    for one in station.get("instruments", ()):
        words = [f"{k} {v}" for k, v in one.items() if k != "name"]
        rows.append((str(one.get("name", "instrument")), ", ".join(words)))
    return tuple(rows)


def capture_fact(capture: Mapping[str, Any]) -> tuple[str, str, str, str]:
    """Return name, attempt, state and remarks of a capture."""
    state = "usable" if capture["usable"] else "not usable"
    remarks = [*capture["faults"], *([capital(capture["because"])] if capture["because"] else [])]
    return capture["name"], str(capture["attempt"]), state, " ".join(sentence(r) for r in remarks) or "–"


def frame_fact(capture: Mapping[str, Any], frame: Mapping[str, Any]) -> tuple[str, str, str]:
    """Return file, size and digest of a frame."""
    page = "" if frame["page"] is None else f", page {frame['page']}"
    attempt = "" if capture["attempt"] == 1 else f"attempt {capture['attempt']}: "
    rows, columns = frame["shape"][:2]
    size = f"{columns} × {rows} {frame['dtype']}" + (", simulated" if frame["simulated"] else "")
    return f"{attempt}{frame['file']}{page}", size, frame["sha256"].removeprefix("sha256:")


def station_file_fact(one: Mapping[str, Any]) -> tuple[str, str, str]:
    """Return file, kind and digest of a manifest or sidecar."""
    attempt = "" if one["attempt"] == 1 else f"attempt {one['attempt']}: "
    return f"{attempt}{one['file']}", one["kind"], one["sha256"] or "could not be read"


def said_facts(document: Document) -> tuple[tuple[str, tuple[Pair, ...]], ...]:
    """Return, by capture and attempt, what its sidecars had to say and what they said, title and rows."""
    tables = []
    for capture in document["captures"]:
        sidecar = capture.get("sidecar") or {"demanded": [], "said": []}
        rows = [("demanded", ", ".join(f"{name}: {words}" for name, words in sidecar["demanded"]) or "nothing")]
        rows += [(said["file"], _fields(said["fields"])) for said in sidecar["said"]]
        if len(rows) > 1 or sidecar["demanded"]:
            attempt = "" if capture["attempt"] == 1 else f", attempt {capture['attempt']}"
            left = len(rows) - MOST_ROWS
            more = [(f"{left} more frames", "stand in results.json")] if left > 0 else []
            tables.append((capture_title(capture) + attempt, (*rows[:MOST_ROWS], *more)))
    return tuple(tables)


def _fields(fields: Sequence[Sequence[str]]) -> str:
    """Return fields with their values, those of one sidecar together."""
    by_source: dict[str, list[str]] = {}
    for name, value, source in fields:
        by_source.setdefault(source, []).append(f"{name} {_printable(value)}")
    return "; ".join(f"{', '.join(words)} ({source})" for source, words in by_source.items())


def _printable(text: str) -> str:
    """Return a station's words with whatever the report's fonts may lack spelled as its number."""
    return "".join(c if c.isprintable() and ord(c) < LATIN_ENDS else f"\\u{ord(c):04x}" for c in text)


def methods_fact(document: Document) -> tuple[tuple[str, str, str], ...]:
    """Return title, options and sources of every module that took part."""
    rows: dict[tuple[str, str], tuple[str, str, str]] = {}
    for method in document["methods"]:
        options = ", ".join(
            f"{k.replace('_', ' ')}: {_plain(v)}" for k, v in method["options"].items() if v not in (None, [])
        )
        row = (method["title"], options or "no options", "; ".join(method["references"]))
        rows.setdefault((method["name"], options), row)
    return tuple(rows.values())


def _plain(value: Any) -> str:
    if isinstance(value, Mapping):
        return ", ".join(f"{k} {v}" for k, v in value.items())
    return f"{value:g}" if isinstance(value, float) else str(value)


def extent_of(capture: str, document: Document) -> str:
    """Return what a quantity without a region is taken of in a capture: the whole frame, or all of its regions."""
    asked = (one[capture] for one in document["spec"].get("captures", ()) if capture in one)
    return extent(regions=bool((next(asked, None) or {}).get("regions")))


def uncertainty_fact(document: Document) -> tuple[tuple[str, str, str], ...]:
    """Return the components of the readings that checks use, in themselves or as members of a combination."""
    rows = []
    for reading in document["readings"]:
        if reading["u"] and any(_uses(check, reading) for check in document["checks"]):
            parts = [f"{c['name']} {c['u']:.2g} {c['type']}" for c in reading["components"] if c["u"] > 0]
            unit = "" if reading["measured_in"] == "1" else f" {reading['measured_in']}"
            where = _where(reading, document)
            channel = "" if reading["channel"] == "mono" else f", {reading['channel']}"
            rows.append((f"{where}{channel}: {reading['label']}", f"{reading['u']:.2g}{unit}", ", ".join(parts)))
    left = len(rows) - MOST_ROWS
    return (*rows[:MOST_ROWS], *([(f"{left} more readings", "", "stand in results.json")] if left > 0 else []))


def _uses(check: Mapping[str, Any], reading: Mapping[str, Any]) -> bool:
    keys = ("capture", "attempt", "channel", "quantity", "parameters", "part", "estimator")
    same = all(check[key] == reading[key] for key in keys)
    return same and (check["where"] == reading["region"] or bool(check["steps"]))


def deviations_fact(document: Document) -> tuple[str, ...]:
    """Return deviations, warnings, remarks, files not used and earlier results."""
    rows = [*document["deviations"], *(f"Warning of the spec: {sentence(w)}" for w in document["warnings"])]
    flags: dict[str, list[str]] = {}
    for reading in document["readings"]:
        for flag in reading["flags"]:
            flags.setdefault(f"{reading['label']}: {flag}", []).append(_where(reading, document))
    rows += [sentence(f"{flag} ({', '.join(dict.fromkeys(places))})") for flag, places in flags.items()]
    if document["unused"]:
        rows.append(f"Files that no pattern used: {', '.join(document['unused'])}.")
    if document["earlier"]:
        rows.append(f"An earlier result of this unit is kept in the folder {document['earlier']}.")
    left = len(rows) - MOST_ROWS
    return (*rows[:MOST_ROWS], *([f"{left} more remarks stand in results.json."] if left > 0 else []))


def _where(reading: Mapping[str, Any], document: Document) -> str:
    return reading["region"] or f"{extent_of(reading['capture'], document)} ({reading['capture']})"


def machine_fact(program: Mapping[str, Any]) -> str:
    """Return program, versions and machine."""
    versions = ", ".join(f"{name} {version}" for name, version in program["versions"].items())
    return f"{program['name']} {program['version']}, template {program['template']}; {versions}; {program['machine']}"
