"""Sine stars from frame to readings: closed forms, mosaics, sagittal and tangential, uncertainty, refusals."""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from scipy.ndimage import gaussian_filter, map_coordinates

from runner.capture.frame import crop
from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Found, Sample, Wanted
from runner.measure.methods import star_response
from runner.spec.model import Amount, Chart, Optics
from tests.measure.star_samples import F, camera_for, frame_of, locate, measure, value
from tests.scenes.stars import StarScene


@pytest.mark.parametrize("centre", [(160.3, 149.8), (157.3, 152.8), (163.0, 147.0)])
def test_the_transfer_within_0005_with_the_centre_off(centre: tuple[float, float]) -> None:
    """Blur of 0.5 px and pixel (Gaussian × sinc) within 0.005 at 0.1 to 0.45 cy/px, up to 3 px off centre.

    Without noise 0.001 is held too: codes of 16 bit leave 1e-5. MTF50 of blur and pixel along the rows is 0.32309.
    """
    scene = StarScene(centre=centre)
    read = measure(frame_of(scene.light()), camera_for(scene))

    for f in F:
        assert value(read[f"mtf at {f:g} cy/px"]) == pytest.approx(scene.mtf(f), abs=0.001)
    assert value(read["mtf50"]) == pytest.approx(scene.mtf_crossing(0.5), rel=0.001)
    assert scene.transfer(np.array([0.32309]), np.array([0.0]))[0] == pytest.approx(0.5, abs=1e-4)
    assert value(read["star centre x"]) == pytest.approx(centre[0], abs=0.005)


def test_the_stars_own_modulation() -> None:
    """Stated, it is divided by and its uncertainty comes along; not stated, the modulation at frequency 0 is told."""
    scene = StarScene()
    frame, camera = frame_of(scene.light()), camera_for(scene)
    known = measure(frame, camera, target_modulation="70 %", target_modulation_uncertainty="0.7 %")
    parts = {c.name: c for c in known["mtf at 0.2 cy/px"].components}

    assert value(known["mtf at 0.2 cy/px"]) == pytest.approx(scene.mtf(0.2), abs=2e-4)
    assert parts["target's modulation"].u == pytest.approx(0.01 * scene.mtf(0.2), rel=1e-2)
    assert value(measure(frame, camera)["low frequency modulation"]) == pytest.approx(70.0, abs=0.1)


def test_sagittal_and_tangential_by_the_place_in_the_frame() -> None:
    """Blurred along y only, 1.0 for 0.5 px: the star right of the frame's centre has its radial lines along x.

    So sagittal, whose lines are radial and whose frequency runs along y, is the blurred one; below the centre it is
    the sharp one. The worst segment is the blurred one, too. The star's frame is cut out of a wider camera's.
    """
    scene = StarScene(blur_y=1.0)
    light = scene.light()
    camera = replace(camera_for(scene), width=900, height=900)
    frames = {"right": np.full((900, 900), 0.5), "below": np.full((900, 900), 0.5)}
    frames["right"][300:600, 560:880] = light
    frames["below"][590:890, 290:610] = light
    read = {place: measure(frame_of(frame), camera) for place, frame in frames.items()}
    blurred, sharp = scene.mtf(0.2, 0.0, np.pi / 4), scene.mtf(0.2, np.pi / 2, np.pi / 4)

    assert value(read["right"]["sagittal mtf at 0.2 cy/px"]) == pytest.approx(blurred, abs=0.008)
    assert value(read["right"]["tangential mtf at 0.2 cy/px"]) == pytest.approx(sharp, abs=0.008)
    assert value(read["below"]["sagittal mtf at 0.2 cy/px"]) == pytest.approx(sharp, abs=0.008)
    assert value(read["below"]["tangential mtf at 0.2 cy/px"]) == pytest.approx(blurred, abs=0.008)
    assert value(read["right"]["worst mtf at 0.2 cy/px"]) == pytest.approx(blurred, abs=0.012)


def test_in_the_frames_centre_there_is_no_sagittal() -> None:
    """A star that covers the frame's centre has no radial direction: refused, the rest is read."""
    scene = StarScene()
    read = measure(frame_of(scene.light()), camera_for(scene))
    refusal = read["sagittal mtf50"].refusal

    assert refusal is not None
    assert (refusal.cause, "the frame's centre lies in the star" in refusal.because) == ("not defined", True)
    assert read["mtf50"].value is not None


