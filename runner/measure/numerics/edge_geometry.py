"""Where an edge lies in a region: signed distances of pixel centres along its normal, and a robust start.

Coordinates: x to the right, y down, px, from the region's centre; pixel centres. The normal points from the dark to
the bright side. u runs along the normal, v along the edge (the normal turned by +90° from x towards y).
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray
from scipy import ndimage

from runner.errors import MeasurementRefused

Array = NDArray[np.float64]

LEAST_CONTRAST = 6.0
"""The edge's step against the scatter of the profile's own differences: below, chance makes such steps."""


@dataclass(frozen=True)
class EdgeLine:
    """A straight or curved edge: u = Σ a_j P_j(v / half), Legendre polynomials."""

    normal: float
    """Direction of the normal, rad from +x towards +y (down)."""
    half: float
    """Half the edge's length in the region, px: where v / half = ±1."""
    coefficients: Array
    """a_0 … a_order, px."""

    def along(self, shape: tuple[int, int]) -> tuple[Array, Array]:
        """Return (u, v) of every pixel, flattened row by row, px."""
        y, x = (np.arange(n) - (n - 1) / 2 for n in shape)
        c, s = np.cos(self.normal), np.sin(self.normal)
        u = (x * c)[None, :] + (y * s)[:, None]
        v = (-x * s)[None, :] + (y * c)[:, None]
        return u.ravel(), v.ravel()

    def distance(self, u: Array, v: Array) -> Array:
        """Return signed distances to the edge, px, positive on the bright side; exact for a straight edge."""
        if not self.coefficients[1:].any():
            return np.asarray(u - self.coefficients[0])
        t = v / self.half
        g = legendre.legval(t, self.coefficients)
        slope = legendre.legval(t, legendre.legder(self.coefficients)) / self.half
        return np.asarray((u - g) / np.sqrt(1 + slope * slope))

    @property
    def tilt(self) -> float:
        """Angle of the mean edge line from the nearest pixel axis, rad in [-π/4, π/4], positive clockwise on screen."""
        first = self.coefficients[1] / self.half if self.coefficients.size > 1 else 0.0
        line = self.normal + np.pi / 2 - np.arctan(first)
        return float(line - np.pi / 2 * np.round(line / (np.pi / 2)))

    def sides(self, aperture: float = 1.0) -> tuple[float, float]:
        """Return the pixel's sides as seen along the normal, px, the longer first."""
        return aperture * float(np.cos(self.tilt)), aperture * abs(float(np.sin(self.tilt)))

    def turned(self) -> "EdgeLine":
        """Return the same edge with its normal turned so that the linear term vanishes (straight edges: exactly)."""
        if self.coefficients.size < 2:
            return self
        delta = float(np.arctan(self.coefficients[1] / self.half))
        kept = self.coefficients.copy()
        kept[1] = 0.0
        kept[0] *= np.cos(delta)
        return replace(self, normal=self.normal - delta, coefficients=kept)


def edge_length(shape: tuple[int, int], normal: float, offset: float = 0.0) -> float:
    """Return the length, px, that the line u = offset has inside the region."""
    rows, columns = shape
    c, s = np.cos(normal), np.sin(normal)
    low, high = -np.inf, np.inf
    # the point at v is (offset·c - v·s, offset·s + v·c)
    for fixed, rate, reach in ((offset * c, -s, columns / 2), (offset * s, c, rows / 2)):
        if abs(rate) < 1e-9:
            if abs(fixed) > reach:
                return 0.0
            continue
        ends = sorted(((-reach - fixed) / rate, (reach - fixed) / rate))
        low, high = max(low, ends[0]), min(high, ends[1])
    return float(max(0.0, high - low))


