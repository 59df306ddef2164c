"""Where the phase of a sector star lies, everywhere in a picture: its centre, an oblique view, and bending.

A perspective view of a star is again a pencil of lines through one point, and a pencil is mapped onto a pencil by a
linear map A of directions. So the phase at a position p is g times the direction of A (p - c), whatever the tilt of the
chart. Distortion of a star off the optical axis bends the lines: to second order the tangential displacement is r²
times harmonics 1 and 3 of the direction. All of it is fitted to phases of sectors, from the outermost ring inwards: an
error ε of the centre turns the phase by g ε / r, and a whole circle read with it keeps J0(2π f ε) of its modulation.

References:
    P. Birch and J. Griffin, Opt. Eng. 54 (2015) 074104 (sine star off centre).
    J. G. Semple and G. T. Kneebone, Algebraic Projective Geometry (1952) (pencils of lines; from memory).
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]
Places = NDArray[np.intp]

SECTORS = 16
"""Sectors whose phases are fitted; 36 cycles leave two in each."""
RINGS = 20
PER_RING = 1200
"""Pixels looked at in a ring, about."""
STAGES = (0.5, 0.5, 0.25, 0.0, 0.0, 0.0)
"""Part of the outer radius down to which a step looks; 0 is all there is."""
BENT_FROM = 1
"""Stage from which bending is fitted."""
APART = 1.5
"""Pixels taken from a ring lie at least so many px apart, so that none is taken twice."""


@dataclass(frozen=True)
class Geometry:
    """The phase of a star."""

    cycles: int
    """g."""
    centre: tuple[float, float]
    """x, y, px from the first pixel's centre."""
    outer: float
    """Radius within which it holds, px."""
    plane: Real
    """A, 2 × 2, of determinant 1: from px about the centre to the star's own plane."""
    bend: Real
    """Factors of cos φ, sin φ, cos 3φ, sin 3φ: displacement along φ in px at the outer radius, over that radius."""
    start: float = 0.0
    """Phase at φ = 0, rad."""
    doubt: float = 0.0
    """Standard uncertainty of the centre, px."""
    left: float = 0.0
    """Rms of what is left of sectors' phases beyond their noise, px along the circle."""

    @property
    def ratio(self) -> float:
        """Longest over shortest diameter of what is a circle on the chart."""
        values = np.linalg.svd(self.plane, compute_uv=False)
        return float(values[0] / values[1])

    def at(self, x: Real, y: Real) -> tuple[Real, Real, Real]:
        """Return phase (rad), local frequency (cy/px) and azimuth (rad) at positions, px from the first pixel."""
        u, v = x - self.centre[0], y - self.centre[1]
        (a, b), (c, d) = self.plane
        p, q = a * u + b * v, c * u + d * v
        square = np.maximum(p * p + q * q, 1e-12)
        r, phi = np.sqrt(square), np.arctan2(q, p)
        shift, slope = self._bent(p / r, q / r, r / self.outer)
        radius = np.sqrt(u * u + v * v)
        f = self.cycles * radius * (1 + slope) / (2 * np.pi * square)
        return self.cycles * (phi + shift) + self.start, f, phi

    def _bent(self, cosine: Real, sine: Real, r: Real) -> tuple[Real | float, Real | float]:
        if not self.bend.any():
            return 0.0, 0.0
        a, b, c, d = self.bend
        double = 2 * cosine * cosine - 1
        cos3, sin3 = cosine * (2 * double - 1), sine * (2 * double + 1)
        shift = r * (a * cosine + b * sine + c * cos3 + d * sin3)
        return shift, r * (b * cosine - a * sine + 3 * (d * cos3 - c * sin3))


def geometry(
    cycles: int, centre: tuple[float, float], outer: float, stretch: tuple[float, float] = (0.0, 0.0)
) -> Geometry:
    """Return the geometry to start from.

    Args:
        cycles: g.
        centre: x, y, px.
        outer: px.
        stretch: As `star_search.Star` has it.
    """
    a, b = stretch
    plane = np.linalg.inv(np.array([[1 + a, b], [b, 1 - a]]))
    return Geometry(cycles, centre, outer, plane / np.sqrt(np.linalg.det(plane)), np.zeros(4))


