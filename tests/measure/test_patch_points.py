"""Patches become points of a curve: repeats averaged, what they share kept apart, what is missing named."""

import numpy as np
import pytest

from runner.measure.contract import NotFound, Scene, Step
from runner.measure.patch_points import lost_patch, points_of
from runner.measure.reading import Component, Reading, Refusal
from runner.spec.model import Camera, Chart, Optics

CAMERA = Camera(width=800, height=600, bit_depth=12, black_level=64, white_level=4095)


def _patch(name: str, f: float, value: float | None, *, refusal: Refusal | None = None) -> list[Reading]:
    parts = (Component("noise", 0.01, "A"), Component("chart", 0.02, "B", shared="chart"))
    u = None if value is None else float(np.hypot(0.01, 0.02))
    return [
        Reading(name, "frequency", "cy/px", f, 1e-6),
        Reading(name, "depth", "1", value, u, parts, refusal=refusal),
    ]


def _scene(readings: list[Reading], lost: tuple[NotFound, ...] = ()) -> Scene:
    names = tuple(dict.fromkeys(r.region for r in readings))
    step = Step({}, {}, (), tuple(readings))
    return Scene("", names, (step,), lost, (800, 600), CAMERA, Optics(), Chart(), ())


def test_repeats_of_a_frequency_are_averaged() -> None:
    """Two patches within 2 % make one point: single noise falls by the root of two, the chart's part stays."""
    found = points_of([*_patch("c", 0.3, 0.4), *_patch("a", 0.1, 0.8), *_patch("b", 0.101, 0.7)], "frequency", "depth")

    assert found.f.tolist() == pytest.approx([0.1005, 0.3])
    assert found.values.tolist() == pytest.approx([0.75, 0.4])
    assert found.own.tolist() == pytest.approx([0.01 / 2**0.5, 0.01])
    assert found.shared["chart"].tolist() == pytest.approx([0.02, 0.02])
    assert found.u()[1] == pytest.approx(np.hypot(0.01, 0.02))


def test_a_missing_patch_is_named() -> None:
    """One that was not found comes before one that was not measured; whole sets have nothing missing."""
    refused = _patch("b", 0.2, None, refusal=Refusal("clipped", "bright"))
    gone = NotFound("z", None, "no edge", "nothing")
    whole = _patch("a", 0.1, 0.8)

    assert lost_patch(_scene(whole), "depth", "group") is None
    assert lost_patch(_scene([*whole, *refused]), "depth", "group") == Refusal("clipped", "group b: bright")
    assert lost_patch(_scene(refused, (gone,)), "depth", "patch") == Refusal("no edge", "patch z: nothing")
