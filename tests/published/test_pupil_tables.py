"""Pupil transfer functions against published closed forms and tables."""

import numpy as np
import pytest
from scipy.optimize import brentq

from runner.measure.numerics.pupils import annular_mtf, ceiling, circular_mtf, cutoff_cy_px, defocus_otf

S = np.arange(1, 10) / 10


def test_circular_pupil() -> None:
    """Circular pupil at s = 0.1 … 0.9, (2/π)(arccos s - s√(1-s²)): Goodman, Introduction to Fourier Optics, 6.3.2."""
    table = [0.872889, 0.747060, 0.623838, 0.504632, 0.391002, 0.284757, 0.188120, 0.104088, 0.037386]
    assert circular_mtf(S) == pytest.approx(table, abs=1e-6)


def test_circular_pupil_crossings() -> None:
    """Where the same closed form falls to 0.5, 0.3, 0.2, 0.1, and the trade's 9 % at the Rayleigh spacing."""
    crossings = [brentq(lambda s, m=m: float(circular_mtf(s)) - m, 0, 1) for m in (0.5, 0.3, 0.2, 0.1)]
    assert crossings == pytest.approx([0.403973, 0.585137, 0.687049, 0.805384], abs=1e-6)
    # the first zero of J1 at 3.8317 puts the Rayleigh spacing at 1.21967 λN, s = 0.8199
    assert float(circular_mtf(1 / 1.2196699)) == pytest.approx(0.08923, abs=1e-5)


@pytest.mark.parametrize(
    ("obscuration", "table"),
    [
        (0.25, [0.83139, 0.67047, 0.53209, 0.41278, 0.35394, 0.29747, 0.20066, 0.11103, 0.03988]),
        (0.33, [0.81093, 0.62799, 0.45962, 0.36103, 0.32516, 0.28927, 0.21111, 0.11681, 0.04195]),
        (0.50, [0.74620, 0.49762, 0.30589, 0.24144, 0.22360, 0.23529, 0.22205, 0.13878, 0.04985]),
    ],
)
def test_annular_pupil(obscuration: float, table: list[float]) -> None:
    """Annular pupil, E. L. O'Neill, J. Opt. Soc. Am. 46 (1956) 285: table to 1e-5."""
    assert annular_mtf(S, obscuration) == pytest.approx(table, abs=1e-5)


@pytest.mark.parametrize(
    ("waves", "table"),
    [
        (0.125, [0.86430, 0.72424, 0.59158, 0.47106, 0.36308, 0.26614, 0.17873, 0.10107, 0.03704]),
        (0.25, [0.83886, 0.65858, 0.50157, 0.37942, 0.28747, 0.21529, 0.15249, 0.09239, 0.03603]),
        (0.5, [0.74209, 0.43482, 0.22926, 0.12569, 0.08461, 0.07411, 0.07281, 0.06269, 0.03216]),
        (0.75, [0.59748, 0.17640, -0.00001, -0.03734, -0.03271, -0.01761, 0.00483, 0.02811, 0.02637]),
        (1.0, [0.42665, -0.01441, -0.06952, -0.03689, -0.02007, -0.01904, -0.01730, 0.00203, 0.01949]),
    ],
)
def test_defocus(waves: float, table: list[float]) -> None:
    """Defocused circular pupil, integral of H. H. Hopkins, Proc. R. Soc. A 231 (1955) 91: table to 1e-5."""
    assert defocus_otf(S, waves) == pytest.approx(table, abs=1e-5)


def test_camera_ceiling() -> None:
    """At 550 nm, f/4, 3.45 µm: cut-off 454.545 lp/mm, 0.38263 at and 0.71835 at half Nyquist (closed forms)."""
    optics = {"wavelength_um": 0.55, "pitch_um": 3.45, "f_number": 4.0}
    assert cutoff_cy_px(**optics) / 3.45e-3 == pytest.approx(454.545, abs=1e-3)  # type: ignore[operator]
    assert ceiling([0.5, 0.25], angle_deg=0, **optics) == pytest.approx([0.38263, 0.71835], abs=1e-5)


def test_microscope_ceiling() -> None:
    """Objective 20×/0.75 at 550 nm, 6.5 µm pixel: object cut-off 2.72727 cy/µm, modulation 0.20494 at Nyquist."""
    optics = {"wavelength_um": 0.55, "pitch_um": 6.5, "numerical_aperture": 0.75, "magnification": 20.0}
    assert cutoff_cy_px(**optics) / 0.325 == pytest.approx(2.72727, abs=1e-5)  # type: ignore[operator]
    assert float(ceiling(0.5, angle_deg=0, **optics)) == pytest.approx(0.20494, abs=1e-5)
