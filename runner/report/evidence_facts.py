"""What a page shows as evidence: overviews with their regions, transfer curves, edge fits."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from runner.report import drawing

MOST_REGIONS = 12
"""Regions whose curves a page shows; those of all others stand in results.json."""


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


def picture_facts(document: Mapping[str, Any]) -> tuple[PictureFact, ...]:
    """Return the overviews that show regions; a capture without regions needs no picture on paper."""
    facts = []
    for picture in document["pictures"]:
        capture = _pictured(picture, document["captures"])
        regions = capture["regions"]
        named = tuple(
            (str(n), r["region"] + ("" if r["found"] else " (not found)"))
            for n, r in enumerate(regions, 1)
            if r["region"]
        )
        if named:
            attempt = "" if capture["attempt"] == 1 else f", attempt {capture['attempt']}"
            title = f"Regions of '{capture['name']}'{attempt} as found"
            words = ", ".join(f"{n} {name}" for n, name in named)
            alt = f"Frame of {capture['name']}{attempt} with regions {words}"
            facts.append(PictureFact(picture["name"], title, alt, named))
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
        where = f"{curve['region'] or 'whole frame'}{channel}"
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
    return 0 if words & {"does not conform", "cannot decide"} else 1


def _companion(curve: Mapping[str, Any], curves: Sequence[Mapping[str, Any]], name: str) -> Mapping[str, Any] | None:
    keys = ("capture", "attempt", "region", "channel", "estimator")
    return next((c for c in curves if c["name"] == name and all(c[k] == curve[k] for k in keys)), None)
