"""Finds a sector star in a picture: its centre, its number of cycles, how far it reaches.

The stripes of a star all point at its centre, so the gradients g of the light are at right angles to the line from it:
the centre c minimises Σ w (g · (p - c))², a linear problem, with weights w that leave out what does not point there.
Around that centre, the light along a circle repeats as often as the star has cycles: a line in the circle's Fourier
spectrum, the same on every circle. The phase of that line and its neighbours, unwound once around, has gone through
as many turns as there are cycles; how it departs from an even turning tells how the centre is off and how oblique the
view is.

References:
    R. Parthasarathy, Nature Methods 9 (2012) 724, doi:10.1038/nmeth.2071 (centre from gradients by least squares).
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import fft

Real = NDArray[np.float64]

COARSE = 360
"""Side of the picture in which the centre is looked for, px at most."""
POINTS = 30_000
"""Gradients used, the strongest."""
ANGLES = 1024
"""Places on a circle."""
RINGS = 48
"""Circles looked at."""
LEAST_CYCLES, MOST_CYCLES = 16, 300
"""Numbers of cycles that are looked for."""
SIDE, SIDE_SHARE = 3, 0.2
"""Lines beside the star's own that belong to it, and more of them by its number of cycles: a centre that is off and an
oblique view turn its phase back and forth."""
LEAST_RINGS = 4
"""Circles in a row on which it must be seen."""
MOST_STRETCH = 0.25
"""A view so oblique that one diameter is 5/3 of the other: beyond, it is no star."""
STANDS_OUT = 0.4
"""Share of a circle's power in the star's line from which the circle belongs to the star."""
LEAST_REACH = 16.0
"""px that must lie about a centre in every direction."""
FINEST = 0.4
"""cy/px; finer stripes are not looked at here."""


@dataclass(frozen=True)
class Star:
    """A star as found; positions count from the first pixel's centre."""

    centre: tuple[float, float]
    """x, y, px."""
    stretch: tuple[float, float]
    """How much longer than the mean the star is along x, and along the diagonal of x and y: an oblique view."""
    cycles: int
    """Number of cycles."""
    inner: float
    """Least radius at which it was seen, px."""
    outer: float
    """Greatest radius at which it is seen in all directions, px."""
    reach: float
    """Radius of the greatest circle about the centre that lies in the picture, px."""


def find_star(values: NDArray[np.generic]) -> Star | None:
    """Find the star of a picture.

    Args:
        values: Rows × columns.

    Returns:
        The star, or None where no number of cycles stands out on several neighbouring circles.
    """
    if min(values.shape) < 32:
        return None
    centre = _pencil(values)
    found = None
    for _ in range(2):  # the second time about the centre that the first has mended
        reach = min(centre[0], centre[1], values.shape[1] - 1 - centre[0], values.shape[0] - 1 - centre[1])
        star = _about(values, centre, float(reach)) if reach >= LEAST_REACH else None
        if star is None:
            break
        found, centre = star, star.centre
    return found


