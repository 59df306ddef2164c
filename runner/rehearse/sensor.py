"""From light to codes: photons, shot noise, fixed pattern, read noise, conversion, clipping, quantisation, firmware.

The model of EMVA Standard 1288 Release 4.0 Linear: electrons are Poisson distributed about quantum efficiency ×
photons, the dark signal adds normal noise, the converter rounds to whole codes between 0 and the white level.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.ndimage import correlate1d

from runner.rehearse.scene import Picture

Codes = NDArray[np.uint16]
"""Codes, rows × columns."""


@dataclass(frozen=True)
class Sharpening:
    """Unsharp mask of the firmware: codes + amount × (codes - smoothed codes)."""

    amount: float
    """Amount."""
    sigma_px: float
    """Standard deviation of the smoothing kernel, px."""

    @property
    def kernel(self) -> NDArray[np.float64]:
        """The smoothing kernel along one axis, sum 1, cut at three standard deviations."""
        half = int(np.ceil(3 * self.sigma_px))
        weights = np.exp(-(np.arange(-half, half + 1) ** 2) / (2 * self.sigma_px**2))
        return np.asarray(weights / weights.sum())

    def apply(self, values: Picture) -> Picture:
        """Return the sharpened frame, rows × columns."""
        smooth = correlate1d(
            correlate1d(values, self.kernel, axis=0, mode="nearest"), self.kernel, axis=1, mode="nearest"
        )
        return np.asarray(values + self.amount * (values - smooth))

    def along(self, frequency: ArrayLike, angle: float) -> Picture:
        """Return its exact transfer function along one direction.

        Args:
            frequency: cy/px, any shape.
            angle: Direction against the rows, degrees.
        """
        f, turn = np.asarray(frequency, dtype=np.float64), np.deg2rad(angle)
        smooth = self._kernel_along(f * np.cos(turn)) * self._kernel_along(f * np.sin(turn))
        return np.asarray(1 + self.amount * (1 - smooth))

    def _kernel_along(self, f: Picture) -> Picture:
        steps = np.arange(len(self.kernel)) - len(self.kernel) // 2
        return np.asarray(np.cos(2 * np.pi * f[..., None] * steps) @ self.kernel)


@dataclass(frozen=True)
class Sensor:
    """The sensor and its converter."""

    quantum_efficiency: float
    """Electrons per photon."""
    full_well_e: float
    """Electrons at which a pixel is full."""
    read_noise_e: float
    """Temporal noise without light, standard deviation, electrons."""
    prnu: float
    """Spread of the pixels' sensitivity, standard deviation as a fraction."""
    dsnu_e: float
    """Spread of the pixels' dark signal, standard deviation, electrons."""
    dn_per_e: float
    """Conversion, DN per electron."""
    black_level: int
    """Code without light, DN."""
    bit_depth: int
    """Bits of the converter."""

    @property
    def white_level(self) -> int:
        """Highest code, DN."""
        return int(2**self.bit_depth - 1)

    def pattern(self, shape: tuple[int, int], rng: np.random.Generator) -> "Pattern":
        """Draw one sensor's fixed pattern; every frame of a unit shares it."""
        gain = 1 + self.prnu * rng.standard_normal(shape)
        return Pattern(gain, self.dsnu_e * rng.standard_normal(shape))

    def expose(
        self, photons: Picture, pattern: "Pattern", rng: np.random.Generator, sharpening: Sharpening | None = None
    ) -> Codes:
        """Return one frame.

        Args:
            photons: Mean photons per pixel, rows × columns.
            pattern: The unit's fixed pattern.
            rng: Source of this frame's noise.
            sharpening: What the firmware does to the codes, or None.
        """
        electrons = rng.poisson(self.quantum_efficiency * np.clip(photons * pattern.gain, 0, None)).astype(np.float64)
        electrons = np.minimum(electrons, self.full_well_e) + pattern.offset_e
        electrons += self.read_noise_e * rng.standard_normal(photons.shape)
        codes = self.convert(electrons)
        if sharpening is None:
            return codes
        return self._whole(sharpening.apply(codes.astype(np.float64)))

    def convert(self, electrons: Picture) -> Codes:
        """Turn electrons into whole codes, clipped at both ends."""
        return self._whole(self.black_level + self.dn_per_e * electrons)

    def _whole(self, values: Picture) -> Codes:
        return np.clip(np.rint(values), 0, self.white_level).astype(np.uint16)


@dataclass(frozen=True)
class Pattern:
    """One sensor's fixed pattern."""

    gain: Picture
    """Sensitivity relative to the mean, rows × columns."""
    offset_e: Picture
    """Dark signal against the mean, electrons, rows × columns."""