def ring_pixels(shape: tuple[int, int], centre: tuple[float, float], edges: Real, most: int) -> tuple[Places, Places]:
    """Return columns and rows of pixels in rings about a centre: all of a thin ring, an even part of a large one.

    Args:
        shape: Rows, columns.
        centre: x, y, px.
        edges: Borders of the rings, rising, px.
        most: Pixels wanted of a ring.
    """
    columns, rows = [], []
    area = np.pi * np.diff(edges**2)
    crowded = area / np.maximum(most, 1) < APART**2
    inner = float(edges[1:][crowded].max()) if crowded.any() else float(edges[0])
    if crowded.any():
        x0, y0 = (max(0, int(c - inner) - 1) for c in centre)
        x1, y1 = (min(n, int(c + inner) + 3) for c, n in zip(centre, (shape[1], shape[0]), strict=True))
        y, x = np.mgrid[y0:y1, x0:x1]
        square = (x - centre[0]) ** 2 + (y - centre[1]) ** 2
        inside = (square >= edges[0] ** 2) & (square < inner**2)
        columns.append(x[inside])
        rows.append(y[inside])
    for low, high, size in zip(edges[:-1], edges[1:], area, strict=True):
        if low < inner - 1e-9:
            continue
        pitch = float(np.sqrt(size / most))
        layers = max(1, round((high - low) / pitch))
        for n in range(layers):
            r = low + (high - low) * (n + 0.5) / layers
            count = max(1, int(2 * np.pi * r / max(APART, size / most * layers / (high - low))))
            turn = 2 * np.pi * (np.arange(count) + 0.618034 * n % 1.0) / count
            columns.append(np.rint(centre[0] + r * np.cos(turn)).astype(np.intp))
            rows.append(np.rint(centre[1] + r * np.sin(turn)).astype(np.intp))
    x, y = np.concatenate(columns), np.concatenate(rows)
    there = (x >= 0) & (x < shape[1]) & (y >= 0) & (y < shape[0])
    return x[there], y[there]


@dataclass(frozen=True)
class Cells:
    """Waves of sectors of rings."""

    wave: NDArray[np.complex128]
    """C of level + Re[C e^{iθ}]."""
    level: Real
    """Level."""
    weight: Real
    """One over the variance of Re C."""
    r: Real
    """Mean radius in the star's plane, px."""
    phi: Real
    """Mean azimuth, rad."""
    number: Real
    """Pixels."""


def refine(
    values_at: Callable[[Places, Places], tuple[Real, NDArray[np.bool_] | None]],
    shape: tuple[int, int],
    start: Geometry,
    finest: float,
) -> tuple[Geometry, Cells]:
    """Fit centre, obliqueness and bending of a star to the phases of its sectors.

    Args:
        values_at: Gives the light at columns and rows, and which of them are the channel's own (None is all).
        shape: Rows, columns.
        start: Centre within a fifth of a cycle at the outer radius.
        finest: cy/px; finer stripes are not looked at.

    Returns:
        The geometry, and the waves of its sectors.
    """
    least = start.cycles / (2 * np.pi * finest)
    edges = np.geomspace(least, start.outer, RINGS + 1)
    x, y = ring_pixels(shape, start.centre, edges, PER_RING)
    values, own = values_at(x, y)
    if own is not None:
        x, y, values = x[own], y[own], values[own]
    x, y = x.astype(np.float64), y.astype(np.float64)
    found = start
    for stage, part in enumerate(STAGES):
        seen = np.hypot(x - found.centre[0], y - found.centre[1]) > max(part * found.outer, least)
        waves = cells(found, x[seen], y[seen], values[seen])
        found = _step(found, waves, bent=stage >= BENT_FROM)
    return found, waves


