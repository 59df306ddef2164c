"""The edge's model against closed-form scenes, and its linearisation against differences of the model itself."""

from dataclasses import replace

import numpy as np
import pytest

from runner.measure.numerics import edge_model as em
from runner.measure.numerics.edge_geometry import EdgeLine
from runner.measure.numerics.line_spread import Array, Lattice, lattice_for
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian

SCENE = EdgeScene(Gaussian(0.6), size=(40, 60), direction=8.0, low=0.2, high=0.7)
LATTICE = lattice_for(40, 0.7)


def _parts(scene: EdgeScene = SCENE, *, curved: bool = False) -> em.Parts:
    line = EdgeLine(float(np.radians(scene.direction)), scene.half_length, np.array([0.0, 0.0, 0.3 * curved]))
    none = np.zeros(LATTICE.centres.size)
    return em.Parts(line, 0.2, 0.5, 0.6, 0.0, 0.0, 0.0, 1.0, none, np.zeros(2))


def _rich(*, curved: bool = True) -> em.Parts:
    """Every part at work, levels 0.2 and 0.79."""
    kernels = np.zeros(LATTICE.centres.size)
    kernels[LATTICE.centres.size // 2 + np.array([-3, 0, 2])] = 0.02, -0.03, 0.04
    shade = np.array([0.04, -0.03])
    return replace(
        _parts(curved=curved), widening=0.03, shift=0.04, tail=0.06, tail_width=1.3, kernels=kernels, shade=shade
    )


def _residual(signal: Array, parts: em.Parts, lattice: Lattice = LATTICE) -> Array:
    """Residuals with the pixels placed anew and the apertures held."""
    return em.residuals(em.Pixels(signal, parts.line), parts, lattice, SCENE.sides).residual


@pytest.mark.parametrize("direction", [2.0, 30.0, 97.0, -171.0])
def test_a_gaussian_edge_is_drawn_to_a_millionth(direction: float) -> None:
    """A scene of the model's own kind, integrated over pixels by another way, leaves 1e-6 of its step."""
    scene = replace(SCENE, direction=direction)
    parts = _parts(scene)
    left = em.residuals(em.Pixels(scene.signal(), parts.line), parts, LATTICE, scene.sides).residual

    assert np.abs(left).max() < 1e-6 * 0.5
    assert parts.rise == pytest.approx(0.5)


def test_rise_is_the_step_between_the_far_levels() -> None:
    """Widening and shift add nothing to the levels; a tail of half-width b still lacks b / (πx) of its area at x.

    At 3000 px that is 1.4e-4 of the tail, which is a ninth of the step here.
    """
    parts, x = _rich(), np.array([-3e3, 3e3])
    spreads, _ = em.shape_columns(x, parts, LATTICE, SCENE.sides)
    levels = parts.low + spreads @ parts.shape

    assert levels == pytest.approx([0.2, 0.2 + parts.rise], abs=1e-5)
    assert parts.rise == pytest.approx(0.5 + 0.06 + 0.03)
    assert spreads[1] == pytest.approx([*em.AREAS, *np.ones(LATTICE.centres.size)], abs=2e-4)


def test_transforms_are_those_of_the_line_spreads() -> None:
    """Each part's transform is the sum over its own line spread; step and optics are the scene's transfer function.

    A tail cut at ±X lacks at most 2 b / (π X · 2πf X) + … < 2e-6 at f >= 0.1 and X = 400 px (integration by parts).
    """
    parts, f = _rich(), np.array([0.1, 0.3, 0.55])
    x = np.arange(-400, 400.01, 0.05)
    _, densities = em.shape_columns(x, parts, LATTICE, SCENE.sides)
    transfers = em.shape_transfers(f, parts, LATTICE, SCENE.sides)

    assert np.exp(-2j * np.pi * f[:, None] * x) @ densities * 0.05 == pytest.approx(transfers, abs=4e-6)
    assert transfers[:, 0] == pytest.approx(SCENE.transfer(f), abs=1e-12)


def test_columns_are_derivatives_of_every_pixel() -> None:
    """Each column of the design is the difference quotient of the residuals, at every pixel, within its bin.

    A bin is 0.05 px wide and up to √(1 + (45/4)²) times that at the corners, where the model is flat: half a bin
    times the column's steepest slope is what binning may cost.
    """
    parts = replace(_rich(), shade=np.zeros(2))
    pixels = em.Pixels(SCENE.signal(), parts.line)
    found = em.residuals(pixels, parts, LATTICE, SCENE.sides)
    model, h = found.model, 1e-5
    kernel = LATTICE.centres.size // 2 + 1
    bent = parts.line.coefficients
    moves = {
        em.LEVEL: replace(parts, low=parts.low + h),
        em.STEP: replace(parts, step=parts.step + h),
        em.WIDENING: replace(parts, widening=parts.widening + h),
        em.SHIFT: replace(parts, shift=parts.shift + h),
        em.TAIL: replace(parts, tail=parts.tail + h),
        em.SHADE: replace(parts, shade=parts.shade + np.array([h, 0])),
        em.FIXED + kernel: replace(parts, kernels=parts.kernels + h * np.eye(1, LATTICE.centres.size, kernel)[0]),
        **{-1 - k: replace(parts, line=replace(parts.line, coefficients=bent + h * np.eye(3)[k])) for k in range(3)},
        -4: replace(parts, shade=parts.shade + np.array([0, h])),
    }
    before = _residual(SCENE.signal(), parts)
    for column, moved in moves.items():
        profile, order = (model.columns[:, column], 0) if column >= 0 else model.sliding[-1 - column]
        expected = (before - _residual(SCENE.signal(), moved)) / h
        steepest = np.abs(np.diff(profile)).max()  # from one bin to the next
        # the line's own slope of 0.9 px in 30, squared, is left out of its columns
        allowed = 0.5 * steepest + 0.002 * np.abs(profile).max()
        assert np.abs(profile[found.index] * pixels.polynomials[order] - expected).max() < allowed, column


def test_information_is_the_sum_over_all_pixels() -> None:
    """Jᵀ W J and Jᵀ W r, taken bin by bin, are those of the whole design written out row by row, pixels dropped too."""
    parts = _rich()
    rng = np.random.default_rng(3)
    pixels = em.Pixels(SCENE.signal() + rng.normal(0, 0.01, (60, 40)), parts.line, rng.random((60, 40)) > 0.3)
    pixels.drop(rng.random(pixels.signal.size) > 0.9, parts.line)
    noise = em.Noise(1e-4, 3e-4, 1000.0)
    linear = em.linearise(pixels, parts, LATTICE, SCENE.sides, noise)

    slid = [profile[linear.index] * pixels.polynomials[j] for profile, j in linear.model.sliding]
    rows = linear.model.columns[linear.index]
    design = np.column_stack([rows[:, : em.FIXED], *slid, rows[:, em.FIXED :]])
    weight = 1 / noise.at(linear.spread)[linear.index]
    assert linear.head == em.FIXED + 4
    assert linear.matrix == pytest.approx((design * weight[:, None]).T @ design, rel=1e-9, abs=1e-6)
    assert linear.right == pytest.approx((design * weight[:, None]).T @ linear.residual, rel=1e-9, abs=1e-6)

    change = rng.normal(0, 0.01, (60, 40))
    truth = (design * weight[:, None]).T @ change.ravel()[pixels.kept]
    assert em.response(pixels, linear, change) == pytest.approx(truth, rel=1e-9, abs=1e-6)
    assert pixels.picture(pixels.taken(change)).ravel()[pixels.kept] == pytest.approx(change.ravel()[pixels.kept])
    assert np.count_nonzero(pixels.picture(pixels.taken(change))) == pixels.signal.size
