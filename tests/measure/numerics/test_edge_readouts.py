"""Single values of a fitted edge against tables of the normal distribution, closed forms and finite differences."""

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest

from runner.errors import MeasurementRefused
from runner.measure.numerics import edge_model as em
from runner.measure.numerics import edge_readouts as readouts
from runner.measure.numerics.edge_curves import Curves, Gradient
from runner.measure.numerics.edge_fit import fit_edge
from runner.measure.numerics.line_spread import GRID, Array, pixel_transfer
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian, Pupil, Sharpened


def light(scene: EdgeScene, seed: int | None = None) -> Array:
    """Return a scene's light as a fraction of range, with its read noise if there is a seed."""
    shape = scene.size[::-1]
    noise = 0.0 if seed is None else scene.read_noise * np.random.default_rng(seed).standard_normal(shape)
    return np.asarray((scene.signal() + noise) / 65535)


def curves_of(scene: EdgeScene, seed: int | None = None) -> Curves:
    """Return the fitted curves of a scene."""
    return Curves(fit_edge(light(scene, seed)))


@pytest.mark.parametrize("sigma", [1.2, 2.0, 3.0])
def test_widths_of_a_gaussian(sigma: float) -> None:
    """10 to 90 % is 2.5631 σ and the half width 2.3548 σ, the pixel's variance 1/12 px² added to σ² (normal tables).

    Beside a Gaussian of 1.2 px the pixel's own shape (fourth cumulant -1/120 px⁴) moves either by less than 0.1 %;
    0.3 % for the width, and 1 % for the half width, whose smoothing is known no better.
    """
    curves = curves_of(EdgeScene(Gaussian(sigma), (100, 120), 5.0))
    total = np.sqrt(sigma**2 + 1 / 12)
    assert readouts.edge_width(curves).value == pytest.approx(2.5631 * total, rel=3e-3)
    assert readouts.full_width(curves).value == pytest.approx(2.3548 * total, rel=0.01)


@pytest.mark.parametrize("direction", [5.0, -8.0, 85.0, 100.0, 187.0, 265.0])
def test_angle_place_and_modulation(direction: float) -> None:
    """Angle (positive clockwise on the screen), place towards bright and modulation are those of the scene.

    The edge is clockwise by as much as its normal is, from +x towards +y: 85° is 5° counter-clockwise of an axis.
    """
    scene = EdgeScene(Gaussian(0.7), (100, 100), direction, offset=-0.4, low=9000, high=27000)
    curves = curves_of(scene)
    from_axis = (direction + 45) % 90 - 45
    assert readouts.angle(curves).value == pytest.approx(from_axis, abs=0.005)
    assert readouts.position(curves).value == pytest.approx(-0.4, abs=0.003)
    assert readouts.modulation(curves).value == pytest.approx(50.0, abs=0.05)


def test_asymmetry_tells_the_trailing_side() -> None:
    """Kelly's skewness is 0 for a Gaussian, that of the closed form for coma, and turns its sign with the contrast."""
    coma, x = EdgeScene(Pupil(0.7, coma=0.4), (80, 120), 7.0), np.linspace(-6, 6, 24001)
    ten, fifty, ninety = np.interp([0.1, 0.5, 0.9], coma.esf(x), x)
    true = 100 * (ninety + ten - 2 * fifty) / (ninety - ten)
    assert abs(true) > 5
    assert readouts.asymmetry(curves_of(coma)).value == pytest.approx(true, abs=0.5)
    assert readouts.asymmetry(Curves(fit_edge(1 - light(coma)))).value == pytest.approx(-true, abs=0.5)
    assert readouts.asymmetry(curves_of(EdgeScene(Gaussian(0.7), (80, 120), 7.0))).value == pytest.approx(0, abs=0.1)


def test_crossing_of_optics_alone_and_none() -> None:
    """With the pixel divided out a Gaussian falls to m at √(ln(1/m) / 2) / (πσ); beyond the band there is no value."""
    curves = curves_of(EdgeScene(Gaussian(0.6), (80, 120), 6.0))
    pixel = pixel_transfer(GRID, curves.fit.sides)
    for modulation in (0.3, 0.5, 0.8):
        found = readouts.crossing(curves, modulation, 0.6, np.where(pixel > 0.1, pixel, np.nan))
        assert found is not None
        assert found.value == pytest.approx(np.sqrt(np.log(1 / modulation) / 2) / (np.pi * 0.6), rel=5e-3)
    half = readouts.crossing(curves, 0.5, 1.0)
    assert half is not None
    assert readouts.crossing(curves, 0.5, half.value - 1e-6) is None
    assert readouts.crossing(curves, 0.5, half.value + 1e-6) is not None


