"""Ceilings of optics and pixels: limits, symmetries and what is unknown (tables: tests/published)."""

import numpy as np
import pytest

from runner.measure.numerics.pupils import (
    annular_mtf,
    ceiling,
    circular_mtf,
    cutoff_cy_px,
    defocus_otf,
    pixel_mtf,
)
from tests.scenes.line_spreads import Pupil

S = np.linspace(0, 1, 41)


def test_every_pupil_starts_at_one_and_ends_at_zero() -> None:
    """At zero frequency nothing is lost, at and beyond the cut-off nothing is left; the sign of s does not matter."""
    for curve in (circular_mtf, lambda s: annular_mtf(s, 0.4), lambda s: defocus_otf(s, 0.6)):
        assert curve(0.0) == pytest.approx(1.0, abs=1e-12)
        assert curve([1.0, 1.7]) == pytest.approx([0.0, 0.0], abs=1e-12)
        assert curve(-S) == pytest.approx(curve(S))


def test_defocus_against_pupil_autocorrelation() -> None:
    """The 1-D integral agrees with the two-dimensional autocorrelation of a defocused pupil to 1e-9."""
    for waves in (0.0, 0.3, 1.5):
        scene = Pupil(1.0, defocus=waves or 1e-12).transfer(S)
        assert defocus_otf(S, waves) == pytest.approx(scene.real, abs=1e-8)


def test_small_obscuration_tends_to_the_full_pupil() -> None:
    """An obscuration of 1e-4 changes nothing beyond 1e-4; one outside [0, 1) is refused."""
    assert annular_mtf(S, 1e-4) == pytest.approx(circular_mtf(S), abs=1e-4)
    assert annular_mtf(S, 0.0) == pytest.approx(circular_mtf(S))
    with pytest.raises(ValueError, match=r"must lie in \[0, 1\), found 1"):
        annular_mtf(S, 1.0)


def test_annular_pupil_by_counting() -> None:
    """The annular closed form equals the overlap of two ring pupils counted on a grid of 1/500, to 3e-3."""
    x = (np.arange(1500) + 0.5) / 500 - 1.5
    r2 = x[None, :] ** 2 + x[:, None] ** 2
    ring = (r2 <= 1) & (r2 >= 0.4**2)
    for shift in (100, 300, 500, 700, 900):
        overlap = np.count_nonzero(ring[:, shift:] & ring[:, :-shift]) / np.count_nonzero(ring)
        assert annular_mtf(shift / 1000, 0.4) == pytest.approx(overlap, abs=3e-3)


def test_ceiling_falls_and_bounds_every_direction() -> None:
    """The default direction bounds all others; an unknown optics or pitch leaves the pixel alone."""
    f = np.linspace(0, 0.5, 11)
    known = {"wavelength_um": 0.55, "pitch_um": 3.0, "f_number": 2.8}
    for angle in (0, 10, 30, 45):
        assert np.all(ceiling(f, **known) >= ceiling(f, **known, angle_deg=angle) - 1e-15)
    assert np.all(np.diff(ceiling(f, **known)) < 0)
    assert ceiling(0.5) == pytest.approx(pixel_mtf(0.5, 45))
    assert ceiling(0.5, wavelength_um=0.55, pitch_um=3.0) == pytest.approx(pixel_mtf(0.5, 45))


def test_cutoff_by_f_number_and_by_aperture() -> None:
    """1/(λN) on the sensor, 2 NA/(λM) through a microscope; without either there is none."""
    assert cutoff_cy_px(0.5, 4.0, f_number=8) == pytest.approx(1.0)
    assert cutoff_cy_px(0.5, 5.0, numerical_aperture=0.5, magnification=-20) == pytest.approx(0.5)
    assert cutoff_cy_px(0.5, 5.0, numerical_aperture=0.5) is None


def test_pixel_fill_has_limits() -> None:
    """A fill outside (0, 1] is refused."""
    with pytest.raises(ValueError, match=r"fill must lie in \(0, 1\], found 0"):
        pixel_mtf(0.5, fill=0)