@pytest.mark.parametrize("channel", ["green", "red"])
def test_a_mosaic_is_measured_on_its_own_pixels(channel: str) -> None:
    """A channel's star among pixels of other levels reads the closed form within 0.004; beyond its sampling nothing."""
    scene = StarScene()
    camera = camera_for(scene, mosaic="RGGB")
    light = 0.4 * scene.light()
    cell = np.array([letter == channel[0].upper() for letter in camera.mosaic]).reshape(2, 2)
    own = np.tile(cell, (150, 160))
    light[own] *= 2
    found = locate(frame_of(scene.light()), camera)
    assert isinstance(found, Found)
    read = measure(frame_of(light), camera, channel, found, target_modulation="70 %")

    for f in (0.1, 0.2, *((0.3,) if channel == "green" else ())):
        assert value(read[f"mtf at {f:g} cy/px"]) == pytest.approx(scene.mtf(f), abs=0.004)
    refusal = read["mtf at 0.4 cy/px"].refusal
    assert refusal is not None
    assert (refusal.cause, "beyond the sampling" in refusal.because) == ("undersampled", True)


def test_the_lens_alone() -> None:
    """Pixel and chart divided out of blur × pixel × chart leave the blur within 0.003."""
    scene = StarScene()
    camera = camera_for(scene)
    frame = frame_of(scene.light())
    found = locate(frame, camera)
    assert isinstance(found, Found)
    asked = (Wanted("mtf", {"frequency": Amount(0.3, "cy/px")}, {"frequency": 0.3}, "lens"),)
    chart = Chart(transfer=((0.0, 1.0), (0.6, 0.7)))
    sample = Sample(found, crop(frame, found.box, camera), camera, Optics(), chart, asked)
    read = star_response.measure(sample, star_response.Options()).readings[0]

    assert read.part == "lens"
    assert value(read) == pytest.approx(np.exp(-2 * (np.pi * 0.5 * 0.3) ** 2) / 0.85, abs=0.003)


def test_curves_are_drawn() -> None:
    """One curve over all azimuths and one for each of eight, falling, with their uncertainties."""
    scene = StarScene(noise=0.01)
    camera, frame = camera_for(scene), frame_of(scene.light(np.random.default_rng(3)))
    found = locate(frame, camera)
    assert isinstance(found, Found)
    sample = Sample(found, crop(frame, found.box, camera), camera, Optics(), Chart(), ())
    curves = star_response.measure(sample, star_response.Options()).curves

    assert len(curves) == 9
    assert curves[0].name == "mtf"
    assert [c.name for c in curves[1:3]] == ["mtf, spokes towards 0°", "mtf, spokes towards 45°"]
    assert (curves[0].y[0] > 0.9, curves[0].y[-1] < 0.2) == (True, True)
    assert all(min(c.u) > 0 for c in curves)


def _bent(light: np.ndarray) -> np.ndarray:
    y, x = np.indices(light.shape)
    return np.asarray(map_coordinates(light, [y, x + 3 * np.sin(y / 12)], order=3, mode="nearest"))


def _bars(_: np.ndarray) -> np.ndarray:
    y, x = np.indices((300, 320))
    return np.asarray(gaussian_filter(0.5 + 0.35 * np.sign(np.cos(36 * np.arctan2(y - 150, x - 160))), 0.6))


@pytest.mark.parametrize(
    ("spoilt", "cause", "words"),
    [
        (lambda light: 1.5 * light - 0.05, "clipped", "of the star's pixels lie at an end of the range"),
        (lambda light: light - 0.2, "clipped", "raise the black level"),
        (_bent, "edge not straight", "stripes stray by"),
        (_bars, "another scene", r"third harmonic is \d+ % of it \(bars have 33 %\)"),
    ],
    ids=["too bright", "cut at black", "bent chart", "a star of bars"],
)
def test_stars_that_cannot_be_measured(spoilt: Any, cause: str, words: str) -> None:
    """Clipped, bent and of bars: each is refused with its sentence."""
    scene = StarScene()
    with pytest.raises(MeasurementRefused, match=words) as refused:
        measure(frame_of(spoilt(scene.light())), camera_for(scene))
    assert refused.value.cause == cause


def test_a_tone_that_is_not_the_stated_one_is_told() -> None:
    """Codes of gamma 2.2 called linear carry a remark about their harmonics on every transfer."""
    scene = StarScene()
    read = measure(frame_of(scene.light() ** (1 / 2.2)), camera_for(scene))

    assert any("another tone curve than stated" in flag for flag in read["mtf50"].flags)


def test_stripes_too_fine_for_a_reference_are_told() -> None:
    """A star that begins at 0.13 cy/px needs its own modulation stated, and reads right with it."""
    scene = StarScene(outer=100)
    frame, camera = frame_of(scene.light()), camera_for(scene)
    refusal = measure(frame, camera)["mtf50"].refusal

    assert refusal is not None
    assert "state the star's own: star response: {target_modulation: …}" in refusal.because
    stated = measure(frame, camera, target_modulation="70 %")
    assert value(stated["mtf at 0.3 cy/px"]) == pytest.approx(scene.mtf(0.3), abs=0.001)


