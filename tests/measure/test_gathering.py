"""A method that gathers sees every step, region and reading of one channel, once for all and once for each group."""

from collections.abc import Sequence
from types import SimpleNamespace
from typing import Any, cast

import numpy as np

from runner.capture.frame import Box, Frame
from runner.measure.contract import Found, Measurement, Method, NotFound, QuantityInfo, Sample, Scene, Target, Wanted
from runner.measure.plan import CapturePlan, MethodPlan, Plan
from runner.measure.reading import Component, Reading
from runner.measure.session import measure_attempt
from runner.spec.model import Amount, Camera, Capture, Chart, Document, Optics, Region, Spec, UnitRule

CAMERA = Camera(width=8, height=6, bit_depth=8, black_level=0, white_level=255, mosaic="RGGB")


def _level(sample: Sample, _options: Any) -> Measurement:
    value = float(sample.crop.codes.mean())
    return Measurement(
        (Reading(sample.found.region, "level", "DN", value, 2.0, (Component("n", 2.0, "A", None, None, True),)),)
    )


def _locate(_frames: Sequence[Frame], regions: Sequence[Region], *_rest: Any) -> list[Any]:
    boxes = {"left": Box(0, 0, 4, 6), "right": Box(4, 0, 8, 6)}
    return [
        Found(r.name, boxes[r.name]) if r.name in boxes else NotFound(r.name, None, "no edge", "off") for r in regions
    ]


def _plan(axes: tuple[str, ...], seen: list[Scene]) -> Plan:
    def gather(scene: Scene, _options: Any) -> Measurement:
        seen.append(scene)
        return Measurement((Reading(scene.region, "balance", "1", float(len(scene.steps)), 0.1),))

    info = {"level": QuantityInfo("DN", "Level."), "balance": QuantityInfo("1", "Balance.", whole=True)}
    each = SimpleNamespace(NAME="level", NEEDS=frozenset(), measure=_level, quantities=lambda: info, quantity=info.get)
    whole = SimpleNamespace(
        NAME="balance",
        NEEDS=frozenset(),
        GATHERS=True,
        AXES=frozenset({"z"}),
        gather=gather,
        quantities=lambda: info,
        quantity=info.get,
    )
    names = ("left", "right", "far")
    regions = tuple(Region(n, (Amount(4, "px"), Amount(3, "px")), (Amount(4, "px"), Amount(2, "px"))) for n in names)
    capture = Capture("c", "t", None, None, {}, CAMERA, Optics(), Chart(), regions, {}, {}, (), ())
    wanted = {"": (Wanted("balance", {}, {}),), "pair": (Wanted("balance", {}, {}),)}
    plans = (
        MethodPlan(cast("Method", each), None, {}),
        MethodPlan(cast("Method", whole), None, wanted, {"pair": ("left", "right")}),
    )
    spec = Spec(Document("D", "A"), UnitRule("P", ".*"), CAMERA, Optics(), (capture,), (), {}, "sha256:0")
    one = CapturePlan(capture, cast("Target", SimpleNamespace(NAME="t", locate=_locate)), None, plans, axes)
    return Plan(spec, (one,), ())


def _frames() -> list[Frame]:
    return [
        Frame(f"{z}-{r}.tif", "", "", np.full((6, 8), 10 * z + r, dtype=np.uint8), axes={"z": str(z), "repeat": str(r)})
        for z in (1, 2)
        for r in (0, 2)
    ]


def test_repeats_of_a_step_are_averaged_before_gathering() -> None:
    """Along an axis each step holds the mean of its repeats, and only what was gathered is reported."""
    seen: list[Scene] = []
    made = measure_attempt(_plan(("z",), seen), 1, lambda _name: _frames(), {})
    red = next(scene for scene in seen if scene.region == "")

    assert [step.axes for step in red.steps] == [{"z": "1"}, {"z": "2"}]
    assert [[r.value for r in step.readings if r.region == "left"] for step in red.steps] == [[11.0], [21.0]]
    assert {r.channel for step in red.steps for r in step.readings} == {"red"}
    assert {(r.quantity, r.region, r.channel) for r in made.measured.readings} == {
        ("balance", region, channel) for region in ("", "pair") for channel in ("red", "green", "blue")
    }


def test_a_group_sees_its_own_regions_only() -> None:
    """Samples, readings and lost regions are those of the group; without axes all readings are reported."""
    seen: list[Scene] = []
    made = measure_attempt(_plan((), seen), 1, lambda _name: _frames(), {})
    everyone, pair = seen[0], seen[1]

    assert (everyone.regions, pair.regions) == (("left", "right", "far"), ("left", "right"))
    assert [lost.region for lost in everyone.lost] == ["far"]
    assert pair.lost == ()
    assert [sample.found.region for sample in pair.steps[0].samples] == ["left", "right"]
    assert sum(r.quantity == "level" for r in made.measured.readings) == 3 * 2 + 3
