"""The peak of a through-focus curve is found where the defocused pupil has it, within its stated uncertainty.

The scenes are Hopkins' transfer function of a defocused circular pupil (Proc. R. Soc. A 231 (1955) 91), integrated here
by plain quadrature and shared with nothing else.
"""

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import quad

from runner.measure.numerics.focus_curve import FocusLost, fit_peak

F_NUMBER, WAVELENGTH = 2.8, 0.55
"""f/2.8 at 0.55 µm: the quarter-wave depth 4 λ N² (from -λ/4 to +λ/4 at the pupil's rim is 8 λ N² / 2) is 17.2 µm."""


def _transfer(s: float, waves: float) -> float:
    def inner(y: float) -> float:
        a = 8 * np.pi * waves * s
        b = np.sqrt(1 - y * y) - s
        return float(np.sin(a * b) / a) if a else float(b)

    return 4 / np.pi * quad(inner, 0, np.sqrt(1 - s * s))[0]


def _curve(z: NDArray[np.float64], z0: float, s: float = 0.25) -> NDArray[np.float64]:
    """Return the transfer at a share of the cut-off for sensor positions in µm, best focus at z0."""
    return np.array([abs(_transfer(s, (one - z0) / (8 * F_NUMBER**2 * WAVELENGTH))) for one in z])


def test_the_published_values_are_reproduced() -> None:
    """The scene itself: 0.65858 at s = 0.2 and a quarter wave (defocused circular pupil, Hopkins 1955)."""
    assert _transfer(0.2, 0.25) == pytest.approx(0.65858, abs=1e-5)


@pytest.mark.parametrize("step", [2.5, 4.0, 6.0, 6.9])
@pytest.mark.parametrize("z0", [-1.3, 0.0, 2.1])
def test_focus_without_noise_whatever_the_steps(step: float, z0: float) -> None:
    """Position within 0.1 % and depth (80 % of the peak) within 1 % of the depth, whatever the grid of steps."""
    z = np.arange(-36, 36.1, step)
    fine = np.linspace(-30, 30, 6001)
    truth = _curve(fine, 0.0)
    inside = fine[truth >= 0.8 * truth.max()]
    depth = float(inside[-1] - inside[0])
    peak = fit_peak(z, _curve(z, z0), np.full(z.size, 1e-4), 0.8)

    assert abs(peak.position - z0) < 0.001 * depth
    assert abs(peak.high - peak.low - depth) < 0.01 * depth


@pytest.mark.parametrize("waves", [0.1, 0.25])
def test_spherical_aberration_stays_inside_the_bound(waves: float) -> None:
    """A quarter wave of W40 makes the curve lopsided: its highest point is found within the bias bound."""
    z = np.arange(-36, 36.1, 4.0) + 0.7
    x = np.linspace(-1, 1, 161)
    across, down = np.meshgrid(x, x)
    shift = 0.25  # half the frequency as a share of the cut-off, in pupil radii: s = 0.25

    def at(positions: NDArray[np.float64]) -> NDArray[np.float64]:
        found = []
        for one in positions:
            w20 = one / (8 * F_NUMBER**2 * WAVELENGTH)
            parts = []
            for sign in (1, -1):
                r2 = (across + sign * shift) ** 2 + down**2
                parts.append(np.where(r2 <= 1, np.exp(2j * np.pi * (w20 * r2 + waves * r2**2)), 0))
            found.append(abs(np.sum(parts[0] * np.conj(parts[1]))) / np.sum(across**2 + down**2 <= 1))
        return np.array(found)

    coarse = np.arange(-15, 15, 1.0)
    near = coarse[np.argmax(at(coarse))]
    fine = near + np.arange(-1.5, 1.5, 0.05)
    parabola = np.polynomial.Polynomial.fit(fine, at(fine), 4)
    truth = next(float(r.real) for r in parabola.deriv().roots() if abs(r.imag) < 1e-6 and abs(r.real - near) < 1.5)
    peak = fit_peak(z, at(z), np.full(z.size, 1e-4), 0.8)

    assert abs(peak.position - truth) <= 0.005 * (peak.high - peak.low)


def test_the_stated_uncertainty_covers_noise() -> None:
    """Of 600 noisy curves 93 to 99 % have their focus within 2u; the spread over u lies in 0.8 to 1.25."""
    rng = np.random.default_rng(3)
    z = np.arange(-36, 36.1, 4.0)
    clean = {z0: _curve(z, z0) for z0 in (-1.7, -0.4, 0.9, 1.6)}
    errors = []
    for n in range(600):
        z0 = list(clean)[n % 4]
        peak = fit_peak(z, clean[z0] + 0.01 * rng.standard_normal(z.size), np.full(z.size, 0.01), 0.8)
        errors.append((peak.position - z0) / np.hypot(peak.position_u, peak.position_bias))

    assert 0.93 <= np.mean(np.abs(errors) <= 2) <= 0.98  # of 600, 0.02 are two standard errors
    assert 0.8 <= np.std(errors) <= 1.25


@pytest.mark.parametrize(
    ("z", "values", "words"),
    [
        ([0.0, 1, 2, 3, 4], [0.1, 0.2, 0.3, 0.4, 0.5], "the largest value lies at the end of the range"),
        ([0.0, 1, 2, 3, 4], [0.1, 0.1, 0.9, 0.1, 0.1], "1 positions lie around the peak"),
    ],
)
def test_without_a_peak_it_is_said(z: list[float], values: list[float], words: str) -> None:
    """A curve that still rises at its end, or has one lone point, has no focus to state."""
    with pytest.raises(FocusLost, match=words):
        fit_peak(np.array(z), np.array(values), np.full(5, 0.01), 0.8)