def _pencil(values: NDArray[np.generic]) -> tuple[float, float]:
    """Return where the stripes of a picture point."""
    step = max(1, -(-max(values.shape) // COARSE))
    rows, columns = (n // step for n in values.shape)
    strip = values[: rows * step, : columns * step].reshape(rows, step, columns * step)
    kind = np.uint32 if values.dtype.kind == "u" and values.dtype.itemsize <= 2 else np.float64
    small = strip.sum(axis=1, dtype=kind).astype(np.float64).reshape(rows, columns, step).sum(axis=2)
    gx = small[1:-1, 2:] - small[1:-1, :-2]
    gy = small[2:, 1:-1] - small[:-2, 1:-1]
    power = (gx**2 + gy**2).ravel()
    some = np.argpartition(power, -min(POINTS, power.size // 2))[-min(POINTS, power.size // 2) :]
    y, x = (each.astype(np.float64) + 1 for each in np.unravel_index(some, gx.shape))
    gx, gy = gx.ravel()[some], gy.ravel()[some]
    length = np.hypot(gx, gy) + 1e-30
    weight, centre = np.ones(x.size), np.array([columns / 2, rows / 2])
    for share in (1.0, 0.3, 0.15, 0.08, 0.05, 0.03, 0.03):
        away = (gx * (x - centre[0]) + gy * (y - centre[1])) / length
        if share < 1:
            weight = 1 / (1 + (away / (share * min(rows, columns))) ** 2) ** 2
        a, b, d = (weight * gx * gx).sum(), (weight * gx * gy).sum(), (weight * gy * gy).sum()
        along = weight * (gx * x + gy * y)
        right = np.array([(along * gx).sum(), (along * gy).sum()])
        determinant = a * d - b * b
        if not determinant > 1e-12 * max(a, d) ** 2:
            break
        centre = np.array([d * right[0] - b * right[1], a * right[1] - b * right[0]]) / determinant
    return float((centre[0] + 0.5) * step - 0.5), float((centre[1] + 0.5) * step - 0.5)


def circles(values: NDArray[np.generic], centre: tuple[float, float], radii: Real) -> NDArray[np.complex128]:
    """Return the Fourier coefficients of the light along circles, circles × orders; order n is e^{inφ}.

    Args:
        values: Rows × columns.
        centre: x, y, px from the first pixel's centre.
        radii: px; the circles lie in the picture.
    """
    turn = 2 * np.pi * np.arange(ANGLES) / ANGLES
    x = np.rint(centre[0] + radii[:, None] * np.cos(turn)).astype(np.intp)
    y = np.rint(centre[1] + radii[:, None] * np.sin(turn)).astype(np.intp)
    np.clip(x, 0, values.shape[1] - 1, out=x)
    np.clip(y, 0, values.shape[0] - 1, out=y)
    return np.asarray(fft.rfft(values[y, x].astype(np.float64), axis=1) / ANGLES)


def _shares(spectra: NDArray[np.complex128], radii: Real) -> Real:
    """Return which share of each circle's power stands about each number of cycles, circles × numbers."""
    power = np.abs(spectra) ** 2
    power[:, :6] = 0.0  # shading
    sums = np.cumsum(np.pad(power, ((0, 0), (1, 0))), axis=1)
    order = np.arange(MOST_CYCLES + 1)
    side = _side(order)
    window = sums[:, order + side + 1] - sums[:, np.maximum(order - side, 0)]
    share = window / np.maximum(sums[:, -1:], 1e-300)
    share[:, :LEAST_CYCLES] = 0.0
    share[order[None, :] > 2 * np.pi * radii[:, None] * FINEST] = 0.0
    return np.asarray(share)


def _side(order: NDArray[np.intp]) -> NDArray[np.intp]:
    return SIDE + (SIDE_SHARE * order).astype(np.intp)


def _about(values: NDArray[np.generic], centre: tuple[float, float], reach: float) -> Star | None:
    radii = np.geomspace(max(4.0, reach / 40), reach, RINGS)
    share = _shares(circles(values, centre, radii), radii)
    score = (share > STANDS_OUT).sum(axis=0) + share.mean(axis=0)
    about = int(np.argmax(score))
    rings = _longest(share[:, about] > STANDS_OUT)
    if rings is None or rings[1] - rings[0] < LEAST_RINGS:
        return None
    first, last = rings
    edge = float(radii[last])
    if last + 1 < RINGS:
        steps = np.linspace(radii[last], radii[last + 1], 17)
        seen = _shares(circles(values, centre, steps), steps)[:, about] > STANDS_OUT
        edge = float(steps[-1] if seen.all() else steps[int(np.argmin(seen)) - 1])
    outer = np.linspace(max(float(radii[first]), 0.55 * edge), 0.95 * edge, 16)
    turned = list(_unwound(circles(values, centre, outer), about))
    cycles = round(float(np.median([turns for turns, _ in turned])))
    kept = [(r, phase) for r, (turns, phase) in zip(outer, turned, strict=True) if turns == cycles]
    if not LEAST_CYCLES <= cycles <= MOST_CYCLES or len(kept) < len(turned) / 2:
        return None
    moved, stretch = _departures(kept, cycles)
    if np.hypot(*moved) > 0.2 * edge or np.hypot(*stretch) > MOST_STRETCH:
        return None
    middle = centre[0] + moved[0], centre[1] + moved[1]
    within = edge * (1 - 2 * float(np.hypot(*stretch)))  # of an ellipse, the shorter half
    return Star(middle, stretch, cycles, float(radii[first]), within, reach)


def _longest(good: NDArray[np.bool_]) -> tuple[int, int] | None:
    """Return first and last place of the longest run, in which one or two places may be missing."""
    places = np.flatnonzero(good)
    if not places.size:
        return None
    runs = np.split(places, np.flatnonzero(np.diff(places) > 3) + 1)
    best = max(runs, key=len)
    return int(best[0]), int(best[-1])


def _unwound(spectra: NDArray[np.complex128], about: int) -> Iterator[tuple[int, Real]]:
    """Yield, for each circle, how often its wave turns and the phase by which it leads an even turning, ANGLES each."""
    side = int(_side(np.array([about]))[0])
    low, high = max(6, about - 2 * side), min(about + 2 * side, spectra.shape[1] - 1)
    band = np.zeros((spectra.shape[0], ANGLES), dtype=np.complex128)
    band[:, low : high + 1] = spectra[:, low : high + 1]
    waves = fft.ifft(band, axis=1)
    for wave in waves:
        steps = np.angle(np.roll(wave, -1) * np.conj(wave))
        turns = round(float(steps.sum() / (2 * np.pi)))
        phase = np.angle(wave[0]) + np.concatenate([[0.0], np.cumsum(steps[:-1])])
        yield turns, phase - turns * 2 * np.pi * np.arange(ANGLES) / ANGLES


def _departures(circle: list[tuple[float, Real]], cycles: int) -> tuple[tuple[float, float], tuple[float, float]]:
    """Return the shift of the centre, px, and the stretch, from phases along circles (medians over them).

    A centre at e leads by g (e_x sin φ - e_y cos φ) / r, a stretch (a, b) by g (a sin 2φ - b cos 2φ).
    """
    turn = 2 * np.pi * np.arange(ANGLES) / ANGLES
    rows = []
    for radius, phase in circle:
        once, twice = (2 * np.mean(phase * np.exp(1j * n * turn)) / cycles for n in (1, 2))
        rows.append([radius * once.imag, -radius * once.real, twice.imag, -twice.real])
    x, y, a, b = (float(v) for v in np.median(rows, axis=0))
    return (x, y), (a, b)
