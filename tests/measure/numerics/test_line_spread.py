"""Closed forms of line spreads and the lattice they are fitted on, against tests/scenes and plain integration."""

import numpy as np
import pytest

from runner.measure.numerics.line_spread import (
    GRID,
    WARP,
    gauss_transfer,
    lattice_for,
    pixel_gauss,
    pixel_transfer,
    tail,
    tail_transfer,
)
from tests.scenes.line_spreads import Gaussian

SIDES = (np.cos(np.radians(17)), np.sin(np.radians(17)))


@pytest.mark.parametrize("sigma", [0.1, 0.35, 1.2])
@pytest.mark.parametrize("angle", [0.0, 2.0, 45.0])
def test_pixel_through_a_gaussian(sigma: float, angle: float) -> None:
    """The edge spread is the scenes' own closed form within 1e-9; each further curve is the derivative of the last."""
    sides = (float(np.cos(np.radians(angle))), float(np.sin(np.radians(angle))))
    x, h = np.linspace(-4, 4, 161), 1e-4
    edge, line, bend, further = pixel_gauss(x, sigma, sides)
    if angle:  # at 0° the program's second side is a thousandth of a pixel, which costs up to 1e-6 / sigma
        assert edge == pytest.approx(Gaussian(sigma).edge(x, sides), abs=1e-9)
    else:
        assert edge == pytest.approx(Gaussian(sigma).edge(x, sides), abs=2e-6)
    for k, mine in enumerate((line, bend, further)):
        ahead, behind = (pixel_gauss(x + step, sigma, sides)[k] for step in (h, -h))
        assert mine == pytest.approx((ahead - behind) / (2 * h), abs=1e-3 * np.abs(mine).max())


def test_pixel_along_the_normal() -> None:
    """A square pixel at 5° passes 0.983632, 0.900347 and 0.637046 at 0.1, 0.25 and 0.5 cy/px (sinc × sinc), 1e-6."""
    sides = (np.cos(np.radians(5)), np.sin(np.radians(5)))
    assert pixel_transfer(np.array([0.1, 0.25, 0.5]), sides) == pytest.approx([0.983632, 0.900347, 0.637046], abs=1e-6)


def test_transfers_are_the_transforms_of_the_line_spreads() -> None:
    """∫ l(x) exp(-2πi f x) dx by the trapezoidal rule is each part's transfer function, within 1e-6 (tail: 1e-3)."""
    f = np.array([0.0, 0.1, 0.25, 0.5, 0.9])
    x = np.linspace(-30, 30, 60001)
    wave = np.exp(-2j * np.pi * f[:, None] * x) * (x[1] - x[0])
    assert wave @ pixel_gauss(x, 0.6, SIDES)[1] == pytest.approx(
        pixel_transfer(f, SIDES) * gauss_transfer(f, 0.6), abs=1e-6
    )
    lattice = lattice_for(20, 0.7)
    assert wave @ lattice.kernels(x)[1] == pytest.approx(lattice.transfer(f), abs=1e-6)
    wide = np.linspace(-3000, 3000, 600001)
    wave = np.exp(-2j * np.pi * f[:, None] * wide) * (wide[1] - wide[0])
    assert wave @ tail(wide, 1.3)[1] == pytest.approx(tail_transfer(f, 1.3), abs=1e-3)  # the ends cut 0.03 % off


def test_tail_falls_like_a_pupils() -> None:
    """The tail's line spread goes as b/(πx²) and its transform starts with a slope of -2πb, as a sharp pupil's does."""
    assert tail(np.array([50.0, 100.0]), 0.8)[1] * np.array([50.0, 100.0]) ** 2 == pytest.approx(0.8 / np.pi, rel=3e-4)
    assert (tail_transfer(np.array([1e-4]), 0.8)[0] - 1) / 1e-4 == pytest.approx(-2 * np.pi * 0.8, rel=1e-3)
    assert tail(np.array([0.0, 1e6]), 0.8)[0] == pytest.approx([0.5, 1.0], abs=1e-6)


def test_interpolation_between_nodes() -> None:
    """A line spread as sharp as a bare pixel's is interpolated within 1e-5 of the step, a blurred one within 1e-7."""
    lattice = lattice_for(60, 0.7)
    x = np.linspace(-59, 59, 20011)
    for sigma, most in ((0.1, 1e-5), (0.6, 1e-7)):
        values, slopes = pixel_gauss(lattice.nodes, sigma, SIDES)[:2]
        found = lattice.interpolate(lattice.warped(x), values, slopes)
        assert found == pytest.approx(pixel_gauss(x, sigma, SIDES)[0], abs=most)
    at_nodes = lattice.interpolate(lattice.warped(lattice.nodes), lattice.nodes, np.ones_like(lattice.nodes))
    assert at_nodes == pytest.approx(lattice.nodes, abs=1e-9)


@pytest.mark.parametrize(("reach", "width"), [(20.0, 0.6), (94.0, 0.6), (180.0, 6.0)])
def test_lattice_covers_its_reach_without_ripple(reach: float, width: float) -> None:
    """Nodes go beyond the reach; kernels add up to a constant within 5e-4 in the core; wide spreads scale it."""
    lattice = lattice_for(reach, width)
    assert lattice.nodes[0] < -reach
    assert lattice.nodes[-1] > reach
    assert lattice.stretch[1:-1] == pytest.approx(np.gradient(lattice.nodes)[1:-1], rel=1e-4)
    x = np.linspace(-WARP, WARP, 1001) * lattice.scale
    total = lattice.kernels(x)[1] @ lattice.steps
    assert np.ptp(total) < 5e-4
    assert total.mean() == pytest.approx(1, abs=5e-3)
    assert lattice.scale == pytest.approx(max(1, width / 2), rel=0.1)


def test_lattices_are_shared_and_tabulated() -> None:
    """Regions of about one size get the very same lattice; its table is its transform on the grid."""
    assert lattice_for(88, 0.6) is lattice_for(90, 0.7)
    lattice = lattice_for(88, 0.6)
    assert lattice.on_grid is lattice.on_grid
    assert lattice.on_grid[50] == pytest.approx(lattice.transfer(np.array([0.25]))[0])
    assert pytest.approx(0.25) == GRID[50]
    bare = lattice.without_kernels()
    assert bare.centres.size == 0
    assert bare.nodes is lattice.nodes
