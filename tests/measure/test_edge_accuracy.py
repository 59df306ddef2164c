"""The joint fit against closed-form scenes: noiseless accuracy, curved edges, shading, shift theorem, Parseval.

Truth comes from tests/scenes, which shares nothing with the program. Bounds are the ones the method promises: MTF50
within 0.5 %, modulation within 0.003 at 0.1, 0.25 and 0.5 cy/px, 1 % at 45° (where all samples repeat on seven tenths
of a pixel); curved edges and a flat-field correction may cost 0.5 %.
"""

from dataclasses import replace

import numpy as np
import pytest

from runner.capture.mosaic import sites
from runner.measure.numerics.edge_curves import Curves
from runner.measure.numerics.edge_fit import fit_edge
from tests.measure.edge_samples import FREQUENCIES, at, camera_of, measure, mtf_errors, value_of
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Exponential, Gaussian, LineSpread, Pupil, Sharpened, box, triangle

SPREADS: dict[str, LineSpread] = {
    "gaussian 0.35": Gaussian(0.35),
    "gaussian 0.6": Gaussian(0.6),
    "gaussian 1.2": Gaussian(1.2),
    "diffraction 0.5": Pupil(0.5),
    "diffraction 0.8": Pupil(0.8),
    "defocus 0.3": Pupil(0.8, defocus=0.3),
    "defocus 0.6": Pupil(0.8, defocus=0.6),
    "coma 0.4": Pupil(0.7, coma=0.4),
    "coma 0.8": Pupil(0.7, coma=0.8),
    "box 1.5": box(1.5),
    "box 3": box(3.0),
    "triangle 3": triangle(3.0),
    "exponential 0.4": Exponential(0.4),
    "exponential 0.8": Exponential(0.8),
}
ANGLES = (2.0, 5.0, *(float(np.degrees(np.arctan(1 / n))) for n in (4, 3, 2)), 43.0)
"""Degrees; three of them are atan 1/4, 1/3, 1/2, where the sampling repeats."""
MTF50 = 0.005
MODULATION = 0.003


@pytest.mark.parametrize("size", [(40, 60), (80, 120)], ids=["40x60", "80x120"])
@pytest.mark.parametrize("name", SPREADS)
def test_noiseless_table(name: str, size: tuple[int, int]) -> None:
    """Every line spread at every angle from 2° to 43°: MTF50 within 0.5 %, modulation within 0.003."""
    for angle in ANGLES:
        scene = EdgeScene(SPREADS[name], size, angle, offset=0.23)
        crossing, modulation = mtf_errors(scene, measure(scene))
        assert abs(crossing) < MTF50, (angle, crossing)
        assert np.abs(modulation).max() < MODULATION, (angle, modulation)


@pytest.mark.parametrize("offset", [0.0, 0.31])
@pytest.mark.parametrize("name", ["gaussian 0.35", "gaussian 0.6", "diffraction 0.5", "triangle 3", "exponential 0.4"])
def test_forty_five_degrees(name: str, offset: float) -> None:
    """At exactly 45° MTF50 is within 1 %, or the region is refused; nothing in between."""
    scene = EdgeScene(SPREADS[name], (80, 80), 45.0, offset=offset)
    reading = measure(scene)["mtf50"]
    if reading.refusal is not None:
        assert reading.refusal.cause == "undersampled"
    else:
        assert abs(value_of(reading) / scene.mtf50() - 1) < 0.01


@pytest.mark.parametrize("direction", [5, 60, 85, 88, 92, 95, 120, 175, 182, 185, 230, 265, 275, 355])
def test_directions_and_polarities(direction: float) -> None:
    """Edges in all four directions and both polarities, steep ones too, measure the same: within 0.02 %."""
    size = (80, 120) if abs(np.cos(np.radians(direction))) > 0.5 else (120, 80)
    scene = EdgeScene(Gaussian(0.6), size, direction, offset=0.1)
    assert abs(mtf_errors(scene, measure(scene))[0]) < 2e-4


