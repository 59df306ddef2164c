"""Lateral colour from mosaics and RGB frames: planted magnifications and shifts, several frames, refusals."""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from runner.capture.frame import Frame
from runner.errors import MeasurementRefused, UsageError
from runner.measure.methods import chromatic_displacement as method
from runner.measure.numerics.vector_field import fit_field
from runner.measure.targets import checkerboard, dot_grid
from tests.measure.lattice_samples import (
    by_name,
    camera,
    colour_sample,
    colours_measured,
    drawn,
    frame,
    located,
    wanted,
)
from tests.scenes.lattices import LatticeScene, Values, colours, mosaic_of, noisy

GREEN = LatticeScene(turn=4, tilt=(3, -4), radial=(-0.1, 0.02), pitch=26, places=(11, 8))
SCENES = dict(zip(("red", "green", "blue"), colours(GREEN, 0.001, -0.002), strict=True))
SCENES["red"] = replace(SCENES["red"], moved=(0.12, -0.07))


def _planted(channel: str) -> tuple[Values, Values]:
    """Return where green shows the points, and by how much a colour shows them elsewhere."""
    places = GREEN.all_places()
    seen = GREEN.seen(places)
    inside = ((seen > 8) & (seen < np.array(GREEN.size) - 8)).all(axis=1)
    return seen[inside], (SCENES[channel].seen(places) - seen)[inside]


@pytest.mark.parametrize("target", [dot_grid, checkerboard], ids=["dots", "board"])
@pytest.mark.parametrize("channel", ["red", "blue"])
def test_planted_colour_errors(target: Any, channel: str) -> None:
    """RGGB, step/noise 50: the field at every point within 0.02 px rms and 0.06 px at worst, figures within 3 u."""
    light = mosaic_of([drawn(scene, target) for scene in SCENES.values()], "RGGB")
    light = noisy(light, 0.014, np.random.default_rng(1))
    device = camera(light, mosaic="RGGB")
    read = by_name(colours_measured(target, [light] * 1, device, channel, (0.3, 0.5)))
    seen, moved = _planted(channel)
    sample = colour_sample(target, [light], device, channel)
    points, vectors, u = method._displacements(sample, channel)
    field = fit_field(points, vectors, u, GREEN.size)
    off = field.at(seen)[0] - moved

    assert np.sqrt(np.mean(off**2)) <= 0.02
    assert np.abs(off).max() <= 0.06
    largest = read["worst chromatic displacement"]
    assert largest.value is not None
    assert abs(largest.value - np.hypot(*moved.T).max()) <= 3 * (largest.u or 0)
    ratio = read["chromatic magnification"]
    assert ratio.value is not None
    assert abs(ratio.value - SCENES[channel].scale) <= 3 * (ratio.u or 0)


def test_the_radial_part_is_signed_outwards() -> None:
    """A blue that is smaller by 0.2 % lies inwards: at half a half diagonal by 0.2 px, red outwards by 0.1 px.

    Geometry: the displacement of a magnification error is that error times the image height (200 px half diagonal).
    """
    plain = dict(zip(("red", "green", "blue"), colours(replace(GREEN, tilt=(0, 0)), 0.001, -0.002), strict=True))
    light = mosaic_of([scene.dots() for scene in plain.values()], "GRBG")
    device = camera(light, mosaic="GRBG")
    for channel, value in (("red", 0.1), ("blue", -0.2)):
        reading = by_name(colours_measured(dot_grid, [light], device, channel, (0.5,)))[
            "radial chromatic displacement at 0.5"
        ]
        assert reading.value == pytest.approx(value, abs=0.01)


def test_a_lens_of_one_colour_has_none() -> None:
    """The same scene in all colours: the largest displacement is nothing within 2 u, a bound of 0.06 px."""
    light = noisy(mosaic_of([GREEN.dots()] * 3, "RGGB"), 0.014, np.random.default_rng(2))
    read = by_name(colours_measured(dot_grid, [light], camera(light, mosaic="RGGB"), "red"))
    reading = read["worst chromatic displacement"]

    assert reading.value is not None
    assert reading.value <= 2 * (reading.u or 0) <= 0.12


