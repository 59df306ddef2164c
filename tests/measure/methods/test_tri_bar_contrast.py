"""Elements from frame to readings: closed forms, the flat, what is refused, coverage."""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from runner.capture.frame import Box, Crop, crop
from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Found, Sample
from runner.measure.methods import tri_bar_contrast
from runner.measure.reading import Reading
from runner.spec.model import Chart, Optics
from tests.measure.tri_bar_samples import CAMERA, CELL, SCALE, contrasts, draw, frame_of, locate, pattern, period
from tests.scenes.stars import Values


def _value(reading: Reading) -> float:
    assert reading.value is not None
    return reading.value


def _by_region(readings: tuple[Reading, ...], quantity: str) -> dict[str, Reading]:
    return {r.region: r for r in readings if r.quantity == quantity}


def test_contrasts_are_the_closed_form() -> None:
    """Twelve elements without noise: contrast within 0.1 %, period within 0.1 %, a pixel of 1.25 µm within 0.1 %."""
    frame = frame_of(draw(0.0))
    read = contrasts(frame, locate(frame))

    for region, reading in _by_region(read, "tri_bar_contrast").items():
        assert _value(reading) == pytest.approx(-100 * pattern(region).seen_contrast(), abs=0.1)
    for region, reading in _by_region(read, "tri_bar_period").items():
        assert _value(reading) == pytest.approx(period(int(region[1])), rel=1e-3)
    for reading in _by_region(read, "pixel_in_object").values():
        assert _value(reading) == pytest.approx(1000 / SCALE, rel=1e-3)
    assert _value(_by_region(read, "tri_bar_direction")["v1"]) == pytest.approx(np.degrees(0.05), abs=0.1)


def test_the_flat_is_divided_out() -> None:
    """Light that falls by a half over the target leaves contrasts as they are where the flat is given."""
    light = draw(0.0)
    fall = np.linspace(1.0, 0.5, light.shape[1])[None, :] * (1 + 0.2 * np.sin(np.arange(light.shape[0]) / 3))[:, None]
    found = locate(frame_of(light))
    one = next(f for f in found if isinstance(f, Found) and f.region == "v3")
    flat = crop(frame_of(0.6 * fall + 0 * light), one.box, CAMERA)
    sample = Sample(one, crop(frame_of(0.9 * light * fall), one.box, CAMERA), CAMERA, Optics(), Chart(), ())
    with_flat = replace(sample, companions={"flat": (flat,)})
    read = tri_bar_contrast.measure(with_flat, tri_bar_contrast.Options()).readings[0]

    assert _value(read) == pytest.approx(-100 * pattern("v3").seen_contrast(), abs=0.3)
    lost = replace(sample, lost_companions={"flat": "white"})
    with pytest.raises(MeasurementRefused, match="capture 'white', the flat, gave no frames") as refused:
        tri_bar_contrast.measure(lost, tri_bar_contrast.Options())
    assert refused.value.cause == "missing companion"
    dark = replace(sample, companions={"flat": (crop(frame_of(0 * light), one.box, CAMERA),)})
    with pytest.raises(MeasurementRefused, match="of the flat lies below"):
        tri_bar_contrast.measure(dark, tri_bar_contrast.Options())


def test_hardly_seen_elements_give_their_contrast_only() -> None:
    """Where period and direction are the coarser elements', the contrast has a remark and the rest is refused."""
    frame = frame_of(draw(0.01, sigma=2.6))
    read = contrasts(frame, locate(frame))
    contrast, period_ = _by_region(read, "tri_bar_contrast")["v6"], _by_region(read, "tri_bar_period")["v6"]

    assert "period and direction taken from the coarser elements" in contrast.flags
    assert contrast.u is not None
    assert abs(_value(contrast) + 100 * pattern("v6", sigma=2.6).seen_contrast()) < 3 * contrast.u
    assert period_.refusal is not None
    assert period_.refusal.cause == "no modulation"


def _sample(light: Values, box: Box, **geometry: float) -> Sample:
    found = Found("v1", box, geometry={"period": 12.5, "turn": 0.05, "sign": -1.0, "known": 0.0, **geometry})
    cut: Crop = crop(frame_of(light), box, CAMERA)
    return Sample(found, cut, CAMERA, Optics(), Chart(), ())


@pytest.mark.parametrize(
    ("spoilt", "cause", "words"),
    [
        (lambda light: 2 * light, "clipped", "lie at an end of the range"),
        (lambda light: light - 0.3, "clipped", "raise the black level"),
        (lambda light: 0 * light + 0.5, "no modulation", "no three bars settle"),
    ],
)
def test_elements_that_cannot_be_measured(spoilt: Any, cause: str, words: str) -> None:
    """Clipped at either end, or nothing there: refused with its sentence."""
    with pytest.raises(MeasurementRefused, match=words) as refused:
        tri_bar_contrast.measure(_sample(spoilt(draw()), Box(0, 0, CELL, CELL)), tri_bar_contrast.Options())
    assert refused.value.cause == cause


def test_without_a_table_there_is_no_scale() -> None:
    """The size of a pixel is refused with the option to write."""
    sample = _sample(draw(), Box(0, 0, CELL, CELL))
    read = {r.quantity: r for r in tri_bar_contrast.measure(sample, tri_bar_contrast.Options()).readings}

    assert read["tri_bar_contrast"].value is not None
    refusal = read["pixel_in_object"].refusal
    assert refusal is not None
    assert "tri-bar elements: {elements: …}" in refusal.because


def _scores(count: int, seed: int) -> dict[str, list[float]]:
    rng = np.random.default_rng(seed)
    scores: dict[str, list[float]] = {}
    for _ in range(count):
        sigma, noise = rng.uniform(0.4, 1.6), float(rng.choice([0.004, 0.01, 0.02]))
        frame = frame_of(draw(noise, int(rng.integers(1 << 30)), sigma=sigma))
        for reading in contrasts(frame, locate(frame)):
            truth = {
                "tri_bar_contrast": -100 * pattern(reading.region, sigma=sigma).seen_contrast(),
                "tri_bar_period": period(int(reading.region[1])),
                "pixel_in_object": 1000 / SCALE,
            }
            if reading.quantity in truth and reading.value is not None:
                off = (reading.value - truth[reading.quantity]) / (reading.u or 1)
                scores.setdefault(reading.quantity, []).append(off)
    return scores


def test_the_stated_uncertainty_covers() -> None:
    """Over a noisy target of twelve elements ±2u holds contrasts and periods in 93 % less two deviations."""
    for each in _scores(1, 4).values():
        assert np.mean(np.abs(each) <= 2) >= 0.93 - 2 * np.sqrt(0.93 * 0.07 / len(each))


@pytest.mark.study
def test_the_stated_uncertainty_covers_over_a_thousand_elements() -> None:
    """±2u holds the truth in 93 % or more of 1080 elements, and spread/u lies below 1.25 (bounds dominate)."""
    for name, each in _scores(90, 14).items():
        z = np.array(each)
        held = 100 * np.mean(np.abs(z) <= 2)
        print(f"{name:24s} {z.size:5d} {z.mean():6.2f} {z.std():6.2f} {held:6.1f}")
        assert held >= 93
        assert z.std() < 1.25


def test_options_are_held_to_their_meaning() -> None:
    """A smoothing in another unit and an unknown key are told."""
    with pytest.raises(UsageError, match="smoothing is '2 mm'"):
        tri_bar_contrast.read_options({"smoothing": "2 mm"})
    with pytest.raises(UsageError, match="unknown option 'blur'"):
        tri_bar_contrast.read_options({"blur": 1})
