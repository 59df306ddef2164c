"""How a known pattern lies in a picture: a polynomial map from pixels to the pattern's cells, found by registration.

A coarse search compares the picture's phase with the pattern's at several rotations and scales; then Gauss-Newton steps
on ever finer pictures fit a map of first, at last of second order, which follows tilt and lens distortion over a patch.

References:
    C. D. Kuglin and D. C. Hines, Proc. IEEE Int. Conf. Cybernetics and Society (1975) 163: phase correlation.
    B. D. Lucas and T. Kanade, Proc. IJCAI (1981) 674: registration by Gauss-Newton steps.
"""

from dataclasses import dataclass, replace
from functools import cached_property
from itertools import product

import numpy as np
from numpy.typing import NDArray
from scipy import fft, ndimage

Values = NDArray[np.float64]

FINER = 2
"""Samples of the stored pattern per cell and axis: its finest waves lie at a quarter of a cycle there."""
SHORT_SIDE = 96
"""px of the coarse picture's shorter side."""
TURNS = np.radians(np.arange(-4, 4.1, 1.0))
SCALES = 1 + np.arange(-0.06, 0.061, 0.02)
LEAST_PEAK = 8.0
"""Peak of the phase correlation over its own root mean square; the largest of 10⁴ places of noise reaches about 4."""
CLEAR_PEAK = 20.0
"""Peak at which the start is near enough: no turns and scales need be tried."""
LEAST_ALIKE = 0.6
"""Correlation of picture and pattern, both softened by 1.5 px: noise of half the pattern's contrast leaves 0.8."""


