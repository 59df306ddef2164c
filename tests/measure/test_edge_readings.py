"""Readings of a fitted edge: a value with the parts of its u, a bound, or the reason why there is none."""

from dataclasses import replace
from math import sqrt

import numpy as np
import pytest
from scipy import ndimage

from runner.capture.frame import Box
from runner.measure import edge_readings
from runner.measure.contract import Found, Sample, Wanted
from runner.measure.edge_readings import Edge
from runner.measure.numerics.edge_checks import check
from runner.measure.numerics.edge_curves import Curves
from runner.measure.numerics.edge_fit import fit_edge
from runner.measure.reading import CAUSES, Reading
from runner.spec.model import Chart, Optics
from tests.measure.edge_samples import at, camera_of, cropped, value_of
from tests.scenes.edges import Codes, EdgeScene
from tests.scenes.line_spreads import Gaussian, Pupil

SCENE = EdgeScene(Gaussian(0.6), (60, 80), 5.0, read_noise=300)
CHART = Chart("bench", transfer=((0.0, 1.0), (0.1, 0.99), (0.3, 0.91), (0.5, 0.80)), transfer_u=0.01)


def edge_of(
    scene: EdgeScene,
    chart: Chart | None = None,
    *,
    shading: str = "none",
    seed: int | None = 5,
    codes: Codes | None = None,
) -> Edge:
    """Return the fitted edge of one capture of a scene, or of its codes, without flat and rounding."""
    camera = camera_of(scene)
    rng = None if seed is None else np.random.default_rng(seed)
    crop = cropped(scene.render(rng) if codes is None else codes, camera)
    box = Box(0, 0, *scene.size)
    sample = Sample(Found("left", box, frozenset({"edge"})), crop, camera, Optics(), chart or Chart(), ())
    fit = fit_edge(crop.signal, shading=shading, aperture=sqrt(scene.fill))
    curves = Curves(fit)
    band, straight = check(curves, shading_known=fit.shading)
    return Edge(sample, curves, band, straight, None, np.zeros((0, fit.covariance.shape[0])))


def wanted(name: str, frequency: float = 0.2, part: str = "system") -> Wanted:
    """Return a wish, at a frequency where the quantity needs one."""
    info = edge_readings.quantity(name)
    assert info is not None
    return replace(at(name, frequency) if info.parameters else Wanted(name, {}, {}), part=part)


def refused(reading: Reading, cause: str) -> str:
    """Return the reason of a reading without value, and see that nothing else stands in it."""
    assert reading.refusal is not None
    assert (reading.value, reading.u, reading.bound, reading.components) == (None, None, None, ())
    assert reading.refusal.cause == cause
    assert cause in CAUSES
    return reading.refusal.because


@pytest.mark.parametrize("shading", ["none", "fitted"])
def test_every_listed_quantity_is_read(shading: str) -> None:
    """Each listed quantity has a value in its unit with a u made of its named parts, some of it noise that averages."""
    edge = edge_of(SCENE, shading=shading)
    names = set()
    for name in edge_readings.quantities():
        reading = edge_readings.read(edge, wanted(name))
        info = edge_readings.quantity(name)
        assert info is not None
        assert (reading.measured_in, reading.quantity, reading.region) == (info.unit, name, "left")
        assert info.sentence.endswith(".")
        assert np.isfinite(value_of(reading))
        assert reading.u is not None
        assert reading.u == pytest.approx(sqrt(sum(part.u**2 for part in reading.components)), rel=1e-12)
        assert reading.u > 0
        assert "noise" in {part.name for part in reading.components}
        names |= {part.name for part in reading.components}
    assert names == {"noise", "method bias"} | ({"shading"} if shading == "fitted" else names & {"shading"})


def test_names_that_are_none() -> None:
    """Levels run from mtf1 to mtf99; anything else is no quantity, and each listed one has unit and sentence."""
    for name in ("mtf0", "mtf05", "mtf100", "mtf-5", "mtf5.5", "MTF50", "mtf50 ", "lsf", ""):
        assert edge_readings.quantity(name) is None, name
    for level in (1, 9, 10, 99):
        info = edge_readings.quantity(f"mtf{level}")
        assert info is not None
        assert info.unit == "cy/px"
        assert f" {level} %" in info.sentence
    assert set(edge_readings.STANDARD) <= set(edge_readings.quantities())


def test_a_crossing_beyond_the_band_is_a_bound() -> None:
    """Where |H| stays above 10 % up to the band's end, mtf10 is `above` that end; mtf50 of that edge is a value.

    Half a pixel's side and a Gaussian of 0.15 px pass sinc(1/2) · exp(-2π² 0.15²) = 0.41 at 1 cy/px.
    """
    scene = EdgeScene(Gaussian(0.15), (80, 120), 7.0, fill=0.25)
    edge = edge_of(scene, seed=None)
    reading = edge_readings.read(edge, wanted("mtf10"))
    assert reading.bound == ("above", edge.band)
    assert (reading.value, reading.u, reading.refusal) == (None, None, None)
    assert reading.flags == (f"no crossing up to {edge.band:.3f} cy/px",)
    assert edge_readings.read(edge, wanted("mtf50")).value == pytest.approx(scene.mtf50(), rel=0.01)


