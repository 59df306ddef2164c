"""The line spreads against independent facts: textbook transforms, special functions, brute-force integration."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import struve

from tests.scenes.line_spreads import Boxes, Exponential, Gaussian, LineSpread, Pupil, Sharpened, box, triangle

SIDES = (np.cos(np.radians(5)), np.sin(np.radians(5)))
EVERY = (
    Gaussian(0.35),
    Gaussian(1.2),
    box(1.7),
    triangle(3.0),
    Exponential(0.5),
    Pupil(0.5),
    Pupil(0.8, defocus=0.4),
    Pupil(0.6, coma=0.5),
    Sharpened(Gaussian(0.7), 0.8, 1.0),
    Sharpened(Pupil(0.7), 0.5, 1.0),
)


@pytest.mark.parametrize("spread", EVERY, ids=repr)
def test_edge_is_the_transform_of_the_transfer_function(spread: LineSpread) -> None:
    """The edge spread's derivative, transformed by plain summation, is optics × pixel: two roads, one answer."""
    h, reach = 0.01, 60.0
    x = np.arange(-reach, reach, h)
    line = np.diff(spread.edge(x, SIDES)) / h
    middle = x[:-1] + h / 2
    f = np.array([0.05, 0.1, 0.25, 0.4])
    summed = np.exp(-2j * np.pi * np.outer(f, middle)) @ line * h
    true = spread.transfer(f) * np.sinc(f * SIDES[0]) * np.sinc(f * SIDES[1])
    # the difference quotient attenuates by sinc(f h); a diffraction tail cut at 60 px leaves 4/(π³ fc 60) of the
    # energy, oscillating away at these frequencies
    tail = 2e-4 if isinstance(spread, Pupil) or isinstance(getattr(spread, "base", None), Pupil) else 2e-7
    assert np.abs(summed / np.sinc(f * h) - true).max() < tail


def test_gaussian_edge_by_brute_force() -> None:
    """One pixel of a Gaussian edge equals the normal distribution integrated over the pixel's square by quadrature."""
    nodes, weights = np.polynomial.legendre.leggauss(40)
    c, s = np.cos(np.radians(17)), np.sin(np.radians(17))
    from scipy.stats import norm

    for x in (-2.3, -0.4, 0.0, 0.7, 3.1):
        d = x + c * nodes[:, None] / 2 + s * nodes[None, :] / 2
        area = weights @ norm.cdf(d / 0.4) @ weights / 4
        assert Gaussian(0.4).edge(x, (c, s)) == pytest.approx(area, abs=1e-12)
        assert Gaussian(0.4).edge(x, (1.0, 0.0)) == pytest.approx(
            quad(lambda u, x=x: norm.cdf((x + u) / 0.4), -0.5, 0.5)[0], abs=1e-10
        )


def test_box_edge_by_brute_force() -> None:
    """A sharp edge seen by a square pixel is the area of the cut square (a polygon, by fine counting)."""
    c, s = np.cos(np.radians(30)), np.sin(np.radians(30))
    u = (np.arange(4000) + 0.5) / 4000 - 0.5
    for x in (-0.5, -0.1, 0.2, 0.6):
        share = float(np.mean(np.clip(((x + c * u) / s) + 0.5, 0, 1)))
        assert Boxes(()).edge(x, (c, s)) == pytest.approx(share, abs=1e-7)


def test_exponential_edge_by_quadrature() -> None:
    """The exponential edge through the pixel equals the convolution done numerically."""
    spread, (a, b) = Exponential(0.6), SIDES

    def bare(x: float) -> float:
        return float(0.5 * np.exp(x / 0.6) if x < 0 else 1 - 0.5 * np.exp(-x / 0.6))

    nodes, weights = np.polynomial.legendre.leggauss(24)
    for x in (-1.5, -0.3, 0.1, 2.0):
        over_a = [quad(bare, x + b * n / 2 - a / 2, x + b * n / 2 + a / 2, points=[0.0])[0] / a for n in nodes]
        assert spread.edge(x, SIDES) == pytest.approx(weights @ over_a / 2, abs=1e-6)


