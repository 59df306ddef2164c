"""A curve through patches says between them what the transfer function is, within its stated uncertainty."""

from math import exp, pi

import numpy as np
import pytest

from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, NotFound, Scene, Step, Wanted
from runner.measure.methods import transfer_curve
from runner.measure.reading import Component, Reading, Refusal
from runner.spec.model import Amount, Camera, Chart, Optics

CAMERA = Camera(width=800, height=600, bit_depth=12, black_level=64, white_level=4095)
FREQUENCIES = (0.05, 0.1, 0.15, 0.2, 0.25, 0.3, 0.35, 0.4, 0.45)


def _truth(f: float) -> float:
    """Return a Gaussian blur of 0.7 px times a square pixel."""
    return exp(-2 * (pi * 0.7 * f) ** 2) * float(np.sinc(f))


def _patch(name: str, f: float, transfer: float, u: float = 0.002, chart: float = 0.0) -> list[Reading]:
    parts = (Component("noise", u, "A", averages=True), Component("target's modulation", chart, "B", shared="own"))
    return [
        Reading(name, "grating_frequency", "cy/px", f, 1e-6),
        Reading(name, "modulation_transfer", "1", transfer, float(np.hypot(u, chart)), parts),
    ]


def _gather(readings: list[Reading], *wanted: Wanted, lost: tuple[NotFound, ...] = ()) -> Measurement:
    regions = tuple(dict.fromkeys(r.region for r in readings))
    scene = Scene(
        "", regions, (Step({}, {}, (), tuple(readings)),), lost, (800, 600), CAMERA, Optics(), Chart(), tuple(wanted)
    )
    return transfer_curve.gather(scene, transfer_curve.read_options({}))


def _at(f: float) -> Wanted:
    return Wanted("mtf", {"frequency": Amount(f, "cy/px")}, {"frequency": f})


def _named(made: Measurement, quantity: str) -> Reading:
    return next(r for r in made.readings if r.quantity == quantity)


def test_between_patches_the_curve_lies_within_its_uncertainty() -> None:
    """Noiseless patches of a known blur: at every frequency and crossing the chord's error stays below 2u.

    0.24711 cy/px is where exp(-2 pi² 0.7² f²) sinc f, the closed form of this blur and pixel, falls to 50 %.
    """
    readings = [r for i, f in enumerate(FREQUENCIES) for r in _patch(f"p{i}", f, _truth(f), u=1e-6)]
    asked = [_at(f) for f in np.linspace(0.05, 0.45, 41)]
    made = _gather(readings, *asked)

    for one in made.readings[: len(asked)]:
        f = one.parameters["frequency"].value
        assert one.value is not None
        assert one.u is not None
        assert abs(one.value - _truth(f)) <= 2 * one.u + 1e-9
        assert one.u < 0.002  # patches 0.05 cy/px apart hold a curve of this bend within 0.4 %
    crossing = _named(made, "mtf50")
    assert crossing.value is not None
    assert crossing.u is not None
    assert crossing.value == pytest.approx(0.24711, abs=2 * crossing.u)


def test_the_stated_uncertainty_covers_the_noise() -> None:
    """Of 1000 draws 93 to 99 % lie within 2u: noise of single patches, a shared chart, and the chord's bound."""
    rng = np.random.default_rng(7)
    inside = []
    for _ in range(1000):
        shared = rng.normal(0, 0.004)
        readings = [
            r
            for i, f in enumerate(FREQUENCIES)
            for r in _patch(f"p{i}", f, _truth(f) * (1 + shared) + rng.normal(0, 0.004), 0.004, 0.004 * _truth(f))
        ]
        f = float(rng.uniform(0.06, 0.44))
        (one,) = [r for r in _gather(readings, _at(f)).readings if r.quantity == "mtf"]
        assert one.value is not None
        assert one.u is not None
        inside.append(abs(one.value - _truth(f)) <= 2 * one.u)
    assert 0.93 <= np.mean(inside) <= 0.99


def test_what_patches_share_does_not_average_out() -> None:
    """Noise of single patches adds in squares, the chart's part adds up.

    Through 1 at 0, a at 0.1 and b at 0.2 the parabola at 0.15 is 0.75 a + 0.375 b - 0.125.
    """
    readings = [*_patch("a", 0.1, 0.8, 0.01, 0.02), *_patch("b", 0.2, 0.6, 0.01, 0.02)]
    one = _named(_gather(readings, _at(0.15)), "mtf")
    parts = {c.name: c.u for c in one.components}

    assert parts["noise"] == pytest.approx(0.01 * np.hypot(0.75, 0.375))
    assert parts["own"] == pytest.approx(0.02 * 1.125)
    assert one.value == pytest.approx(0.75 * 0.8 + 0.375 * 0.6 - 0.125)


def test_beyond_the_patches_nothing_is_known() -> None:
    """A frequency outside is refused; a curve that does not fall to a level gives a bound."""
    readings = [*_patch("a", 0.1, 0.8), *_patch("b", 0.2, 0.6)]
    made = _gather(readings, _at(0.3))
    outside = _named(made, "mtf")

    assert outside.refusal is not None
    assert "0.3 cy/px lies outside" in outside.refusal.because
    assert _named(made, "mtf50").bound == ("above", 0.2)
    assert _named(_gather([*_patch("a", 0.1, 0.4), *_patch("b", 0.2, 0.2)]), "mtf50").bound == ("below", 0.1)


def test_a_lost_patch_leaves_the_wanted_curve_not_measured() -> None:
    """A curve with a hole is never passed off as whole; where nothing is wanted, nothing is said."""
    missing = NotFound("c", None, "no modulation", "nothing there")
    readings = [*_patch("a", 0.1, 0.8), *_patch("b", 0.2, 0.6)]
    refused = [Reading("c", "modulation_transfer", "1", None, None, refusal=Refusal("clipped", "bright"))]

    with pytest.raises(MeasurementRefused, match="patch c: nothing there"):
        _gather(readings, _at(0.15), lost=(missing,))
    with pytest.raises(MeasurementRefused, match="patch c: bright"):
        _gather([*readings, *refused], _at(0.15))
    assert _gather(readings, lost=(missing,)).readings == ()
    assert _gather(_patch("a", 0.1, 0.8)) == Measurement(())
    with pytest.raises(MeasurementRefused, match="have 1 frequencies, a curve needs 2"):
        _gather(_patch("a", 0.1, 0.8), _at(0.1))


def test_patches_of_one_frequency_are_averaged() -> None:
    """Two patches within 2 % of a frequency make one point with the mean of both."""
    readings = [*_patch("a", 0.1, 0.8), *_patch("b", 0.101, 0.7), *_patch("c", 0.2, 0.5)]
    (curve,) = _gather(readings).curves

    assert curve.x == pytest.approx((0.1005, 0.2))
    assert curve.y == pytest.approx((0.75, 0.5))
    assert curve.u[0] == pytest.approx(0.002 / 2**0.5)
