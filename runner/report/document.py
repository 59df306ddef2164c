"""`results.json`: the one document from which everything in a report comes, and the way back for re-judging."""

import ctypes
import json
import platform
import zlib
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from functools import cache
from importlib import metadata
from typing import Any

import runner
from runner.capture.station import StationWords
from runner.errors import VerificationRefused
from runner.judge.verdict import Check, Judgement
from runner.measure.evidence import CaptureEvidence, FrameFact, RegionFact, UnitEvidence
from runner.measure.plan import Plan
from runner.measure.reading import Component, Reading, Refusal, Spot
from runner.report.conditions import conditions, deviations, methods
from runner.report.plotted import curve_back, curve_data, map_back, map_data
from runner.report.station_words import sidecar_data, station_back, station_data
from runner.spec.build import from_expanded
from runner.spec.model import Amount, Spec, Station
from runner.spec.revision import canonical_json

FORMAT = "probatum-results/1"
TEMPLATE = "1"
"""Edition of the templates that print it."""
LIBRARIES = (
    "numpy",
    "scipy",
    "scikit-image",
    "pillow",
    "tifffile",
    "imagecodecs",
    "weasyprint",
    "pydyf",
    "pikepdf",
    "pyhanko",
)
"""What a measured or printed digit may depend on."""
SHARED = {
    "pango": ("libpango-1.0.so.0", "pango_version_string"),
    "harfbuzz": ("libharfbuzz.so.0", "hb_version_string"),
}
"""Libraries of the system on which a printed page's bytes depend: file, and the function that tells its version."""


@dataclass(frozen=True)
class RunFacts:
    """What one run states about all of its units."""

    time: str
    """Time of the verdict, ISO 8601 UTC."""
    lot: str = ""
    """Lot."""
    operator: str = ""
    """Operator."""
    station: Station = field(default_factory=Station)
    """Station."""


def program() -> dict[str, Any]:
    """Return the program, its libraries and the kind of machine."""
    return {
        "name": "probatum",
        "version": runner.__version__,
        "template": TEMPLATE,
        "versions": {"python": platform.python_version(), "zlib": zlib.ZLIB_RUNTIME_VERSION}
        | {name: _version(name) for name in LIBRARIES}
        | {name: _shared_version(*where) for name, where in SHARED.items()},
        "machine": f"{platform.system()} {platform.machine()}",
    }


_version = cache(metadata.version)
"""Version of an installed library; reading it from the disk for every unit takes as long as the whole HTML page."""


@cache
def _shared_version(file: str, function: str) -> str:
    """Return what a shared library says of itself, or `unknown` where it goes by another name."""
    try:
        ask = getattr(ctypes.CDLL(file), function)
    except (OSError, AttributeError):
        return "unknown"
    ask.restype = ctypes.c_char_p
    return str(ask().decode())


def to_document(
    plan: Plan,
    evidence: UnitEvidence,
    judgement: Judgement,
    facts: RunFacts,
    *,
    unused: tuple[str, ...] = (),
    pictures: tuple[Mapping[str, Any], ...] = (),
    earlier: str | None = None,
) -> dict[str, Any]:
    """Return one unit's results as plain JSON data.

    Args:
        plan: The bound spec.
        evidence: What was measured.
        judgement: What was decided.
        facts: What the run states.
        unused: Files of the unit that no pattern used.
        pictures: Name, kind, capture and digest of each picture.
        earlier: Folder of an older result that this one replaces.
    """
    spec = plan.spec
    return {
        "format": FORMAT,
        "program": program(),
        "document": {"number": spec.document.number, "revision": spec.document.revision, "digest": spec.digest},
        "spec": spec.expanded,
        "plan": plan.defaults(),
        "unit": {"serial": evidence.serial, "product": spec.unit.product, "lot": facts.lot},
        "station": dict(facts.station.raw) | ({"digest": facts.station.digest} if facts.station.digest else {}),
        "operator": facts.operator,
        "time": facts.time,
        "simulated": evidence.simulated,
        "verdict": judgement.verdict,
        "at_fault": judgement.at_fault,
        "because": judgement.because,
        "reasons": list(judgement.reasons),
        "next": judgement.next,
        "captures": [_capture(plan, capture, judgement, evidence.station) for capture in evidence.captures],
        "readings": [_reading(reading) for reading in evidence.readings],
        "checks": [_check(check) for check in judgement.checks],
        "curves": [curve_data(curve) for curve in evidence.curves],
        "maps": [map_data(one) for one in evidence.maps],
        "spots": [asdict(one) for one in evidence.spots],
        "pictures": [dict(picture) for picture in pictures],
        "methods": methods(plan),
        "station_files": station_data(evidence.station),
        "deviations": deviations(plan, evidence),
        "warnings": [str(warning) for warning in spec.warnings],
        "remarks": list(evidence.remarks),
        "unused": list(unused),
        "earlier": earlier,
    }


