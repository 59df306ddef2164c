"""From light to codes: photons, shot noise, fixed pattern, read noise, conversion, clipping, quantisation, firmware.

The model of EMVA Standard 1288 Release 4.0 Linear: electrons are Poisson distributed about quantum efficiency ×
photons, the dark signal adds normal noise, the converter rounds to whole codes between 0 and the white level.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field

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
        return Pattern(gain, self.dsnu_e * rng.standard_normal(shape), np.zeros(shape))

    def expose(
        self, photons: Picture, pattern: "Pattern", rng: np.random.Generator, firmware: "Firmware | None" = None
    ) -> Codes:
        """Return one frame.

        Args:
            photons: Mean photons per pixel, rows × columns.
            pattern: The unit's fixed pattern.
            rng: Source of this frame's noise.
            firmware: What is done to the codes on their way out, or None.
        """
        light = self.quantum_efficiency * np.clip(photons * pattern.gain, 0, None)
        electrons = np.minimum(rng.poisson(light + pattern.dark_e).astype(np.float64), self.full_well_e)
        electrons += pattern.offset_e
        electrons += self.read_noise_e * rng.standard_normal(photons.shape)
        codes = self.convert(electrons, (firmware or Firmware()).added_dn)
        for place, code in pattern.stuck.items():
            codes[place] = code
        return self._processed(codes, firmware) if firmware else codes

    def convert(self, electrons: Picture, added_dn: Picture | float = 0.0) -> Codes:
        """Turn electrons, and what the readout adds to them, into whole codes, clipped at both ends."""
        return self._whole(self.black_level + self.dn_per_e * electrons + added_dn)

    def _processed(self, codes: Codes, firmware: "Firmware") -> Codes:
        if firmware.gains is not None:
            codes = self._whole(self.black_level + (codes.astype(np.float64) - self.black_level) * firmware.gains)
        if firmware.sharpening is not None:
            codes = self._whole(firmware.sharpening.apply(codes.astype(np.float64)))
        return codes

    def _whole(self, values: Picture) -> Codes:
        return np.clip(np.rint(values), 0, self.white_level).astype(np.uint16)


@dataclass(frozen=True)
class Pattern:
    """One sensor's fixed pattern."""

    gain: Picture
    """Sensitivity relative to the mean, rows × columns."""
    offset_e: Picture
    """Dark signal against the mean, electrons, rows × columns."""
    dark_e: Picture
    """Mean dark signal of hot pixels in one frame, electrons, rows × columns; it has shot noise of its own."""
    stuck: Mapping[tuple[int, int], int] = field(default_factory=dict)
    """Codes of stuck pixels by row and column."""


@dataclass(frozen=True)
class Firmware:
    """What happens to one frame behind the pixels."""

    added_dn: Picture | float = 0.0
    """What the readout adds before the converter, DN; fits rows × columns."""
    gains: Picture | None = None
    """Shading correction: factors on the light over the black level, rows × columns."""
    sharpening: Sharpening | None = None
    """Unsharp mask, the last step."""
