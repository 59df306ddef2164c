"""The joint fit on its own: closed-form parts, symmetry of the picture, linear response, what it leaves out."""

from dataclasses import replace

import numpy as np
import pytest

from runner.errors import MeasurementRefused
from runner.measure.numerics import edge_model as em
from runner.measure.numerics.edge_curves import Curves
from runner.measure.numerics.edge_fit import fit_edge
from runner.measure.numerics.edge_readouts import crossing, edge_width, modulation, position
from runner.measure.numerics.line_spread import Array
from tests.scenes.edges import EdgeScene, bar_scene
from tests.scenes.line_spreads import Gaussian, Pupil, box

FREQUENCIES = np.array([0.05, 0.1, 0.2, 0.3, 0.4, 0.5])


def light(scene: EdgeScene, rng: np.random.Generator | None = None) -> Array:
    """Return a scene's light as a fraction of range, with its read noise if a generator draws it."""
    noise = 0.0 if rng is None else scene.read_noise * rng.standard_normal(scene.signal().shape)
    return np.asarray((scene.signal() + noise) / 65535)


@pytest.mark.parametrize("direction", [5.0, -12.0, 97.0, 200.0])
@pytest.mark.parametrize("sigma", [0.5, 1.2])
def test_parts_of_a_gaussian_edge(direction: float, sigma: float) -> None:
    """Levels, direction, place and the Gaussian of a noiseless edge come back as the scene states them.

    Levels within 0.05 % of the step, direction 0.005°, place 0.003 px, sigma 1 %: a tenth of what the method promises
    for modulation (0.003) and below it for MTF50 (0.5 %, of which kernels may carry the rest).
    """
    size = (120, 80) if abs(np.sin(np.radians(direction))) > 0.7 else (80, 120)
    scene = EdgeScene(Gaussian(sigma), size, direction, offset=0.37)
    fit = fit_edge(light(scene))

    assert fit.parts.low == pytest.approx(8000 / 65535, abs=5e-4 * 32000 / 65535)
    assert fit.parts.rise == pytest.approx(32000 / 65535, rel=5e-4)
    assert np.cos(fit.parts.line.normal - np.radians(direction)) > np.cos(np.radians(0.005))
    assert position(Curves(fit)).value == pytest.approx(0.37, abs=3e-3)
    assert fit.parts.sigma == pytest.approx(sigma, rel=0.01)
    assert sorted(fit.sides) == pytest.approx(sorted(scene.sides), abs=1e-4)


@pytest.mark.parametrize("name", ["quarter turn", "mirror", "inverted contrast"])
def test_same_fit_of_the_same_edge(name: str) -> None:
    """A picture turned by 90°, mirrored or inverted has the same |H| (1e-4) and edge width, and its place follows.

    1e-4 is the rest of the iteration: it stops at steps below 1e-3 px, of which |H| feels the square.
    """
    rng = np.random.default_rng(5)
    picture = light(EdgeScene(Pupil(0.7, coma=0.4), (80, 120), 6.3, offset=0.4, read_noise=100), rng)
    other = {"quarter turn": np.rot90(picture), "mirror": picture[:, ::-1], "inverted contrast": 1 - picture}[name]
    one, two = Curves(fit_edge(picture)), Curves(fit_edge(other))

    assert np.abs(two.transfer(FREQUENCIES)[0]) == pytest.approx(np.abs(one.transfer(FREQUENCIES)[0]), abs=1e-4)
    assert edge_width(two).value == pytest.approx(edge_width(one).value, rel=1e-4)
    sign = -1 if name == "inverted contrast" else 1  # the normal points to the other side, hence distances along it
    assert position(two).value == pytest.approx(sign * position(one).value, abs=1e-3)
    low = 1 - one.fit.parts.low - one.rise if sign < 0 else one.fit.parts.low
    assert two.fit.parts.low == pytest.approx(low, abs=1e-5)
    assert two.fit.covariance.shape == one.fit.covariance.shape


def test_change_is_what_a_new_fit_finds() -> None:
    """`change` of a small disturbance predicts what a fit of the disturbed picture finds, in every value read from it.

    Second order and the weights' own change leave up to a tenth of the change; each value is compared in its u.
    """
    rng = np.random.default_rng(6)
    picture = light(EdgeScene(Gaussian(0.6), (80, 120), 7.0, read_noise=320), rng)
    before = Curves(fit_edge(picture))
    for _ in range(3):
        disturbed = 0.3 * 320 / 65535 * rng.standard_normal(picture.shape)
        after, change = Curves(fit_edge(picture + disturbed)), before.fit.change(disturbed)
        for read in (edge_width, modulation, position, lambda c: c.modulus_at(0.2), lambda c: crossing(c, 0.5, 1.0)):
            one, two = read(before), read(after)
            assert one is not None
            assert two is not None
            found = (two.value - one.value) / one.u(before.fit.sampling)
            assert found == pytest.approx(float(one.by @ change) / one.u(before.fit.sampling), abs=0.05)
    assert before.fit.change(np.zeros_like(picture)) == pytest.approx(0, abs=0)


