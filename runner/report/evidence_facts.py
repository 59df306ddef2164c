"""What a page shows as evidence: overviews with their regions, transfer curves, edge fits."""

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from runner.report import drawing
from runner.report.circumstance_facts import Document, extent_of

MOST_REGIONS = 12
"""Regions whose curves a page shows; those of all others stand in results.json."""

MOST_ALIKE = 4
"""Regions of one capture whose maps or profiles of one kind a page shows."""

MOST_SPOTS = 40
"""Defects and the like that a page lists."""

TROUBLE = frozenset({"does not conform", "cannot decide"})
"""Verdicts whose evidence comes first."""


EVEN = frozenset({"flat field", "dark frame", "light series"})
"""Targets whose frames hold nothing to see."""


@dataclass(frozen=True)
class PictureFact:
    """An overview picture."""

    name: str
    """File name."""
    title: str
    """Title."""
    alt: str
    """What it shows, for those who do not see it."""
    regions: tuple[tuple[str, str], ...]
    """Balloon number and words of each region."""


@dataclass(frozen=True)
class CurveFact:
    """One region's curves."""

    title: str
    """Title."""
    transfer: str
    """Transfer curve as SVG."""
    edge: str
    """Edge fit with its residual as SVG, or empty."""


@dataclass(frozen=True)
class MapFact:
    """One map."""

    name: str
    """File name within the page."""
    title: str
    """Title."""
    alt: str
    """What it shows, for those who do not see it."""
    png: bytes
    """The picture."""


def map_facts(document: Mapping[str, Any]) -> tuple[tuple[MapFact, ...], int]:
    """Return the drawn maps, and how many are left out."""
    from runner.report.map_picture import map_picture  # noqa: PLC0415 - heavy, and most documents have no map

    maps = document.get("maps", [])
    facts = []
    for number, area in enumerate(_telling(maps, document), 1):
        title = f"{area['name']}: {_where(area, document)}"
        marks = ", ".join(words for _, _, words in area["marks"])
        alt = f"Map of the {title}" + (f", marked: {marks}" if marks else "")
        facts.append(MapFact(f"map-{number}.png", title, alt, map_picture(area)))
    return tuple(facts), len(maps) - len(facts)


def plan_facts(document: Document) -> tuple[MapFact, ...]:
    """Return a plan of each capture's frame with its defects marked, where there are any."""
    from runner.report.spot_picture import SIGNS, spot_picture  # noqa: PLC0415 - heavy, and most documents have no spot

    spots: dict[tuple[str, int], list[Mapping[str, Any]]] = {}
    for spot in document.get("spots", ()):
        if spot["kind"] in SIGNS:
            spots.setdefault((spot["capture"], spot["attempt"]), []).append(spot)
    facts = []
    for number, ((capture, attempt), mine) in enumerate(spots.items(), 1):
        frames = next(c["frames"] for c in document["captures"] if (c["name"], c["attempt"]) == (capture, attempt))
        counts = Counter(spot["kind"] for spot in mine)
        title = f"defects: {capture}" + ("" if attempt == 1 else f", attempt {attempt}")
        alt = f"Plan of the frame with its {title}: " + ", ".join(f"{n} × {kind}" for kind, n in counts.items())
        facts.append(MapFact(f"plan-{number}.png", title, alt, spot_picture(tuple(frames[0]["shape"][:2]), mine)))
    return tuple(facts)


def _telling(rows: Sequence[Mapping[str, Any]], document: Document) -> list[Mapping[str, Any]]:
    """Return which of many maps or profiles a page shows: of one kind those of regions with trouble, else the first."""
    kinds: dict[tuple[Any, ...], list[Mapping[str, Any]]] = {}
    for row in rows:
        kinds.setdefault(tuple(row[key] for key in ("capture", "attempt", "name", "channel")), []).append(row)
    chosen = []
    for alike in kinds.values():
        troubled = [row for row in alike if not _trouble(row, document["checks"])]
        chosen += troubled[:MOST_ALIKE] or alike[:1]
    return chosen[:MOST_REGIONS]


def plain_curve_facts(document: Mapping[str, Any]) -> tuple[tuple[CurveFact, ...], int]:
    """Return curves that are no transfer curves and belong to none, and how many are left out."""
    known = {"mtf", "edge spread", "edge spread data", "residual", "line spread"}
    curves = [c for c in document["curves"] if c["name"] not in known and len(c["x"]) > 1]
    facts = []
    for curve in _telling(curves, document):
        title = f"{curve['name']}: {_where(curve, document)}"
        facts.append(CurveFact(title, drawing.plain_picture(curve, title), ""))
    return tuple(facts), len(curves) - len(facts)


