"""Noise of a known spectrum on a chart, and its picture: each of its waves through the transfer function.

A wave through any linear system is a wave again, so nothing is resampled. The pattern is the one of chart files: waves
|k|^(-slope/2) over 0 < |k| < cells/2 with the phases of numpy's frozen `RandomState`, scaled to a standard deviation
of 0.09 of its range.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from runner.rehearse.painting import Seen, round_transfer
from runner.rehearse.scene import Picture

DEVIATION = 0.09
"""Standard deviation over the range."""


@dataclass(frozen=True)
class NoiseTexture:
    """The pattern as it was printed; it goes on without end."""

    seed: int
    """Its random numbers start from it."""
    cells: int
    """Cells along a period."""
    side_mm: float
    """Length of a period."""
    slope: float
    """Power falls as frequency to minus this."""
    low: float
    """Least light relative to a white board."""
    high: float
    """Greatest."""

    def waves(self) -> NDArray[np.complex128]:
        """Return the amplitudes of all waves, cells × cells, as a discrete Fourier transform orders them."""
        k = np.fft.fftfreq(self.cells) * self.cells
        size = np.hypot(k[:, None], k)
        white = np.fft.fft2(np.random.RandomState(self.seed).standard_normal((self.cells, self.cells)))
        inside = (size > 0) & (size < self.cells / 2)
        bare = np.where(inside, np.maximum(size, 1) ** (-self.slope / 2) * white / np.abs(white), 0)
        deviation = np.sqrt(np.sum(np.abs(bare) ** 2))  # of the sum of these waves, by Parseval
        return np.asarray(bare * DEVIATION * (self.high - self.low) / deviation)

    def picture(self, seen: Seen) -> Picture:
        """Return the light averaged over each pixel, rows × columns; distortion is left out."""
        k = np.fft.fftfreq(self.cells) * self.cells
        f = k * seen.mm_per_px / self.side_mm
        side = np.sqrt(seen.system.fill)
        through = round_transfer(seen.system, np.hypot(f[:, None], f)) * np.sinc(side * f[:, None]) * np.sinc(side * f)
        x = (np.arange(seen.columns) + 0.5 - seen.columns / 2) * (-1 if seen.mirrored else 1)
        y = np.arange(seen.rows) + 0.5 - seen.rows / 2
        # The square's middle lies in the frame's; cells' centres at +0.5.
        turns = [
            np.exp(2j * np.pi * k * ((at[:, None] * seen.mm_per_px / self.side_mm) + 0.5 - 0.5 / self.cells))
            for at in (y, x)
        ]
        return np.asarray((self.low + self.high) / 2 + (turns[0] @ (self.waves() * through) @ turns[1].T).real)
