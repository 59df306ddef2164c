"""Mean squares of a stack of frames in a two-way layout: what varies by row, by column, and the rest.

One walk over the pixels, in pieces that stay in the processor's cache, adds up what is needed: squares of the mean
frame and of the frames about it, means of rows and columns, and the mean frame's coefficients in polynomials of y and
x that are orthonormal on the pixels, so that a shading comes off the sums without a second walk.

References:
    H. Scheffé, The Analysis of Variance (1959), 4.1 (two-way layout, mean squares and their expectations).
    EMVA Standard 1288 Release 4.0 Linear (2021), split of the spatial variances.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]
Frames = NDArray[Any] | Sequence[NDArray[Any]]
"""Frames × rows × columns, or that many arrays of rows × columns; any real number type.

An array may be anything that gives its rows as `[a:b]` and has `shape` and `dtype`.
"""

STRIP = 32_768
"""Pixels worked on at a time: two or three such pieces of float64 stay in a processor's cache."""


@dataclass(frozen=True)
class Sums:
    """What one walk over the pixels of n frames of M rows × N columns adds up."""

    shape: tuple[int, int, int]
    """n, M, N."""
    differences: float
    """Σ (frame - mean frame)² over frames and pixels."""
    mean: float
    """Σ (mean frame)² over pixels."""
    rows: Real
    """Means of the rows of each frame, n × M."""
    columns: Real
    """Means of the columns of each frame, n × N."""
    shading: Real
    """Coefficients of the mean frame in orthonormal polynomials, orders of y × orders of x."""


@dataclass(frozen=True)
class Stratum:
    """One line of the layout: rows, columns or the rest."""

    t: float
    """Mean square of the frames about their mean, n/(n-1) taken in: temporal."""
    t_dof: float
    """Its degrees of freedom."""
    a: float
    """Mean square of the mean frame after removal of the shading."""
    dof: float
    """Its degrees of freedom."""
    lost: float
    """Degrees of freedom that went with the shading."""
    noise: float
    """Temporal noise left in the mean frame's mean square, t/n."""

    @property
    def s(self) -> float:
        """Mean square of the pattern alone; noise may leave it below zero."""
        return self.a - self.noise

    def scatter(self, pattern: float, noise: float | None = None, lost: float | None = None) -> float:
        """Return the variance of `s` around a pattern of given mean square.

        Σ(p + e)² of a fixed p varies by 4 Σp² σ² + 2 f σ⁴; a white pattern's own mean square over all its degrees of
        freedom differs from that over f of them by 2 lost p⁴ / (f (f + lost)).

        Args:
            pattern: True mean square of the pattern.
            noise: Mean square of what else is in the mean frame; None is its temporal noise.
            lost: Degrees of freedom of the pattern that are not among `dof`; None is those of the shading.
        """
        w = self.noise if noise is None else noise
        k = self.lost if lost is None else lost
        p = max(0.0, pattern)
        frame = (4 * p * w + 2 * w**2) / self.dof + 2 * k * p**2 / (self.dof * (self.dof + k))
        return frame + 2 * self.noise**2 / self.t_dof


@dataclass(frozen=True)
class Layout:
    """The three strata of n frames of M rows × N columns."""

    n: int
    """Frames."""
    shape: tuple[int, int]
    """M, N."""
    rows: Stratum
    """Between rows."""
    columns: Stratum
    """Between columns."""
    rest: Stratum
    """Within both."""

    @property
    def weighted(self) -> tuple[tuple[Stratum, float], ...]:
        """Strata with their weights in the total variance."""
        m, n = self.shape
        return (self.rows, 1 / n), (self.columns, 1 / m), (self.rest, 1 - 1 / m - 1 / n)


def short_codes(frame: NDArray[Any]) -> bool:
    """Tell whether a frame holds codes of 8 or 16 bits, which float32 holds exactly, and sums of 256 of them too."""
    return bool(frame.dtype.kind == "u" and frame.dtype.itemsize <= 2)


