"""Gratings from frame to readings: closed forms, mosaics, the stated uncertainty, and every refusal."""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from runner.capture.frame import Box, Frame, crop
from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Found, NotFound, Sample
from runner.measure.methods import grating_response
from runner.measure.reading import Reading
from runner.measure.targets import sinusoidal_grating
from runner.spec.model import Amount, Camera, Chart, Optics, Region
from tests.scenes.gratings import GratingScene

CAMERA = Camera(width=120, height=100, bit_depth=16, black_level=1000, white_level=61000)


def _frame(scene: GratingScene, camera: Camera = CAMERA, rng: np.random.Generator | None = None) -> Frame:
    codes = camera.black_level + scene.light(rng) * (camera.white_level - camera.black_level)
    return Frame("stripes-1.tif", "", "", np.round(codes).astype(np.uint16))


def _located(frame: Frame, camera: Camera) -> Found | NotFound:
    region = Region("patch", (Amount(50, "%"), Amount(50, "%")), (Amount(100, "%"), Amount(100, "%")))
    return sinusoidal_grating.locate([frame], [region], camera, sinusoidal_grating.Options())[0]


def _measure(frame: Frame, camera: Camera = CAMERA, channel: str = "mono", **options: Any) -> dict[str, Reading]:
    found = _located(frame, camera)
    assert isinstance(found, Found)
    sample = Sample(found, crop(frame, found.box, camera, channel), camera, Optics(), Chart(), wanted=())
    asked = grating_response.read_options(options)
    return {r.quantity: r for r in grating_response.measure(sample, asked).readings}


def _value(reading: Reading) -> float:
    assert reading.value is not None
    return reading.value


@pytest.mark.parametrize("periods", [3.0, 7.31, 31.4, 57.0])
@pytest.mark.parametrize("direction", [0.0, 12.5, 45.0, -60.0, 89.0])
def test_noiseless_gratings(periods: float, direction: float) -> None:
    """Modulation within 0.2 %, frequency within 1e-4 cy/px, direction within 0.02°, at any orientation and number.

    16 bit codes leave 1e-5 of the range; the pixel's aperture is the scene's own sinc.
    """
    f, turn = periods / 120, np.radians(direction)
    scene = GratingScene((120, 100), (f * np.cos(turn), f * np.sin(turn)), shading=(0.1, -0.1), fill=1.0, phase=0.7)
    if max(np.abs(scene.frequency)) > 0.49:
        scene = replace(scene, frequency=(0.8 * scene.frequency[0], 0.8 * scene.frequency[1]))
    read = _measure(_frame(scene))

    assert _value(read["modulation"]) == pytest.approx(100 * scene.seen_modulation, rel=0.002)
    assert _value(read["grating_frequency"]) == pytest.approx(float(np.hypot(*scene.frequency)), abs=1e-4)
    assert _value(read["grating_direction"]) == pytest.approx(direction, abs=0.02)
    assert _value(read["grating_phase"]) == pytest.approx(np.degrees(0.7), abs=0.1)


def test_the_transfer_is_the_pixels_sinc() -> None:
    """A perfect lens leaves the pixel's aperture: 0.9003 at 0.25 cy/px, 0.9836 at 0.1 (sinc f).

    The frequencies lie a hair off, so that no harmonic falls onto the sine.
    """
    for f in (0.2503, 0.1):
        read = _measure(_frame(GratingScene((120, 100), (f, 0.0), fill=1.0)), target_modulation="60 %")
        assert _value(read["modulation_transfer"]) == pytest.approx(np.sinc(f), rel=1e-3)


def test_the_targets_own_uncertainty_comes_along() -> None:
    """0.6 % of 60 % is one per cent of the transfer; patches of one chart share it."""
    scene = GratingScene((120, 100), (0.07, 0.02))
    read = _measure(_frame(scene), target_modulation="60 %", target_modulation_uncertainty="0.6 %")
    parts = {c.name: c for c in read["modulation_transfer"].components}

    assert parts["target's modulation"].u == pytest.approx(0.01, rel=1e-3)
    assert parts["target's modulation"].shared == "target's modulation"


