"""Line spreads in closed form against quadrature, textbook transforms and the interpolation's own error bound."""

import numpy as np
import pytest
from numpy.polynomial import legendre
from scipy.integrate import quad
from scipy.special import ndtr

from runner.measure.numerics.line_spread import (
    GRID,
    Array,
    gauss_transfer,
    lattice_for,
    pixel_gauss,
    pixel_transfer,
    tail,
    tail_transfer,
)

ANGLES = np.radians([0.0, 0.02, 5.0, 26.6, 45.0])
POINTS, WEIGHTS = legendre.leggauss(50)
"""Quadrature over a pixel's side, exact to rounding where the Gaussian is no narrower than a tenth of it."""


def _sides(angle: float, side: float = 1.0) -> tuple[float, float]:
    return side * float(np.cos(angle)), side * float(np.sin(angle))


def _over_pixel(sides: tuple[float, float]) -> tuple[Array, Array]:
    """Distances of the points of a square pixel along the normal, and their weights (a plain mean over its area)."""
    first, second = (0.5 * side * POINTS for side in sides)
    return (first[:, None] + second[None, :]).ravel(), np.outer(WEIGHTS, WEIGHTS).ravel() / 4


@pytest.mark.parametrize("angle", ANGLES)
@pytest.mark.parametrize(("sigma", "side"), [(0.1, 1.0), (0.35, 1.0), (0.8, 0.7), (3.0, 1.0)])
def test_pixel_gauss_is_the_mean_over_the_pixel(angle: float, sigma: float, side: float) -> None:
    """Edge, line and both derivatives are those of a normal distribution, averaged over the pixel point by point.

    A side thinner than 1e-3 px counts as 1e-3: the spread's variance is off by up to 1e-6/12, which changes each by
    half of that times its second derivative; beyond it the second difference over that side loses 1e-9.
    """
    sides, x = _sides(angle, side), np.linspace(-5, 5, 61)
    place, weight = _over_pixel(sides)
    z = (x[:, None] - place[None, :]) / sigma
    g = np.exp(-0.5 * z**2) / (np.sqrt(2 * np.pi) * sigma)
    hermite = (1.0, -z / sigma, (z**2 - 1) / sigma**2)  # Gaussian derivatives (Abramowitz and Stegun 26.2.31)
    truth = [(g * h) @ weight for h in hermite]
    spread, *found = pixel_gauss(x, sigma, sides)

    for order, (value, expected) in enumerate(zip(found, truth, strict=True)):
        # |d^n g| <= n! 0.4 / sigma^(n+1) roundly (Cramér's bound gives 0.43 √n!)
        thin = 1e-6 / 24 * 0.43 * np.sqrt([2.0, 6.0, 24.0][order]) / sigma ** (order + 3)
        assert value == pytest.approx(expected, rel=1e-9, abs=thin + 1e-9 / sigma ** (order + 1)), order
    assert spread == pytest.approx(ndtr(z) @ weight, abs=1e-9 + 1e-6 / 24 * 0.43 / sigma**2)


@pytest.mark.parametrize("angle", ANGLES)
def test_far_from_the_edge_nothing_is_left_of_rounding(angle: float) -> None:
    """200 px away the levels are 0 and 1 and the line spread 0 to 1e-7, though squares of 2e3 deviations cancel."""
    spread, density, *_ = pixel_gauss(np.array([-200.0, 200.0]), 0.1, _sides(angle))

    assert spread == pytest.approx([0.0, 1.0], abs=1e-7)
    assert density == pytest.approx([0.0, 0.0], abs=1e-9)


@pytest.mark.parametrize("angle", ANGLES)
def test_transfers_are_the_transforms(angle: float) -> None:
    """∬ cos 2πf(x cos t + y sin t) over the pixel is two sincs (Goodman, sec. 2.1: rect); a Gaussian stays one."""
    f = np.linspace(0, 2, 21)
    sides = _sides(angle)
    place, weight = _over_pixel(sides)
    x = np.linspace(-8, 8, 3201)  # the rectangle rule is exact for a function this smooth (Poisson's sum)
    whole = np.cos(2 * np.pi * f[:, None] * x) @ pixel_gauss(x, 0.5, sides)[1] * (x[1] - x[0])

    assert pixel_transfer(f, sides) == pytest.approx(np.cos(2 * np.pi * f[:, None] * place) @ weight, abs=1e-12)
    assert pixel_transfer(f, sides) * gauss_transfer(f, 0.5) == pytest.approx(whole, abs=1e-6)


