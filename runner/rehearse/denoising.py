"""Noise reduction that keeps edges and smears what is fainter: each pixel becomes the mean of those like it.

References:
    J.-S. Lee, Computer Vision, Graphics, and Image Processing 24 (1983) 255: the sigma filter.
"""

from dataclasses import dataclass

import numpy as np

from runner.rehearse.sensor import Codes


@dataclass(frozen=True)
class Denoising:
    """Sigma filter on each colour's own pixels."""

    alike_dn: float
    """Neighbours that differ by no more are averaged."""
    reach: int
    """Neighbours each way, in pixels of the same colour."""

    def apply(self, codes: Codes, pitch: int) -> Codes:
        """Return the smoothed frame.

        Args:
            codes: Rows × columns.
            pitch: px from one pixel of a colour to the next: 2 in a mosaic, else 1.
        """
        out = np.empty_like(codes)
        for row in range(pitch):
            for column in range(pitch):
                out[row::pitch, column::pitch] = self._plane(codes[row::pitch, column::pitch])
        return out

    def _plane(self, codes: Codes) -> Codes:
        own = codes.astype(np.float64)
        rows, columns = own.shape
        wide = np.pad(own, self.reach, mode="reflect")
        total, count = np.zeros(own.shape), np.zeros(own.shape)
        for i in range(2 * self.reach + 1):
            for j in range(2 * self.reach + 1):
                other = wide[i : i + rows, j : j + columns]
                alike = np.abs(other - own) <= self.alike_dn
                total += np.where(alike, other, 0.0)
                count += alike
        return np.asarray(np.rint(total / count), dtype=np.uint16)
