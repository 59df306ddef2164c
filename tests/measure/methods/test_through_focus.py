"""Focus, depth and the focal surface come back from through-focus sets whose truth is a closed form.

Curves are those of a defocused circular pupil (Hopkins, Proc. R. Soc. A 231 (1955) 91) at a quarter of its cut-off,
f/2.8, 0.55 µm, rendered by plain quadrature in the twin test of the peak's fit.
"""

from dataclasses import dataclass, replace
from functools import cache

import numpy as np
import pytest

from runner.capture.frame import Box, Crop
from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Found, Measurement, NotFound, Sample, Scene, Step, Wanted
from runner.measure.methods import through_focus
from runner.measure.reading import Component, Reading, Refusal
from runner.spec.model import Amount, Camera, Chart, Optics
from tests.measure.numerics.test_focus_curve import _curve

CAMERA = Camera(width=1600, height=1200, bit_depth=12, black_level=64, white_level=4095, pixel_pitch_um=3.0)
CENTRES = {f"r{r}c{c}": (160 + 320 * c, 120 + 480 * r) for r in range(3) for c in range(5)}
FREQUENCY = Amount(0.16, "cy/px")
BEST = Wanted("best_focus", {}, {})


@dataclass(frozen=True)
class Lens:
    """A focal surface, µm: height, rise across, rise down, corner over centre, sagittal minus tangential there."""

    height: float = 1.5
    across: float = 10.0
    down: float = -4.0
    sag: float = -6.0
    astigmatism: float = 5.0

    def focus(self, x: float, y: float, kind: float) -> float:
        """Return best focus at a place of the frame."""
        reach = ((x - 800) ** 2 + (y - 600) ** 2) / 1000**2
        plane = self.height + self.across * (x / 1600 - 0.5) + self.down * (y / 1200 - 0.5)
        return plane + (self.sag + self.astigmatism * kind) * reach


@cache
def _table() -> tuple[np.ndarray, np.ndarray]:
    z = np.arange(-60, 60.1, 0.5)
    return z, _curve(z, 0.0)


def _direction(name: str, number: int) -> tuple[float, float]:
    """Return an edge's direction of modulation and its kind: every other region lies along the radius."""
    x, y = CENTRES[name]
    radius = float(np.degrees(np.arctan2(y - 600, x - 800)))
    if (x, y) == (800, 600):
        return 5.0, 0.0
    return (radius + 10, -0.5) if number % 2 else (radius + 80, 0.5)


def _scene(
    lens: Lens, noise: float = 0.0, seed: int = 0, step: float = 4.0, names: tuple[str, ...] = tuple(CENTRES)
) -> Scene:
    rng = np.random.default_rng(seed)
    places = np.arange(-36, 36.1, step)
    table = _table()
    steps = []
    for z in places:
        samples, readings = [], []
        for number, name in enumerate(names):
            direction, kind = _direction(name, number)
            x, y = CENTRES[name]
            box = Box(x - 40, y - 60, x + 40, y + 60)
            crop = Crop("f.tif", box, np.zeros((4, 4)), CAMERA)
            found = Found(name, box, geometry={"edge_direction": direction})
            samples.append(Sample(found, crop, CAMERA, Optics(), Chart(), ()))
            value = float(np.interp(z - lens.focus(x, y, kind), *table)) + noise * rng.standard_normal()
            parts = (Component("noise", max(noise, 1e-4), "A", averages=True),)
            readings.append(
                Reading(name, "mtf", "1", value, max(noise, 1e-4), parts, parameters={"frequency": FREQUENCY})
            )
        steps.append(Step({"z": f"{z}um"}, {}, tuple(samples), tuple(readings)))
    return Scene("", names, tuple(steps), (), (1600, 1200), CAMERA, Optics(), Chart(), (BEST,))


def _gather(scene: Scene, **asked: object) -> Measurement:
    return through_focus.gather(scene, through_focus.read_options({"frequency": "0.16 cy/px", **asked}))


def _values(made: Measurement) -> dict[str, tuple[float, float]]:
    return {r.quantity: (float(r.value), float(r.u)) for r in made.readings if r.value is not None and r.u is not None}


TRUTH = {
    "best_focus": 1.5,
    "focus_tilt_x": 10.0,
    "focus_tilt_y": -4.0,
    "field_curvature": -6.0,
    "astigmatism": 5.0,
    "focal_surface_tilt": float(np.degrees(np.arctan(np.hypot(10 / 4800, 4 / 3600)))),
}


def test_a_known_focal_surface_without_noise() -> None:
    """Focus within 2 % of the depth of focus, tilt within 3 %, everything within its stated uncertainty."""
    found = _values(_gather(_scene(Lens())))
    z, curve = _table()
    inside = z[curve >= 0.8 * curve.max()]
    depth = float(inside[-1] - inside[0])

    assert abs(found["best_focus"][0] - 1.5) < 0.02 * depth
    assert found["focal_surface_tilt"][0] == pytest.approx(TRUTH["focal_surface_tilt"], rel=0.03)
    assert found["depth_of_focus"][0] == pytest.approx(depth, abs=0.5)  # the table's own grid
    assert found["peak_transfer"][0] == pytest.approx(float(curve.max()), abs=0.002)
    for name, truth in TRUTH.items():
        assert abs(found[name][0] - truth) <= 2 * found[name][1], name