def test_no_value_without_a_reason() -> None:
    """Frequencies outside band, chart or what can be divided, phases of nothing and lens widths are refused."""
    edge = edge_of(SCENE, CHART)
    for f in (-0.1, edge.band + 0.01):
        assert "beyond" in refused(edge_readings.read(edge, wanted("mtf", f)), "undersampled")
    beyond_chart = edge_readings.read(edge, wanted("mtf", 0.6, "lens"))
    assert "up to 0.5 cy/px only, not at 0.600" in refused(beyond_chart, "not defined")
    assert edge_readings.read(edge, wanted("mtf", 0.5, "lens")).value is not None
    blind = refused(edge_readings.read(edge_of(SCENE), wanted("mtf", 0.97, "lens")), "not defined")
    assert "pixel and chart together pass 0.0" in blind
    assert "for the lens alone" in refused(edge_readings.read(edge, wanted("edge_width", part="lens")), "not defined")
    phase = edge_readings.read(edge_of(EdgeScene(Pupil(0.3))), wanted("phase_transfer", 0.45))
    assert "is not told from chance" in refused(phase, "not defined")


def test_a_chart_error_moves_the_lens_as_its_component_states() -> None:
    """A chart stated 0.01 (its u) higher moves mtf and mtf50 of the lens by their chart component, within 3 %.

    3 % because 1/m is not linear: 0.01/0.91 is 1.1 %. Lens times chart times the pixel's two sincs is the system.
    """
    high = replace(CHART, transfer=((0.0, 1.0), *((f, m + 0.01) for f, m in CHART.transfer[1:])))
    one = edge_of(SCENE, CHART)
    other = replace(one, sample=replace(one.sample, chart=high))
    for wish in (wanted("mtf50", part="lens"), wanted("mtf", 0.3, "lens")):
        first, second = (edge_readings.read(edge, wish) for edge in (one, other))
        (chart,) = (part for part in first.components if part.name == "chart")
        assert chart.u == pytest.approx(value_of(first) - value_of(second), rel=0.03)
        assert (chart.type, chart.shared, chart.averages) == ("B", "chart", False)
    system = value_of(edge_readings.read(one, wanted("mtf", 0.3)))
    assert value_of(first) * 0.91 * np.prod(np.sinc(0.3 * np.array(SCENE.sides))) == pytest.approx(system, rel=1e-4)


def test_curves_agree_with_the_readings() -> None:
    """The stored transfer function passes through the readings, its u within theirs; data scatter as noise does."""
    edge = edge_of(SCENE)
    curves = {curve.name: curve for curve in edge_readings.curves_of(edge)}
    assert set(curves) == {"mtf", "edge spread", "edge spread data", "residual", "line spread"}
    mtf = curves["mtf"]
    assert (mtf.x[0], mtf.x[-1]) == (0.0, edge.band)
    assert mtf.y[0] == pytest.approx(1, abs=1e-9)
    for k in (10, 20, 30):
        reading = edge_readings.read(edge, wanted("mtf", mtf.x[k]))
        assert reading.value == pytest.approx(mtf.y[k], abs=1e-9)
        assert reading.u is not None
        assert 0 < mtf.u[k] <= 1.001 * reading.u
    data, spread = curves["edge spread data"], curves["edge spread"]
    noise = 300 / 32000 / sqrt(10)  # 80 rows meet a bin of an eighth of a pixel ten times
    assert np.abs(np.interp(data.x, spread.x, spread.y) - data.y).max() < 0.02
    assert 0.5 * noise < np.std(curves["residual"].y) / 100 < 2 * noise
    assert all(curve.region == "left" and curve.estimator == "joint fit" for curve in curves.values())


def test_shared_noise_is_told_and_widens_u() -> None:
    """Noise that a 3 × 3 mean has gone over is told, and u of the levels grows threefold (√9), that of mtf50 does not.

    Within 35 %: one capture knows the sum of its autocorrelation to a fifth. At 0.28 cy/px across an upright edge the
    mean leaves (1 + 2 cos 2π 0.28)²/3 = 0.13 of the power, times 3 along it: less than white noise has.
    """
    rng = np.random.default_rng(8)
    white = rng.standard_normal((120, 80))
    shared = 3 * ndimage.uniform_filter(white, 3, mode="wrap")
    scene = replace(SCENE, size=(80, 120), read_noise=0.0)
    readings = []
    for noise in (white, shared):
        codes = scene.render(rng, scene.signal() + 300 * noise)
        edge = edge_of(scene, codes=codes)
        readings.append([edge_readings.read(edge, wanted(name)) for name in ("edge_modulation", "mtf50")])
    (level, crossing), (level_shared, crossing_shared) = readings
    assert not level.flags
    assert all(r.flags[0].startswith("neighbouring pixels share noise: means vary ") for r in readings[1])
    assert level.u is not None
    assert level_shared.u == pytest.approx(3 * level.u, rel=0.35)
    assert 0.6 < (crossing_shared.u or 0) / (crossing.u or 1) < 1.2
