"""Artwork printed, and seen by a camera: a picture of the sheet resampled through a view, blurred, sampled, with noise.

The print is perfect: a tone is the share of bare sheet that its sRGB code (IEC 61966-2-1) stands for.
"""

import subprocess
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from PIL import Image
from scipy import ndimage

from tests.scenes.chart_views import BLACK, WHITE, View

Real = NDArray[np.float64]
FINE = 3
"""Samples of a pixel each way."""


def printed(artwork: Path, dpi: int, ink: float, ground: float) -> NDArray[np.float32]:
    """Return the reflectance of a printed PDF, rows × columns."""
    stem = artwork.with_suffix("")
    command = ["pdftoppm", "-r", str(dpi), "-gray", "-png", "-singlefile", str(artwork), str(stem)]
    subprocess.run(command, check=True, timeout=120)
    Image.MAX_IMAGE_PIXELS = None
    code = np.asarray(Image.open(stem.with_suffix(".png")).convert("L"))
    steps = np.arange(256) / 255
    light = np.where(steps <= 0.04045, steps / 12.92, ((steps + 0.055) / 1.055) ** 2.4)
    return np.asarray((ink + (ground - ink) * light).astype(np.float32)[code])


@dataclass(frozen=True)
class Camera:
    """What sees the sheet."""

    view: View
    """Where."""
    blur: float = 0.7
    """Standard deviation of the lens' Gaussian, px."""
    exposure: float = 0.95
    """Light of a perfect white, of the range."""
    noise: float = 12.0
    """DN."""

    def transfer(self, frequency: float) -> float:
        """Return lens times pixel along a row; the pixel is the mean of `FINE` samples."""
        lens = np.exp(-2 * (np.pi * frequency * self.blur) ** 2)
        pixel = np.sin(np.pi * frequency) / (FINE * np.sin(np.pi * frequency / FINE))
        return float(lens * pixel)

    def codes(self, sheet: NDArray[np.float32], dpi: int, size: tuple[float, float], seed: int) -> NDArray[np.uint16]:
        """Return a frame of the sheet; beyond it is bare sheet too.

        Args:
            sheet: Reflectance.
            dpi: Its pixels to an inch.
            size: Its width and height, mm.
            seed: Of the noise.
        """
        columns, rows = self.view.size
        margin = 6  # px: what the lens blurs in from beyond the frame
        light = np.empty((rows, columns))
        for top in range(0, rows, 100):
            y = (np.arange((top - margin) * FINE, (min(top + 100, rows) + margin) * FINE) + 0.5) / FINE
            x = (np.arange(-margin * FINE, (columns + margin) * FINE) + 0.5) / FINE
            place = self.view.to_chart(np.stack(np.meshgrid(x, y), axis=-1).reshape(-1, 2))
            at = [
                (place[:, n] + size[n] / 2) * dpi / 25.4 - 0.5 for n in (1, 0)
            ]  # rows, columns of the print's pixels; it begins with the sheet's upper left corner
            fine = ndimage.map_coordinates(sheet, at, order=1, mode="nearest").reshape(len(y), len(x))
            fine = ndimage.gaussian_filter(fine, self.blur * FINE, truncate=5)
            pixels = fine.reshape(len(y) // FINE, FINE, len(x) // FINE, FINE).mean(axis=(1, 3))
            light[top : top + 100] = pixels[margin:-margin, margin:-margin]
        codes = BLACK + (WHITE - BLACK) * self.exposure * light
        codes += np.random.default_rng(seed).normal(0, self.noise, codes.shape)
        return np.asarray(np.clip(np.rint(codes), 0, WHITE).astype(np.uint16))