def spot_facts(document: Mapping[str, Any]) -> tuple[tuple[tuple[str, str, str, str], ...], int]:
    """Return spots as rows of kind, place in px, where and words, and how many are left out; failing counts first."""
    spots = sorted(document.get("spots", []), key=lambda spot: not _counted(spot, document["checks"]))
    rows = tuple((s["kind"], f"{s['x']:g}, {s['y']:g}", _where(s, document), s["words"]) for s in spots[:MOST_SPOTS])
    return rows, len(spots) - len(rows)


def _counted(spot: Mapping[str, Any], checks: Sequence[Mapping[str, Any]]) -> bool:
    """Tell whether a count that a spot enters is among what does not conform or cannot be decided."""
    mine = [c for c in checks if all(c[key] == spot[key] for key in ("capture", "attempt", "channel"))]
    counts = tuple(spot["kind"].replace(" ", "_") + ending for ending in ("s", "es"))  # or those of a zone
    return any(
        c["quantity"].startswith(counts) and c["where"] == spot["region"] and c["verdict"] in TROUBLE for c in mine
    )


def _where(one: Mapping[str, Any], document: Document) -> str:
    channel = "" if one["channel"] == "mono" else f" {one['channel']}"
    attempt = "" if one["attempt"] == 1 else f", attempt {one['attempt']}"
    return f"{one['region'] or extent_of(one['capture'], document)}{channel} ({one['capture']}{attempt})"


def picture_facts(document: Mapping[str, Any]) -> tuple[PictureFact, ...]:
    """Return the overviews; an even field without regions needs no picture on paper."""
    facts = []
    for picture in document["pictures"]:
        capture = _pictured(picture, document["captures"])
        regions = capture["regions"]
        named = tuple(
            (str(n), r["region"] + ("" if r["found"] else " (not found)"))
            for n, r in enumerate(regions, 1)
            if r["region"]
        )
        attempt = "" if capture["attempt"] == 1 else f", attempt {capture['attempt']}"
        if named:
            title = f"Regions of '{capture['name']}'{attempt} as found:"
            words = ", ".join(f"{n} {name}" for n, name in named)
            alt = f"Frame of {capture['name']}{attempt} with regions {words}"
            facts.append(PictureFact(picture["name"], title, alt, named))
        elif capture["target"] not in EVEN:
            title = f"First frame of '{capture['name']}'{attempt}"
            facts.append(PictureFact(picture["name"], title, f"Frame of {capture['name']}{attempt}", ()))
    return tuple(facts)


def _pictured(picture: Mapping[str, Any], captures: Sequence[Mapping[str, Any]]) -> Mapping[str, Any]:
    """Return the capture and attempt that a picture shows."""
    keys = picture["capture"], picture["attempt"]
    return next(c for c in captures if (c["name"], c["attempt"]) == keys)


def curve_facts(document: Mapping[str, Any]) -> tuple[tuple[CurveFact, ...], int]:
    """Return the drawn curves of regions, those with trouble first, and how many are left out."""
    facts = []
    curves = [c for c in document["curves"] if c["name"] == "mtf"]
    for curve in sorted(curves, key=lambda c: _trouble(c, document["checks"]))[:MOST_REGIONS]:
        mine = _checks(curve, document["checks"])
        spread, residual = (_companion(curve, document["curves"], name) for name in ("edge spread", "residual"))
        channel = "" if curve["channel"] == "mono" else f", {curve['channel']}"
        where = f"{curve['region'] or extent_of(curve['capture'], document)}{channel}"
        attempt = "" if curve["attempt"] == 1 else f", attempt {curve['attempt']}"
        title = f"{where} ({curve['capture']}{attempt}, {curve['estimator']})"
        transfer = drawing.transfer_picture(curve, mine, f"Transfer curve of {where} with limits")
        edge = drawing.edge_picture(spread, residual, f"Edge fit of {where} with its residual") if spread else ""
        facts.append(CurveFact(title, transfer, edge))
    return tuple(facts), len(curves) - len(facts)


def _checks(curve: Mapping[str, Any], checks: Sequence[Mapping[str, Any]]) -> list[Mapping[str, Any]]:
    same = [c for c in checks if (c["capture"], c["attempt"]) == (curve["capture"], curve["attempt"])]
    mine = [c for c in same if (c["where"], c["channel"]) == (curve["region"], curve["channel"])]
    return [c for c in mine if c["part"] == "system"]


def _trouble(curve: Mapping[str, Any], checks: Sequence[Mapping[str, Any]]) -> int:
    words = {c["verdict"] for c in _checks(curve, checks)}
    return 0 if words & TROUBLE else 1


def _companion(curve: Mapping[str, Any], curves: Sequence[Mapping[str, Any]], name: str) -> Mapping[str, Any] | None:
    keys = ("capture", "attempt", "region", "channel", "estimator")
    return next((c for c in curves if c["name"] == name and all(c[k] == curve[k] for k in keys)), None)
