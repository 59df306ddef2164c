"""Hand-made specs, readings and evidence for the judge's tests."""

from collections.abc import Sequence
from typing import Any

from runner.measure.evidence import CaptureEvidence, FrameFact, UnitEvidence
from runner.measure.reading import Component, Reading, Refusal
from runner.spec.model import (
    Amount,
    Bound,
    Camera,
    Capture,
    Chart,
    Document,
    Limit,
    Optics,
    Region,
    Spec,
    UnitRule,
)

CAMERA = Camera(width=800, height=600, bit_depth=12, black_level=64, white_level=4095, pixel_pitch_um=3.0)
FRAME = FrameFact("chart-1.tif", "ab" * 32, (600, 800), "uint16")
REGIONS = ("centre", "left", "right")


def limit(characteristic: str = "1", **more: Any) -> Limit:
    """Return a limit; mtf50 of the centre, at least 0.2 cy/px, proof either way, unless told otherwise."""
    known: dict[str, Any] = {
        "capture": "chart",
        "quantity": "mtf50",
        "parameters": {},
        "where": ("centre",),
        "where_label": "centre",
        "unit": "cy/px",
        "at_least": 0.2,
        "at_most": None,
        "rule": "proof either way",
        "conformance_probability": 0.95,
    }
    return Limit(characteristic=characteristic, **(known | more))


def reading(value: float | None, u: float | None = 0.001, region: str = "centre", **more: Any) -> Reading:
    """Return a reading of mtf50 in cy/px unless told otherwise."""
    parts = () if u is None else (Component("noise", u, "A", averages=True),)
    known: dict[str, Any] = {"components": parts, "capture": "chart", "estimator": "joint fit"}
    quantity, unit = more.pop("quantity", "mtf50"), more.pop("measured_in", "cy/px")
    return Reading(region, quantity, unit, value, u, **(known | more))


def refused(cause: str, region: str = "centre", **more: Any) -> Reading:
    """Return a reading without value."""
    return reading(None, None, region, refusal=Refusal(cause, f"because of {cause}"), **more)


def spec(*limits: Limit, usable_if: Sequence[Bound] = (), captures: Sequence[str] = ("chart",)) -> Spec:
    """Return a spec whose first capture holds the limits."""
    size = (Amount(80, "px"), Amount(120, "px"))
    regions = tuple(Region(name, (Amount(50, "%"), Amount(50, "%")), size) for name in REGIONS)
    made = tuple(
        Capture(
            name=name,
            target="slanted edge",
            frames=None,
            same_frames_as=None,
            uses={},
            camera=CAMERA,
            optics=Optics(),
            chart=Chart(),
            regions=regions,
            measure={},
            target_options={},
            usable_if=tuple(usable_if),
            limits=tuple(one for one in limits if one.capture == name),
        )
        for name in captures
    )
    return Spec(Document("D", "A"), UnitRule("WS8", ".*"), CAMERA, Optics(), made, (), {}, "sha256:0")


def evidence(*readings: Reading, captures: Sequence[CaptureEvidence] = ()) -> UnitEvidence:
    """Return evidence of one good capture unless other captures are given."""
    made = tuple(captures) or (CaptureEvidence("chart", 1, "slanted edge", (FRAME,)),)
    return UnitEvidence("WS8-000101", made, readings, ())