def _scores(count: int, seed: int, kinds: tuple[int, ...] = (36, 72, 144)) -> dict[str, list[float]]:
    """Return (value - truth) / u of stars of all kinds in noise."""
    rng = np.random.default_rng(seed)
    scores: dict[str, list[float]] = {}
    for number in range(count):
        cycles = int(rng.choice(kinds))
        outer = {36: 120, 72: 140, 144: 200}[cycles] * rng.uniform(0.9, 1.3)
        size = int(2 * outer + 40), int(2 * outer + 30)
        a, b = rng.uniform(-0.03, 0.03, 2)
        scene = StarScene(
            size,
            (size[0] / 2 + rng.uniform(-3, 3), size[1] / 2 + rng.uniform(-3, 3)),
            cycles,
            outer,
            float(rng.choice([0.35, 0.6, 1.0])),
            modulation=rng.uniform(0.5, 0.8),
            phase=rng.uniform(0, 6),
            affine=((1 + a, b), (b, 1 - a)) if number % 2 else ((1.0, 0.0), (0.0, 1.0)),
            shading=(rng.uniform(-0.1, 0.1), rng.uniform(-0.1, 0.1)),
        )
        quiet, camera = scene.light(), camera_for(scene)
        truth = {f"mtf at {f:g} cy/px": scene.mtf(f) for f in (0.1, 0.2, 0.3, 0.4, 0.45)}
        for f in (0.2, 0.4):
            truth[f"worst mtf at {f:g} cy/px"] = min(scene.mtf(f, k * np.pi / 4, np.pi / 4) for k in range(8))
        truth |= {"mtf50": scene.mtf_crossing(0.5), "low frequency modulation": 100 * scene.modulation}
        truth |= {"star centre x": scene.centre[0], "star centre y": scene.centre[1]}
        for _ in range(5):
            light = quiet + rng.normal(0, rng.choice([0.005, 0.01, 0.02]), quiet.shape)
            own = measure(frame_of(light, camera), camera, target_modulation=scene.modulation)
            read = {"": measure(frame_of(light, camera), camera), ", own modulation stated": own}
            for words, readings in read.items():
                for label, true in truth.items():
                    reading = readings[label]
                    if reading.value is not None and (not words or "mtf" in label):
                        scores.setdefault(label + words, []).append((reading.value - true) / (reading.u or 1))
    return scores


def test_the_stated_uncertainty_covers() -> None:
    """10 noisy stars, transfers pooled: ±2u holds the truth in 93 % less two deviations of the sample, or more."""
    scores = _scores(2, 5, (36,))
    pooled = np.array([s for label, each in scores.items() if label.startswith("mtf") for s in each])

    assert np.mean(np.abs(pooled) <= 2) >= 0.93 - 2 * np.sqrt(0.93 * 0.07 / 10)
    assert 0.6 < np.std(pooled) < 1.4


@pytest.mark.study
def test_the_stated_uncertainty_covers_over_a_thousand_stars() -> None:
    """±2u holds the truth in 93 % or more of 1000 stars, and spread/u lies in 0.8 to 1.25 where noise dominates."""
    scores = _scores(200, 11)
    for label, each in sorted(scores.items()):
        z = np.array(each)
        held = 100 * np.mean(np.abs(z) <= 2)
        print(f"{label:50s} {z.size:5d} {z.mean():6.2f} {z.std():6.2f} {held:6.1f}")
        assert held >= 93
        assert z.std() < 1.25


@pytest.mark.parametrize(
    ("options", "words"),
    [({"target_modulation": "0 %"}, "target_modulation is '0 %'"), ({"segments": 16}, "unknown option 'segments'")],
)
def test_options_are_held_to_their_meaning(options: dict[str, Any], words: str) -> None:
    """A modulation of nothing and an unknown key are told."""
    with pytest.raises(UsageError, match=words):
        star_response.read_options(options)


def test_quantities_are_those_of_the_trade() -> None:
    """Any crossing from 1 to 99 % of any family; a transfer needs its frequency; what is unknown is None."""
    info = star_response.quantity("worst_mtf20")

    assert info is not None
    assert info.unit == "cy/px"
    assert (star_response.quantity("mtf") or star_response._PLAIN["diameter_ratio"]).parameters == {
        "frequency": "cy/px"
    }
    assert star_response.quantity("mtf100") is None
    assert star_response.quantity("edge_width") is None
    assert {"mtf50", "worst_mtf", "sagittal_mtf50", "third_harmonic"} <= set(star_response.quantities())
