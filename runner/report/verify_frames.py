"""Measures a report's unit again from its frames: the same files, the same values, the same verdicts."""

from collections.abc import Mapping
from hashlib import sha256
from pathlib import Path
from typing import Any

from runner.errors import ProbatumError
from runner.report import verify_record
from runner.report.verify_content import differing
from runner.report.verify_record import Check, Terms

SHARE_OF_U = 0.01
"""A value measured again may differ by u/100: far below what any decision rests on, far above round-off."""
RELATIVE_U = 0.01
"""So may u itself, relative to itself."""
ROUND_OFF = 1e-9
"""Relative; where u is zero."""
OF_A_CURVE = 1e-4
"""Points of a curve may differ by this part of its largest value: a fraction of a drawn line, far above round-off."""


def check_frames(document: Mapping[str, Any], frames: Path, terms: Terms) -> list[Check]:
    """Check digests, values, verdicts and pictures against what the frames give.

    Args:
        document: The signed results.
        frames: Folder of frames.
        terms: With the tool that measures.
    """
    try:
        again, pictures = terms.tools.measure_again(document, frames)
    except ProbatumError as error:
        return [Check("frames", False, f"the unit cannot be measured again: {error}")]
    except Exception as error:  # noqa: BLE001 - whatever goes wrong, the report is not confirmed
        return [Check("frames", False, f"the unit cannot be measured again: {type(error).__name__}: {error}")]
    checks = [_digests(document, again)]
    if any(one.get("station_files") for one in (document, again)):
        checks.append(_station_files(document, again))
    if checks[0].held:
        checks += [_values(document, again), _curves(document, again), _verdicts(document, again)]
        if any(one.get(kind) for one in (document, again) for kind in ("maps", "spots")):
            checks.append(_maps_and_spots(document, again))
        checks.append(_pictures(document, again, pictures))
    return checks


def _digests(document: Mapping[str, Any], again: Mapping[str, Any]) -> Check:
    def files(one: Mapping[str, Any]) -> list[dict[str, Any]]:
        keys = ("name", "attempt", "frames", "file_faults")
        return [{key: capture[key] for key in keys} for capture in one["captures"]]

    odd = differing(files(document), files(again))
    if odd:
        return Check("frames", False, f"these are not the frames of the report: {_few(odd)}")
    count = sum(len(capture["frames"]) for capture in document["captures"])
    return Check("frames", True, f"every frame has the digest of the report ({count})")


def _station_files(document: Mapping[str, Any], again: Mapping[str, Any]) -> Check:
    """Compare manifests and sidecars by digest, and what was said of each frame."""
    name = "manifests and sidecars"

    def digests(one: Mapping[str, Any]) -> dict[str, str]:
        return {f"attempt {f['attempt']}, {f['file']}": f["sha256"] for f in one.get("station_files", ())}

    stated, found = digests(document), digests(again)
    odd = sorted(file for file in stated.keys() | found.keys() if stated.get(file) != found.get(file))
    if odd:
        return Check(name, False, f"these are not those of the report: {_few(odd)}")
    said = [[capture.get("sidecar") for capture in one["captures"]] for one in (document, again)]
    words = differing(said[0], said[1])
    if words:
        return Check(name, False, f"they do not say what the report says: {_few(words)}")
    return Check(name, True, f"every manifest and sidecar has the digest of the report ({len(stated)})")


def _values(document: Mapping[str, Any], again: Mapping[str, Any]) -> Check:
    stated, found = _by_key(document["readings"]), _by_key(again["readings"])
    if stated.keys() != found.keys() or len(stated) != len(document["readings"]):
        return Check("values", False, "measured again, other readings come out than the report lists")
    odd = [f"{_words(key)}: {why}" for key in stated if (why := _other(stated[key], found[key]))]
    if odd:
        return Check("values", False, f"measured again, values differ: {_few(odd)}")
    return Check("values", True, f"every reading comes out again within u/100 ({len(stated)})")


def _other(stated: Mapping[str, Any], found: Mapping[str, Any]) -> str:
    """Tell how a reading differs, or return nothing."""
    whether = [
        (one["value"] is None, one["u"] is None, one["measured_in"], one["refusal"] is None) for one in (stated, found)
    ]
    if whether[0] != whether[1]:
        return "measured on one side only"
    if stated["refusal"] is not None and stated["refusal"]["cause"] != found["refusal"]["cause"]:
        return f"'{stated['refusal']['cause']}' stated, '{found['refusal']['cause']}' found"
    if differing(stated["bound"], found["bound"], relative=SHARE_OF_U):
        return f"bound {stated['bound']} stated, {found['bound']} found"
    if stated["value"] is None:
        return ""
    u = stated["u"] or 0.0
    allowed = max(SHARE_OF_U * u, ROUND_OFF * abs(stated["value"]))
    if abs(stated["value"] - found["value"]) > allowed:
        return f"{stated['value']:.6g} stated, {found['value']:.6g} found, u {u:.2g}"
    if abs(u - (found["u"] or 0.0)) > RELATIVE_U * u:
        return f"u {u:.3g} stated, {found['u']:.3g} found"
    return ""


