"""The simulator's optics against published tables and against scenes that share no code with it."""

import numpy as np
import pytest
from scipy.integrate import quad

from runner.rehearse.optics import Transfer, crossing, pupil_transfer, quadrature
from tests.scenes.line_spreads import Pupil

S = np.arange(1, 10) / 10


def test_pupil_in_focus_is_the_textbook_one() -> None:
    """A circular pupil in focus has (2/π)(arccos s - s sqrt(1 - s²)); Goodman, Introduction to Fourier Optics, 6.4."""
    table = [0.872889, 0.747060, 0.623838, 0.504632, 0.391002, 0.284757, 0.188120, 0.104088, 0.037386]

    assert pupil_transfer(S, 0.0) == pytest.approx(table, abs=1e-6)  # the table's last digit
    assert pupil_transfer(np.array([0.0, 1.0, 1.5]), 0.0) == pytest.approx([1.0, 0.0, 0.0], abs=1e-12)


@pytest.mark.parametrize("w20", [0.125, 0.75, 2.0, 12.0])
def test_focus_error_is_hopkins_overlap_integral(w20: float) -> None:
    """The defocused transfer function is the pupil's overlap integral in its other order of integration.

    Source: Hopkins, Proc. R. Soc. A 231 (1955) 91: ∬ cos(8π W20 s x) over the overlap of two discs, divided by π.
    """

    def overlap(s: float) -> float:
        return quad(
            lambda x: 4 / np.pi * np.cos(8 * np.pi * w20 * s * x) * np.sqrt(1 - (x + s) ** 2), 0, 1 - s, limit=400
        )[0]

    assert pupil_transfer(S, w20) == pytest.approx([overlap(s) for s in S], abs=1e-7)  # quad's own tolerance


@pytest.mark.parametrize("w20", [0.125, 0.25, 0.5, 1.0])
def test_focus_error_lowers_the_peak_as_sinc_squared(w20: float) -> None:
    """The volume under the transfer function falls by sinc²(W20): Strehl ratio of pure focus error.

    Source: Born and Wolf, Principles of Optics, 8.8.2 (intensity along the axis).
    """
    s, weights = quadrature(40)
    strehl = (pupil_transfer(s, w20) * s) @ weights / ((pupil_transfer(s, 0.0) * s) @ weights)

    assert strehl == pytest.approx(float(np.sinc(w20)) ** 2, abs=1e-6)


def test_pixel_multiplies_the_lens() -> None:
    """f/4, 550 nm, 3.45 µm pixels: 0.38263 at 0.5 cy/px and 0.71835 at 0.25; product of the two closed forms."""
    system = Transfer(4.0, 0.55, 0.0, 0.0, 3.45)

    assert system.along([0.5, 0.25], 0.0) == pytest.approx([0.38263, 0.71835], abs=1e-5)


def test_gaussian_and_small_aperture_multiply_too() -> None:
    """A Gaussian blur multiplies by exp(-2π²σ²f²), a fill of a quarter halves the pixel's side: known transforms."""
    f = np.linspace(0.01, 0.5, 20)
    bare, blurred = Transfer(2.8, 0.55, 0.0, 0.0, 3.0), Transfer(2.8, 0.55, 0.0, 1.5, 3.0)
    small = Transfer(2.8, 0.55, 0.0, 0.0, 3.0, fill=0.25)

    assert blurred.along(f, 5) / bare.along(f, 5) == pytest.approx(np.exp(-2 * (np.pi * 0.5 * f) ** 2), rel=1e-12)
    assert small.along(f, 0) / bare.along(f, 0) == pytest.approx(np.sinc(f / 2) / np.sinc(f), rel=1e-12)


@pytest.mark.parametrize(("focus_um", "angle"), [(0.0, 5.0), (17.0, 5.0), (30.0, 30.0), (0.0, 45.0)])
def test_edge_spread_is_the_scenes_own(focus_um: float, angle: float) -> None:
    """The edge spread agrees with the closed-form scenes, which share no code with the simulator.

    Linear interpolation between the table's points costs at most h²/8 times the line spread's slope: below 2e-5.
    """
    system = Transfer(2.8, 0.55, focus_um, 0.0, 3.0)
    sides = abs(np.cos(np.deg2rad(angle))), abs(np.sin(np.deg2rad(angle)))
    scene = Pupil(system.cut_off, defocus=system.w20)
    distance = np.linspace(-30, 30, 997)

    spread = np.interp(distance, *system.edge_spread(angle, 150.0))

    assert spread == pytest.approx(scene.edge(distance, sides), abs=2e-5)


def test_far_tail_is_that_of_diffraction() -> None:
    """Far from the edge 2/(π³ fc d) of the light is missing: the slope of the transfer function at 0 demands it."""
    system = Transfer(2.8, 0.55, 5.0, 1.3, 3.0)

    distance, spread = system.edge_spread(5.0, 150.0)

    assert 1 - spread[-1] == pytest.approx(2 / (np.pi**3 * system.cut_off * distance[-1]), rel=0.01)
    assert spread[0] == pytest.approx(1 - spread[-1], rel=1e-9)
    assert np.all(np.diff(spread) > 0)


def test_wide_blur_is_the_geometrical_disc() -> None:
    """At 116 waves of focus error the edge spread is that of a uniform disc, ½ + (u sqrt(1-u²) + arcsin u)/π.

    Geometry; diffraction rounds the disc's rim over about sqrt(λ dz) = 16 px of 238, hence 0.5 %.
    """
    system = Transfer(2.8, 0.55, 4000.0, 1.3, 3.0)
    distance, spread = system.edge_spread(5.0, 440.0)
    u = np.clip(distance / system.disc_radius, -1, 1)

    assert system.disc_radius == pytest.approx(4000 / 2.8 / 2 / 3)
    assert spread == pytest.approx(0.5 + (u * np.sqrt(1 - u**2) + np.arcsin(u)) / np.pi, abs=5e-3)


def test_crossing_of_a_known_curve() -> None:
    """MTF50 of a Gaussian σ = 0.5 px through a pixel is 0.32309 cy/px (roots of the closed form)."""
    f50 = crossing(lambda f: np.exp(-2 * (np.pi * 0.5 * f) ** 2) * np.sinc(f), 0.5, 1.0)

    assert f50 == pytest.approx(0.32309, abs=1e-5)


def test_crossing_that_is_not_there_is_refused() -> None:
    """A curve that stays above the modulation has no crossing, and says so."""
    with pytest.raises(ValueError, match=r"stays above 0\.5 up to 1 cy/px"):
        crossing(np.ones_like, 0.5, 1.0)
