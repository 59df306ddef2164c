"""The known transfer function of a simulated camera: diffraction × focus error × Gaussian × pixel.

Everything is real and even, so the edge spread follows from the transfer function H along the edge's normal by
E(d) = 1/2 + ∫ H(f) sin(2πfd) / (πf) df over 0 … cut-off, which quadrature gives without any sampling of the picture.

References:
    Hopkins, Proc. R. Soc. A 231 (1955) 91: transfer function of a defocused circular pupil.
    Goodman, Introduction to Fourier Optics: circular pupil in focus.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import brentq

Values = NDArray[np.float64]


def quadrature(cycles: float) -> tuple[Values, Values]:
    """Return nodes and weights on 0 … 1 for an integrand that oscillates that many times.

    Gauss-Legendre panels of 16 nodes for at most three cycles each: five nodes a cycle, where π are the least.
    """
    panels = 4 + int(np.ceil(abs(cycles) / 3))
    nodes, weights = np.polynomial.legendre.leggauss(16)
    starts = np.arange(panels)[:, None]
    return ((starts + (nodes + 1) / 2) / panels).ravel(), np.tile(weights / (2 * panels), panels)


def pupil_transfer(s: ArrayLike, w20: float) -> Values:
    """Return the incoherent transfer function of a circular pupil with focus error.

    (4/π) ∫ cos t · sin(a z)/a dt over 0 … arccos s, with a = 8π W20 s and z = cos t - s; the substitution y = sin t
    in Hopkins' integral leaves a smooth integrand for quadrature.

    Args:
        s: Frequencies as a fraction of the cut-off, any shape; beyond 1 the result is 0.
        w20: Focus error at the pupil's rim, waves.
    """
    fraction = np.asarray(s, dtype=np.float64)
    nodes, weights = quadrature(w20)  # the phase 8π W20 s (1 - s) turns |W20| times at most
    limit = np.arccos(np.clip(fraction, 0, 1))[..., None]
    t = limit * nodes
    z = np.cos(t) - np.clip(fraction, 0, 1)[..., None]
    integrand = np.cos(t) * z * np.sinc(8 * w20 * fraction[..., None] * z)
    return np.asarray(4 / np.pi * limit[..., 0] * (integrand @ weights))


@dataclass(frozen=True)
class Transfer:
    """The system's transfer function at one place of the field."""

    f_number: float
    """Working f-number."""
    wavelength_um: float
    """Wavelength, µm."""
    focus_error_um: float
    """Distance of the sensor from best focus, µm."""
    blur_um: float
    """Standard deviation on the sensor of the Gaussian that stands for aberrations and charge diffusion, µm."""
    pitch_um: float
    """Pixel pitch, µm."""
    fill: float = 1.0
    """Fraction of the pixel's area that collects light; the aperture is a square."""

    @property
    def cut_off(self) -> float:
        """Cut-off of the optics, cy/px."""
        return self.pitch_um / (self.wavelength_um * self.f_number)

    @property
    def w20(self) -> float:
        """Focus error at the pupil's rim, waves: dz / (8 N² λ)."""
        return self.focus_error_um / (8 * self.f_number**2 * self.wavelength_um)

    @property
    def disc_radius(self) -> float:
        """Radius of the geometrical blur disc, px."""
        return abs(self.focus_error_um) / (2 * self.f_number * self.pitch_um)

    def along(self, frequency: ArrayLike, angle: float) -> Values:
        """Return the transfer function along one direction.

        Args:
            frequency: cy/px along that direction, any shape.
            angle: Direction against the rows, degrees.
        """
        f = np.asarray(frequency, dtype=np.float64)
        side, turn = np.sqrt(self.fill), np.deg2rad(angle)
        pixel = np.sinc(side * f * np.cos(turn)) * np.sinc(side * f * np.sin(turn))
        gaussian = np.exp(-2 * (np.pi * self.blur_um / self.pitch_um * f) ** 2)
        return np.asarray(pupil_transfer(np.abs(f) / self.cut_off, self.w20) * gaussian * pixel)

    def edge_spread(self, angle: float, reach: float) -> tuple[Values, Values]:
        """Return distances and edge spread for interpolation.

        The distances are dense at the edge (a hyperbolic sine), where linear interpolation is then good to 1e-5.

        Args:
            angle: Direction of the edge's normal against the rows, degrees.
            reach: Largest distance from the edge, px.
        """
        core = 1 + self.disc_radius
        half = core * np.sinh(np.linspace(0, np.arcsinh(reach / core), 1501))
        nodes, weights = quadrature(self.cut_off * reach)
        f = self.cut_off * nodes
        amplitude = self.along(f, angle) / (np.pi * f) * weights * self.cut_off
        rise = np.sin(2 * np.pi * half[:, None] * f) @ amplitude
        return np.concatenate([-half[:0:-1], half]), np.concatenate([0.5 - rise[:0:-1], 0.5 + rise])


def crossing(curve: Callable[[Values], Values], modulation: float, top: float) -> float:
    """Return the lowest frequency at which a transfer function falls to a modulation.

    Args:
        curve: Transfer function of frequencies in cy/px.
        modulation: Looked for.
        top: Highest frequency to look at, cy/px.

    Raises:
        ValueError: The curve stays above the modulation.
    """
    grid = np.linspace(0, top, 2001)
    below = np.flatnonzero(curve(grid) < modulation)
    if not below.size:
        msg = f"the transfer function stays above {modulation:g} up to {top:g} cy/px"
        raise ValueError(msg)
    ends = float(grid[below[0] - 1]), float(grid[below[0]])
    return float(brentq(lambda f: float(curve(np.array([f]))[0]) - modulation, *ends))
