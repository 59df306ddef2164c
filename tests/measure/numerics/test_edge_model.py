"""The model of an edge on all pixels: its values against closed forms, its derivatives against differences."""

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pytest
from numpy.typing import NDArray

from runner.measure.numerics import edge_model as em
from runner.measure.numerics.edge_geometry import EdgeLine
from runner.measure.numerics.edge_model import Noise, Parts, Pixels
from runner.measure.numerics.line_spread import Lattice, lattice_for
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian

if TYPE_CHECKING:
    from collections.abc import Callable

Array = NDArray[np.float64]

SCENE = EdgeScene(Gaussian(0.6), (30, 44), 7.0, offset=0.4, low=8000, high=40000)
SHAPE = (44, 30)
LATTICE = lattice_for(30, 0.7)
NOISE = Noise(1e-4, 3e-4, 1000)


def _parts(order: int = 1, *, filled: bool = True) -> Parts:
    """Return parts about the scene; filled ones have something of everything."""
    line = EdgeLine(np.radians(7), SCENE.half_length, np.array([0.4, 0.0, 0.3, 0.1][: order + 1]))
    count = LATTICE.centres.size
    kernels = 0.02 * np.sin(np.arange(count)) * (np.abs(LATTICE.centres) < 2) if filled else np.zeros(count)
    some = 0.01 if filled else 0.0
    return Parts(line, 0.2, 0.5, 0.6, some, -some, 2 * some, 1.2, kernels, np.array([some, -2 * some]))


def _signal(parts: Parts) -> Array:
    """Return what the model makes of all pixels."""
    pixels = Pixels(np.zeros(SHAPE), parts.line)
    return -em.residuals(pixels, parts, LATTICE, parts.line.sides()).residual


def _step(parts: Parts, which: int, size: float) -> Parts:
    """Move one number of the fit, in the order of the normal equations."""
    order = parts.line.coefficients.size - 1
    shade = em.FIXED + order + 1
    plain: dict[int, Callable[[Parts], Parts]] = {
        em.LEVEL: lambda p: replace(p, low=p.low + size),
        em.STEP: lambda p: replace(p, step=p.step + size),
        em.WIDENING: lambda p: replace(p, widening=p.widening + size),
        em.SHIFT: lambda p: replace(p, shift=p.shift + size),
        em.TAIL: lambda p: replace(p, tail=p.tail + size),
        em.SHADE: lambda p: replace(p, shade=p.shade + np.array([size, 0])),
        shade: lambda p: replace(p, shade=p.shade + np.array([0, size])),
    }
    if which in plain:
        return plain[which](parts)
    if which < shade:
        moved = parts.line.coefficients + size * (np.arange(order + 1) == which - em.FIXED)
        return replace(parts, line=replace(parts.line, coefficients=moved))
    count = parts.kernels.size
    return replace(parts, kernels=parts.kernels + size * (np.arange(count) == which - shade - 1))


def test_model_of_a_gaussian_edge_is_the_closed_form() -> None:
    """With a Gaussian of the scene's own width every pixel is the scene's, within 1e-6 of the step."""
    parts = replace(_parts(filled=False), low=0.2, step=0.5)
    mine = _signal(parts).reshape(SHAPE)
    true = 0.2 + 0.5 * (SCENE.signal() - SCENE.low) / (SCENE.high - SCENE.low)
    assert mine == pytest.approx(true, abs=5e-7)
    assert parts.rise == 0.5


@pytest.mark.parametrize("order", [1, 3])
def test_normal_equations_are_those_of_the_true_derivatives(order: int) -> None:
    """Jᵀ W J and Jᵀ W r from bins are those of derivatives by differences pixel by pixel, within 1 % of their scale.

    Bins of a twentieth of a pixel move a pixel by 0.025 px at most, which changes a steep column by up to a per cent.
    """
    parts = replace(_parts(order), shade=np.zeros(2))
    size = em.FIXED + order + 2 + LATTICE.centres.size
    columns = []
    for k in range(size):
        ahead, behind = (_signal(_step(parts, k, h)) for h in (1e-5, -1e-5))
        columns.append((ahead - behind) / 2e-5)
    jacobian = np.array(columns).T
    pixels = Pixels(_signal(parts).reshape(SHAPE) + 0.01 * np.random.default_rng(1).standard_normal(SHAPE), parts.line)
    linear = em.linearise(pixels, parts, LATTICE, parts.line.sides(), NOISE)
    weights = 1 / NOISE.at((_signal(parts) - parts.low) / parts.rise)
    matrix = (jacobian * weights[:, None]).T @ jacobian
    assert linear.head == em.FIXED + order + 2
    # far out bins are wide and hold a handful of corner pixels
    near = np.concatenate([np.arange(linear.head), linear.head + np.flatnonzero(np.abs(LATTICE.centres) < 12)])
    unit = np.sqrt(np.diag(matrix))[near]
    mine, true = (each[np.ix_(near, near)] / np.outer(unit, unit) for each in (linear.matrix, matrix))
    assert mine == pytest.approx(true, abs=0.01)
    residual = pixels.signal - _signal(parts)
    right = (jacobian.T @ (weights * residual))[near]
    # in these units the right side of pure noise scatters by about one
    assert linear.right[near] / unit == pytest.approx(right / unit, abs=0.1)


