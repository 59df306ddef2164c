"""Geometry from frame to readings: closed forms, both charts, mosaics, views of one chart, and every refusal."""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from runner.errors import MeasurementRefused, UsageError
from runner.measure.methods import geometry
from runner.measure.targets import checkerboard, dot_grid
from tests.measure.lattice_samples import BOTH, DISTANCE, PITCH, PIXEL, by_name, camera, drawn, measured
from tests.scenes import lattice_truth
from tests.scenes.lattices import LatticeScene, mosaic_of, noisy

VIEW = LatticeScene(turn=4, tilt=(4, -6), radial=(-0.12, 0.02), centre=(5, -3), pitch=20.5)
KNOWN: dict[str, Any] = {"pitch": "5 mm", "distance": "120 mm"}
FIELDS = (0.3, 0.6)


def _truth(scene: LatticeScene) -> dict[str, float]:
    made = lattice_truth.truth(scene, PITCH, DISTANCE, PIXEL)
    made = {name.replace("_", " "): value for name, value in made.items()}
    return made | {f"local distortion at {f:g}": lattice_truth.local_distortion(scene, f) for f in FIELDS}


@pytest.mark.parametrize("target", BOTH, ids=["dots", "board"])
def test_every_reading_of_a_tilted_view(target: Any) -> None:
    """All figures lie within 4 u of the scene's camera and lens, at step/noise 100; distortion within 0.1 %."""
    light = noisy(drawn(VIEW, target), 0.007, np.random.default_rng(1))
    read = by_name(measured(target, light, fields=FIELDS, **KNOWN))

    for name, value in _truth(VIEW).items():
        reading = read[name]
        assert reading.value is not None, name
        assert reading.u is not None
        assert abs(reading.value - value) <= 4 * reading.u, name
    assert read["local distortion at 0.6"].value == pytest.approx(_truth(VIEW)["local distortion at 0.6"], abs=0.1)
    assert read["lattice points"].value == 117
    assert read["missing points"].value == 0


def test_views_of_one_chart_agree() -> None:
    """Shifted, turned, scaled and keystoned: what belongs to the lens changes by less than 2.8 u of the difference.

    At step/noise 50, of the lens's distortion, centre and both percentages of the picture's height.
    """
    base = LatticeScene(radial=(-0.12, 0.02), centre=(5, -3), pitch=20.5)
    views = [base, replace(base, shift=(-9, 4)), replace(base, turn=7), replace(base, pitch=19, tilt=(6, -7))]
    names = ["local distortion at 0.3", "local distortion at 0.6", "optical centre x", "optical centre y"]
    names += ["tv distortion ebu", "tv distortion smia"]
    rng = np.random.default_rng(2)
    first, *others = [
        by_name(measured(dot_grid, noisy(view.dots(), 0.014, rng), fields=FIELDS, **KNOWN)) for view in views
    ]
    for name in names:
        for other in others:
            one, two = first[name], other[name]
            assert one.value is not None
            assert two.value is not None
            assert abs(one.value - two.value) <= 2.8 * np.hypot(one.u or 0, two.u or 0), name


@pytest.mark.parametrize("channel", ["red", "green", "blue"])
def test_a_mosaic_is_measured_on_its_own_pixels(channel: str) -> None:
    """Each colour has its own lens here, and its distortion comes out of its own pixels."""
    lenses = {"red": (-0.10,), "green": (-0.12,), "blue": (-0.14,)}
    scenes = {name: LatticeScene(radial=radial, places=(11, 8), pitch=25) for name, radial in lenses.items()}
    light = mosaic_of([scene.dots() for scene in scenes.values()], "BGGR")
    light = noisy(light, 0.014, np.random.default_rng(3))
    read = by_name(measured(dot_grid, light, camera(light, mosaic="BGGR"), channel=channel, fields=(0.6,)))
    reading = read["local distortion at 0.6"]

    assert reading.value is not None
    truth = lattice_truth.local_distortion(scenes[channel], 0.6)
    assert abs(reading.value - truth) <= 3 * (reading.u or 0)
    assert (reading.u or 1) < 0.05  # 0.7 % lie between two colours


def test_a_lens_without_distortion_has_no_centre() -> None:
    """Its centre is refused, its distortion is nothing within 3 u, and tangential terms are given."""
    light = noisy(LatticeScene(pitch=21).dots(), 0.014, np.random.default_rng(4))
    read = by_name(measured(dot_grid, light, fields=(0.5,)))

    assert read["optical centre x"].refusal is not None
    assert "too small to tell where its centre lies" in read["optical centre x"].refusal.because
    assert abs(read["local distortion at 0.5"].value or 1) <= 3 * (read["local distortion at 0.5"].u or 0)
    assert read["tangential p1"].value is not None