@dataclass(frozen=True)
class Pattern:
    """A pattern that is known everywhere, periodic in `cells`."""

    raster: Values
    """cells × cells, reflectance at the cells' centres."""

    @property
    def cells(self) -> int:
        """Side in cells."""
        return int(self.raster.shape[0])

    @property
    def mean(self) -> float:
        """Mean reflectance."""
        return float(self.raster.mean())

    @cached_property
    def _terms(self) -> Values:
        """Spline coefficients of the pattern, sampled finer by its own Fourier series."""
        n, finer = self.cells, FINER * self.cells
        terms = fft.rfft2(self.raster)
        wide = np.zeros((finer, finer // 2 + 1), dtype=np.complex128)
        half = n // 2
        wide[:half, :half], wide[-half:, :half] = terms[:half, :half], terms[-half:, :half]
        fine = fft.irfft2(wide, (finer, finer)) * FINER**2
        return np.asarray(ndimage.spline_filter(fine, 3, mode="grid-wrap"))

    def blurred(self, sigma: float) -> "Pattern":
        """Return the pattern through a Gaussian blur of so many cells."""
        k = fft.fftfreq(self.cells)
        weight = np.exp(-2 * (np.pi * sigma) ** 2 * (k[:, None] ** 2 + fft.rfftfreq(self.cells)[None, :] ** 2))
        return Pattern(np.asarray(fft.irfft2(fft.rfft2(self.raster) * weight, self.raster.shape)))

    def at(self, u: Values, v: Values) -> Values:
        """Return the reflectance at places in cells, (0, 0) being the square's outer corner."""
        rows, columns = FINER * (v - 0.5), FINER * (u - 0.5)
        return np.asarray(
            ndimage.map_coordinates(self._terms, np.stack([rows, columns]), order=3, mode="grid-wrap", prefilter=False)
        )


@dataclass(frozen=True)
class View:
    """A map from pixels to cells: u and v are polynomials of second order in x and y."""

    half: tuple[float, float]
    """Half width and half height of the picture, px: x and y are scaled by them about its centre."""
    terms: Values
    """2 × 6: coefficients of 1, x, y, x², xy, y² for u and for v, cells."""

    def cells(self, x: Values, y: Values) -> tuple[Values, Values]:
        """Return the cells under pixels (x, y), px from the picture's outer corner."""
        parts = self.powers(x, y)
        u, v = (sum(c * part for c, part in zip(row, parts, strict=True)) for row in self.terms)
        return np.asarray(u), np.asarray(v)

    def powers(self, x: Values, y: Values) -> list[Values]:
        """Return 1, x, y, x², xy, y² of pixels."""
        s, t = np.broadcast_arrays(x / self.half[0] - 1, y / self.half[1] - 1)
        return [np.ones_like(s), s, t, s * s, s * t, t * t]

    @property
    def cells_per_px(self) -> float:
        """Cells to a pixel in the middle."""
        across = self.terms[:, 1] / self.half[0]
        down = self.terms[:, 2] / self.half[1]
        return float(np.sqrt(abs(across[0] * down[1] - across[1] * down[0])))


class PatternLost(Exception):
    """Raised when a picture does not show the pattern; the sentence says what was found."""


def start_view(size: tuple[int, int], cells_per_px: float, turn: float, cells: int) -> View:
    """Return a view with the pattern's centre in the picture's centre.

    Args:
        size: Width and height of the picture, px.
        cells_per_px: Scale.
        turn: Angle of the pattern's rows against the pixel rows, radians, clockwise on screen.
        cells: Side of the pattern.
    """
    half = (size[0] / 2, size[1] / 2)
    c, s = cells_per_px * np.cos(turn), cells_per_px * np.sin(turn)
    terms = np.zeros((2, 6))
    terms[:, 0] = cells / 2
    terms[:, 1], terms[:, 2] = (c * half[0], -s * half[0]), (s * half[1], c * half[1])
    return View(half, terms)


def register(picture: Values, pattern: Pattern, start: View, *, search: bool) -> View:
    """Find the pattern in a picture.

    Args:
        picture: Linear light, rows × columns.
        pattern: The pattern.
        start: Where it is believed to lie.
        search: Rotations of up to 4° and scales of up to 6 % around the start are tried; else only shifts.

    Raises:
        PatternLost: The picture shows another pattern, or this one mirrored or turned over.
    """
    view, peak = _coarse(picture, pattern, start, search=False)
    if search and peak < CLEAR_PEAK:
        view, peak = _coarse(picture, pattern, start, search=True)
    if peak < LEAST_PEAK:
        raise PatternLost(_what_else(picture, pattern, start, peak, None))
    for step, sigma, orders in ((4, 3.0, (3, 3, 3, 3)), (2, 1.2, (3, 3, 6, 6, 6))):
        soft = pattern.blurred(sigma * view.cells_per_px)
        seen = ndimage.gaussian_filter(picture, sigma)
        for order in orders:
            view = _improved(seen, soft, view, step, order)
    alike = _likeness(picture, pattern, view)
    if alike < LEAST_ALIKE:
        raise PatternLost(_what_else(picture, pattern, start, peak, alike))
    return view


def _coarse(picture: Values, pattern: Pattern, start: View, *, search: bool) -> tuple[View, float]:
    """Return the best of the tried views, and how clearly it stands out."""
    block = max(1, min(picture.shape) // SHORT_SIDE)
    rows, columns = (size // block * block for size in picture.shape)
    small = picture[:rows, :columns].reshape(rows // block, block, columns // block, block).mean(axis=(1, 3))
    seen = _whitened(small)
    soft = pattern.blurred(block * start.cells_per_px / 2)
    x = (np.arange(columns // block) + 0.5) * block
    y = ((np.arange(rows // block) + 0.5) * block)[:, None]
    best, best_peak = start, 0.0
    for turn, scale in product(TURNS, SCALES) if search else ((0.0, 1.0),):
        c, s = np.cos(turn) * scale, np.sin(turn) * scale
        aspect = start.half[1] / start.half[0]
        terms = start.terms.copy()
        terms[:, 1] = c * start.terms[:, 1] - s * start.terms[:, 2] / aspect
        terms[:, 2] = s * start.terms[:, 1] * aspect + c * start.terms[:, 2]
        view = replace(start, terms=terms)
        known = _whitened(soft.at(*view.cells(x, y)))
        found = fft.irfft2(seen * known.conj(), small.shape)
        place = np.unravel_index(int(np.argmax(found)), found.shape)
        peak = float(found[place] / np.sqrt(np.mean(found**2)))
        if peak > best_peak:
            best_peak = peak
            dy, dx = (int((p + n // 2) % n - n // 2) * block for p, n in zip(place, small.shape, strict=True))
            moved = terms.copy()
            moved[:, 0] -= terms[:, 1] * dx / start.half[0] + terms[:, 2] * dy / start.half[1]
            best = replace(view, terms=moved)
    return best, best_peak


def _whitened(picture: Values) -> NDArray[np.complex128]:
    """Return the phases of a windowed picture, with the fine half of its frequencies left out."""
    windows = (np.hanning(n) for n in picture.shape)
    terms = fft.rfft2((picture - picture.mean()) * np.outer(*windows))
    f = np.hypot(fft.fftfreq(picture.shape[0])[:, None], fft.rfftfreq(picture.shape[1])[None, :])
    return np.where((f > 0.02) & (f < 0.25), terms / np.maximum(np.abs(terms), 1e-300), 0)


def _improved(picture: Values, pattern: Pattern, view: View, step: int, order: int) -> View:
    """Return the view after one Gauss-Newton step on every so many-th pixel of a softened picture and pattern."""
    edge = 2 * step + 2
    x: Values = np.arange(edge, picture.shape[1] - edge, step, dtype=np.float64) + 0.5
    y: Values = (np.arange(edge, picture.shape[0] - edge, step, dtype=np.float64) + 0.5)[:, None]
    u, v = view.cells(x, y)
    little = 0.05
    known = pattern.at(u, v)
    by_u = (pattern.at(u + little, v) - known) / little
    by_v = (pattern.at(u, v + little) - known) / little
    values = picture[edge : picture.shape[0] - edge : step, edge : picture.shape[1] - edge : step]
    powers = view.powers(x, y)
    gain = float(np.cov(known.ravel(), values.ravel())[0, 1] / known.var())
    columns = [gain * by_u * p for p in powers[:order]] + [gain * by_v * p for p in powers[:order]]
    columns += [known * p for p in powers[:3]] + powers[:3]
    design = np.stack([c.ravel() for c in columns])
    target = (values - gain * known).ravel()
    normal = design @ design.T
    moved = np.linalg.solve(normal + 1e-9 * np.diag(np.diag(normal)), design @ target)
    terms = view.terms.copy()
    terms[0, :order] += moved[:order]
    terms[1, :order] += moved[order : 2 * order]
    return replace(view, terms=terms)


def _likeness(picture: Values, pattern: Pattern, view: View) -> float:
    """Return the correlation of the softened picture with the softened pattern, slow changes of the light taken off."""
    sigma = 1.5
    soft = pattern.blurred(sigma * view.cells_per_px)
    x: Values = np.arange(0, picture.shape[1], 2, dtype=np.float64) + 0.5
    y: Values = (np.arange(0, picture.shape[0], 2, dtype=np.float64) + 0.5)[:, None]
    known = soft.at(*view.cells(x, y))
    seen = ndimage.gaussian_filter(picture, sigma)[::2, ::2]
    slow = np.stack([part.ravel() for part in view.powers(x, y)], axis=1)
    one, two = (v.ravel() - slow @ np.linalg.lstsq(slow, v.ravel(), rcond=None)[0] for v in (known, seen))
    return float(one @ two / np.sqrt((one @ one) * (two @ two)))


def _what_else(picture: Values, pattern: Pattern, start: View, peak: float, alike: float | None) -> str:
    """Say what a picture shows in place of the pattern: this one mirrored or turned, or nothing that is known."""
    others = {
        "mirrored": pattern.raster[:, ::-1],
        "upside down": pattern.raster[::-1, ::-1],
        "turned by 90°": np.rot90(pattern.raster),
        "turned by -90°": np.rot90(pattern.raster, -1),
    }
    peaks = {
        words: _coarse(picture, Pattern(np.ascontiguousarray(raster)), start, search=True)[1]
        for words, raster in others.items()
    }
    best = max(peaks, key=lambda words: peaks[words])
    if peaks[best] >= max(LEAST_PEAK, 1.3 * peak):
        return f"the pattern lies {best} in the region"
    if alike is not None:
        found = f"the region and the pattern agree to {100 * alike:.0f} % where they fit best, {100 * LEAST_ALIKE:g} %"
        return f"the region does not show the pattern: {found} is needed"
    return f"the region does not show the pattern: the best place stands out {peak:.1f} fold, {LEAST_PEAK:g} is needed"