def level_of(frame: NDArray[Any]) -> float:
    """Return the mean of a frame; short codes are added up as such, which is twice as fast and exact."""
    kind: Any = np.uint32 if short_codes(frame) and frame.shape[1] <= 65_536 else np.float64
    height = frame.shape[0] if isinstance(frame, np.ndarray) else max(1, STRIP // frame.shape[1])
    total = sum(
        float(frame[y : y + height].sum(axis=1, dtype=kind).sum(dtype=np.float64))
        for y in range(0, frame.shape[0], height)
    )
    return total / int(frame.shape[0] * frame.shape[1])


def add_up(
    frames: Frames, factors: Real, offsets: Real, order: int, *, keep: NDArray[np.float32] | None = None
) -> Sums:
    """Walk over factor · frame - offset.

    Args:
        frames: n ≥ 2 frames × rows × columns.
        factors: One for each frame.
        offsets: One for each frame, such that each frame's mean comes out as zero.
        order: Highest power of y and of x among the polynomials; less than the rows and columns.
        keep: Rows × columns to be filled with the mean frame; None keeps none.
    """
    count, (m, n) = len(frames), frames[0].shape
    along_y, along_x, ones = _polynomials(m, order), _polynomials(n, order), np.ones(n)
    rows, columns, shading = np.zeros((count, m)), np.zeros((count, n)), np.zeros((order + 1, n))
    mean_rows = np.zeros(m)
    differences = power = 0.0
    apart = 1 if count == 2 else count  # of two frames the second departs from the mean as the first, mirrored
    height = max(1, STRIP // n)
    pieces, mean_piece = np.empty((count, height, n)), np.empty((height, n))
    for y in range(0, m, height):
        strip = slice(y, min(m, y + height))
        high = strip.stop - y
        for k, frame in enumerate(frames):
            _level(frame[strip], factors[k], offsets[k], pieces[k, :high])
        mean = np.add(pieces[0, :high], pieces[1, :high], out=mean_piece[:high])
        for k in range(2, count):
            mean += pieces[k, :high]
        mean *= 1 / count  # four times as fast as to divide
        power += float(np.vdot(mean, mean))
        if keep is not None:
            keep[strip] = mean
        shading += along_y[strip].T @ mean
        mean_rows[strip] = mean @ ones / n
        for k in range(apart):
            away = np.subtract(pieces[k, :high], mean, out=pieces[k, :high])
            differences += float(np.vdot(away, away))
            rows[k, strip] = away @ ones / n
            columns[k] += np.ones(high) @ away / m
    if count == 2:
        differences, rows[1], columns[1] = 2 * differences, -rows[0], -columns[0]
    rows += mean_rows
    columns += shading[0] / np.sqrt(m) * np.sign(along_y[0, 0])  # the polynomial of order 0 is ±1/√M
    return Sums((count, m, n), differences, power, rows, columns, shading @ along_x)


def _level(values: NDArray[Any], factor: float, offset: float, out: Real) -> None:
    np.copyto(out, values)  # and then in place: faster than to convert and multiply at once
    if factor != 1.0:
        out *= factor
    out -= offset


def _polynomials(count: int, order: int) -> Real:
    """Return orthonormal polynomials on that many equidistant points, points × (order + 1)."""
    powers = np.polynomial.legendre.legvander(np.linspace(-1, 1, count), order)
    return np.asarray(np.linalg.qr(powers)[0], dtype=np.float64)


def layout(sums: Sums, order: int) -> Layout:
    """Return the mean squares after removal of a polynomial shading.

    A term in y alone takes one degree of freedom from the rows, one in x alone from the columns, a mixed one from the
    rest.

    Args:
        sums: Sums of the walk.
        order: Total order of the polynomial, at most that of the walk.
    """
    count, m, n = sums.shape
    mean_rows, mean_columns = sums.rows.mean(axis=0), sums.columns.mean(axis=0)
    t_rows = n * float(np.sum((sums.rows - mean_rows) ** 2))
    t_columns = m * float(np.sum((sums.columns - mean_columns) ** 2))
    a_rows, a_columns = n * float(mean_rows @ mean_rows), m * float(mean_columns @ mean_columns)
    b, a = np.indices(sums.shading.shape)
    gone = np.where((a + b <= order) & (a + b > 0), sums.shading**2, 0.0)

    def stratum(t: float, all_dof: int, a_square: float, removed: float, lost: float) -> Stratum:
        t_mean = max(0.0, t) / ((count - 1) * all_dof)
        square = max(0.0, a_square - removed) / (all_dof - lost)
        return Stratum(t_mean, (count - 1) * all_dof, square, all_dof - lost, lost, t_mean / count)

    return Layout(
        count,
        (m, n),
        rows=stratum(t_rows, m - 1, a_rows, float(gone[:, 0].sum()), order),
        columns=stratum(t_columns, n - 1, a_columns, float(gone[0].sum()), order),
        rest=stratum(
            sums.differences - t_rows - t_columns,
            (m - 1) * (n - 1),
            sums.mean - a_rows - a_columns,
            float(gone[1:, 1:].sum()),
            order * (order - 1) / 2,
        ),
    )


def pooled(layouts: Sequence[Layout]) -> Layout:
    """Return what layouts of alike arrays tell together: means of mean squares, all their degrees of freedom."""
    if len(layouts) == 1:
        return layouts[0]

    def together(strata: Sequence[Stratum]) -> Stratum:
        t, a, noise = (float(np.mean([getattr(one, name) for one in strata])) for name in ("t", "a", "noise"))
        t_dof, dof, lost = (float(sum(getattr(one, name) for one in strata)) for name in ("t_dof", "dof", "lost"))
        return Stratum(t, t_dof, a, dof, lost, noise)

    rows, columns, rest = (together([getattr(one, name) for one in layouts]) for name in ("rows", "columns", "rest"))
    return Layout(layouts[0].n, layouts[0].shape, rows, columns, rest)


def split_variances(total: float, rows: float, columns: float, shape: tuple[int, int]) -> tuple[float, float, float]:
    """Return the variances of pixel, row and column part (EMVA 1288 Release 4.0 Linear).

    Args:
        total: Variance of the pixels.
        rows: Variance of the means of rows.
        columns: Variance of the means of columns.
        shape: Rows M and columns N.
    """
    m, n = shape
    d = m * n - m - n
    pixel = m * n / d * (total - columns - rows)
    row = (m * n - n) / d * rows - m / d * (total - columns)
    column = (m * n - m) / d * columns - n / d * (total - rows)
    return pixel, row, column