def test_without_the_targets_modulation_there_is_no_transfer() -> None:
    """The transfer is refused with the option to write; all else is measured."""
    read = _measure(_frame(GratingScene((120, 100), (0.07, 0.02))))

    assert read["modulation_transfer"].refusal is not None
    assert "target_modulation" in read["modulation_transfer"].refusal.because
    assert read["modulation"].value is not None


def test_harmonics_of_a_cubic_tone() -> None:
    """A chain with a cubic term shows its third harmonic within 2 % of cos³ = (3 cos + cos 3)/4, and no second."""
    scene = GratingScene((120, 100), (0.061, 0.023), cubic=-0.8)
    first, third = scene.harmonics
    read = _measure(_frame(scene))

    assert _value(read["third_harmonic"]) == pytest.approx(-100 * third / first, rel=0.02)
    assert _value(read["second_harmonic"]) < 0.01


@pytest.mark.parametrize("channel", ["red", "green", "blue"])
def test_a_mosaic_is_measured_on_its_own_pixels(channel: str) -> None:
    """Each channel's stripes come out as they are, in cy/px of the raw grid, green above the others' sampling limit."""
    camera = replace(CAMERA, mosaic="GRBG")
    u = {"red": (0.11, 0.05), "green": (0.31, 0.06), "blue": (0.03, 0.2)}[channel]
    share = {"red": 0.4, "green": 0.6, "blue": 0.5}
    light = np.empty((100, 120))
    for name in camera.channels:
        cell = np.array([c == name[0].upper() for c in camera.mosaic]).reshape(2, 2)
        mask = np.tile(cell, (50, 60))
        light[mask] = GratingScene((120, 100), u, level=share[name], modulation=0.5).light()[mask]
    frame = Frame("s.tif", "", "", np.round(1000 + 60000 * light).astype(np.uint16))
    box = Box(0, 0, 120, 100)
    found = Found("patch", box, geometry={"frequency_x": u[0], "frequency_y": u[1]})
    sample = Sample(found, crop(frame, box, camera, channel), camera, Optics(), Chart(), wanted=())
    read = {r.quantity: r for r in grating_response.measure(sample, grating_response.Options()).readings}

    assert _value(read["modulation"]) == pytest.approx(50.0, rel=1e-3)
    assert _value(read["grating_frequency"]) == pytest.approx(float(np.hypot(*u)), abs=1e-5)


def test_the_spectrum_is_marked_at_its_peaks() -> None:
    """The map's highest ordinates off the origin lie at the marks of +f and -f, within its own coarseness."""
    scene = GratingScene((120, 100), (0.21, -0.13))
    found = _located(_frame(scene), CAMERA)
    assert isinstance(found, Found)
    sample = Sample(found, crop(_frame(scene), found.box, CAMERA), CAMERA, Optics(), Chart(), wanted=())
    (area,) = grating_response.measure(sample, grating_response.Options()).maps
    values, x, y = np.array(area.values), np.array(area.x), np.array(area.y)
    origin = np.hypot(x[None, :], y[:, None]) < 0.05
    row, column = np.unravel_index(np.where(origin, -200, values).argmax(), values.shape)

    assert max(values.shape) <= 65
    assert values.max() == 0.0
    assert values[row, column] == pytest.approx(20 * np.log10(0.6 / 2), abs=0.5)  # half the modulation, Hann's scallop
    marks = {words: (mx, my) for mx, my, words in area.marks}
    assert marks["DC"] == (0.0, 0.0)
    assert min(np.hypot(x[column] - mx, y[row] - my) for mx, my in (marks["+f"], marks["-f"])) < 0.02