def find_edge(signal: Array, sites: NDArray[np.bool_] | None = None) -> tuple[EdgeLine, float, float]:
    """Find the one edge of a region from nothing.

    The direction is that of the smoothed gradient's structure tensor (isotropic noise adds to it evenly and leaves the
    direction alone); the place is the steepest point of the profile along it.

    Args:
        signal: Rows × columns.
        sites: Pixels that may be used, at least one in every 2 × 2; None is all of them.

    Returns:
        (edge line of order 1, dark level, bright level), good to about a pixel and a degree.

    Raises:
        MeasurementRefused: `no edge` when no direction or no step stands out.
    """
    if sites is None:
        smooth = ndimage.uniform_filter(signal, 3, mode="nearest")
    else:
        shares = ndimage.uniform_filter(sites.astype(np.float64), 3, mode="nearest")
        smooth = ndimage.uniform_filter(np.where(sites, signal, 0.0), 3, mode="nearest") / shares
    gy, gx = (np.asarray(slope)[1:-1, 1:-1] for slope in np.gradient(smooth))
    power = gx * gx + gy * gy
    strong = power > 0.25 * float(np.quantile(power, 0.98))
    xx, yy, xy = (float(np.sum(p[strong])) for p in (gx * gx, gy * gy, gx * gy))
    normal = 0.5 * float(np.arctan2(2 * xy, xx - yy))
    profile, places, counts = _profile(signal, normal, sites)
    offset, low, high, contrast = _step(profile, places, counts)
    if not contrast > LEAST_CONTRAST:
        raise MeasurementRefused(
            "no edge",
            f"no step stands out of the region's noise (step / scatter {contrast:.1f})",
            allowed=f"at least {LEAST_CONTRAST:g}",
            next_step="check that the region lies on an edge",
        )
    if high < low:
        normal, offset, low, high = normal + np.pi, -offset, high, low
    normal = float(np.mod(normal + np.pi, 2 * np.pi) - np.pi)
    half = max(1.0, edge_length((signal.shape[0], signal.shape[1]), normal, offset) / 2)
    return EdgeLine(normal, half, np.array([offset, 0.0])), low, high


def _profile(signal: Array, normal: float, sites: NDArray[np.bool_] | None) -> tuple[Array, Array, Array]:
    """Mean signal in bins of one px along the normal (two in a mosaic); bins that hold few pixels are cut."""
    line = EdgeLine(normal, 1.0, np.zeros(1))
    u, _ = line.along((signal.shape[0], signal.shape[1]))
    used, pitch = (slice(None), 1) if sites is None else (np.flatnonzero(sites), 2)
    index = np.round(u[used] / pitch).astype(np.intp)
    low = int(index.min())
    counts = np.bincount(index - low).astype(np.float64)
    sums = np.bincount(index - low, signal.ravel()[used])
    kept = counts >= 0.25 * counts.max()
    first, last = np.flatnonzero(kept)[[0, -1]]
    span = slice(int(first), int(last) + 1)
    return sums[span] / np.maximum(counts[span], 1), pitch * (low + np.arange(first, last + 1)), counts[span]


def _step(profile: Array, places: Array, counts: Array) -> tuple[float, float, float, float]:
    """Return (place, level before, level after, step over scatter) of the best single step of a profile."""
    n = profile.size
    if n < 6:
        return 0.0, 0.0, 0.0, 0.0
    weight, total = np.cumsum(counts), np.cumsum(counts * profile)
    k = np.arange(2, n - 3)
    before = total[k] / weight[k]
    after = (total[-1] - total[k]) / (weight[-1] - weight[k])
    between = weight[k] * (weight[-1] - weight[k]) / weight[-1] * (after - before) ** 2
    best = int(k[int(np.argmax(between))])
    # the half level's crossing nearest to the best split is the place
    margin = max(2, n // 8)
    low = float(np.median(profile[: max(2, best - margin)]))
    high = float(np.median(profile[min(n - 2, best + 1 + margin) :]))
    above = (profile > (low + high) / 2) == (high > low)
    crossings = np.flatnonzero(np.diff(above.astype(np.int8)) == 1)
    if crossings.size == 0:
        return 0.0, low, high, 0.0
    at = int(crossings[np.argmin(np.abs(crossings - best))])
    rise = profile[at + 1] - profile[at]
    place = float(places[at] + ((low + high) / 2 - profile[at]) / rise if rise else places[at])
    flat = np.concatenate(
        [np.diff(profile[: max(2, best - margin)]), np.diff(profile[min(n - 2, best + 1 + margin) :])]
    )
    scatter = 1.4826 * float(np.median(np.abs(flat))) / np.sqrt(2) if flat.size else 0.0
    return place, low, high, abs(high - low) / max(scatter, 1e-12)
