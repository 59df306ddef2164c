"""Combining uncertainty: components, repeats, declared parts, draws."""

from math import inf, sqrt

import numpy as np
import pytest

from runner.measure.reading import Component, Reading, Refusal
from runner.measure.uncertainty import (
    Input,
    combined_u,
    coverage_factor,
    effective_dof,
    mean_of_repeats,
    propagate,
    with_declared,
)
from runner.spec.model import Amount, UncertaintyComponent
from runner.spec.units import FrequencyContext

CONTEXT = FrequencyContext(pixel_pitch_um=3.0)


def _reading(value: float | None, noise: float = 0.004, bias: float = 0.003, **more: object) -> Reading:
    parts = (Component("noise", noise, "A", 50.0, averages=True), Component("method bias", bias, "B"))
    u = None if value is None else sqrt(noise**2 + bias**2)
    known: dict[str, object] = {"components": parts} | more
    return Reading("centre", "mtf50", "cy/px", value, u, **known)  # type: ignore[arg-type]


def test_only_what_averages_falls_with_repeats() -> None:
    """Four repeats halve the noise and leave the bias."""
    mean = mean_of_repeats([_reading(v) for v in (0.30, 0.301, 0.302, 0.303)])

    assert mean.value == pytest.approx(0.3015)
    assert {c.name: c.u for c in mean.components} == pytest.approx({"noise": 0.002, "method bias": 0.003})
    assert mean.u == pytest.approx(sqrt(0.002**2 + 0.003**2))


def test_one_refused_repeat_refuses_the_mean() -> None:
    """The repeats that went well are not picked out."""
    lost = _reading(None, refusal=Refusal("no edge", "gone"), components=())
    mean = mean_of_repeats([_reading(0.3), lost])

    assert (mean.value, mean.u) == (None, None)
    assert mean.refusal == Refusal("no edge", "1 of 2 repeats: gone")


@pytest.mark.parametrize("value", [float("nan"), float("inf")])
def test_a_repeat_that_is_no_number_refuses_the_mean(value: float) -> None:
    """NaN in one repeat is a fault, not a value."""
    mean = mean_of_repeats([_reading(0.3), _reading(value)])

    assert mean.refusal is not None
    assert mean.refusal.cause == "fault"


def test_bounded_repeats_give_the_weakest_bound() -> None:
    """Of two bounds the one that claims less stands; a value counts with the end of its interval."""
    above = [_reading(None, bound=("above", b), components=()) for b in (0.8, 0.7)]

    assert mean_of_repeats(above).bound == ("above", 0.7)
    mixed = mean_of_repeats([above[0], _reading(0.5)]).bound
    assert mixed is not None
    assert mixed[1] == pytest.approx(0.49)


def test_repeats_that_scatter_too_much_are_flagged() -> None:
    """Repeats a hundred noises apart do not pass for noise; repeats within it do."""
    assert "scatter" in mean_of_repeats([_reading(0.3), _reading(0.7)]).flags[0]
    assert mean_of_repeats([_reading(0.3), _reading(0.304)]).flags == ()


def test_many_repeats_measure_their_own_noise() -> None:
    """From twenty repeats on, the scatter is the noise, with its degrees of freedom."""
    values = np.random.default_rng(1).normal(0.3, 0.02, 25)
    mean = mean_of_repeats([_reading(float(v)) for v in values])

    noise = next(c for c in mean.components if c.name == "noise")
    assert noise.u == pytest.approx(values.std(ddof=1) / 5)
    assert noise.dof == 24


def test_declared_components_join_their_quantities() -> None:
    """Relative parts scale with the value, absolute ones convert; other quantities are left alone."""
    declared = (
        UncertaintyComponent("chart", ("mtf50",), relative=0.01, shared="chart"),
        UncertaintyComponent("offset", ("mtf50",), absolute=Amount(1.0, "lp/mm")),
        UncertaintyComponent("other", ("overshoot",), relative=1.0),
    )
    reading = with_declared(_reading(0.3), declared, CONTEXT)

    assert {c.name: c.u for c in reading.components[2:]} == pytest.approx({"chart": 0.003, "offset": 0.003})
    assert reading.u == pytest.approx(sqrt(0.005**2 + 2 * 0.003**2))
    assert reading.components[2].shared == "chart"


def test_a_stations_component_replaces_the_specs_default() -> None:
    """Of two with one name the last counts."""
    declared = [UncertaintyComponent("chart", ("mtf50",), relative=r) for r in (0.01, 0.02)]

    assert with_declared(_reading(0.3), declared, CONTEXT).components[-1].u == pytest.approx(0.006)


def test_a_reading_without_value_gets_no_component() -> None:
    """What was not measured has no uncertainty."""
    lost = _reading(None, refusal=Refusal("no edge", "gone"))

    assert with_declared(lost, [UncertaintyComponent("chart", ("mtf50",), relative=0.01)], CONTEXT) is lost


def test_draws_depend_on_their_inputs_alone() -> None:
    """The same inputs give the same draws; another use of them gives others."""
    inputs = [Input(1.0, 0.1), Input(2.0, 0.2)]
    one, two = propagate(lambda x: x.sum(axis=0), inputs), propagate(lambda x: x.sum(axis=0), inputs)

    assert np.array_equal(one.samples, two.samples)
    assert one.mean != propagate(lambda x: x.sum(axis=0), inputs, label="other").mean


def test_shared_parts_move_together() -> None:
    """A difference of two inputs that share everything has no uncertainty."""
    inputs = [Input(1.0, 0.0, {"chart": 0.1}), Input(2.0, 0.0, {"chart": 0.1})]

    assert propagate(lambda x: x[1] - x[0], inputs).u == pytest.approx(0, abs=1e-12)


def test_infinite_degrees_of_freedom_are_normal() -> None:
    """Without any finite component the factor is the normal's."""
    assert effective_dof([Component("a", 1.0, "B")]) == inf
    assert coverage_factor(0.95) == pytest.approx(1.959964, abs=1e-6)
    assert combined_u([1.0, 1.0], [3.0, 4.0]) == 5.0