@pytest.mark.parametrize("width", [0.4, 1.0, 2.5])
def test_the_tail_is_a_lorentzian(width: float) -> None:
    """∫ b cos(2πfx) / π(x² + b²) dx = exp(-2πb|f|), a pair of every table of transforms; the edge is its integral."""
    f = np.array([0.03, 0.1, 0.4, 1.0])

    def line(x: float) -> float:
        return float(tail(np.array(x), width)[1])

    value = [2 * quad(line, 0, np.inf, weight="cos", wvar=2 * np.pi * v)[0] for v in f]
    assert tail_transfer(f, width) == pytest.approx(value, abs=1e-7)
    assert tail_transfer(-f, width) == pytest.approx(tail_transfer(f, width))

    area = quad(line, -np.inf, 0.7)[0]
    assert float(tail(np.array(0.7), width)[0]) == pytest.approx(area, abs=1e-8)


@pytest.mark.parametrize(("reach", "width"), [(40.0, 0.8), (150.0, 0.8), (60.0, 7.0)])
def test_kernels_are_what_their_transforms_say(reach: float, width: float) -> None:
    """Each kernel's transform is the sum over its own density; its edge spread is that density's running sum."""
    lattice = lattice_for(reach, width)
    f = np.array([0.0, 0.07, 0.31, 0.9])
    x = np.arange(-1.2 * reach - 60, 1.2 * reach + 60, 0.05)  # px; seven samples per narrowest sigma or more
    spreads, densities = lattice.kernels(x)

    assert np.exp(-2j * np.pi * f[:, None] * x) @ densities * 0.05 == pytest.approx(lattice.transfer(f), abs=1e-8)
    middle = 0.05 * (np.cumsum(densities, axis=0) - densities / 2)  # trapezoids: off by h²/12 of the slope
    slope = 0.25 / lattice.sigmas.min() ** 2
    assert np.abs(middle - spreads).max() < 0.05**2 / 12 * slope * 1.01
    assert lattice.nodes[0] < -reach
    assert lattice.nodes[-1] > reach
    assert lattice.warped(lattice.nodes) == pytest.approx(np.arange(lattice.nodes.size), abs=1e-9)


@pytest.mark.parametrize("sigma", [0.1, 0.25, 0.6, 2.0])
def test_interpolation_keeps_hermites_bound(sigma: float) -> None:
    """Between nodes a cubic Hermite is off by at most h⁴/384 max|f⁗| (de Boor 1978, ch. IV; from memory).

    f is the edge spread over the warped place asinh(x/4), h the distance of its nodes there, 0.05/4. The bound is
    reached by cubics' next of kin only, so less than a third of it would mean that something else was measured.
    """
    sides, lattice = _sides(np.radians(5)), lattice_for(40, 0.8)

    def edge(place: Array) -> Array:
        return pixel_gauss(4 * np.sinh(place), sigma, sides)[0]

    spread, density, *_ = pixel_gauss(lattice.nodes, sigma, sides)
    place, d = np.linspace(-1, 1, 20011), 0.003
    found = lattice.interpolate(lattice.warped(4 * np.sinh(place)), spread, density)
    weights = zip((1, -4, 6, -4, 1), (-2, -1, 0, 1, 2), strict=True)
    fourth = np.sum([w * edge(place + k * d) for w, k in weights], axis=0) / d**4
    bound = 0.0125**4 / 384 * float(np.abs(fourth).max())

    assert 0.3 * bound < float(np.abs(found - edge(place)).max()) < 1.02 * bound
    if sigma > 0.2:
        assert bound < 1e-6  # what the module says of its bins


@pytest.mark.parametrize("width", [0.6, 6.0])
def test_kernels_leave_no_ripple(width: float) -> None:
    """Kernels weighed with their distances add up to one constant in the core: a plateau needs no wave of them.

    Equal Gaussians of 0.7 of their distance ripple by ±2 exp(-2π² 0.49) = 1.3e-4 of their sum (Poisson's formula); as
    much again is allowed for distances that grow.
    """
    lattice = lattice_for(100, width)
    total = lattice.kernels(np.linspace(-3, 3, 1001) * lattice.scale)[1] @ lattice.steps

    assert np.ptp(total) < 4 * 1.3e-4
    assert lattice.scale == pytest.approx(max(1, width / 2), rel=0.1)


def test_regions_of_one_size_share_a_lattice() -> None:
    """The same lattice object serves regions of about one size; its table is its transform on the grid."""
    assert lattice_for(88, 0.6) is lattice_for(90, 0.7)
    lattice = lattice_for(88, 0.6)

    assert lattice.on_grid[50] == pytest.approx(lattice.transfer(GRID[50:51])[0])
    assert pytest.approx(0.25) == GRID[50]
    assert lattice.without_kernels().centres.size == 0
