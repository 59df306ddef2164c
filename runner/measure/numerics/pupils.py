"""Transfer functions that optics and pixels cannot exceed: circular and annular pupils, defocus, the square pixel."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


def circular_mtf(s: ArrayLike) -> Array:
    """Return the incoherent transfer function of an aberration-free circular pupil.

    Args:
        s: Frequency over cut-off frequency; its sign does not matter.

    References:
        J. W. Goodman, Introduction to Fourier Optics, 6.3.2: (2/π) (arccos s - s √(1 - s²)).
    """
    x = np.clip(np.abs(np.asarray(s, dtype=np.float64)), 0.0, 1.0)
    return np.asarray(2 / np.pi * (np.arccos(x) - x * np.sqrt(1 - x * x)))


def annular_mtf(s: ArrayLike, obscuration: float) -> Array:
    """Return the transfer function of an aberration-free annular pupil.

    Args:
        s: Frequency over the full pupil's cut-off frequency.
        obscuration: Inner over outer diameter, in [0, 1).

    Raises:
        ValueError: The obscuration lies outside [0, 1).

    References:
        E. L. O'Neill, J. Opt. Soc. Am. 46 (1956) 285 and 1096.
    """
    if not 0 <= obscuration < 1:
        raise ValueError(f"the obscuration must lie in [0, 1), found {obscuration:g}")
    x = np.abs(np.asarray(s, dtype=np.float64))
    e = obscuration
    if e == 0:
        return circular_mtf(x)
    cosine = np.clip((1 + e * e - 4 * x * x) / (2 * e), -1, 1)
    p = np.arccos(cosine)
    # at p = π the half-angle tangent grows without bound; its arc tangent tends to π/2
    half = np.arctan2((1 + e) * np.sin(p / 2), (1 - e) * np.cos(p / 2))
    middle = 2 * e / np.pi * np.sin(p) + (1 + e * e) / np.pi * p - 2 * (1 - e * e) / np.pi * half - 2 * e * e
    shared = np.where(x <= (1 - e) / 2, -2 * e * e, np.where(x < (1 + e) / 2, middle, 0.0))
    return np.asarray((circular_mtf(x) + e * e * circular_mtf(x / e) + shared) / (1 - e * e))


def defocus_otf(s: ArrayLike, waves: float) -> Array:
    """Return the (real) optical transfer function of a circular pupil with defocus.

    The integral (4/π) ∫₀^√(1-s²) sin(a (√(1-y²) - s))/a dy, a = 8π W20 s, by Gauss-Legendre quadrature after
    y = sin t, good to 1e-10 up to 10 waves.

    Args:
        s: Frequency over cut-off frequency.
        waves: W20, wavelengths of defocus at the pupil's rim.

    References:
        H. H. Hopkins, Proc. R. Soc. A 231 (1955) 91.
    """
    x = np.clip(np.abs(np.asarray(s, dtype=np.float64)), 0.0, 1.0)
    nodes, weights = np.polynomial.legendre.leggauss(96)
    end = np.arccos(x)[..., None]
    t = end * (nodes + 1) / 2
    reach = np.cos(t) - x[..., None]
    # sin(a r)/a = r sinc(a r / π) also holds at a = 0
    inside = reach * np.sinc(8 * waves * x[..., None] * reach) * np.cos(t)
    return np.asarray(4 / np.pi * (end[..., 0] / 2) * (inside @ weights))


def pixel_mtf(frequency: ArrayLike, angle_deg: float = 0.0, fill: float = 1.0) -> Array:
    """Return the transfer function of a square pixel along a direction, sinc(f a cos t) sinc(f a sin t).

    Args:
        frequency: cy/px along that direction.
        angle_deg: The direction's angle from the nearest pixel axis, degrees.
        fill: Fraction of the pixel's area that collects light; the side is a = √fill.

    Raises:
        ValueError: The fill lies outside (0, 1].
    """
    if not 0 < fill <= 1:
        raise ValueError(f"the fill must lie in (0, 1], found {fill:g}")
    f, t = np.asarray(frequency, dtype=np.float64) * np.sqrt(fill), np.radians(angle_deg)
    return np.asarray(np.abs(np.sinc(f * np.cos(t)) * np.sinc(f * np.sin(t))))


def cutoff_cy_px(
    wavelength_um: float,
    pitch_um: float,
    *,
    f_number: float | None = None,
    numerical_aperture: float | None = None,
    magnification: float | None = None,
) -> float | None:
    """Return the diffraction cut-off on the sensor, cy/px, or None when the optics are not known well enough.

    1/(λ N) from the working f-number; 2 NA/(λ M) from an object-side numerical aperture and a magnification.
    """
    if f_number is not None:
        return pitch_um / (wavelength_um * f_number)
    if numerical_aperture is not None and magnification is not None:
        return 2 * numerical_aperture * pitch_um / (wavelength_um * abs(magnification))
    return None


def ceiling(
    frequency: ArrayLike,
    *,
    wavelength_um: float | None = None,
    pitch_um: float | None = None,
    f_number: float | None = None,
    numerical_aperture: float | None = None,
    magnification: float | None = None,
    fill: float = 1.0,
    angle_deg: float = 45.0,
) -> Array:
    """Return the highest modulation that diffraction and the pixel leave at a frequency.

    What is not known does not limit: without wavelength, pitch or aperture only the pixel counts.

    Args:
        frequency: cy/px on the sensor.
        wavelength_um: Mean wavelength, µm.
        pitch_um: Pixel pitch, µm.
        f_number: Working f-number.
        numerical_aperture: Object-side numerical aperture (immersion included).
        magnification: Image size over object size.
        fill: Fraction of the pixel's area that collects light.
        angle_deg: Direction from the nearest pixel axis; 45 is the least attenuated one and bounds all others.
    """
    f = np.asarray(frequency, dtype=np.float64)
    modulation = pixel_mtf(f, angle_deg, fill)
    if wavelength_um is None or pitch_um is None:
        return modulation
    cutoff = cutoff_cy_px(
        wavelength_um,
        pitch_um,
        f_number=f_number,
        numerical_aperture=numerical_aperture,
        magnification=magnification,
    )
    return modulation if cutoff is None else modulation * circular_mtf(f / cutoff)
