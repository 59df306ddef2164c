"""The edge-based spatial frequency response to the letter of ISO 12233:2014, for comparison with other laboratories.

A method-defined measurand: what it yields departs from the true transfer function by its own rules (bins of a quarter
pixel, a window as wide as the region, discrete lines). Its uncertainty is that of its own noiseless value.
Two readings of the text are ours: the line derivative enters the centroid with the edge's sign, not its modulus
(rectified noise would pull each centroid to the window's middle), and frequencies are along the edge's normal
(f / cos of the edge angle), as the text's own distances are along the rows.

References:
    ISO 12233:2014 6.2, Annex D.
"""

from dataclasses import dataclass
from math import atan, cos, degrees, floor, radians

import numpy as np
from numpy.typing import NDArray

from runner.errors import MeasurementRefused

Array = NDArray[np.float64]

BINS = 4
"""Bins per pixel."""
CLIP = 10.0
"""Largest correction of the derivative filter."""
HIGHEST = 1.0
"""Frequencies are kept up to here, cy/px along the rows."""
ANGLES = (2.5, 10.0)
"""Degrees from the axis; the slopes 1/4 to 1/1, at which bins stay empty or repeat, all lie beyond."""
SMALLEST = (60, 20)
"""Least size along the edge and across it, px."""
DRAWS = 400
"""Draws for a crossing's u, which is then good to 4 %."""
LEAST_CNR = 20.0
"""Edge step over noise."""
MOST_RESIDUAL = 0.25
"""Rms departure of the rows' centroids from the straight line, px, noise taken off."""
MOST_UNEVEN = 0.10
"""Change of illumination over a plateau."""


@dataclass(frozen=True)
class IsoEstimate:
    """What the standard's algorithm yields for one region."""

    frequency: Array
    """Lines of the discrete transform up to 1 cy/px along the rows, in cy/px along the edge's normal."""
    modulation: Array
    """Spatial frequency response at those lines, 1 at zero."""
    u: Array
    """Standard uncertainty of each, from the pixels' noise through the linear chain (first order)."""
    covariance: Array
    """Covariance of the modulations; neighbouring lines share the window and move together."""
    edge_angle: float
    """Degrees from the nearest pixel axis."""
    distance: Array
    """Bin centres along the normal from the edge, px."""
    esf: Array
    """Edge spread in those bins, in the signal's unit."""
    lsf: Array
    """Its derivative by [-1/2 0 1/2], per bin, not yet windowed."""
    step: float
    """Bright minus dark plateau, in the signal's unit."""
    noise: tuple[float, float]
    """Standard deviation of one pixel on the dark and on the bright plateau."""

    def mtf_at(self, frequency: float) -> tuple[float, float]:
        """Return modulation and its standard uncertainty, linear between the lines.

        Raises:
            MeasurementRefused: The frequency lies outside the lines.
        """
        if not 0 <= frequency <= self.frequency[-1]:
            raise MeasurementRefused(
                "not defined",
                f"{frequency:g} cy/px lies outside the estimator's lines, 0 to {self.frequency[-1]:.3f} cy/px",
            )
        k = min(int(np.searchsorted(self.frequency, frequency, side="right")) - 1, self.frequency.size - 2)
        t = (frequency - self.frequency[k]) / (self.frequency[k + 1] - self.frequency[k])
        weight = np.array([1 - t, t])
        return float(weight @ self.modulation[k : k + 2]), self._spread(k, weight)

    def mtf_crossing(self, level: float) -> tuple[float, float] | None:
        """Return the first frequency at which the response falls to a level, and its u; None if it never does.

        Noise makes a first crossing jump between lines, which first order does not see; so u is the greater of the
        first-order one and that of draws from the covariance (JCGM 101:2008), always the same draws.
        """
        k = _first_below(self.modulation[None, :], level)[0]
        if k == 0:
            return None
        value = float(_cross(self.frequency, self.modulation[None, :], np.array([k]), level)[0])
        high, low = self.modulation[k - 1], self.modulation[k]
        width, t = self.frequency[k] - self.frequency[k - 1], (high - level) / (high - low)
        linear = self._spread(k - 1, width / (high - low) * np.array([1 - t, t]))
        values, vectors = np.linalg.eigh(self.covariance)
        normal = np.random.default_rng(12233).standard_normal((DRAWS, values.size))
        drawn = self.modulation + (normal * np.sqrt(np.maximum(values, 0))) @ vectors.T
        first = _first_below(drawn, level)
        some = first > 0
        crossings = _cross(self.frequency, drawn[some], first[some], level)
        return value, max(linear, float(np.sqrt(np.mean((crossings - value) ** 2))))

    def _spread(self, k: int, weight: Array) -> float:
        block = self.covariance[k : k + 2, k : k + 2]
        return float(max(0.0, float(weight @ block @ weight)) ** 0.5)