def test_a_decentred_lens_about_the_frames_middle() -> None:
    """With the centre held, tangential terms come out, and the centre is refused with the option's name."""
    scene = LatticeScene(radial=(-0.1,), tangential=(0.003, -0.002), pitch=21)
    light = noisy(scene.dots(), 0.007, np.random.default_rng(5))
    read = by_name(measured(dot_grid, light, centre="frame"))

    for name, value in (("tangential p1", 0.003), ("tangential p2", -0.002)):
        assert abs((read[name].value or 0) - value) <= 3.5 * (read[name].u or 0)
    assert read["optical centre offset"].refusal is not None
    assert "centre: frame" in read["optical centre offset"].refusal.because


def test_what_the_spec_does_not_state_is_asked_for() -> None:
    """Without pitch, distance and pixel pitch what needs them is refused with what to write; all else is measured."""
    light = VIEW.dots()
    read = by_name(measured(dot_grid, light, camera(light, pixel_pitch_um=None)))
    pitched = by_name(measured(dot_grid, light, camera(light, pixel_pitch_um=None), pitch="5 mm"))

    assert "geometry: {pitch: 5 mm}" in str(read["field of view width"].refusal)
    assert "geometry: {distance: 600 mm}" in str(pitched["field angle horizontal"].refusal)
    assert "pixel_pitch" in str(pitched["magnification"].refusal)
    assert pitched["object pixel size"].value == pytest.approx(_truth(VIEW)["object pixel size"], rel=1e-4)
    assert read["rotation"].value is not None


def test_what_lies_far_beyond_the_points_is_not_read() -> None:
    """Dots up to 0.5 half diagonals tell nothing of the corner; the sentence says how far they reach."""
    scene = LatticeScene(places=(7, 6), radial=(-0.1,))
    read = by_name(measured(dot_grid, scene.dots(), fields=(0.3, 1.0)))
    refusal = read["local distortion at 1"].refusal

    assert read["local distortion at 0.3"].value is not None
    assert refusal is not None
    assert refusal.cause == "outside the estimator's limits"
    assert "points were seen up to 0.4" in refusal.because


def test_a_crumpled_chart_is_no_lattice_of_a_flat_one() -> None:
    """Dots moved by up to 12 px in waves: no flat lattice, however the lens may be."""
    scene = LatticeScene(pitch=22, radius=0.2)
    light = scene.dots()
    y, x = np.mgrid[0:240, 0:320]
    waves = 6 * np.sin(x / 30.0) * np.sin(y / 25.0)
    source = np.clip(np.round(y + waves), 0, 239).astype(int), np.clip(np.round(x + waves), 0, 319).astype(int)

    with pytest.raises((MeasurementRefused, AssertionError), match=r"off the best view of a flat lattice|NotFound"):
        measured(dot_grid, light[source])


def test_a_lens_of_few_terms_says_so() -> None:
    """A lens with three terms, fitted with one: the residual shows, and u of the distortion holds the difference."""
    scene = LatticeScene(radial=(-0.2, 0.12), pitch=21)
    light = noisy(scene.dots(), 0.007, np.random.default_rng(6))
    short, full = (by_name(measured(dot_grid, light, fields=(0.6,), radial_terms=n)) for n in (1, 3))
    reading, truth = short["local distortion at 0.6"], lattice_truth.local_distortion(scene, 0.6)

    assert (short["distortion residual"].value or 0) > 2 * (full["distortion residual"].value or 1)
    assert {c.name for c in reading.components} >= {"lens and chart", "radial terms"}
    assert abs((reading.value or 0) - truth) <= 2.5 * (reading.u or 0)


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"pitch": "5 px"}, "pitch is '5 px'"),
        ({"pitch": "0 mm"}, "pitch is '0 mm'"),
        ({"pitch_uncertainty": "80 %"}, "allowed is 0 % to 50 %"),
        ({"radial_terms": 7}, "radial_terms is 7; allowed are whole numbers from 1 to 6"),
        ({"centre": "middle"}, "centre is 'middle'; allowed are fitted and frame"),
        ({"distanse": "1 mm"}, "did you mean 'distance'"),
    ],
)
def test_options_are_held_to_their_meaning(options: dict[str, Any], words: str) -> None:
    """Wrong units, nothing, more than half, too many terms and unknown words are told."""
    with pytest.raises(UsageError, match=words):
        geometry.read_options(options)


def test_every_quantity_is_answered() -> None:
    """Whatever the method lists it yields, as a value or with the reason why there is none."""
    light = VIEW.board()
    read = {r.quantity for r in measured(checkerboard, light, fields=(0.5,), **KNOWN).readings}

    assert read == set(geometry.quantities())