def cells(at: Geometry, x: Real, y: Real, values: Real) -> Cells:
    """Fit level and wave of every sector of every ring; those with too few pixels are left out.

    Args:
        at: Phase of the star.
        x: Columns of pixels, px from the first pixel's centre.
        y: Rows.
        values: Their light.
    """
    theta, f, phi = at.at(x, y)
    r = at.cycles / (2 * np.pi * f)
    ring = np.clip((np.log(r / r.min()) / np.log(r.max() / r.min() + 1e-9) * RINGS).astype(np.intp), 0, RINGS - 1)
    sector = ((phi / (2 * np.pi) % 1.0) * SECTORS).astype(np.intp) % SECTORS
    cell = ring * SECTORS + sector
    count = RINGS * SECTORS

    def total(each: Real) -> Real:
        return np.asarray(np.bincount(cell, each, count), dtype=np.float64)

    number = total(np.ones_like(values))
    columns = (np.ones_like(theta), np.cos(theta), np.sin(theta))
    gram, right = np.empty((count, 3, 3)), np.empty((count, 3))
    for i, one in enumerate(columns):
        right[:, i] = total(one * values)
        for j, two in enumerate(columns[: i + 1]):
            gram[:, i, j] = gram[:, j, i] = total(one * two)
    square = total(values * values)
    good = (number >= 12) & (np.linalg.det(gram) > 1e-3 * number**3 / 4)
    gram, right, number, square = gram[good], right[good], number[good], square[good]
    inverse = np.linalg.inv(gram)
    solved = np.einsum("kij,kj->ki", inverse, right)
    noise = np.maximum(square - (solved * right).sum(axis=1), 1e-12 * square) / np.maximum(number - 3, 1)
    variance = noise * (inverse[:, 1, 1] + inverse[:, 2, 2]) / 2
    # the mean direction of a sector as a circular mean, the mean radius as a plain one
    cosine, sine = total(np.cos(phi))[good], total(np.sin(phi))[good]
    wave = solved[:, 1] - 1j * solved[:, 2]
    return Cells(wave, solved[:, 0], 1 / variance, total(r)[good] / number, np.arctan2(sine, cosine), number)


def _step(at: Geometry, waves: Cells, *, bent: bool) -> Geometry:
    """Correct the geometry by what the phases of its sectors say."""
    clear = np.abs(waves.wave) ** 2 * waves.weight > 9
    if np.count_nonzero(clear) < 24:
        return at
    wave, weight, r, phi = (each[clear] for each in (waves.wave, waves.weight, waves.r, waves.phi))
    weight = weight * np.abs(wave) ** 2
    far = r > 0.6 * at.outer
    outer = wave[far] if far.any() else wave
    middle = np.angle((outer * np.abs(outer)).sum())
    # half a turn is a contrast that the blur has reversed, no error of the geometry
    lead = np.angle((wave * np.exp(-1j * middle)) ** 2) / 2
    g = at.cycles
    columns = [np.ones_like(r), g * np.sin(phi) / r, -g * np.cos(phi) / r, -g * np.sin(2 * phi), g * np.cos(2 * phi)]
    if bent:
        columns += [g * r / at.outer * each for n in (1, 3) for each in (np.cos(n * phi), np.sin(n * phi))]
    design = np.array(columns).T
    # a sector whose phase is another's by chance or a defect must not pull: weights fall beyond three deviations
    limit = np.sqrt(weight)
    for _ in range(2):
        normal = design.T @ (design * weight[:, None])
        solved = np.linalg.solve(normal, design.T @ (weight * lead))
        left = lead - design @ solved
        scale = max(1.0, 1.4826 * float(np.median(np.abs(left) * limit)))
        weight = limit**2 / (1 + (left * limit / (3 * scale)) ** 2)
    inverse = np.linalg.inv(normal) * scale**2
    e = np.linalg.solve(at.plane, solved[1:3])
    turn = np.array([[1 + solved[3], solved[4]], [solved[4], 1 - solved[3]]]) @ at.plane
    rest = float((weight * ((left * r / g) ** 2 - (r / g / limit) ** 2)).sum() / weight.sum())
    return replace(
        at,
        centre=(at.centre[0] + float(e[0]), at.centre[1] + float(e[1])),
        plane=turn / np.sqrt(np.linalg.det(turn)),
        bend=at.bend + solved[5:] if bent else at.bend,
        start=at.start + float(middle + solved[0]),
        doubt=float(np.sqrt((inverse[1, 1] + inverse[2, 2]) / 2)),
        left=float(np.sqrt(max(0.0, rest))),
    )
