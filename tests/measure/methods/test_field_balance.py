"""Halves of the field are compared fairly: known differences come back, what regions share cancels."""

from dataclasses import replace

import numpy as np
import pytest

from runner.capture.frame import Box, Crop
from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Found, NotFound, Sample, Scene, Step, Wanted
from runner.measure.methods import field_balance
from runner.measure.reading import Component, Reading, Refusal
from runner.spec.model import Amount, Camera, Chart, Optics

CAMERA = Camera(width=1600, height=1200, bit_depth=12, black_level=64, white_level=4095)
PLACES = {"ul": (160, 120, 37.0), "ur": (1440, 120, 57.0), "ll": (160, 1080, -37.0), "lr": (1440, 1080, -60.0)}
PLACES |= {"centre": (800, 600, 5.0)}
"""Column, row, direction of the modulation: radii to the corners lie at ±36.9°."""


def _scene(values: dict[str, float], u: float = 0.01, shared: float = 0.0) -> Scene:
    samples, readings = [], []
    for name, value in values.items():
        x, y, direction = PLACES[name]
        box = Box(x - 40, y - 60, x + 40, y + 60)
        found = Found(name, box, geometry={"edge_direction": direction})
        samples.append(Sample(found, Crop("f", box, np.zeros((4, 4)), CAMERA), CAMERA, Optics(), Chart(), ()))
        parts = (Component("noise", u, "A"), Component("chart", shared * value, "B", shared="chart"))
        readings.append(Reading(name, "mtf50", "cy/px", value, float(np.hypot(u, shared * value)), parts))
    step = Step({}, {}, tuple(samples), tuple(readings))
    wanted = (Wanted("left_right_balance", {}, {}),)
    return Scene("", tuple(values), (step,), (), (1600, 1200), CAMERA, Optics(), Chart(), wanted)


def _values(scene: Scene, **asked: str) -> dict[str, Reading]:
    return {r.quantity: r for r in field_balance.gather(scene, field_balance.read_options(asked)).readings}


def test_known_differences() -> None:
    """(right - left) over their mean, in per cent; the centre counts to no half."""
    found = _values(_scene({"ul": 0.2, "ll": 0.2, "ur": 0.3, "lr": 0.3, "centre": 9.0}))

    assert found["left_right_balance"].value == pytest.approx(40)
    assert found["top_bottom_balance"].value == pytest.approx(0)


def test_directions_are_those_of_the_radius() -> None:
    """Upper left's and lower left's... modulation along the radius is tangential, across it sagittal, between neither.

    Upper left: the radius lies at 36.9°, the modulation at 37°: tangential. Upper right: radius at -36.9°, modulation
    at 57°, 94° apart: sagittal.
    """
    size = (1600, 1200)
    found = {
        name: Found(name, Box(x - 40, y - 60, x + 40, y + 60), geometry={"edge_direction": d})
        for name, (x, y, d) in PLACES.items()
    }

    assert field_balance.direction(found["ul"], size) == -1
    assert field_balance.direction(found["ur"], size) == 1
    assert field_balance.direction(found["centre"], size) == 0
    assert field_balance.direction(replace(found["ul"], geometry={}), size) == 0
    assert field_balance.direction(replace(found["ul"], geometry={"edge_direction": 37.0 + 45}), size) == 0


def test_the_stated_uncertainty() -> None:
    """1000 draws with a shared scale and single noise: 93 to 97.5 % within 2u, the scale cancels in equal halves."""
    rng = np.random.default_rng(2)
    inside = []
    for _ in range(1000):
        scale = 1 + 0.05 * rng.standard_normal()
        drawn = {
            n: v * scale + 0.01 * rng.standard_normal()
            for n, v in {"ul": 0.2, "ll": 0.25, "ur": 0.3, "lr": 0.2}.items()
        }
        one = _values(_scene(drawn, 0.01, 0.05))["left_right_balance"]
        assert one.value is not None
        assert one.u is not None
        inside.append(abs(one.value - 100 * (0.25 - 0.225) / 0.2375) <= 2 * one.u)
    assert 0.93 <= np.mean(inside) <= 0.975
    even = _values(_scene(dict.fromkeys(("ul", "ll", "ur", "lr"), 0.2), 0.0, 0.05))["left_right_balance"]
    assert even.u == pytest.approx(0, abs=1e-9)


def test_what_is_missing_is_named() -> None:
    """A wanted balance with a lost, refused or only bounded region is not measured; one side alone is no balance."""
    scene = _scene({"ul": 0.2, "ur": 0.3})
    broken = replace(scene.steps[0].readings[0], value=None, u=None, refusal=Refusal("clipped", "bright"))
    bounded = replace(scene.steps[0].readings[0], value=None, u=None, bound=("above", 0.5))

    def with_first(reading: Reading) -> Scene:
        return replace(scene, steps=(replace(scene.steps[0], readings=(reading, scene.steps[0].readings[1])),))

    with pytest.raises(MeasurementRefused, match="ul: bright"):
        _values(with_first(broken))
    with pytest.raises(MeasurementRefused, match="ul: mtf50 is only a bound"):
        _values(with_first(bounded))
    with pytest.raises(MeasurementRefused, match="ll: gone"):
        _values(replace(scene, lost=(NotFound("ll", None, "no edge", "gone"),)))
    refusal = _values(_scene({"ul": 0.2, "ll": 0.3}))["left_right_balance"].refusal
    assert refusal is not None
    assert refusal.because == "0 regions lie on one side and 2 on the other"


def test_the_compared_quantity_is_asked_of_others() -> None:
    """An mtf is wanted at its frequency; a frequency without unit is refused."""
    options = field_balance.read_options({"quantity": "mtf", "frequency": "0.25 cy/px"})

    assert field_balance.wants(options) == (("mtf", {"frequency": Amount(0.25, "cy/px")}),)
    with pytest.raises(UsageError, match=r"frequency is '0.25'"):
        field_balance.read_options({"frequency": "0.25"})