def _first_below(modulation: Array, level: float) -> NDArray[np.intp]:
    """Return the number of the first line below a level in each row; 0 if there is none."""
    return np.asarray(np.argmax(modulation < level, axis=1), dtype=np.intp)


def _cross(frequency: Array, modulation: Array, first: NDArray[np.intp], level: float) -> Array:
    """Return where each row crosses the level between the line before `first` and that one, linearly."""
    rows = np.arange(first.size)
    high, low = modulation[rows, first - 1], modulation[rows, first]
    t = (high - level) / (high - low)
    return np.asarray(frequency[first - 1] + t * (frequency[first] - frequency[first - 1]))


def derivative_correction(frequency: Array | float) -> Array:
    """Return the correction of the [-1/2 0 1/2] filter at four bins a pixel, (π f/2)/sin(π f/2), at most 10.

    Args:
        frequency: cy/px along the rows.
    """
    s = np.sinc(np.asarray(frequency, dtype=np.float64) / 2)
    return np.asarray(np.minimum(CLIP, 1 / np.maximum(s, 1e-12)))


def estimate(signal: Array, *, noise: float | tuple[float, float] | None = None) -> IsoEstimate:
    """Estimate the spatial frequency response of one slanted edge.

    Args:
        signal: Linear light, rows × columns, one edge; a nearly horizontal edge is transposed.
        noise: Standard deviation of one pixel, in all or on (dark, bright) plateau; None takes it from the plateaus.

    Raises:
        MeasurementRefused: The region lies outside the estimator's limits of use.
    """
    rows = np.ascontiguousarray(signal, dtype=np.float64)
    # summed along the edge the derivative across it adds up, and the other way round it does not
    across, along = (float(np.max(np.abs(np.sum(np.diff(rows, axis=1 - a), axis=a)))) for a in (0, 1))
    if along / rows.shape[1] > across / rows.shape[0]:
        rows = rows.T
    if rows[:, -3:].mean() < rows[:, :3].mean():
        rows = rows[:, ::-1]
    if rows.shape[0] < SMALLEST[0] or rows.shape[1] < SMALLEST[1]:
        _refuse(f"the region is {rows.shape[0]} px along the edge and {rows.shape[1]} px across", "60 × 20 px at least")
    place, slope, centroids = fit_line(rows)
    angle = degrees(atan(abs(slope)))
    if not ANGLES[0] <= angle <= ANGLES[1]:
        _refuse(f"the edge lies {angle:.2f}° from the axis", f"{ANGLES[0]:g}° to {ANGLES[1]:g}°")
    # whole crossings only; 60 rows at 2.5° hold two, so there is always one
    count = floor(abs(slope) * rows.shape[0]) / abs(slope)
    kept = rows[: round(count)]
    distance = np.arange(rows.shape[1])[None, :] - (place + slope * np.arange(kept.shape[0]))[:, None]
    levels = _plateaus(kept, distance)
    sigma = levels.noise if noise is None else (noise, noise) if isinstance(noise, (int, float)) else noise
    _refuse_capture(levels, sigma, centroids - place - slope * np.arange(rows.shape[0]), rows.shape[1])
    first, esf, counts = bin_edge(kept, distance)
    lit = np.clip((esf - levels.low) / levels.step, 0, 1)
    variance = (sigma[0] ** 2 + (sigma[1] ** 2 - sigma[0] ** 2) * lit) / counts
    lsf, frequency, modulation, covariance = transform(esf, variance)
    scale = cos(radians(angle))
    return IsoEstimate(
        frequency / scale,
        modulation,
        np.sqrt(np.diag(covariance)),
        covariance,
        angle,
        (first + np.arange(esf.size) + 0.5) / BINS * scale,
        esf,
        lsf,
        levels.step,
        sigma,
    )


