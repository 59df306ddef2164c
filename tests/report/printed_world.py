"""Results documents with everything a page can show, judged from hand-made readings of an invented board camera."""

from collections.abc import Mapping, Sequence
from functools import lru_cache
from hashlib import sha256
from typing import Any

import numpy as np

from runner.judge.unit import judge_unit
from runner.measure.evidence import CaptureEvidence, FrameFact, RegionFact, UnitEvidence
from runner.measure.plan import Plan, bind
from runner.measure.reading import Component, Curve, Reading, Refusal
from runner.report.document import RunFacts, canonical, parse, to_document
from runner.report.pictures import overview
from runner.resources import folder
from runner.spec.build import read_spec
from runner.spec.model import Amount, Station

TIME = "2026-12-01T09:30:00Z"
CORNERS = ("upper left", "upper right", "lower left", "lower right")
BOXES = {
    "centre": (666, 540, 746, 660),
    "corners upper left": (200, 120, 280, 240),
    "corners upper right": (1320, 120, 1400, 240),
    "corners lower left": (200, 960, 280, 1080),
    "corners lower right": (1320, 960, 1400, 1080),
}
PICTURE = "chart-overview.png"


@lru_cache
def plan() -> Plan:
    """Return the demo lot's spec, bound."""
    return bind(read_spec(folder("demo_lots") / "walnut_line" / "walnut-board-camera.yaml"))


@lru_cache
def picture() -> bytes:
    """Return an overview of a plain grey frame."""
    codes = np.full((1200, 1600), 1500, dtype=np.uint16)
    regions = [{"region": r.region, "found": r.found, "box": r.box, "outline": r.outline} for r in _regions()]
    return overview(codes, plan().spec.camera, regions)


def reading(quantity: str, region: str, value: float | None, u: float, unit: str, **more: Any) -> Reading:
    """Return a reading with two components."""
    parts = (Component("noise", 0.8 * u, "A", 900.0, averages=True), Component("method bias", 0.6 * u, "B"))
    known: dict[str, Any] = {"capture": "chart", "estimator": "joint fit", "components": parts if u else ()}
    return Reading(region, quantity, unit, value, None if value is None else u, **(known | more))


def readings(
    centre: float = 0.5927,
    corners: Sequence[float] = (0.2918, 0.2909, 0.2923, 0.2904),
    overshoot: float = 1.2,
    refusal: Refusal | None = None,
) -> list[Reading]:
    """Return what the demo's limits ask for; with a refusal nothing has a value.

    Args:
        centre: mtf at 0.25 cy/px.
        corners: mtf50 of the four corners, cy/px.
        overshoot: %.
        refusal: Why the method refused its regions.
    """
    none = refusal is not None
    more: dict[str, Any] = {"refusal": refusal}
    at = {"frequency": Amount(0.25, "cy/px")}
    rows = [reading("mtf", "centre", None if none else centre, 0.0041, "1", parameters=at, **more)]
    for name, value in zip(CORNERS, corners, strict=True):
        rows.append(reading("mtf50", f"corners {name}", None if none else value, 0.0022, "cy/px", **more))
        rows.append(reading("edge_width", f"corners {name}", None if none else 1.7, 0.008, "px", **more))
    rows.append(reading("overshoot", "centre", None if none else overshoot, 0.3, "%", flags=("little of it",), **more))
    rows.append(reading("edge_width", "centre", None if none else 1.6986, 0.008, "px", **more))
    return rows + [
        made for region in BOXES for made in (_usable("clipped", region, 0.0), _usable("edge_modulation", region, 60.0))
    ]


def document(
    serial: str = "WS8-000101",
    rows: Sequence[Reading] | None = None,
    *,
    regions: bool = True,
    lot: str = "L7",
    station: Mapping[str, Any] | None = None,
) -> dict[str, Any]:
    """Return one unit's results as read back from their file.

    Args:
        serial: The unit.
        rows: Readings; those of a good unit by default.
        regions: They were found.
        lot: The lot.
        station: Contents of the station file.
    """
    rows = readings() if rows is None else rows
    captures = tuple(
        CaptureEvidence(name, 1, target, tuple(_frame(name, n) for n in (1, 2)), regions=found)
        for name, target, found in (("dark", "dark frame", ()), ("chart", "slanted edge", _regions(found=regions)))
    )
    curves = tuple(curve for r in BOXES for curve in curves_of(r)) if regions else ()
    evidence = UnitEvidence(serial, captures, tuple(rows), curves)
    listed = ({"name": PICTURE, "kind": "regions", "capture": "chart", "attempt": 1, "sha256": _digest(picture())},)
    raw = dict(station or {"name": "bench 2", "place": "hall 1"})
    facts = RunFacts(TIME, lot, "Kim", Station(str(raw.get("name", "")), raw=raw))
    made = to_document(plan(), evidence, judge_unit(plan().spec, evidence), facts, pictures=listed)
    return parse(canonical(made))


def unmeasured(serial: str = "WS8-000108") -> dict[str, Any]:
    """Return the results of a unit that shows no edge anywhere."""
    return document(serial, readings(refusal=Refusal("no edge", "nothing in the region is an edge")), regions=False)


def failing(serial: str = "WS8-000103") -> dict[str, Any]:
    """Return the results of a unit whose right side is soft."""
    return document(serial, readings(corners=(0.2979, 0.1732, 0.2999, 0.1736)))


def undecided(serial: str = "WS8-000105") -> dict[str, Any]:
    """Return the results of a unit just as sharp as the limit asks."""
    return document(serial, readings(centre=0.4498))


def all_four() -> list[dict[str, Any]]:
    """Return one unit of each verdict."""
    return [document(), failing(), undecided(), unmeasured()]


def pictures() -> dict[str, bytes]:
    """Return the pictures that the documents list."""
    return {PICTURE: picture()}


def curves_of(region: str, attempt: int = 1, channel: str = "mono") -> list[Curve]:
    """Return the curves of a Gaussian edge of standard deviation 0.7 px, sampled coarsely."""
    x = np.linspace(0, 1, 21)
    mtf = np.exp(-2 * (np.pi * 0.7 * x) ** 2)
    across = np.linspace(-5, 5, 21)
    spread = 1 / (1 + np.exp(-across))
    same: dict[str, Any] = {"capture": "chart", "attempt": attempt, "channel": channel, "estimator": "joint fit"}
    return [
        Curve(region, "mtf", _floats(x), _floats(mtf), _floats(0.004 + 0 * x), "cy/px", "1", **same),
        Curve(region, "edge spread", _floats(across), _floats(spread), (), "px", "1", **same),
        Curve(region, "residual", _floats(across), _floats(0.3 * np.sin(7 * across)), (), "px", "%", **same),
    ]


def _floats(values: Any) -> tuple[float, ...]:
    return tuple(float(value) for value in values)


def _usable(quantity: str, region: str, value: float) -> Reading:
    return reading(quantity, region, value, 0.0, "%", estimator="count" if quantity == "clipped" else "joint fit")


def _frame(capture: str, number: int) -> FrameFact:
    name = f"{capture}-{number}.tif"
    return FrameFact(name, sha256(name.encode()).hexdigest(), (1200, 1600), "uint16")


def _regions(*, found: bool = True) -> tuple[RegionFact, ...]:
    return tuple(
        RegionFact(name, found=found, box=box, outline=((box[0] + 30.0, box[1] + 0.0), (box[0] + 40.0, box[3] + 0.0)))
        for name, box in BOXES.items()
    )


def _digest(data: bytes) -> str:
    return sha256(data).hexdigest()
