"""Bars from frame to readings: closed forms, mosaics, the target's contrast, uncertainty, staged bad captures."""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
import skimage.data
from scipy.ndimage import gaussian_filter

from runner.capture.frame import Box, Frame, crop
from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Found, NotFound, Sample
from runner.measure.methods import bar_response
from runner.measure.reading import Reading
from runner.measure.targets import square_wave_bars
from runner.spec.model import Amount, Camera, Chart, Optics, Region
from tests.scenes.bars import SquareScene, ThreeBars, Values
from tests.scenes.stars import StarScene

CAMERA = Camera(width=120, height=100, bit_depth=16, black_level=1000, white_level=61000)


def _frame(light: Values) -> Frame:
    return Frame("bars.tif", "", "", np.clip(np.round(1000 + 60000 * light), 0, 61000).astype(np.uint16))


def _measure(light: Values, camera: Camera = CAMERA, channel: str = "mono", **options: Any) -> dict[str, Reading]:
    frame = _frame(light)
    rows, columns = light.shape
    size = Amount(columns, "px"), Amount(rows, "px")
    region = Region("group", (Amount(columns / 2, "px"), Amount(rows / 2, "px")), size)
    found = square_wave_bars.locate([frame], [region], camera, square_wave_bars.Options())[0]
    if isinstance(found, NotFound):
        raise MeasurementRefused(found.cause, found.because)
    sample = Sample(found, crop(frame, found.box, camera, channel), camera, Optics(), Chart(), ())
    return {r.quantity: r for r in bar_response.measure(sample, bar_response.read_options(options)).readings}


def _value(reading: Reading) -> float:
    assert reading.value is not None
    return reading.value


@pytest.mark.parametrize(("f", "turn"), [(0.04, 3.0), (0.11, -60.0), (0.23, 88.0), (0.43, 12.0)])
def test_noiseless_bars(f: float, turn: float) -> None:
    """Contrast and transfers within 0.002, frequency within 1e-4, direction within 0.02 degrees, under shading."""
    u = f * np.cos(np.radians(turn)), f * np.sin(np.radians(turn))
    scene = SquareScene((120, 100), u, shading=(0.1, -0.1))
    read = _measure(scene.light(), target_contrast="60 %")

    assert _value(read["bar_contrast"]) == pytest.approx(100 * scene.seen_contrast(), abs=0.2)
    assert _value(read["contrast_transfer"]) == pytest.approx(scene.seen_contrast() / 0.6, abs=0.003)
    assert _value(read["modulation_transfer"]) == pytest.approx(scene.transfer(f), abs=0.001)
    assert _value(read["bar_frequency"]) == pytest.approx(f, abs=1e-4)
    assert _value(read["bar_direction"]) == pytest.approx(turn, abs=0.02)
    assert _value(read["second_harmonic"]) < 0.2  # four periods under shading tell it no better


def test_the_targets_contrast() -> None:
    """Not stated, transfers are refused with the option to write; stated, its uncertainty comes along, shared."""
    light = SquareScene((120, 100), (0.07, 0.02)).light()
    refusal = _measure(light)["contrast_transfer"].refusal
    read = _measure(light, target_contrast="60 %", target_contrast_uncertainty="0.6 %")["contrast_transfer"]
    part = {c.name: c for c in read.components}["target's contrast"]

    assert refusal is not None
    assert "bar response: {target_contrast: …}" in refusal.because
    assert part.u == pytest.approx(0.01 * _value(read), rel=1e-3)
    assert part.shared == "target's contrast"


@pytest.mark.parametrize("channel", ["red", "green"])
def test_a_mosaic_is_measured_on_its_own_pixels(channel: str) -> None:
    """A channel's bars among pixels of other levels come out within 0.5 % of the closed form."""
    camera = replace(CAMERA, mosaic="GRBG")
    scene = SquareScene((120, 100), (0.09, 0.04), sigma=0.8)
    cell = np.array([letter == channel[0].upper() for letter in camera.mosaic]).reshape(2, 2)
    light = 0.5 * scene.light()
    own = np.tile(cell, (50, 60))
    light[own] *= 2
    box = Box(0, 0, 120, 100)
    found = Found("group", box, geometry={"frequency_x": 0.09, "frequency_y": 0.04})
    sample = Sample(found, crop(_frame(light), box, camera, channel), camera, Optics(), Chart(), ())
    read = {r.quantity: r for r in bar_response.measure(sample, bar_response.Options()).readings}

    assert _value(read["bar_contrast"]) == pytest.approx(100 * scene.seen_contrast(), abs=0.5)


def _chequers(r: np.random.Generator) -> Values:
    y, x = np.indices((100, 120))
    board = np.sign(np.sin(x / 4 + y / 30)) * np.sign(np.sin(y / 4 - x / 30))
    return np.asarray(gaussian_filter(0.5 + 0.3 * board, 0.7) + r.normal(0, 0.005, board.shape))


