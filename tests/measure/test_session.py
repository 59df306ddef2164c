"""A unit is measured whole: faults stay where they arise, silence never looks like a value."""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from types import SimpleNamespace
from typing import Any, cast

import numpy as np
import pytest

from runner.capture.frame import Box, Frame
from runner.errors import FrameRefused, MeasurementRefused
from runner.measure.contract import Found, Measurement, Method, NotFound, QuantityInfo, Sample, Target, Wanted
from runner.measure.plan import CapturePlan, MethodPlan, Plan
from runner.measure.reading import Component, Curve, Map, Reading, Spot
from runner.measure.session import Faults, measure_attempt, unit_evidence
from runner.spec.model import (
    Amount,
    Camera,
    Capture,
    Chart,
    Document,
    Optics,
    Region,
    Spec,
    UncertaintyComponent,
    UnitRule,
)

CAMERA = Camera(width=8, height=6, bit_depth=8, black_level=0, white_level=255)
MTF_AT = {"frequency": Amount(0.25, "cy/px")}


def _region(name: str) -> Region:
    return Region(name, (Amount(4, "px"), Amount(3, "px")), (Amount(4, "px"), Amount(2, "px")))


def _locate(_frames: Sequence[Frame], regions: Sequence[Region], _camera: Camera, _options: Any) -> list[Any]:
    found: list[Any] = []
    for region in regions:
        box = Box(2, 2, 6, 4)
        lost = region.name == "lost"
        found.append(NotFound(region.name, box, "no edge", "nothing") if lost else Found(region.name, box))
    return found


def _measure(sample: Sample, options: Any) -> Measurement:
    if options == "refuse":
        raise MeasurementRefused("too noisy", "noise 9")
    if options == "fault":
        raise ZeroDivisionError
    value = float(sample.crop.codes.mean()) - sum(
        float(c.codes.mean()) for cs in sample.companions.values() for c in cs
    )
    parts = (Component("noise", 2.0, "A", averages=True), Component("bias", 1.0, "B"))
    reading = Reading(sample.found.region, "mean", "DN", value, 5**0.5, parts)
    return Measurement((reading,), (Curve(sample.found.region, "c", (0.0,), (1.0,), (), "px", "1"),))


def _quantities() -> Mapping[str, QuantityInfo]:
    return {"mean": QuantityInfo("DN", "Mean."), "mtf": QuantityInfo("1", "Mtf.", {"frequency": "cy/px"})}


def _plan(options: str = "", wanted: tuple[Wanted, ...] = (), regions: tuple[str, ...] = ("a",), **more: Any) -> Plan:
    capture = Capture(
        name="chart",
        target="t",
        frames=None,
        same_frames_as=None,
        uses=more.get("uses", {}),
        camera=CAMERA,
        optics=Optics(),
        chart=Chart(),
        regions=tuple(_region(r) for r in regions),
        measure={},
        target_options={},
        usable_if=(),
        limits=(),
    )
    spec = Spec(Document("D", "A"), UnitRule("P", ".*"), CAMERA, Optics(), (capture,), (), {}, "sha256:0")
    target = cast("Target", SimpleNamespace(NAME="t", locate=_locate))
    method = cast(
        "Method",
        SimpleNamespace(
            NAME="m", NEEDS=frozenset({"edge"}), measure=_measure, quantities=_quantities, quantity=_quantities().get
        ),
    )
    plans = (MethodPlan(method, options, dict.fromkeys(regions, wanted)),)
    return Plan(spec, (CapturePlan(capture, target, None, plans),), more.get("uncertainty", ()))


def _frame(level: int, repeat: str = "1") -> Frame:
    return Frame(f"{repeat}.tif", "sha", "pix", np.full((6, 8), level, dtype=np.uint8), axes={"repeat": repeat})


def _run(plan: Plan, *frames: Frame, faults: Faults | None = None) -> tuple[Any, Any, Any]:
    attempt = measure_attempt(plan, 1, lambda _name: frames or (_frame(100),), {}, faults=faults)
    return attempt.captures, attempt.measured.readings, attempt.measured.curves


def test_a_reading_carries_its_capture_and_attempt() -> None:
    """Readings and curves know where they come from."""
    captures, readings, curves = _run(_plan())

    assert (readings[0].capture, readings[0].attempt, readings[0].value) == ("chart", 1, 100)
    assert (curves[0].capture, captures[0].regions[0].box) == ("chart", (2, 2, 6, 4))


def test_repeats_are_measured_each_and_averaged() -> None:
    """The value of repeats is their mean; only what averages falls by the root of their number."""
    _, (reading,), _ = _run(_plan(), _frame(100), _frame(104, "2"), _frame(108, "3"), _frame(112, "4"))

    assert reading.value == 106
    assert {c.name: c.u for c in reading.components} == {"noise": 1.0, "bias": 1.0}