def test_widths_and_angle() -> None:
    """Edge width within 0.5 %, line spread's width within 1 % (2 % with coma), angle within 0.01°, modulation 0.1 %."""
    for name, fwhm in (("gaussian 0.6", 0.01), ("diffraction 0.5", 0.01), ("coma 0.4", 0.02), ("triangle 3", 0.01)):
        scene = EdgeScene(SPREADS[name], (80, 120), 6.3, offset=-0.2)
        readings = measure(scene)
        assert value_of(readings["edge width"]) == pytest.approx(scene.edge_width(), rel=5e-3)
        assert value_of(readings["lsf fwhm"]) == pytest.approx(scene.lsf_fwhm(), rel=fwhm)
        assert abs(value_of(readings["edge angle"])) == pytest.approx(6.3, abs=0.01)
        assert value_of(readings["edge modulation"]) == pytest.approx(100 * scene.modulation, abs=0.1)


@pytest.mark.parametrize("gain", [0.3, 0.8])
def test_overshoot_of_an_unsharp_mask(gain: float) -> None:
    """Overshoot and undershoot of a sharpened edge are those of its closed form, within 0.1 % of the step."""
    scene = EdgeScene(Sharpened(Gaussian(0.6), gain, 1.2), (80, 120), 7.0)
    readings = measure(scene)
    true = 100 * scene.overshoot()
    assert true > 2
    assert value_of(readings["overshoot"]) == pytest.approx(true, abs=0.1)
    assert value_of(readings["undershoot"]) == pytest.approx(true, abs=0.1)
    assert abs(mtf_errors(scene, readings)[0]) < MTF50


@pytest.mark.parametrize("channel", ["red", "green"])
def test_mosaic(channel: str) -> None:
    """A channel of a mosaic is measured as well on its own pixels, with nonsense on all others: MTF50 within 0.5 %."""
    for name in ("gaussian 0.35", "diffraction 0.5", "coma 0.4", "exponential 0.4"):
        for angle in (5.0, 20.0):
            scene = EdgeScene(SPREADS[name], (80, 120), angle, offset=0.23)
            codes = scene.render()
            own = sites(channel, replace(camera_of(scene), mosaic="GRBG"), (0, 0), (120, 80))
            assert own is not None
            codes[~own] = 777
            crossing, modulation = mtf_errors(scene, measure(scene, codes, mosaic="GRBG", channel=channel))
            assert abs(crossing) < MTF50, (name, angle, crossing)
            assert np.abs(modulation).max() < MODULATION, (name, angle, modulation)


@pytest.mark.parametrize("name", ["box 1.5", "box 3", "triangle 3", "exponential 0.4", "exponential 0.8"])
def test_half_width_of_kinked_line_spreads(name: str) -> None:
    """The half width of a line spread with kinks is within 1.5 %, and within 2 u, which states that bound.

    1.5 % over √3 is 0.87 %: what its u must be at least.
    """
    for angle in (2.0, 9.0, 26.0, 40.0):
        scene = EdgeScene(SPREADS[name], (80, 120), angle, offset=0.23)
        reading = measure(scene)["lsf fwhm"]
        error, u = value_of(reading) / scene.lsf_fwhm() - 1, (reading.u or 0) / scene.lsf_fwhm()
        assert abs(error) < min(0.015, 2 * u), (angle, error, u)
        assert 0.0086 < u < 0.012


def test_half_filled_pixels() -> None:
    """With half the pixel's area filled the fit's own pixel follows, and MTF50 stays within 0.5 %."""
    scene = EdgeScene(Gaussian(0.5), (80, 120), 5.0, fill=0.5)
    crossing, modulation = mtf_errors(scene, measure(scene))
    assert abs(crossing) < MTF50
    assert np.abs(modulation).max() < MODULATION


