"""The ceiling of diffraction and pixel, against the closed form and worked figures."""

from math import inf, pi, sin

import pytest

from runner.spec.ceiling import ceiling, circular_pupil, cutoff, frequency_at, pixel
from runner.spec.model import Camera, Optics


def _camera(pitch: float | None) -> Camera:
    return Camera(1600, 1200, 12, 64.0, 4095.0, pixel_pitch_um=pitch)


@pytest.mark.parametrize(
    ("s", "value"),
    [(0.0, 1), (0.1, 0.872889), (0.3, 0.623838), (0.5, 0.391002), (0.7, 0.188120), (0.9, 0.037386), (1, 0), (1.2, 0)],
)
def test_a_perfect_circular_pupil(s: float, value: float) -> None:
    """The usual table of 2/π (acos s - s √(1-s²)) (Goodman, Introduction to Fourier Optics, 6.3), to its six digits."""
    assert circular_pupil(s) == pytest.approx(value, abs=5.1e-7)


@pytest.mark.parametrize(("modulation", "s"), [(0.5, 0.403973), (0.3, 0.585137), (0.2, 0.687049), (0.1, 0.805384)])
def test_where_a_perfect_pupil_falls_to_a_modulation(modulation: float, s: float) -> None:
    """The inverse of the same closed form, to its six digits: half modulation at 0.404 of the cut-off."""
    optics = Optics(f_number=2.8, wavelength_um=0.55)

    found = frequency_at(modulation, _camera(3.0), optics, None)

    assert found / cutoff(_camera(3.0), optics) == pytest.approx(s, abs=5.1e-7)


def test_a_square_pixel_at_45_degrees() -> None:
    """At 45° a square pixel transfers sinc² of f a/√2; along its side it transfers sinc, which is never more."""
    for f in (0.1, 0.25, 0.5, 0.9):
        assert pixel(f, 1.0) == pytest.approx((sin(pi * f / 2**0.5) / (pi * f / 2**0.5)) ** 2, rel=1e-14)
        assert pixel(f, 1.0) >= sin(pi * f) / (pi * f)
    assert pixel(0.0, 1.0) == 1.0
    assert pixel(2**0.5, 1.0) == 0.0


def test_lens_times_pixel() -> None:
    """550 nm, f/4, 3.45 µm: 0.38263 at Nyquist with the pixel along its side (closed form); at 45° a little more."""
    camera, optics = _camera(3.45), Optics(f_number=4.0, wavelength_um=0.55)
    along = circular_pupil(0.5 / cutoff(camera, optics)) * sin(pi / 2) / (pi / 2)
    assert along == pytest.approx(0.38263, abs=5.1e-6)
    assert along < ceiling(0.5, camera, optics, 1.0) < 1.03 * along


def test_a_microscope() -> None:
    """20×/0.75, 550 nm, 6.5 µm: Nyquist is s = 0.564 of the object's cut-off of 2.72727 cy/µm (closed form)."""
    optics = Optics(numerical_aperture=0.75, magnification=20.0, wavelength_um=0.55)
    s = 0.5 / cutoff(_camera(6.5), optics)
    assert s == pytest.approx(1.53846 / 2.72727, rel=1e-5)
    assert circular_pupil(s) * sin(pi / 2) / (pi / 2) == pytest.approx(0.20494, abs=5.1e-6)


def test_what_is_not_stated_counts_as_perfect() -> None:
    """Without pitch, wavelength or aperture there is no diffraction, without fill no pixel: the ceiling is 1."""
    for camera, optics in (
        (_camera(None), Optics(f_number=2.8, wavelength_um=0.55)),
        (_camera(3.0), Optics(f_number=2.8)),
        (_camera(3.0), Optics(wavelength_um=0.55)),
        (_camera(3.0), Optics(numerical_aperture=0.2, wavelength_um=0.55)),
    ):
        assert ceiling(0.4, camera, optics, None) == 1.0
        assert frequency_at(0.5, camera, optics, None) == inf


def test_the_crossing_of_the_ceiling() -> None:
    """The frequency at which the ceiling falls to a modulation is where it has that value, to the last digits."""
    optics = Optics(f_number=2.8, wavelength_um=0.55)
    for fill in (None, 0.5, 1.0):
        for modulation in (0.1, 0.5, 0.9):
            f = frequency_at(modulation, _camera(3.0), optics, fill)
            assert ceiling(f, _camera(3.0), optics, fill) == pytest.approx(modulation, abs=1e-12)
