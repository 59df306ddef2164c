"""A flat chart painted on cells finer than a pixel, seen by a lens with distortion, blurred and averaged over pixels.

A painter says how bright the chart is, as the mean over a small cell, at places in millimetres. Cells are laid out in
the frame, so that what the lens bends stays sharp; then the transfer function of optics and pixel takes the place of
the cells' own. So a frame is as exact as cells are fine: what finer waves fold back is the cells' own error.

References:
    D. C. Brown, Photogrammetric Engineering 32 (1966) 444: radial distortion.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import fft

from runner.rehearse.optics import Transfer, Values, pupil_transfer
from runner.rehearse.scene import Picture

Paint = Callable[[Values, Values, float], Picture]
"""Light of cells: their centres (x to the right, y down from the chart's middle) and their side, all in mm."""
MARGIN = 12
"""px painted beyond the frame's border, so that blur finds something there."""
STEPS = 5
"""Newton's steps that undo a distortion; four give 1e-9 px where it is below a tenth."""


@dataclass(frozen=True)
class Lens:
    """How a lens bends and spreads colours of the picture about the frame's middle."""

    k1: float = 0.0
    """Image height is the ideal one × (1 + k1 · (ideal height / half diagonal)²)."""
    half_diagonal_px: float = 1.0
    """Of the whole sensor."""
    colours: tuple[float, float, float] = (1.0, 1.0, 1.0)
    """Magnification of red, green and blue over green's."""

    def ideal(self, height: Values, colour: int) -> Values:
        """Return the ideal image heights behind those seen, px."""
        wanted = height / self.colours[colour] / self.half_diagonal_px
        r = wanted
        for _ in range(STEPS):
            r = r - (r * (1 + self.k1 * r**2) - wanted) / (1 + 3 * self.k1 * r**2)
        return np.asarray(r * self.half_diagonal_px)


@dataclass(frozen=True)
class Seen:
    """How a window of the sensor, in its middle, sees a chart."""

    columns: int
    """Columns of the window."""
    rows: int
    """Rows of the window."""
    mm_per_px: float
    """Length in the object that one pixel sees in the middle."""
    system: Transfer
    """Optics and pixel; they hold for the whole window."""
    lens: Lens = Lens()
    """Distortion and colours."""
    mirrored: bool = False
    """The chart is seen from behind."""

    def places(self, x: Values, y: Values, colour: int) -> tuple[Values, Values]:
        """Return what px from the window's middle show of the chart, mm from its middle."""
        height = np.hypot(x, y)
        factor = self.lens.ideal(height, colour) / np.maximum(height, 1e-9) * self.mm_per_px
        return np.asarray(x * factor * (-1 if self.mirrored else 1)), np.asarray(y * factor)


def picture(paint: Paint, seen: Seen, *, colour: int = 1, cells: int = 3) -> Picture:
    """Return the noiseless picture of a painted chart.

    Args:
        paint: The chart.
        seen: How it is seen.
        colour: 0 red, 1 green, 2 blue: which of the lens's magnifications holds.
        cells: Cells along a pixel's side, an odd number.

    Returns:
        Light averaged over each pixel, rows × columns.
    """
    x, y = (_centres(size, cells) for size in (seen.columns, seen.rows))
    u, v = seen.places(x[None, :], y[:, None], colour)
    fine = paint(u, v, seen.mm_per_px / cells)
    soft = blurred(fine, seen.system, cells)
    first = MARGIN * cells + cells // 2
    return soft[first::cells, first::cells][: seen.rows, : seen.columns]


def _centres(size: int, cells: int) -> Values:
    """Return the centres of cells along one side with its margins, px from the window's middle."""
    count = (size + 2 * MARGIN) * cells
    return np.asarray((np.arange(count) + 0.5 - count / 2) / cells)


def blurred(fine: Picture, system: Transfer, cells: int) -> Picture:
    """Return cells' light through optics and pixel, at the cells' centres; borders meet one another round a torus."""
    fx, fy = fft.rfftfreq(fine.shape[1], 1 / cells), fft.fftfreq(fine.shape[0], 1 / cells)[:, None]
    side = np.sqrt(system.fill)
    pixel = np.sinc(side * fx) * np.sinc(side * fy) / (np.sinc(fx / cells) * np.sinc(fy / cells))
    seen = fft.rfft2(fine) * round_transfer(system, np.hypot(fx, fy)) * pixel
    return np.asarray(fft.irfft2(seen, fine.shape))


def round_transfer(system: Transfer, f: Values) -> Values:
    """Return the transfer function of the optics without the pixel, which has no direction, at frequencies in cy/px."""
    places = np.linspace(0, min(system.cut_off, float(f.max())), 1001)
    gaussian = np.exp(-2 * (np.pi * system.blur_um / system.pitch_um * places) ** 2)
    return np.asarray(np.interp(f, places, pupil_transfer(places / system.cut_off, system.w20) * gaussian, right=0.0))