def test_the_stated_uncertainty_covers_noise() -> None:
    """Over 200 sets with noise of 0.01 in the transfer 93 % and more of every term lie within 2u."""
    inside: dict[str, list[bool]] = {name: [] for name in TRUTH}
    for seed in range(200):
        found = _values(_gather(_scene(Lens(), noise=0.01, seed=seed)))
        for name, truth in TRUTH.items():
            inside[name].append(abs(found[name][0] - truth) <= 2 * found[name][1])

    for name, hits in inside.items():
        assert np.mean(hits) >= 0.93, name


def test_sagittal_lies_across_the_radius() -> None:
    """Regions whose modulation lies across the radius focus higher by the astigmatism: its sign follows."""
    plus, minus = (_values(_gather(_scene(Lens(astigmatism=a))))["astigmatism"][0] for a in (5.0, -5.0))

    assert plus == pytest.approx(5, abs=0.3)
    assert minus == pytest.approx(-5, abs=0.3)


def test_one_region_has_a_focus_but_no_tilt() -> None:
    """What one region cannot tell is refused with its reason; a length without a pixel pitch gives no angle."""
    scene = _scene(Lens(), names=("r1c2",))
    made = _gather(scene)
    refused = {r.quantity: r.refusal.because for r in made.readings if r.refusal}

    assert set(_values(made)) == {"best_focus", "depth_of_focus", "peak_transfer"}
    assert "do not tell it" in refused["astigmatism"]
    bare = replace(_scene(Lens()), camera=replace(CAMERA, pixel_pitch_um=None))
    assert (
        "pixel pitch"
        in {r.quantity: r.refusal.because for r in _gather(bare).readings if r.refusal}["focal_surface_tilt"]
    )


def test_a_set_that_ends_too_early() -> None:
    """A peak at the end of the range, or beyond it, is never extrapolated."""
    with pytest.raises(MeasurementRefused, match="r1c2: the largest value lies at the end of the range"):
        _gather(_scene(Lens(height=60), names=("r1c2",)))


def test_numbered_files_need_the_size_of_a_step() -> None:
    """Plain numbers are places in a row: the spec says how far apart, else nothing is measured."""
    scene = _scene(Lens(), names=("r1c2",), step=4.0)
    numbered = replace(scene, steps=tuple(replace(s, axes={"z": f"{n:02d}"}) for n, s in enumerate(scene.steps)))

    assert _values(_gather(numbered, step="4 um"))["best_focus"][0] == pytest.approx(36 + 1.5, abs=0.2)
    with pytest.raises(MeasurementRefused, match="position of step '00' is not known"):
        _gather(numbered)
    with pytest.raises(MeasurementRefused, match="two steps have the same position"):
        _gather(replace(scene, steps=(*scene.steps, scene.steps[0])))
    seconds = tuple(replace(s, axes={"z": f"{n} s"}) for n, s in enumerate(scene.steps))
    with pytest.raises(MeasurementRefused, match="is no length on the sensor"):
        _gather(replace(scene, steps=seconds))


def test_sidecars_count_before_names() -> None:
    """A stage's own position is believed before the number in a file's name."""
    scene = _scene(Lens(), names=("r1c2",))
    moved = tuple(replace(s, taken={"position": Amount(float(s.axes["z"][:-2]) / 1000 + 1, "mm")}) for s in scene.steps)

    assert _values(_gather(replace(scene, steps=moved)))["best_focus"][0] == pytest.approx(1001.5, abs=0.2)


def test_a_region_that_is_lost_everywhere_is_named() -> None:
    """A wanted surface with a hole is not measured, with the region and the reason."""
    scene = _scene(Lens())
    lost = NotFound("r0c0", None, "no edge", "nothing there")
    blind = tuple(
        replace(
            s,
            readings=tuple(
                replace(r, value=None, u=None, refusal=Refusal("too dark", "no light")) if r.region == "r0c0" else r
                for r in s.readings
            ),
        )
        for s in scene.steps
    )
    with pytest.raises(MeasurementRefused, match="r0c0: nothing there"):
        _gather(replace(scene, lost=(lost,)))
    with pytest.raises(MeasurementRefused, match="r0c0: no light"):
        _gather(replace(scene, steps=blind))


@pytest.mark.parametrize(
    ("asked", "words"),
    [({"frequency": "0.1"}, "frequency is '0.1'"), ({"step": "-2 um"}, "step"), ({"share": "99 %"}, "share")],
)
def test_options_are_kept_inside_their_meaning(asked: dict[str, str], words: str) -> None:
    """A frequency has its unit, a step goes forward, the depth ends below the peak."""
    with pytest.raises(UsageError, match=words):
        through_focus.read_options(asked)