def _photograph(_: np.random.Generator) -> Values:
    whole: Values = skimage.data.coins()  # type: ignore[no-untyped-call]
    return whole[:100, 40:160] / 270 + 0.01


CHALLENGES: dict[str, tuple[Any, str, str]] = {
    "lamp off": (lambda r: r.normal(0, 1e-4, (100, 120)), "too dark", "over the black level"),
    "no picture": (lambda _: np.full((100, 120), 0.5), "no picture", "same value"),
    "no chart": (lambda r: r.normal(0.5, 0.01, (100, 120)), "no modulation", "no line stands out"),
    "clipped": (lambda _: 1.4 * SquareScene().light(), "clipped", "at an end of the range"),
    "cut at black": (lambda _: SquareScene().light() - 0.25, "clipped", "raise the black level"),
    "chequers": (_chequers, "another scene", "bars explain the region badly"),
    "a star": (
        lambda r: StarScene((120, 100), (60, 50), 36, 48, noise=0.005).light(r),
        "another scene",
        "have no single frequency",
    ),
    "three bars only": (
        lambda r: ThreeBars((120, 100), period=18.0, noise=0.005).light(r),
        "another scene",
        "have no single frequency",
    ),
    "beside the group": (
        lambda r: np.where(np.arange(120) < 80, 0.5, SquareScene().light()) + r.normal(0, 0.002, (100, 120)),
        "another scene",
        "have no single frequency",
    ),
    "too far away": (lambda _: SquareScene(frequency=(0.494, 0.0)).light(), "undersampled", "from the limit of"),
    "too near": (lambda _: SquareScene(frequency=(0.021, 0.0)).light(), "too few crossings", "at least 3 are needed"),
    "turned onto the grid": (
        lambda _: SquareScene(frequency=(0.25, 0.0), sigma=0.3).light(),
        "undersampled",
        "turn the bars by a few degrees",
    ),
    "a photograph": (_photograph, "too few crossings", "2.0 periods lie in the region"),
}


@pytest.mark.parametrize("name", CHALLENGES)
def test_bad_captures_are_told(name: str) -> None:
    """Each staged bad capture ends with its cause and its sentence, from the target or the method."""
    light, cause, words = CHALLENGES[name]
    with pytest.raises(MeasurementRefused, match=words) as refused:
        _measure(light(np.random.default_rng(4)))
    assert refused.value.cause == cause


def _scores(count: int, seed: int) -> dict[str, list[float]]:
    rng = np.random.default_rng(seed)
    scores: dict[str, list[float]] = {}
    for _ in range(count):
        f, turn = rng.uniform(0.05, 0.42), rng.uniform(-1.5, 1.5)
        scene = SquareScene(
            (int(rng.uniform(60, 140)), int(rng.uniform(60, 120))),
            (f * np.cos(turn), f * np.sin(turn)),
            sigma=rng.uniform(0.3, 0.9),
            phase=rng.uniform(0, 6),
            noise=float(rng.choice([0.003, 0.01, 0.02])),
            shading=(rng.uniform(-0.1, 0.1), rng.uniform(-0.1, 0.1)),
        )
        try:
            read = _measure(scene.light(rng), target_contrast=0.6)
        except MeasurementRefused:  # blurred to nothing, or turned onto the grid
            continue
        truth = {"bar_contrast": 100 * scene.seen_contrast(), "modulation_transfer": scene.transfer(f)}
        truth |= {"bar_frequency": f, "bar_direction": np.degrees(turn)}
        for name, true in truth.items():
            scores.setdefault(name, []).append((_value(read[name]) - true) / (read[name].u or 1))
    return scores


def test_the_stated_uncertainty_covers() -> None:
    """Over 25 noisy groups ±2u holds the truth in 93 % less two deviations of the sample, or more."""
    for each in _scores(25, 2).values():
        assert np.mean(np.abs(each) <= 2) >= 0.93 - 2 * np.sqrt(0.93 * 0.07 / 25)
        assert 0.6 < np.std(each) < 1.45


@pytest.mark.study
def test_the_stated_uncertainty_covers_over_a_thousand_groups() -> None:
    """±2u holds the truth in 93 % or more of 1100 groups, and spread/u lies in 0.8 to 1.25."""
    for name, each in _scores(1100, 12).items():
        z = np.array(each)
        held = 100 * np.mean(np.abs(z) <= 2)
        print(f"{name:24s} {z.size:5d} {z.mean():6.2f} {z.std():6.2f} {held:6.1f}")
        assert held >= 93
        assert 0.8 < z.std() < 1.25


def test_options_are_held_to_their_meaning() -> None:
    """A contrast above the whole and an unknown key are told."""
    with pytest.raises(UsageError, match="target_contrast is '120 %'"):
        bar_response.read_options({"target_contrast": "120 %"})
    with pytest.raises(UsageError, match="unknown option 'contrast'"):
        bar_response.read_options({"contrast": 1})
