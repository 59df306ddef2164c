"""The highest transfer function that optics and pixel allow: diffraction at a circular pupil times the pixel aperture.

No lens and no focus can exceed it, so a limit above it asks for what cannot be. The pixel's factor is taken at the most
favourable edge direction (45°), and what the spec does not state counts as perfect; the ceiling errs on the high side.

References:
    Goodman, Introduction to Fourier Optics, 6.3 (diffraction-limited OTF of a circular pupil, incoherent light);
    ISO 15529:2010 (aperture of the sampling element).
"""

from math import acos, inf, pi, sin, sqrt

from runner.spec.model import Camera, Optics


def circular_pupil(s: float) -> float:
    """Return the modulation transfer of a perfect circular pupil at s, the frequency over the cut-off frequency."""
    return 0.0 if s >= 1 else 2 / pi * (acos(s) - s * sqrt(1 - s * s))


def cutoff(camera: Camera, optics: Optics) -> float:
    """Return the optics' incoherent cut-off in cy/px on the sensor; infinity where it is not stated.

    It is 1/(λN) on the sensor for a working f-number N, and 2 NA/λ in the object for a numerical aperture NA.
    """
    pitch, wavelength = camera.pixel_pitch_um, optics.wavelength_um
    if pitch is None or wavelength is None:
        return inf
    if optics.f_number is not None:
        return pitch / (wavelength * optics.f_number)
    if optics.numerical_aperture is not None and optics.magnification is not None:
        return 2 * optics.numerical_aperture / wavelength * pitch / optics.magnification
    return inf


def pixel(frequency: float, fill: float) -> float:
    """Return the transfer of a square pixel at 45°, where it is highest; the frequency in cy/px, fill as a fraction."""
    x = pi * frequency * sqrt(fill / 2)
    if x >= pi:
        return 0.0
    return (sin(x) / x) ** 2 if x > 0 else 1.0


def ceiling(frequency: float, camera: Camera, optics: Optics, fill: float | None) -> float:
    """Return the highest modulation transfer that a system can have.

    Args:
        frequency: cy/px.
        camera: Gives the pixel pitch.
        optics: Gives aperture and wavelength; what is not stated counts as perfect.
        fill: Fraction of the pixel that collects light, or None to leave the pixel out (a lens alone, or not stated).
    """
    transfer = circular_pupil(frequency / cutoff(camera, optics))
    return transfer if fill is None else transfer * pixel(frequency, fill)


def frequency_at(modulation: float, camera: Camera, optics: Optics, fill: float | None) -> float:
    """Return the frequency in cy/px at which the ceiling falls to a modulation; infinity where it does not.

    The ceiling falls steadily up to the cut-off and the pixel's first zero, so that bisection finds it.
    """
    end = min(cutoff(camera, optics), inf if fill is None else sqrt(2 / fill))
    if end == inf:
        return inf
    low, high = 0.0, end
    for _ in range(60):  # halves the interval to the last bit of a double
        middle = (low + high) / 2
        low, high = (middle, high) if ceiling(middle, camera, optics, fill) > modulation else (low, middle)
    return high