def canonical(document: Mapping[str, Any]) -> bytes:
    """Return the bytes of `results.json`: sorted keys, shortest decimals, no NaN, UTF-8, one newline at the end."""
    return canonical_json(document) + b"\n"


def parse(data: bytes, *, where: str = "results.json") -> dict[str, Any]:
    """Read `results.json` strictly.

    Raises:
        VerificationRefused: Doubled keys, NaN, another format, or bytes that are not canonical.
    """
    try:
        document = json.loads(data.decode("utf-8"), object_pairs_hook=_no_doubles, parse_constant=_no_constants)
    except (ValueError, RecursionError) as error:
        raise VerificationRefused(f"it is no strict JSON: {error}", where=where) from error
    if not isinstance(document, dict) or document.get("format") != FORMAT:
        found = document.get("format") if isinstance(document, dict) else type(document).__name__
        raise VerificationRefused(f"its format is {found!r}", where=where, allowed=f"this program reads {FORMAT}")
    if canonical(document) != data:
        raise VerificationRefused("its bytes are not in canonical form", where=where, next_step="it was rewritten")
    return document


def from_document(document: Mapping[str, Any]) -> tuple[Spec, UnitEvidence]:
    """Return spec and evidence out of a results document, so that it can be judged again without the frames.

    Raises:
        VerificationRefused: The document lacks something or holds it in another form.
    """
    try:
        spec = from_expanded(document["spec"])
        evidence = UnitEvidence(
            document["unit"]["serial"],
            tuple(_capture_back(c) for c in document["captures"]),
            tuple(_reading_back(r) for r in document["readings"]),
            tuple(curve_back(c) for c in document["curves"]),
            tuple(map_back(m) for m in document.get("maps", ())),
            tuple(Spot(**s) for s in document.get("spots", ())),
            tuple(str(remark) for remark in document.get("remarks", ())),
            bool(document["simulated"]) and not all(c["frames"] for c in document["captures"]),
            station_back(document),
        )
    except (KeyError, TypeError, ValueError, AttributeError) as error:
        raise VerificationRefused(f"it cannot be read back: {type(error).__name__}: {error}") from error
    return spec, evidence