def test_diffraction_line_spread_is_struve() -> None:
    """The edge of a circular pupil integrates fc·H1(2v)/v², v = π fc x (Struve function; Born & Wolf 8.5, LSF)."""
    fc = 0.5
    spread = Pupil(fc)
    x = np.linspace(-40, 40, 161) + 0.013
    h = 1e-2
    # mean of the line spread over h, against the edge's own difference; (1, 0) sides would blur, so 1e-9 sides are used
    bare = spread.edge(x + h / 2, (1e-9, 0.0)) - spread.edge(x - h / 2, (1e-9, 0.0))
    nodes, weights = np.polynomial.legendre.leggauss(8)
    v = np.pi * fc * np.abs(x[:, None] + h * nodes / 2)
    struve_mean = (fc * np.asarray(struve(1, 2 * v)) / v**2) @ weights / 2
    assert np.abs(bare / h - struve_mean).max() < 1e-7


def test_diffraction_tail_reaches_far() -> None:
    """Far out the edge misses the plateau by 2/(π³ fc x), the cusp of the transfer function at zero."""
    x = 150.0
    missing = 1 - Pupil(0.5).edge(np.array([x, x + 0.5, x + 1.0, x + 1.5]), SIDES).mean()
    assert missing == pytest.approx(2 / (np.pi**3 * 0.5 * (x + 0.75)), rel=1e-3)


def test_defocus_table() -> None:
    """The pupil autocorrelation reproduces the defocus table (1-D integral after Hopkins 1955), tol 1e-5."""
    table = {
        0.25: (0.83886, 0.65858, 0.50157, 0.37942, 0.28747, 0.21529, 0.15249, 0.09239, 0.03603),
        1.0: (0.42665, -0.01441, -0.06952, -0.03689, -0.02007, -0.01904, -0.01730, 0.00203, 0.01949),
    }
    s = np.arange(1, 10) / 10
    for waves, row in table.items():
        h = Pupil(1.0, defocus=waves).transfer(s)
        assert np.abs(h - np.array(row)).max() < 1.1e-5


def test_coma_is_asymmetric_and_balanced_by_tilt() -> None:
    """Coma leaves |H| even, makes the line spread trail to the dark side, and W11 = -2/3 W31 undoes its shift.

    With W31 (ρ³ - 2ρ/3) cos φ the wavefront is orthogonal to tilt (Zernike coma), so to first order no shift is left.
    """
    small = 0.02
    balanced = Pupil(0.6, coma=small, wavefront_tilt=-2 / 3 * small)
    f = np.array([0.05, 0.2, 0.4])
    plain, rest = np.angle(Pupil(0.6, coma=small).transfer(f)), np.angle(balanced.transfer(f))
    assert np.all(plain > 0)
    x = np.linspace(-20, 20, 4001)
    line = np.gradient(Pupil(0.6, coma=0.6).edge(x, SIDES), x)
    peak = x[np.argmax(line)]
    assert line[x < peak].sum() > line[x > peak].sum()
    assert np.abs(rest[0]) < 0.5 * np.abs(plain[0])


def test_sharpened_overshoot_has_the_masks_gain() -> None:
    """An unsharp mask of gain g multiplies high frequencies by 1 + g and leaves the plateaus alone."""
    spread = Sharpened(Gaussian(0.5), 0.8, 2.0)
    assert spread.transfer(0.0) == pytest.approx(1.0)
    assert spread.transfer(0.6) == pytest.approx(1.8 * Gaussian(0.5).transfer(0.6), rel=1e-6)
    assert spread.edge(30.0, SIDES) == pytest.approx(1.0, abs=1e-12)
    assert spread.edge(2.0, SIDES) > 1.05