def test_overshoot_and_undershoot_change_places() -> None:
    """A sharpened comatic edge overshoots and undershoots as its closed form; inverted contrast swaps both."""
    scene = EdgeScene(Sharpened(Pupil(0.8, coma=0.2), 1.0, 1.2), (80, 120), 7.0)
    x = np.linspace(-8, 8, 8001)
    true = 100 * (scene.esf(x).max() - 1), -100 * scene.esf(x).min()
    assert abs(true[0] - true[1]) > 1
    for picture, expected in ((light(scene), true), (1 - light(scene), true[::-1])):
        curves = Curves(fit_edge(picture))
        found = [readouts.beyond(curves, bright=bright).value for bright in (True, False)]
        assert found == pytest.approx(expected, abs=0.3)


def test_no_overshoot_out_of_noise() -> None:
    """Noise makes no overshoot of 3 u, u never vanishes, and the mean over captures is a quarter of u at most."""
    scene = EdgeScene(Gaussian(0.7), (60, 80), 7.0, read_noise=1000)
    all_curves = [curves_of(scene, seed) for seed in range(10)]
    pairs = [(readouts.beyond(c, bright=bright), c.fit.covariance) for c in all_curves for bright in (True, False)]
    values, u = np.array([(found.value, max(found.least_u, found.u(each))) for found, each in pairs]).T
    assert ((values >= 0) & (values < 3 * u)).all()
    assert values.mean() < 0.25 * u.mean()  # the highest points of these noisy curves lie 0.4 u above the step


NAMES = ("step", "widening", "shift", "tail")
READOUTS: dict[str, Callable[[Curves], Gradient | None]] = {
    "edge width": readouts.edge_width,
    "full width": readouts.full_width,
    "asymmetry": readouts.asymmetry,
    "overshoot": lambda c: readouts.beyond(c, bright=True),
    "undershoot": lambda c: readouts.beyond(c, bright=False),
    "crossing": lambda c: readouts.crossing(c, 0.5, 1.0),
    "phase": lambda c: readouts.phase(c, 0.2),
    "position": readouts.position,
    "modulation": readouts.modulation,
}


@pytest.mark.parametrize("name", READOUTS)
def test_derivatives_by_finite_differences(name: str) -> None:
    """The derivative to every fitted amount is that of a central difference, within 1 % of the largest one."""
    scene = EdgeScene(Sharpened(Pupil(0.8, coma=0.2), 1.0, 1.2), (60, 80), 7.0)
    curves, read = curves_of(scene), READOUTS[name]
    parts, central = curves.fit.parts, read(curves)
    assert central
    step = 1e-4 * curves.rise

    def value(by: Array) -> float:
        plain = {key: getattr(parts, key) + float(v) for key, v in zip(NAMES, by, strict=False)}
        moved = replace(parts, **plain, kernels=parts.kernels + by[4:])
        linear = replace(curves.fit.linear, model=em.model_of(moved, curves.fit.lattice, curves.fit.sides))
        found = read(Curves(replace(curves.fit, parts=moved, linear=linear)))
        return found.value if found is not None else np.nan

    ways = np.eye(curves.shape.size)[[0, 1, 2, 3, *range(4, curves.shape.size, 5), curves.shape.size // 2 + 2]]
    numeric = np.array([(value(step * way) - value(-step * way)) / (2 * step) for way in ways])
    assert ways @ central.by[curves.index] == pytest.approx(numeric, abs=0.01 * np.abs(numeric).max())


def test_what_is_not_defined_is_refused() -> None:
    """A phase where nothing passes, a level that the edge never reaches and levels below nothing are refused."""
    curves = curves_of(EdgeScene(Pupil(0.3), (80, 120), 7.0))
    with pytest.raises(MeasurementRefused, match=r"modulus at 0\.45 cy/px is 0\.\d+: its phase is not told") as refused:
        readouts.phase(curves, 0.45)
    assert refused.value.cause == "not defined"
    with pytest.raises(MeasurementRefused, match=r"does not cross 130 % of the step"):
        readouts.level(curves, 1.3)
    with pytest.raises(MeasurementRefused, match=r"add up to less than nothing: check the black level"):
        readouts.modulation(Curves(fit_edge(light(EdgeScene()) - 0.5)))


def test_a_narrow_tip_on_a_plateau_has_no_half_width() -> None:
    """Where 35 % of the height is more than 2.4 times as wide as 65 %, half of it says nothing of the spread."""
    nodes = np.linspace(-5, 5, 501)
    tip, plateau = np.exp(-0.5 * (nodes / 0.2) ** 2), np.exp(-((nodes / 1.8) ** 8))
    spiked = 0.57 * tip + 0.43 * plateau
    gauss, lorentz = np.exp(-0.5 * nodes**2), 1 / (1 + nodes**2)

    with pytest.raises(MeasurementRefused, match="hangs on a narrow tip"):
        readouts._refuse_spike(spiked / spiked.max(), nodes, int(spiked.argmax()))
    for plain in (gauss, lorentz):
        readouts._refuse_spike(plain, nodes, int(plain.argmax()))