def _no_doubles(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    keys = dict(pairs)
    if len(keys) != len(pairs):
        doubled = next(key for n, (key, _) in enumerate(pairs) if key in dict(pairs[:n]))
        raise ValueError(f"the key {doubled!r} stands twice")
    return keys


def _no_constants(word: str) -> Any:
    raise ValueError(f"{word} is not allowed")


def _amounts(parameters: Mapping[str, Amount]) -> dict[str, list[Any]]:
    return {name: [amount.value, amount.unit] for name, amount in parameters.items()}


def _amounts_back(parameters: Mapping[str, Any]) -> dict[str, Amount]:
    return {name: Amount(float(value), str(unit)) for name, (value, unit) in parameters.items()}


def _capture(plan: Plan, capture: CaptureEvidence, judgement: Judgement, station: StationWords) -> dict[str, Any]:
    state = next(s for s in judgement.captures if (s.name, s.attempt) == (capture.name, capture.attempt))
    asked = plan.spec.capture(capture.name)
    return {
        "name": capture.name,
        "attempt": capture.attempt,
        "target": capture.target,
        "usable": state.usable,
        "faults": list(state.faults),
        "at_fault": state.at_fault,
        "because": state.because,
        "file_faults": list(capture.faults),
        "frames": [
            {
                "file": f.file,
                "sha256": f.sha256,
                "shape": list(f.shape),
                "dtype": f.dtype,
                "page": f.page,
                "simulated": f.simulated,
            }
            for f in capture.frames
        ],
        "regions": [
            {
                "region": r.region,
                "found": r.found,
                "box": None if r.box is None else list(r.box),
                "outline": [[float(x), float(y)] for x, y in r.outline],
            }
            for r in capture.regions
        ],
        "conditions": conditions(asked.camera, asked.optics, asked.chart),
        "sidecar": sidecar_data(asked, capture.attempt, station),
        "chart": {"name": asked.chart.name, "serial": asked.chart.serial, "due": asked.chart.due},
    }


def _capture_back(data: Mapping[str, Any]) -> CaptureEvidence:
    return CaptureEvidence(
        data["name"],
        int(data["attempt"]),
        data["target"],
        tuple(
            FrameFact(f["file"], f["sha256"], tuple(f["shape"]), f["dtype"], f["page"], bool(f["simulated"]))
            for f in data["frames"]
        ),
        tuple(data["file_faults"]),
        tuple(
            RegionFact(
                r["region"],
                found=bool(r["found"]),
                box=None if r["box"] is None else tuple(r["box"]),
                outline=tuple((float(x), float(y)) for x, y in r["outline"]),
            )
            for r in data["regions"]
        ),
    )


def _reading(reading: Reading) -> dict[str, Any]:
    refusal = reading.refusal
    return {
        "capture": reading.capture,
        "attempt": reading.attempt,
        "region": reading.region,
        "channel": reading.channel,
        "quantity": reading.quantity,
        "parameters": _amounts(reading.parameters),
        "label": reading.label,
        "part": reading.part,
        "estimator": reading.estimator,
        "value": reading.value,
        "measured_in": reading.measured_in,
        "u": reading.u,
        "components": [
            {"name": c.name, "u": c.u, "type": c.type, "dof": c.dof, "shared": c.shared, "averages": c.averages}
            for c in reading.components
        ],
        "method": reading.method,
        "flags": list(reading.flags),
        "bound": None if reading.bound is None else list(reading.bound),
        "refusal": None if refusal is None else {"cause": refusal.cause, "because": refusal.because},
        "count": reading.count,
        "trials": reading.trials,
    }


def _reading_back(data: Mapping[str, Any]) -> Reading:
    bound, refusal = data["bound"], data["refusal"]
    return Reading(
        region=data["region"],
        quantity=data["quantity"],
        measured_in=data["measured_in"],
        value=data["value"],
        u=data["u"],
        components=tuple(
            Component(c["name"], c["u"], c["type"], c["dof"], c["shared"], bool(c["averages"]))
            for c in data["components"]
        ),
        parameters=_amounts_back(data["parameters"]),
        part=data["part"],
        estimator=data["estimator"],
        method=data["method"],
        channel=data["channel"],
        capture=data["capture"],
        attempt=int(data["attempt"]),
        bound=None if bound is None else (str(bound[0]), float(bound[1])),
        refusal=None if refusal is None else Refusal(refusal["cause"], refusal["because"]),
        count=bool(data["count"]),
        trials=data["trials"],
        flags=tuple(data["flags"]),
    )


def _number(characteristic: str) -> int | str:
    """Return a plain number as one; `010` and the like stay text, so that no two characteristics become the same."""
    plain = characteristic.isdecimal() and str(int(characteristic)) == characteristic
    return int(characteristic) if plain else characteristic


def _check(check: Check) -> dict[str, Any]:
    return {
        "characteristic": _number(check.characteristic),
        "capture": check.capture,
        "attempt": check.attempt,
        "where": check.where,
        "channel": check.channel,
        "quantity": check.quantity,
        "parameters": _amounts(check.parameters),
        "label": check.label,
        "part": check.part,
        "estimator": check.estimator,
        "value": check.value,
        "u": check.u,
        "k": check.k,
        "bound": None if check.bound is None else list(check.bound),
        "measured_in": check.measured_in,
        "at_least": check.at_least,
        "at_most": check.at_most,
        "acceptance": {"at_least": check.acceptance_at_least, "at_most": check.acceptance_at_most},
        "rule": check.rule,
        "conformance_probability": check.conformance_probability,
        "probability": check.probability,
        "verdict": check.verdict,
        "at_fault": check.at_fault,
        "because": check.because,
        "reason": check.reason,
        "steps": check.steps,
    }