@pytest.mark.parametrize(("curve", "order"), [((0.0,), 1), ((0.8,), 2), ((2.0, 0.7), 3), ((1.5, -0.8, 0.5), 5)])
def test_curved_edges_cost_little(curve: tuple[float, ...], order: int) -> None:
    """An edge bent by up to 2 px, followed by a polynomial of its order, costs 0.5 % of MTF50 at most."""
    scene = EdgeScene(Gaussian(0.6), (80, 120), 5.0, curve=curve)
    crossing, modulation = mtf_errors(scene, measure(scene, order=order))
    assert abs(crossing) < MTF50
    assert np.abs(modulation).max() < MODULATION


def test_a_curve_that_is_not_followed_is_refused() -> None:
    """A sagitta of 2 px under a straight fit is no silent loss: the region is refused, or the loss is in u."""
    from runner.errors import MeasurementRefused

    scene = EdgeScene(Gaussian(0.6), (80, 120), 5.0, curve=(2.0,), read_noise=320)
    with pytest.raises(MeasurementRefused, match=r"departs from the fitted curve by 0\.\d+ px rms") as refused:
        measure(scene, scene.render(np.random.default_rng(1)))
    assert refused.value.cause == "edge not straight"


@pytest.mark.parametrize("name", ["gaussian 0.35", "gaussian 1.2", "diffraction 0.5", "exponential 0.8", "box 3"])
def test_shading_by_a_flat_frame(name: str) -> None:
    """20 % of shading taken out by a flat frame costs 0.5 % of MTF50 at most, with any blur."""
    scene = EdgeScene(SPREADS[name], (80, 120), 5.0, black=500, shading=(0.1, -0.06, -0.04))
    flat = scene.render(light=scene.flat())
    crossing, _ = mtf_errors(scene, measure(scene, flats=[flat], shading={"from": "flat"}))
    assert abs(crossing) < MTF50


@pytest.mark.parametrize("name", ["gaussian 0.35", "gaussian 0.6", "gaussian 1.2"])
def test_shading_fitted(name: str) -> None:
    """20 % of linear shading fitted along with a Gaussian-like blur costs 0.5 % of MTF50 at most."""
    scene = EdgeScene(SPREADS[name], (80, 120), 5.0, shading=(0.1, 0.05, 0.0))
    crossing, _ = mtf_errors(scene, measure(scene, shading="fitted"))
    assert abs(crossing) < MTF50


@pytest.mark.parametrize("tone", ["srgb", 2.2])
def test_tone_is_undone(tone: float | str) -> None:
    """A gamma-coded 16-bit frame measures like a linear one, MTF50 within 0.5 %."""
    scene = EdgeScene(Gaussian(0.6), (80, 120), 5.0, tone=tone, black=0, white=65535, low=6000, high=50000)
    assert abs(mtf_errors(scene, measure(scene))[0]) < MTF50


def test_shift_makes_a_phase_ramp() -> None:
    """An edge moved by 0.25 px turns the phase by 2πfd: 22.5° at 0.25 cy/px and 9.0° at 0.1 (shift theorem)."""
    f = np.array([0.1, 0.25])
    phases = []
    for offset in (0.0, 0.25):
        fit = fit_edge(EdgeScene(Pupil(0.7, coma=0.3), (80, 120), 7.0, offset=offset).render() / 65535)
        place = fit.parts.line.turned().coefficients[0]
        h, _ = Curves(fit).transfer(f)
        phases.append(np.degrees(np.angle(h * np.exp(-2j * np.pi * f * place))))
    assert phases[0] - phases[1] == pytest.approx([9.0, 22.5], abs=0.02)


def test_phase_transfer_of_coma() -> None:
    """The phase about the 50 % point is that of the closed form, within 0.3°; a symmetric line spread has none."""
    scene = EdgeScene(Pupil(0.7, coma=0.4), (80, 120), 7.0)
    readings = measure(scene, wanted=[at("phase_transfer", f) for f in (0.1, 0.25)])
    x = np.linspace(-3, 3, 6001)
    middle = np.interp(0.5, scene.esf(x), x)
    for f in (0.1, 0.25):
        true = np.degrees(np.angle(complex(scene.transfer(f)) * np.exp(2j * np.pi * f * middle)))
        assert value_of(readings[f"phase transfer at {f:g} cy/px"]) == pytest.approx(true, abs=0.3)
    plain = measure(EdgeScene(Gaussian(0.6), (80, 120), 7.0), wanted=[at("phase_transfer", 0.25)])
    assert value_of(plain["phase transfer at 0.25 cy/px"]) == pytest.approx(0, abs=0.05)


