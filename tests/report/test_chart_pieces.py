"""What features are drawn of: tones, places and shapes against plain geometry."""

from collections import Counter
from dataclasses import replace
from itertools import pairwise
from typing import Any

import numpy as np
import pytest

from runner.errors import UsageError
from runner.report.chart_pieces import DRAWN, Area, Clipped, Disc, pieces, without_artwork
from runner.spec.chart_model import ChartFile, Feature, Marks, View

PLAIN = ChartFile("a", "1", (200.0, 150.0), 0.85, 0.05, Marks(8.0, 4.0, ()), {}, View(), "sha256:")


def _drawn(kind: str, size: tuple[float, float] = (40.0, 30.0), **data: Any) -> list[Any]:
    one = Feature("it", kind, (10.0, -5.0), size, data)
    return list(pieces(replace(PLAIN, features={"it": one})))


def test_strips_hold_the_sine_that_is_stated() -> None:
    """The staircase's own Fourier series: its fundamental is 70 % of the mean; below 31 f there is nothing else."""
    (clipped,) = _drawn("sinusoidal grating", period="2 mm", mean="45 %", target_modulation="70 %", angle="0 deg")
    assert isinstance(clipped, Clipped)
    strips = [piece for piece in clipped.pieces if isinstance(piece, Area)]
    edges = np.array([strip.points[0][0] for strip in strips])
    assert np.diff(edges) == pytest.approx(2.0 / 32)
    tones = np.array([strip.reflectance for strip in strips[:32]])
    for harmonic in range(1, 31):
        # Fourier coefficient of steps, exactly: each strip's integral of exp(-2 pi i h x / period)
        a, b = edges[:32], edges[1:33]
        w = 2j * np.pi * harmonic / 2.0
        size = abs(np.sum(tones * (np.exp(-w * b) - np.exp(-w * a)) / -w)) * 2 / 2.0
        assert size == pytest.approx(0.45 * 0.7 if harmonic == 1 else 0.0, abs=1e-9)
    assert tones.mean() == pytest.approx(0.45, abs=1e-12)


def test_no_gap_between_strips() -> None:
    """Each strip reaches under the next one, and they reach over the box: no light shines through."""
    (clipped,) = _drawn("sinusoidal grating", period="2 mm", mean="45 %", target_modulation="70 %", angle="30 deg")
    c, s = np.cos(np.pi / 6), np.sin(np.pi / 6)
    spans = [sorted({round((x - 10) * c + (y + 5) * s, 6) for x, y in piece.points}) for piece in clipped.pieces]

    assert all(b[0] < a[1] for a, b in pairwise(spans))
    assert spans[0][0] < -25 < 25 < spans[-1][1]  # half diagonal of 40 × 30 mm


def test_bars_are_as_wide_as_their_gaps() -> None:
    """Dark bars of half a period stand a period apart, one in the middle of the box."""
    (clipped,) = _drawn("square wave bars", period="4 mm", angle="0 deg")
    spans = sorted((min(x for x, _ in bar.points), max(x for x, _ in bar.points)) for bar in clipped.pieces[1:])

    assert [b - a for a, b in spans] == pytest.approx([2.0] * len(spans))
    assert np.diff([a for a, _ in spans]) == pytest.approx(4.0)
    assert (9.0, 11.0) in [(round(a, 9), round(b, 9)) for a, b in spans]


def test_a_star_has_its_cycles() -> None:
    """A star's tone at an angle is the sine of so many cycles around, its first maximum to the right."""
    found = _drawn("sine star", cycles=36, mean="40 %", target_modulation="80 %")
    wheel = next(piece for piece in found if isinstance(piece, Clipped))
    tones = np.array([piece.reflectance for piece in wheel.pieces])

    power = np.abs(np.fft.rfft(tones)) * 2 / len(tones)
    assert int(power[1:].argmax()) + 1 == 36
    assert power[36] == pytest.approx(0.32, rel=0.002)
    assert wheel.size[0] == pytest.approx(0.94 * 30)


def test_an_edge_lies_where_its_angle_says() -> None:
    """At 5° the dark lies left and the line through the centre leans by 5°; at 95° the dark lies above."""
    for angle, dark_side in ((5.0, (-9.0, 0.0)), (95.0, (0.0, -9.0))):
        (clipped,) = _drawn("slanted edge", angle=f"{angle} deg")
        dark = clipped.pieces[1]
        normal = np.array([np.cos(np.radians(angle)), np.sin(np.radians(angle))])
        along = np.array(dark.points) - (10.0, -5.0)
        assert sorted(np.round(along @ normal, 6))[2:] == pytest.approx([0.0, 0.0])
        assert np.dot(dark_side, normal) < 0


def test_dots_squares_and_steps_are_counted() -> None:
    """As many dots and squares as the box holds, about its centre; grey steps in rows with their own tones."""
    dots = _drawn("dot grid", pitch="5 mm", diameter="2 mm")
    assert len(dots) == 8 * 6
    assert np.mean([dot.centre for dot in dots], axis=0) == pytest.approx((10, -5))
    assert len(_drawn("checkerboard", square="5 mm")) == 8 * 6 / 2
    steps = _drawn("grey steps", reflectance=["5 %", "18 %", 0.4, "80 %"], layout="2 x 2")
    assert [round(piece.reflectance, 3) for piece in steps[1:]] == [0.05, 0.18, 0.4, 0.8]
    assert Counter(piece.points[0][1] for piece in steps[1:]).most_common()[0][1] == 2


@pytest.mark.parametrize(
    ("kind", "data", "told"),
    [
        ("sinusoidal grating", {"mean": "45 %", "target_modulation": 0.5}, "lacks 'period', from which a sinusoidal"),
        (
            "sinusoidal grating",
            {"period": "2 px", "mean": 0.4, "target_modulation": 0.5},
            "'period' of feature 'it' is",
        ),
        (
            "sinusoidal grating",
            {"period": "2 mm", "mean": 0.6, "target_modulation": 0.5},
            "swings from 29.9 % to 90.1 %",
        ),
        ("slanted edge", {"angle": 5}, "'angle' of feature 'it' is 5"),
        ("flat field", {}, "lacks 'reflectance'"),
        ("grey steps", {}, "lacks 'reflectance'"),
    ],
)
def test_what_cannot_be_drawn_is_told(kind: str, data: dict[str, Any], told: str) -> None:
    """Missing data, wrong units and tones that ink and ground cannot give are refused with the feature's name."""
    with pytest.raises(UsageError, match=told):
        _drawn(kind, **data)


def test_kinds_without_artwork_are_named() -> None:
    """What this program does not draw is left out and named."""
    chart = replace(PLAIN, features={"x": Feature("x", "colour patches", (0, 0), (9, 9), {})})

    assert "colour patches" not in DRAWN
    assert (list(pieces(chart)), without_artwork(chart)) == ([], ("x",))


def test_marks_are_rings() -> None:
    """A mark is a disc of ink with a hole of ground."""
    first, second = pieces(replace(PLAIN, marks=Marks(8.0, 4.0, ((3.0, 4.0),))))

    assert (first, second) == (Disc((3.0, 4.0), 4.0, 0.05), Disc((3.0, 4.0), 2.0, 0.85))