def test_declared_components_are_added() -> None:
    """What spec or station declare enters every reading of the quantity."""
    declared = UncertaintyComponent("chart", ("mean",), relative=0.02, shared="chart")
    _, (reading,), _ = _run(_plan(uncertainty=(declared,)))

    assert reading.components[-1].u == 2.0
    assert reading.u == 3.0


def test_a_region_that_was_not_found_refuses_what_was_wanted_of_it() -> None:
    """Each wanted reading of a lost region exists, without value and with the target's reason."""
    _, readings, _ = _run(_plan(wanted=(Wanted("mtf", MTF_AT, {"frequency": 0.25}),), regions=("lost",)))

    assert [(r.quantity, r.value, r.refusal.cause) for r in readings] == [("mtf", None, "no edge")]


def test_a_method_that_refuses_leaves_its_reason() -> None:
    """A refusing method's sentence stands in its readings."""
    _, (reading,), _ = _run(_plan("refuse"))

    assert (reading.value, reading.refusal.cause, reading.refusal.because) == (None, "too noisy", "noise 9")


def test_a_fault_of_a_method_stops_nothing_else() -> None:
    """A fault becomes a refused reading with its name; the traceback is kept for whoever mends it."""
    faults = Faults()
    _, (reading,), _ = _run(_plan("fault"), faults=faults)

    assert reading.refusal.cause == "fault"
    assert "ZeroDivisionError" in reading.refusal.because
    assert "Traceback" in faults.tracebacks[0]


def test_what_was_wanted_and_did_not_come_is_refused() -> None:
    """A method that forgets a wanted reading cannot make its limit disappear."""
    _, readings, _ = _run(_plan(wanted=(Wanted("mtf", MTF_AT, {"frequency": 0.25}),)))

    assert [(r.quantity, r.refusal.cause) for r in readings if r.refusal] == [("mtf", "fault")]


def test_a_refused_file_makes_its_capture_faulty() -> None:
    """The loader's sentence becomes the capture's fault, and nothing of it is measured."""

    def load(_name: str) -> Sequence[Frame]:
        raise FrameRefused("it is truncated", where="1.tif")

    attempt = measure_attempt(_plan(), 1, load, {})

    assert attempt.captures[0].faults == ("1.tif: it is truncated",)
    assert attempt.measured.readings == ()


def test_a_known_fault_is_not_even_loaded() -> None:
    """What the survey refused is not opened again."""
    attempt = measure_attempt(_plan(), 1, lambda _name: pytest.fail("opened"), {"chart": ("a.tif: twice the same",)})

    assert attempt.captures[0].faults == ("a.tif: twice the same",)


def test_companions_reach_the_method() -> None:
    """The crops of a companion capture lie at the same box."""
    _, (reading,), _ = _run(_plan(uses={"dark": "chart"}))

    assert reading.value == 0


def test_the_painter_sees_the_first_frame_with_its_regions() -> None:
    """Pictures show the regions as they were found."""
    seen: list[Any] = []
    measure_attempt(_plan(), 1, lambda _n: (_frame(7),), {}, painter=lambda *what: seen.append(what))

    (name, attempt, frame, regions) = seen[0]
    assert (name, attempt, int(frame.codes[0, 0]), regions[0].region) == ("chart", 1, 7, "a")


def test_evidence_is_put_in_one_fixed_order() -> None:
    """The order of attempts and regions given does not change the evidence."""
    one = measure_attempt(_plan(regions=("b", "a")), 1, lambda _name: (_frame(100),), {})
    two = measure_attempt(_plan(regions=("a", "b")), 1, lambda _name: (_frame(100),), {})

    assert unit_evidence("S", [one]).readings == unit_evidence("S", [two]).readings


def test_frames_may_be_taken_together_in_every_channel() -> None:
    """A method that asks for it sees all frames at once, each channel in turn, with the others beside it."""
    seen: list[tuple[str, int, list[str]]] = []

    def measure(sample: Sample, _options: Any) -> Measurement:
        seen.append((sample.crop.channel, len(sample.frames), sorted(sample.channels)))
        spot = Spot(sample.found.region, "hot pixel", 3.0, 2.0, "9 times the noise")
        area = Map(sample.found.region, "shading", (0.0,), (0.0,), ((1.0,),), "px", "1")
        return Measurement((), (), (area,), (spot,))

    plan = _plan()
    colour = replace(plan.captures[0].capture, camera=replace(CAMERA, mosaic="RGGB"))
    method = cast("Method", SimpleNamespace(NAME="m", TOGETHER=True, NEEDS=(), measure=measure, quantities=dict))
    capture = replace(plan.captures[0], capture=colour, methods=(MethodPlan(method, None, {}),))
    attempt = measure_attempt(replace(plan, captures=(capture,)), 2, lambda _n: (_frame(7), _frame(8)), {})

    assert seen == [(c, 2, ["blue", "green", "red"]) for c in ("red", "green", "blue")]
    assert {(s.capture, s.attempt, s.kind) for s in attempt.measured.spots} == {("chart", 2, "hot pixel")}
    assert [m.channel for m in unit_evidence("S", [attempt]).maps] == ["blue", "green", "red"]
