"""The keys of a spec file, as far as one mapping can tell; what holds between mappings is tested with its module."""

from typing import Any

import pytest

from runner.spec import shapes
from runner.spec.file_shapes import FramesShape
from runner.spec.model import COMBINATIONS, RULES
from runner.spec.region_shapes import RegionShape
from runner.spec.shape import Shape
from runner.spec.tree import Complaints, parse

LIMIT = "characteristic: 1, quantity: mtf50, "


def _told(kind: type[Shape], text: str) -> list[str]:
    complaints = Complaints()
    tree = parse(f"{{{text}}}", "f", complaints)
    kind.model_validate(tree, context=complaints)
    return [c.found for c in complaints.sorted("error")]


@pytest.mark.parametrize(
    ("kind", "text"),
    [
        *((shapes.LimitShape, f"{LIMIT} where: a, at_most: 1 px, combine: {c}") for c in COMBINATIONS if c != "ratio"),
        (shapes.LimitShape, f"{LIMIT} where: a, at_most: 1, combine: ratio, against: [b, c]"),
        *((shapes.LimitShape, f"{LIMIT} at_least: 1 px, rule: {rule}") for rule in RULES),
        (shapes.LimitShape, f"{LIMIT} report_only: true, measured_in: um"),
        (shapes.LimitShape, f"{LIMIT} nominal: 3 px, tolerance: [1 px, 2 px]"),
        (shapes.LimitShape, f"{LIMIT} at_most: 3, bound: poisson, beyond_nyquist: true, part: lens, modulation: 50 %"),
        (shapes.DecisionShape, "rule: simple acceptance, conformance_probability: 0.99"),
        (FramesShape, "names: 'a-{repeat}-{z}.tif', count: 10"),
        (shapes.ChartShape, "name: a, serial: 007, due: 2027-03-31, transfer: [[0 cy/px, 1], [0.5 cy/px, 0.9]]"),
        (RegionShape, "on: field, position: {field: 1, azimuth: 0 deg}, size: [10 %, 10 %]"),
        (shapes.ComponentShape, "name: a, of: [b, c], absolute: 3 px, shared: d"),
        (shapes.OpticsShape, "numerical_aperture: 1.4, immersion: 1.518, magnification: 60, wavelength: 0.52 um"),
        (shapes.CameraPart, "bit_depth: 10 bit, tone: gamma 2.2, processing: [sharpened, denoised], delivers: jpeg"),
    ],
)
def test_what_a_mapping_may_say(kind: type[Shape], text: str) -> None:
    """Every documented form of a mapping is read without a complaint."""
    assert _told(kind, text) == []


@pytest.mark.parametrize(
    ("kind", "text", "told"),
    [
        (shapes.LimitShape, f"{LIMIT} at_most: 1 px, combine: mean", "a combination needs regions"),
        (shapes.LimitShape, f"{LIMIT} nominal: 1 px, tolerance: 1 px, at_most: 3 px", "stand together"),
        (shapes.LimitShape, f"{LIMIT} tolerance: 1 px, at_most: 3 px", "tolerance stands without nominal"),
        (shapes.LimitShape, f"{LIMIT} at_most: 3 px, conformance_probability: 100 %", "probability of 100 % is not"),
        (shapes.ComponentShape, "name: a, of: b, relative: 1 %, absolute: 3 px", "either relative or absolute"),
        (shapes.ChartShape, "transfer_uncertainty: 0.1", "a transfer table that is not there"),
        (shapes.ChartShape, "view: {tilt: at most 3 deg}", "known by its marks only"),
        (shapes.CaptureShape, "target: a, uses: {}", "a mapping stands where companions are meant"),
        (shapes.CaptureShape, "target: a, uses: [dark]", "a list stands where companions are meant"),
    ],
)
def test_what_a_mapping_may_not_say(kind: type[Shape], text: str, told: str) -> None:
    """Keys that exclude or need each other are told, once."""
    found = _told(kind, text)

    assert len(found) == 1
    assert told in found[0]


def test_every_shape_says_what_it_is() -> None:
    """Complaints call each mapping by a name of its own, and its required keys are known keys."""
    kinds: list[Any] = [kind for kind in vars(shapes).values() if isinstance(kind, type) and issubclass(kind, Shape)]
    assert len(kinds) > 10

    for kind in kinds:
        if kind is not Shape:
            assert kind.WORDS != Shape.WORDS
            assert set(kind.REQUIRED) <= set(kind.known_keys())