def test_the_stated_uncertainty_covers() -> None:
    """Over 300 noisy patches ±2u holds modulation, frequency and direction in 93 % or more, and spread/u is near 1.

    300 draws: 93 % less 2 standard deviations of the sample; the spread's own scatter is 4 %.
    """
    rng = np.random.default_rng(7)
    off: dict[str, list[float]] = {"modulation": [], "grating_frequency": [], "grating_direction": []}
    for _ in range(300):
        f, turn = rng.uniform(0.04, 0.4), rng.uniform(-1.5, 1.5)
        scene = GratingScene((64, 60), (f * np.cos(turn), f * np.sin(turn)), phase=rng.uniform(-3, 3), noise=0.01)
        read = _measure(_frame(scene, rng=rng))
        for name, truth in (("modulation", 60.0), ("grating_frequency", f), ("grating_direction", np.degrees(turn))):
            off[name].append((_value(read[name]) - truth) / (read[name].u or 1))
    for ratios in off.values():
        assert np.mean(np.abs(ratios) <= 2) >= 0.93 - 2 * np.sqrt(0.93 * 0.07 / 300)
        assert 0.8 < np.std(ratios) < 1.25


@pytest.mark.parametrize(
    ("light", "cause"),
    [
        (lambda _r: np.full((100, 120), 0.5), "no picture"),
        (lambda r: r.normal(0.5, 0.01, (100, 120)), "no modulation"),
        (lambda r: r.normal(0.0, 1e-4, (100, 120)), "too dark"),
    ],
)
def test_where_there_are_no_stripes(light: Any, cause: str) -> None:
    """A constant, a noisy and a dark patch are told apart."""
    codes = np.round(1000 + 60000 * light(np.random.default_rng(1))).astype(np.uint16)
    found = _located(Frame("s.tif", "", "", codes), CAMERA)

    assert isinstance(found, NotFound)
    assert found.cause == cause


def _two(f: float, g: float) -> np.ndarray:
    one, two = GratingScene((120, 100), (f, 0.02)), GratingScene((120, 100), (0.03, g), modulation=0.35)
    return (one.light() + two.light()) / 2


@pytest.mark.parametrize(
    ("light", "cause", "words"),
    [
        (
            GratingScene((120, 100), (0.05, 0.01), level=0.8, modulation=0.6).light(),
            "clipped",
            "at an end of the range",
        ),
        (GratingScene((120, 100), (0.496, 0.0)).light(), "undersampled", "from the limit of sampling"),
        (_two(0.09, 0.2), "another scene", "explain the patch badly"),
    ],
)
def test_patches_that_cannot_be_measured(light: np.ndarray, cause: str, words: str) -> None:
    """Clipped crests, stripes at the limit of sampling and two gratings at once are refused with their reason."""
    codes = np.clip(np.round(1000 + 60000 * light), 0, 61000).astype(np.uint16)

    with pytest.raises(MeasurementRefused, match=words) as refused:
        _measure(Frame("s.tif", "", "", codes))
    assert refused.value.cause == cause


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"target_modulation": "120 %"}, "target_modulation is '120 %'"),
        ({"target_modulation": "3 px"}, "allowed is 0.1 % to 100 %"),
        ({"background": 5}, "background is 5"),
        ({"bakground": 1}, "unknown option 'bakground'"),
    ],
)
def test_options_are_held_to_their_meaning(options: dict[str, Any], words: str) -> None:
    """A share above the whole, another unit, an order beyond two and an unknown key are told."""
    with pytest.raises(UsageError, match=words):
        grating_response.read_options(options)


def test_stripes_that_bend_too_far_are_refused() -> None:
    """A chart seen through strong distortion: a large region is refused with the way out, a small one is measured."""
    x = np.arange(120) - 59.5
    phase = 2 * np.pi * 0.09 * x * (1 + 0.15 * x / 120)
    light = 0.5 + 0.3 * np.cos(phase)[None, :] * np.ones((100, 1))
    frame = Frame("s.tif", "", "", np.round(65535 * light).astype(np.uint16))

    with pytest.raises(MeasurementRefused, match="take a smaller region"):
        _measure(frame)
