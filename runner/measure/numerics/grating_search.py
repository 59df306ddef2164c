"""Finds a grating's frequency in the spatial Fourier transform of a patch, to start a fit from.

The patch is freed of its mean and tilt and multiplied by a Hann window, whose side lobes fall as 1/k³, so that neither
the background nor the cut at the border covers a weak line. The highest ordinate off the origin is refined by a
parabola through the logarithms of its neighbours (within a tenth of a bin for a Hann window).

References:
    F. J. Harris, Proc. IEEE 66 (1978) 51 (windows for harmonic analysis).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import fft

Real = NDArray[np.float64]

GUARD = 2.0
"""Ordinates this near to the origin, in bins, belong to the background as the window spreads it."""


@dataclass(frozen=True)
class Line:
    """The strongest line of a patch's spectrum."""

    frequency: tuple[float, float]
    """Components along x and y, cy/px of the frame; y ≥ 0, and x > 0 where y = 0."""
    contrast: float
    """Its power over the median power of all ordinates."""
    periods: float
    """Periods between two borders of the patch, counted along the frequency's own direction."""


def strongest_line(
    values: NDArray[np.floating],
    pitch: tuple[float, float] = (1.0, 1.0),
    *,
    guard: float = GUARD,
    smoothed: bool = False,
) -> Line | None:
    """Find the strongest line.

    Args:
        values: Patch, rows × columns, light.
        pitch: Distance of neighbouring columns and rows, px of the frame.
        guard: Bins around the origin to leave out.
        smoothed: The patch went through [1 2 1]/4 along both axes, as a mosaic's grey picture: undone, for it weakens
            fine stripes below what the colours' different levels make of them, their mirror image at 0.5 cy/px less.

    Returns:
        The line, or None for a patch that is constant or smaller than 8 × 8.
    """
    rows, columns = values.shape
    if min(rows, columns) < 8 or np.ptp(values) == 0:
        return None
    power = spectrum(values)
    fx, fy = fft.rfftfreq(columns), fft.fftfreq(rows)
    away = np.hypot(fx[None, :] * columns, fy[:, None] * rows)
    if smoothed:
        power = power / np.outer(_passed(fy, rows), _passed(fx, columns)) ** 2
    searched = np.where(away > guard, power, 0.0)
    row, column = np.unravel_index(int(np.argmax(searched)), power.shape)
    x = (fx[column] + _shift(power, columns, int(row), int(column), 1) / columns) / pitch[0]
    y = (fy[row] + _shift(power, columns, int(row), int(column), 0) / rows) / pitch[1]
    if y < 0 or (y == 0 and x < 0):
        x, y = -x, -y
    median = float(np.median(power.ravel()[:: max(1, power.size // 20000)]))
    contrast = float(power[row, column]) / median if median > 0 else float("inf")
    size = np.array([columns * pitch[0], rows * pitch[1]])
    reach = float(np.abs([x, y]) @ size / np.hypot(x, y)) if x or y else 0.0
    return Line((float(x), float(y)), contrast, float(np.hypot(x, y)) * reach)


def spectrum(values: NDArray[np.floating], *, level: bool = False) -> Real:
    """Return the power spectrum of a patch without its mean and tilt, Hann window, over the half plane of x ≥ 0.

    Args:
        values: Rows × columns.
        level: Keep the mean, whose line then stands at the origin with its square.

    Returns:
        Rows × (columns // 2 + 1), in the order of `scipy.fft.rfft2`; a line of amplitude a stands at a²/4.
    """
    rows, columns = values.shape
    x, y = _centred(columns), _centred(rows)
    mean = values.mean()
    flat = values - mean
    slope_x = float(x @ flat.sum(axis=0)) / (rows * float(x @ x))
    slope_y = float(y @ flat.sum(axis=1)) / (columns * float(y @ y))
    flat -= slope_x * x[None, :]
    flat -= slope_y * y[:, None]
    if level:
        flat += mean
    wx, wy = _hann(columns), _hann(rows)
    flat *= (wx / wx.mean())[None, :]
    flat *= (wy / wy.mean())[:, None]
    transformed = fft.rfft2(flat.astype(np.float32)) / flat.size
    return np.asarray(transformed.real**2 + transformed.imag**2, dtype=np.float64)


def _passed(f: Real, n: int) -> Real:
    """Return what [1 2 1]/4 leaves of frequencies; two bins from 0.5 cy/px, where nothing is left, it is not undone."""
    return np.asarray(np.where(np.abs(f) < 0.5 - GUARD / n, np.cos(np.pi * f) ** 2, 1.0))


def _centred(n: int) -> Real:
    return np.arange(n, dtype=np.float64) - (n - 1) / 2


def _hann(n: int) -> Real:
    return 0.5 - 0.5 * np.cos(2 * np.pi * (np.arange(n) + 0.5) / n)


def _shift(power: Real, columns: int, row: int, column: int, axis: int) -> float:
    """Return where the peak of a parabola through three log ordinates lies, bins from the middle one.

    Of the patch's so many columns the half plane x ≥ 0 is kept: beyond its ends the spectrum is its own mirror image.
    """
    index = [row, column]
    around = []
    for step in (-1, 0, 1):
        at = list(index)
        at[axis] += step
        if not 0 <= at[1] < power.shape[1]:
            at = [-at[0], -at[1] % columns]
        at[0] %= power.shape[0]
        around.append(float(np.log(power[at[0], at[1]] + 1e-300)))
    before, middle, after = around
    bend = before - 2 * middle + after
    return 0.0 if bend >= 0 else float(np.clip((before - after) / (2 * bend), -0.5, 0.5))


def picture(values: NDArray[np.floating], pitch: float, most: int) -> tuple[Real, Real, Real]:
    """Return a patch's whole spectrum for a picture: frequencies along x and y, and dB below the mean's line.

    Args:
        values: Rows × columns.
        pitch: Distance of neighbouring pixels, px of the frame.
        most: Ordinates along each axis at most; the highest of those that fall together is kept.

    Returns:
        x (cy/px), y (cy/px), rows × columns of dB, the origin in the middle.
    """
    rows, columns = values.shape
    half = spectrum(values, level=True)
    mirrored = np.roll(half[::-1], 1, axis=0)[:, 1 : (columns + 1) // 2][:, ::-1]
    whole = np.concatenate([mirrored, half[:, : columns // 2 + 1]], axis=1)
    whole = fft.fftshift(whole, axes=0)
    x = np.concatenate([-fft.rfftfreq(columns)[1 : (columns + 1) // 2][::-1], fft.rfftfreq(columns)]) / pitch
    y = fft.fftshift(fft.fftfreq(rows)) / pitch
    highest = max(float(whole.max()), 1e-30)
    for axis, size in ((0, rows), (1, x.size)):
        step = -(-size // most)
        starts = np.arange(0, size, step)
        whole = np.maximum.reduceat(whole, starts, axis=axis)
        places = (y, x)[axis]
        means = np.add.reduceat(places, starts) / np.diff(np.append(starts, size))
        y, x = (means, x) if axis == 0 else (y, means)
    return x, y, 10 * np.log10(np.maximum(whole, 1e-30) / highest)