def test_rgb_frames_and_several_of_them() -> None:
    """Planes of RGB on all pixels; four frames leave half the noise of one."""
    device = camera(np.zeros((240, 320)), colour="rgb")
    planes = np.stack([scene.dots() for scene in SCENES.values()], axis=-1)
    rng = np.random.default_rng(3)
    frames = [frame(noisy(planes, 0.014, rng)) for _ in range(4)]
    found = located(dot_grid, frames[0], device)
    one, four = (by_name(_rgb(found, frames[:n], device)) for n in (1, 4))
    name = "chromatic shift x"

    assert (four[name].u or 0) == pytest.approx((one[name].u or 0) / 2, rel=0.15)
    assert four[name].value == pytest.approx(0.12, abs=4 * (four[name].u or 0) + 0.01)


def _rgb(found: Any, frames: list[Frame], device: Any) -> Any:
    from runner.capture.frame import crop
    from runner.measure.contract import Sample
    from runner.spec.model import Chart, Optics

    crops = {name: tuple(crop(one, found.box, device, name) for one in frames) for name in device.channels}
    sample = Sample(found, crops["red"][0], device, Optics(), Chart(), (), frames=crops["red"], channels=crops)
    return method.measure(sample, method.Options())


@pytest.mark.parametrize(
    ("channel", "words"), [("green", "what red and blue are held against"), ("mono", "without colour")]
)
def test_where_there_is_nothing_to_hold_against(channel: str, words: str) -> None:
    """Green and mono frames answer what is asked with the reason, and nothing where nothing is."""
    light = GREEN.dots()
    device = camera(light) if channel == "mono" else camera(light, mosaic="RGGB")
    asked = colour_sample(dot_grid, [light], device, channel, wanted((0.5,), "chromatic_displacement"))
    (reading,) = method.measure(asked, method.Options()).readings

    assert words in str(reading.refusal)
    assert method.measure(replace(asked, wanted=()), method.Options()).readings == ()


def test_colours_that_show_another_scene() -> None:
    """A red that shows the grid bent by waves is no lateral colour of a lens."""
    light = mosaic_of([GREEN.dots()] * 3, "RGGB")
    sample = colour_sample(dot_grid, [light], camera(light, mosaic="RGGB"), "red")
    rng = np.random.default_rng(4)
    points, moved, u = method._displacements(sample, "red")
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(method, "_displacements", lambda *_: (points, moved + rng.normal(0, 0.6, moved.shape), u))
        with pytest.raises(
            MeasurementRefused, match=r"the points of red lie 0\.\d\d px rms off any smooth displacement"
        ):
            method.measure(sample, method.Options())


def test_beyond_the_points_nothing_is_read() -> None:
    """At an image height that no point has, the reading is refused with how far they reach."""
    light = mosaic_of([GREEN.dots()] * 3, "RGGB")
    read = by_name(colours_measured(dot_grid, [light], camera(light, mosaic="RGGB"), "red", (1.2,)))

    assert "points were seen up to 0.77" in str(read["chromatic displacement at 1.2"].refusal)


def test_a_clipped_colour_is_named() -> None:
    """Red at the white level: the sentence says which colour."""
    light = mosaic_of([1.5 * GREEN.dots(), GREEN.dots(), GREEN.dots()], "RGGB")

    with pytest.raises(MeasurementRefused, match=r"in red: .*lie at the white level") as refused:
        colours_measured(dot_grid, [light], camera(light, mosaic="RGGB"), "red")
    assert refused.value.cause == "clipped"


def test_a_declared_bias_goes_into_u() -> None:
    """A bound of 0.3 px on what a colour's blur moves is 0.3/√3 of every displacement's u (a rectangle)."""
    light = mosaic_of([GREEN.dots()] * 3, "RGGB")
    sample = colour_sample(dot_grid, [light], camera(light, mosaic="RGGB"), "red")
    read = by_name(method.measure(sample, method.read_options({"bias": "0.3 px"})))
    parts = {c.name: c.u for c in read["chromatic shift x"].components}

    assert parts["blur of one colour"] == pytest.approx(0.3 / np.sqrt(3))
    with pytest.raises(UsageError, match="bias is '3 mm'"):
        method.read_options({"bias": "3 mm"})