def test_defects_and_unused_sites_count_for_nothing() -> None:
    """Dead pixels are left out and counted, other colours' sites are never looked at; the input stays as it was."""
    rng = np.random.default_rng(7)
    scene = EdgeScene(Gaussian(0.8), (120, 120), 10.0, read_noise=64)
    picture = light(scene, rng)
    broken = picture.copy()
    broken[[20, 60, 61, 100], [58, 70, 90, 20]] = 0.0, 1.0, 0.0, 1.0
    kept = broken.copy()
    fit = fit_edge(broken)
    assert fit.left_out == 4
    assert np.array_equal(broken, kept)
    assert fit.parts.rise == pytest.approx(fit_edge(picture).parts.rise, rel=1e-4)

    sites = np.zeros(picture.shape, dtype=bool)
    sites[::2, ::2] = sites[1::2, 1::2] = True
    one = fit_edge(np.where(sites, picture, 0.9), sites=sites)
    two = fit_edge(np.where(sites, picture, 0.1), sites=sites)
    assert one.parts.kernels == pytest.approx(two.parts.kernels, abs=1e-12)
    h = Curves(one).transfer(FREQUENCIES)[0]
    assert np.abs(h) == pytest.approx(scene.mtf(FREQUENCIES), abs=0.006)  # four times the noise at 0.5 cy/px


def test_no_edge_no_fit() -> None:
    """A constant region and plain noise are refused as `no edge`; a step of six times the noise is measured."""
    rng = np.random.default_rng(8)
    noise = 0.3 + 0.01 * rng.standard_normal((80, 60))
    for region in (np.full((80, 60), 0.3), noise):
        with pytest.raises(MeasurementRefused, match=r"no step stands out of the region's noise") as refused:
            fit_edge(region)
        assert refused.value.cause == "no edge"
    scene = replace(EdgeScene(Gaussian(0.8), (60, 80)), low=18000, high=22000)
    assert fit_edge(light(scene) + noise - 0.3).parts.rise == pytest.approx(4000 / 65535, rel=0.05)
    for nothing in (bar_scene(EdgeScene(size=(60, 90)), 20) / 65535, np.tile(np.linspace(0.1, 0.9, 60), (90, 1))):
        with pytest.raises(MeasurementRefused, match=r"no step stands out|no pair of levels") as refused:
            fit_edge(nothing)
        assert refused.value.cause == "no edge"


def test_shading_comes_back() -> None:
    """A shading of 8 % along x and 5 % along y over half the region is found within 0.5 % when it is fitted.

    When it is not, what a free fit would find is told all the same (2 %), and the fit keeps none.
    """
    scene = EdgeScene(Gaussian(0.8), (80, 120), 5.0, shading=(0.08, 0.05, 0.0))
    c, s = np.cos(np.radians(5)), np.sin(np.radians(5))
    true = np.array([0.08 * c / 40 + 0.05 * s / 60, 0.05 * c / 60 - 0.08 * s / 40]) * scene.half_length
    fit, without = (fit_edge(light(scene), shading=asked) for asked in ("fitted", "none"))

    assert fit.parts.shade == pytest.approx(true, abs=0.005)
    assert fit.shading
    assert without.shade_free[0] == pytest.approx(true, abs=0.02)
    assert not without.parts.shade.any()
    assert np.abs(without.unshaded).max() > np.abs(fit.unshaded).max() == 0


def test_sampling_covariance_is_the_scatter_of_captures() -> None:
    """Over 80 captures Re H at 0.25 cy/px, angle and step scatter as told, and the posterior is never smaller.

    80 drawings know a deviation to 8 %; three of those are allowed.
    """
    rng = np.random.default_rng(5)
    scene = EdgeScene(Pupil(0.6), (40, 60), 9.0, read_noise=640)
    found, told, whole = [], np.zeros(3), np.zeros(3)
    for _ in range(80):
        curves = Curves(fit_edge(light(scene, rng)))
        h, by = curves.transfer(np.array([0.25]))
        size = curves.fit.covariance.shape[0]
        angle = (np.arange(size) == em.FIXED + 1) / curves.fit.parts.line.half
        gradients = (curves.full(by[0].real), angle, curves.full(curves.areas))
        found.append([h[0].real, curves.fit.parts.line.tilt, curves.rise])
        told += [g @ curves.fit.sampling @ g / 80 for g in gradients]
        whole += [g @ curves.fit.covariance @ g / 80 for g in gradients]

    assert np.std(found, axis=0) == pytest.approx(np.sqrt(told), rel=0.24)
    assert np.all(whole >= told)


def test_smoothing_is_told_where_it_bites() -> None:
    """The height that a prior takes from a line spread is none for a Gaussian and has its sign for a box.

    A flat top is rounded, so its middle reads high: at a noise of 3 % of the step by some per cent, and told as such.
    """
    rng = np.random.default_rng(7)
    told = []
    for spread in (Gaussian(0.6), box(2.0)):
        scene = EdgeScene(spread, (80, 120), 6.0, read_noise=1000)
        every = []
        for _ in range(8):
            curves = Curves(fit_edge(light(scene, rng)))
            middle = curves.at(np.array([-curves.fit.parts.shift / curves.rise]))
            every.append(float(middle[3][0] @ curves.fit.smoothing[curves.index] / middle[2][0]))
        told.append(np.mean(every))

    assert abs(told[0]) < 0.01
    assert told[1] > 3 * abs(told[0])


@pytest.mark.parametrize("direction", [4.0, float(np.degrees(np.arctan(0.5)))])
def test_sharper_than_the_pixel(direction: float) -> None:
    """An edge without any blur settles, also at atan 1/2 where samples repeat: modulation within 0.003."""
    scene = EdgeScene(Gaussian(0.05), (60, 90), direction)
    h = Curves(fit_edge(light(scene))).transfer(FREQUENCIES[:4])[0]

    assert np.abs(h) == pytest.approx(scene.mtf(FREQUENCIES[:4]), abs=0.003)