def _refuse(found: str, allowed: str) -> None:
    raise MeasurementRefused("outside the estimator's limits", found, allowed=f"ISO 12233:2014 edges: {allowed}")


def fit_line(rows: Array) -> tuple[float, float, Array]:
    """Return (column at row 0, columns per row, centroid of each row) of the edge's straight line.

    Centroids of the line derivative under a Hamming window, which lies in the middle first and on the line of the
    first pass in the second.
    """
    width = rows.shape[1] - 1
    slope = np.diff(rows, axis=1)
    x = np.arange(width) + 0.5
    index = np.arange(rows.shape[0], dtype=np.float64)
    centre = np.full(rows.shape[0], (rows.shape[1] - 1) / 2)
    centroids, line = centre, np.zeros(2)
    for _ in range(2):
        away = np.clip((x[None, :] - centre[:, None]) / width, -0.5, 0.5)
        window = slope * (0.54 + 0.46 * np.cos(2 * np.pi * away))
        mass = window.sum(axis=1)
        # a row without a rise says nothing about the edge; it counts as lying on the line
        known = mass > 0.05 * np.abs(mass).max()
        centroids = np.where(known, (window @ x) / np.where(known, mass, 1.0), centre)
        line = np.polynomial.polynomial.polyfit(index, centroids, 1)
        centre = line[0] + line[1] * index
    return float(line[0]), float(line[1]), centroids


@dataclass(frozen=True)
class Plateaus:
    """The two sides of an edge."""

    low: float
    """Dark level."""
    high: float
    """Bright level."""
    noise: tuple[float, float]
    """Standard deviation of one pixel, dark and bright."""
    uneven: float
    """Largest change of a side's fitted plane over the region, over its level."""

    @property
    def step(self) -> float:
        """Bright minus dark level."""
        return self.high - self.low


def _plateaus(rows: Array, distance: Array) -> Plateaus:
    guard = min(8.0, float(np.max(np.abs(distance))) / 2)
    index = np.indices(rows.shape).astype(np.float64)
    # differences of 2 × 2 px cancel level, slope and edge-parallel shading; each has the variance of four pixels
    mixed = np.zeros(rows.shape)
    mixed[1:, 1:] = (rows[1:, 1:] - rows[1:, :-1] - rows[:-1, 1:] + rows[:-1, :-1]) / 2
    levels: list[float] = []
    noise: list[float] = []
    uneven = 0.0
    for side in (distance < -guard, distance > guard):
        plane = np.stack([np.ones(np.count_nonzero(side)), index[0][side], index[1][side]], axis=1)
        terms = np.linalg.lstsq(plane, rows[side], rcond=None)[0]
        fitted = plane @ terms
        levels.append(float(fitted.mean()))
        inner = side.copy()
        inner[0], inner[:, 0] = False, False
        noise.append(float(np.sqrt(np.mean(mixed[inner] ** 2))))
        uneven = max(uneven, float(np.ptp(fitted)) / max(abs(levels[-1]), 1e-12))
    return Plateaus(levels[0], levels[1], (noise[0], noise[1]), uneven)