@pytest.mark.parametrize("name", ["gaussian 0.6", "diffraction 0.5", "coma 0.4", "exponential 0.8"])
def test_line_spread_and_transfer_function_agree_in_energy(name: str) -> None:
    """∫ l² dx = 2 ∫₀ |H|² df within 1e-3 (Parseval), both taken from the same fit."""
    curves = Curves(fit_edge(EdgeScene(SPREADS[name], (80, 120), 5.0).render() / 65535))
    x = np.linspace(-30, 30, 2401)
    in_space = np.sum(curves.at(x)[2] ** 2) * (x[1] - x[0])
    f = np.arange(0, 3, 0.002) + 0.001
    h, _ = curves.transfer(f)
    assert 2 * np.sum(np.abs(h) ** 2) * 0.002 == pytest.approx(in_space, rel=1e-3)


def test_noise_bounds() -> None:
    """At step/noise 100 and 30 the rms error of MTF50 over blurs stays below the promised figures.

    0.9/2.8 % for 40×60, 0.6/1.8 % for 80×120, 0.45/1.3 % for 200×300. 16 captures a size: their rms is known to 18 %;
    long runs find 0.6/1.6 %, 0.45/1.3 % and 0.32/0.95 %.
    """
    rng = np.random.default_rng(2024)
    for size, ratio, most in (
        ((40, 60), 100, 0.009),
        ((80, 120), 100, 0.006),
        ((200, 300), 100, 0.0045),
        ((40, 60), 30, 0.028),
        ((80, 120), 30, 0.018),
        ((200, 300), 30, 0.013),
    ):
        errors = []
        for spread in (Gaussian(0.35), Gaussian(0.6), Gaussian(1.2), Pupil(0.5)):
            for angle in (3.3, 9.0, 17.0, 31.0):
                scene = EdgeScene(spread, size, angle, offset=rng.uniform(-0.5, 0.5), read_noise=32000 / ratio)
                errors.append(mtf_errors(scene, measure(scene, scene.render(rng)))[0])
        assert np.sqrt(np.mean(np.square(errors))) < most
        assert np.abs(errors).max() < 3 * most


def test_noise_reading() -> None:
    """The noise read from the region is the scene's own, within 5 %: read and shot noise on a 12-bit camera."""
    scene = EdgeScene(
        Gaussian(0.6),
        (80, 120),
        5.0,
        low=400,
        high=2400,
        black=64,
        white=4095,
        bits=12,
        read_noise=6,
        electrons_per_dn=4,
    )
    reading = measure(scene, scene.render(np.random.default_rng(9)))["edge noise"]
    middle = np.mean([36 + (level - 64) / 4 for level in (scene.low, scene.high)])
    assert value_of(reading) == pytest.approx(100 * np.sqrt(middle) / (scene.high - scene.low), rel=0.05)


def test_both_estimators_side_by_side() -> None:
    """Asked for by name, the standard's estimator stands beside the joint fit and differs by its own bias only."""
    from tests.measure.edge_samples import wishes

    scene = EdgeScene(Gaussian(0.6), (80, 120), 5.0)
    readings = measure(scene, wanted=[*wishes(), *wishes("iso 12233:2014")])
    for f in FREQUENCIES:
        ours, iso = (value_of(readings[f"mtf at {f:g} cy/px{tail}"]) for tail in ("", " (iso)"))
        assert iso == pytest.approx(ours, abs=0.006)
        assert iso != ours


def test_scene_is_not_the_programs_own() -> None:
    """Turning a scene's own truth by 2 % fails the table: the comparison can fail."""
    scene = EdgeScene(Gaussian(0.6), (80, 120), 5.0)
    readings = measure(scene)
    assert abs(mtf_errors(replace(scene, optics=Gaussian(0.62)), readings)[0]) > MTF50