def test_response_is_linear_and_matches_the_residuals() -> None:
    """The response to the residual itself is the right side; to twice a change it is twice the response."""
    parts = _parts()
    rng = np.random.default_rng(2)
    pixels = Pixels(rng.normal(0.4, 0.1, SHAPE), parts.line)
    linear = em.linearise(pixels, parts, LATTICE, parts.line.sides(), NOISE)
    assert em.response(pixels, linear, linear.residual.reshape(SHAPE)) == pytest.approx(linear.right)
    change = rng.normal(0, 1, SHAPE)
    once, twice = (em.response(pixels, linear, k * change) for k in (1, 2))
    assert twice == pytest.approx(2 * once)


def test_only_own_pixels_count() -> None:
    """A fit of some sites sees nothing of the others: same equations whatever the others hold, fewer counts."""
    parts = _parts()
    sites = np.zeros(SHAPE, dtype=bool)
    sites[::2, 1::2] = True
    signal = np.random.default_rng(3).normal(0.4, 0.1, SHAPE)
    one = Pixels(signal, parts.line, sites)
    other = Pixels(np.where(sites, signal, 1e6), parts.line, sites)
    a, b = (em.linearise(p, parts, LATTICE, parts.line.sides(), NOISE) for p in (one, other))
    assert a.matrix == pytest.approx(b.matrix)
    assert a.right == pytest.approx(b.right)
    assert a.counts.sum() == sites.sum()
    picture = one.picture(one.signal)
    assert picture[sites] == pytest.approx(signal[sites])
    assert not picture[~sites].any()
    one.drop(one.signal > np.median(one.signal), parts.line)
    assert one.signal.size == one.distance.size == one.polynomials[1].size == -(-sites.sum() // 2)


def test_bins_keep_the_residuals_squares() -> None:
    """Sums, means and scatter within bins add up to the pixels' own sum of squares."""
    parts = _parts()
    pixels = Pixels(np.random.default_rng(4).normal(0.4, 0.1, SHAPE), parts.line)
    found = em.residuals(pixels, parts, LATTICE, parts.line.sides())
    assert found.counts.sum() == 44 * 30
    total = found.within.sum() + (found.counts * found.means**2).sum()
    assert total == pytest.approx((found.residual**2).sum())


def test_shape_transfers_are_the_transforms_of_the_shape_columns() -> None:
    """The transform of every part is that of its line spread (1e-4; the tail's ends beyond 2000 px: 1e-3)."""
    parts, sides = _parts(), (0.99, 0.12)
    x = np.linspace(-2000, 2000, 400001)
    f = np.array([0.05, 0.3])
    few: Lattice = replace(
        LATTICE, centres=LATTICE.centres[30:33], sigmas=LATTICE.sigmas[30:33], steps=LATTICE.steps[30:33]
    )
    wave = np.exp(-2j * np.pi * f[:, None] * x) * (x[1] - x[0])
    densities = em.shape_columns(x, parts, few, sides)[1]
    mine = em.shape_transfers(f, parts, few, sides)
    assert mine == pytest.approx(wave @ densities, abs=1e-3)
    plain = np.array([0, 1, 2, 4, 5, 6])
    assert mine[:, plain] == pytest.approx((wave @ densities)[:, plain], abs=1e-5)


def test_noise_between_the_levels() -> None:
    """The variance runs linearly from level to level and stays there beyond."""
    assert NOISE.at(np.array([-0.1, 0.0, 0.5, 1.0, 1.2])) == pytest.approx([1e-4, 1e-4, 2e-4, 3e-4, 3e-4])
    assert NOISE.times(2) == Noise(2e-4, 6e-4, 1000)