def _refuse_capture(levels: Plateaus, noise: tuple[float, float], residual: Array, width: int) -> None:
    worst = max(noise)
    if levels.step <= 0 or levels.step < LEAST_CNR * worst:
        _refuse(f"the step is {levels.step / max(worst, 1e-12):.1f} times the noise", f"{LEAST_CNR:g} times at least")
    # variance of a centroid from white noise: the derivative moved onto the window times the distance
    x = (np.arange(width) - (width - 1) / 2) / width
    window = x * width * (0.54 + 0.46 * np.cos(2 * np.pi * x))
    by_noise = float(np.sum(np.gradient(window) ** 2)) * (noise[0] ** 2 + noise[1] ** 2) / 2 / levels.step**2
    # the mean square of so many draws exceeds that by three of its own standard deviations about once in a thousand
    by_noise *= 1 + 3 * (2 / residual.size) ** 0.5
    rms = max(0.0, float(np.mean(residual**2)) - by_noise) ** 0.5
    if rms > MOST_RESIDUAL:
        _refuse(f"the edge departs from a straight line by {rms:.2f} px rms", f"{MOST_RESIDUAL:g} px at most")
    if levels.uneven > MOST_UNEVEN:
        _refuse(
            f"the illumination changes by {100 * levels.uneven:.0f} % over a plateau",
            f"{100 * MOST_UNEVEN:.0f} % at most",
        )


def bin_edge(rows: Array, distance: Array) -> tuple[int, Array, Array]:
    """Average pixels into bins of a quarter pixel over the range that every row reaches.

    Args:
        rows: Rows × columns, a whole number of crossings.
        distance: Of every pixel from the edge along its row, px.

    Returns:
        (number of the first bin, counted from the edge; means; counts).

    Raises:
        MeasurementRefused: A bin stays empty.
    """
    first, last = floor(BINS * float(distance[:, 0].max())) + 1, floor(BINS * float(distance[:, -1].min()))
    size = (last - first) // 2 * 2
    index = np.floor(BINS * distance).astype(np.intp) - first
    inside = (index >= 0) & (index < size)
    counts = np.bincount(index[inside], minlength=max(size, 1)).astype(np.float64)
    if size < 16 * BINS or counts.min() < 1:
        empty = int(np.count_nonzero(counts < 1))
        _refuse(f"{empty} of {size} bins of the edge spread stay empty", f"none, of {16 * BINS} at least")
    return first, np.bincount(index[inside], rows[inside], minlength=size) / counts, counts


def transform(esf: Array, variance: Array) -> tuple[Array, Array, Array, Array]:
    """Return (line spread, frequency in cy/px along the rows, modulation, covariance) of a binned edge spread.

    Args:
        esf: Mean of each bin, an even number of bins.
        variance: Variance of each mean.
    """
    n = esf.size
    lsf = np.zeros(n)
    lsf[1:-1] = (esf[2:] - esf[:-2]) / 2
    turn = n // 2 - int(np.argmax(lsf))
    window = np.roll(0.54 + 0.46 * np.cos(2 * np.pi * (np.arange(n) - n // 2) / n), -turn)
    frequency = np.arange(n // 2) * BINS / n
    frequency = frequency[frequency <= HIGHEST]
    # the rotation moves the line spread's maximum to the window's middle and changes phases only
    waves = np.exp(-2j * np.pi * np.outer(np.arange(frequency.size), np.arange(n)) / n) * window
    waves[:, 0] = waves[:, -1] = 0
    lines = waves @ lsf
    correction = derivative_correction(frequency)
    modulation = correction * np.abs(lines) / np.abs(lines[0])
    # chain of the derivative filter: bin j enters the line spread at j - 1 with +1/2 and at j + 1 with -1/2
    chain = np.zeros_like(waves)
    chain[:, 1:] += waves[:, :-1] / 2
    chain[:, :-1] -= waves[:, 1:] / 2
    direction = np.conj(lines) / np.maximum(np.abs(lines), 1e-300)
    jacobian = correction[:, None] * np.real(direction[:, None] * chain)
    jacobian -= modulation[:, None] * np.real(direction[0] * chain[0])[None, :]
    jacobian /= np.abs(lines[0])
    return lsf, frequency, modulation, np.asarray((jacobian * variance) @ jacobian.T)