def _curves(document: Mapping[str, Any], again: Mapping[str, Any]) -> Check:
    keys = ("name", "region", "capture", "attempt", "channel", "estimator")

    def by_key(one: Mapping[str, Any]) -> dict[tuple[Any, ...], dict[str, Any]]:
        return {tuple(curve[k] for k in keys): curve for curve in one["curves"]}

    stated, found = by_key(document), by_key(again)
    if stated.keys() != found.keys() or len(stated) != len(document["curves"]):
        return Check("curves", False, "measured again, other curves come out than the report lists")
    odd = [f"{key[0]} of {key[1] or 'the frame'}" for key in stated if not _alike(stated[key], found[key])]
    if odd:
        return Check("curves", False, f"measured again, curves differ: {_few(odd)}")
    return Check("curves", True, f"every curve comes out again ({len(stated)})")


def _maps_and_spots(document: Mapping[str, Any], again: Mapping[str, Any]) -> Check:
    def maps(one: Mapping[str, Any]) -> dict[str, Mapping[str, Any]]:
        keys = ("name", "region", "capture", "attempt", "channel")
        return {" ".join(str(m[k]) for k in keys): m for m in one.get("maps", ())}

    stated, found = maps(document), maps(again)
    if stated.keys() != found.keys() or document.get("spots", []) != again.get("spots", []):
        return Check("maps and spots", False, "measured again, other maps or spots come out than the report lists")
    odd = [name for name in stated if not _same_map(stated[name], found[name])]
    if odd:
        return Check("maps and spots", False, f"measured again, maps differ: {_few(odd)}")
    return Check("maps and spots", True, f"every map and spot comes out again ({len(stated) + len(found)})")


def _same_map(stated: Mapping[str, Any], found: Mapping[str, Any]) -> bool:
    fixed = ("x", "y", "axes_in", "values_in")
    if any(stated[k] != found[k] for k in fixed) or len(stated["values"]) != len(found["values"]):
        return False
    pairs = [
        pair for one, two in zip(stated["values"], found["values"], strict=True) for pair in zip(one, two, strict=True)
    ]
    allowed = OF_A_CURVE * max((abs(b) for _, b in pairs), default=0.0)
    return all(abs(a - b) <= allowed for a, b in pairs)


def _alike(stated: Mapping[str, Any], found: Mapping[str, Any]) -> bool:
    if (stated["x_in"], stated["y_in"]) != (found["x_in"], found["y_in"]):
        return False
    for axis in ("x", "y", "u"):
        one, other = stated[axis], found[axis]
        if len(one) != len(other):
            return False
        allowed = OF_A_CURVE * max((abs(v) for v in other), default=0.0)
        if any(abs(a - b) > allowed for a, b in zip(one, other, strict=True)):
            return False
    return True


def _verdicts(document: Mapping[str, Any], again: Mapping[str, Any]) -> Check:
    def verdicts(one: Mapping[str, Any]) -> dict[str, Any]:
        keys = ("characteristic", "capture", "where", "channel", "verdict", "at_fault")
        checks = [{key: check[key] for key in keys} for check in one["checks"]]
        return {"verdict": one["verdict"], "at_fault": one["at_fault"], "checks": checks}

    odd = differing(verdicts(document), verdicts(again))
    if odd:
        return Check("verdicts from frames", False, f"measured again, verdicts change: {_few(odd)}")
    return Check("verdicts from frames", True, "measured again, no verdict changes")


def _pictures(document: Mapping[str, Any], again: Mapping[str, Any], pictures: Mapping[str, bytes]) -> Check:
    """Compare by digest; where versions are the same, another picture is another frame or was painted by hand."""
    stated = {p["name"]: p["sha256"] for p in document["pictures"]}
    found = {name: sha256(data).hexdigest() for name, data in pictures.items()}
    odd = sorted(name for name in stated.keys() | found.keys() if stated.get(name) != found.get(name))
    if not odd:
        return Check("pictures", True, f"every picture comes out of the frames again byte for byte ({len(stated)})")
    words = f"painted again from the frames, these pictures differ: {', '.join(odd)}"
    if stated.keys() != found.keys() or document["program"] == again["program"]:
        return Check("pictures", False, words)
    return Check("pictures", None, words, verify_record.PICTURES)


_KEYS = ("capture", "attempt", "region", "channel", "quantity", "part", "estimator")


def _by_key(readings: list[dict[str, Any]]) -> dict[tuple[Any, ...], dict[str, Any]]:
    def parameters(reading: Mapping[str, Any]) -> tuple[Any, ...]:
        return tuple(sorted((name, *amount) for name, amount in reading["parameters"].items()))

    return {(*(reading[k] for k in _KEYS), parameters(reading)): reading for reading in readings}


def _words(key: tuple[Any, ...]) -> str:
    capture, attempt, region, _channel, quantity, *_ = key
    return f"{capture} {attempt}, {region or 'whole capture'}, {quantity}"


def _few(rows: list[str]) -> str:
    return "; ".join(rows[:3]) + (f"; and {len(rows) - 3} more" if len(rows) > 3 else "")
