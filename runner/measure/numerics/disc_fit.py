"""Sub-pixel centres of many blurred discs at once, with their uncertainty.

Each disc is an ellipse of known shape and orientation, of free size, whose border is a step blurred by a Gaussian (the
pixel's aperture and the optics together), on a ground that slopes. Only pixels about the border are used; that is where
the centre is. The model is the same when turned by half a turn, so whatever it lacks of symmetric kind (another point
spread, another size) does not move the centre; uneven light is fitted.

    light = (1 + gx dx + gy dy) (ground + step Φ(-t / σ)),   t = (|A⁻¹ d| - s) / |∇|A⁻¹ d||

What is found is the centre of area of the disc's picture. Under keystone and distortion that is not the picture of the
disc's centre; whoever fits the view takes the difference from it (`plane_view`).

References:
    Gauss-Newton least squares with the covariance of the residuals' variance: JCGM 100:2008, H.3.
    J. Heikkilä, IEEE Trans. Pattern Anal. Mach. Intell. 22 (2000) 1066 (centre of a disc's picture under perspective).
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.mark_pixels import Pixels, Real, Short, covered, inverses, solved

PILOTS = 24
"""Discs that are fitted first, over the whole room each has, to learn the blur."""
RING = 3.0
"""Blurs on either side of the border that are used; beyond them the step has less than 0.2 % left to do."""
MORE_RING = 1.5
"""px besides."""
CHUNK = 60_000
"""Pixels fitted at a time: their derivatives stay in a processor's cache."""
NEAR = 8
"""Discs of a group of like size that are asked which pixels they need."""
STEPS, PILOT_STEPS = 6, 12
SETTLED = 3e-3
"""px; a smaller step of every centre ends the iteration: what a next one would do is a hundredth of that."""
LEAST_BLUR = 0.25
"""px: a perfect lens leaves a pixel's aperture, 0.29 px."""
P = 8
"""Parameters of a disc: centre, size, blur, ground, step, slopes."""


@dataclass(frozen=True)
class DiscFits:
    """What was found; rows belong to the discs that went in."""

    centres: Real
    """(n, 2), px, pixel centres at +0.5."""
    covariance: Real
    """Of each centre, (n, 2, 2), px²."""
    size: Real
    """Radius over that of the shape that went in, (n,)."""
    blur: Real
    """Standard deviation of the border's Gaussian, px, (n,)."""
    ground: Real
    """Light about the disc, (n,)."""
    step: Real
    """Light of the disc less that, (n,)."""
    misfit: Real
    """Rms of what the model leaves, light, (n,)."""
    used: Real
    """Pixels, (n,)."""
    settled: NDArray[np.bool_]
    """The iteration came to rest near where it began."""


def fit_discs(pixels: Pixels, centres: Real, shapes: Real, room: Real) -> DiscFits:
    """Fit discs.

    Args:
        pixels: The channel's pixels.
        centres: Where to begin, (n, 2), px: within a third of the radius.
        shapes: Matrices A that turn the unit circle into each disc's border about its centre, px, (n, 2, 2).
        room: How far from the centre the ground reaches before something else comes, in radii, (n,), above 1.
    """
    if not len(centres):
        none = np.zeros(0)
        return DiscFits(centres, np.zeros((0, 2, 2)), none, none, none, none, none, none, none.astype(bool))
    small = np.sqrt(np.abs(np.linalg.det(shapes)))
    pilots = np.unique(np.linspace(0, len(centres) - 1, min(PILOTS, len(centres))).astype(int))
    start = np.maximum(LEAST_BLUR, 0.12 * small)
    first = _fit(pixels, centres[pilots], shapes[pilots], room[pilots], start[pilots], None, PILOT_STEPS)
    good = first.settled & (np.abs(first.size - 1) < 0.5)
    if not good.any():
        return _fit(pixels, centres, shapes, room, start, None, PILOT_STEPS)
    blur = np.full(len(centres), max(LEAST_BLUR, float(np.median(first.blur[good]))))
    widest = max(float(blur[0]), float(np.quantile(first.blur[good], 0.9)))
    shapes = shapes * float(np.median(first.size[good]))
    made = _fit(pixels, centres, shapes, room, blur, RING * widest + MORE_RING, STEPS)
    again = np.flatnonzero(~made.settled)
    if len(again):
        made = _put(made, again, _fit(pixels, centres[again], shapes[again], room[again], blur[again], None, 30))
    return replace(made, size=made.size * float(np.median(first.size[good])))


def _put(into: DiscFits, where: NDArray[np.intp], part: DiscFits) -> DiscFits:
    merged = {}
    for name in into.__dataclass_fields__:
        values = getattr(into, name).copy()
        values[where] = getattr(part, name)
        merged[name] = values
    return DiscFits(**merged)


def _fit(
    pixels: Pixels, centres: Real, shapes: Real, room: Real, blur: Real, ring: float | None, steps: int
) -> DiscFits:
    """Fit discs in groups of like size."""
    reach = np.hypot(shapes[:, :, 0], shapes[:, :, 1]) * room[:, None]  # half width and half height
    if ring is not None:
        reach = np.minimum(reach, np.hypot(shapes[:, :, 0], shapes[:, :, 1]) + ring)
    order = np.argsort(reach.max(axis=1), kind="stable")
    parts = []
    at = 0
    while at < len(order):
        most = max(1.0, 4 * float(reach[order[at]].prod()) * pixels.share)
        group = order[at : at + max(1, int(CHUNK / most))]
        wide = (float(reach[group, 1].max()), float(reach[group, 0].max()))
        parts.append(_fit_group(pixels, centres[group], shapes[group], room[group], blur[group], ring, wide, steps))
        at += len(group)
    place = np.empty(len(order), dtype=int)
    place[order] = np.arange(len(order))
    return DiscFits(
        **{name: np.concatenate([getattr(p, name) for p in parts])[place] for name in DiscFits.__dataclass_fields__}
    )


def _fit_group(
    pixels: Pixels,
    centres: Real,
    shapes: Real,
    room: Real,
    blur: Real,
    ring: float | None,
    wide: tuple[float, float],
    steps: int,
) -> DiscFits:
    offsets, bases = pixels.offsets(wide), pixels.bases(centres)
    inverse = np.linalg.inv(shapes)
    offsets = offsets[_near(offsets * 1.0, inverse, room, shapes, ring, pixels.step)]
    light, x, y, there = pixels.around(bases, offsets)
    x, y = (x - centres[:, :1]).astype(np.float32), (y - centres[:, 1:]).astype(np.float32)
    light, inverse = light.astype(np.float32), inverse.astype(np.float32)
    rho = _radius(x, y, inverse)[0]
    low, high = _bounds(shapes, room, ring)
    weight = (there & (rho >= low[:, None]) & (rho <= high[:, None])).astype(np.float32)
    used, small = weight.sum(axis=1, dtype=np.float64), np.sqrt(np.abs(np.linalg.det(shapes)))
    state = _first(light, rho, weight, blur)
    for _ in range(steps):
        normal, right, squares = _equations(light, x, y, weight, inverse, state)
        change = solved(normal, right)
        left = squares - np.einsum("ni,ni->n", right, change)  # of squares after this step, near the solution
        # bounds keep a poor start from running away; near the solution none of them is met
        change[:, :2] = np.clip(change[:, :2], -0.3 * small[:, None], 0.3 * small[:, None])
        change[:, 2] = np.clip(change[:, 2], -0.2, 0.2)
        change[:, 3] = np.clip(change[:, 3], -0.4 * state[:, 3], 0.6 * state[:, 3])
        state = state + change
        state[:, 2] = np.clip(state[:, 2], 0.3, 3.0)
        state[:, 3] = np.maximum(state[:, 3], LEAST_BLUR)
        moved = np.hypot(change[:, 0], change[:, 1])
        if moved.max(initial=0.0) < SETTLED:
            break
    variance = np.maximum(left, 0.0) / np.maximum(used - P, 1)
    covariance = inverses(normal)[:, :2, :2] * variance[:, None, None]
    settled = (moved < 3 * SETTLED) & (np.hypot(state[:, 0], state[:, 1]) < 0.5 * small) & (used > 3 * P)
    parts = (state[:, :2] + centres, covariance, *(state[:, i] for i in range(2, 6)), np.sqrt(variance), used, settled)
    return DiscFits(*parts)


def _radius(dx: Short, dy: Short, inverse: Short) -> tuple[Short, Short, Short]:
    """Return |A⁻¹ d| and its gradient by x and y, each (n, k)."""
    (a, b), (c, d) = (inverse[:, i, :, None].swapaxes(0, 1) for i in (0, 1))
    qx, qy = a * dx + b * dy, c * dx + d * dy
    rho = np.sqrt(qx * qx + qy * qy) + np.float32(1e-9)
    return rho, (a * qx + c * qy) / rho, (b * qx + d * qy) / rho


def _bounds(shapes: Real, room: Real, ring: float | None) -> tuple[Real, Real]:
    """Return the least and greatest radius that is used, in radii, (n,) each."""
    if ring is None:
        return np.zeros(len(shapes)), room
    short = np.linalg.svd(shapes, compute_uv=False)[:, 1]
    return np.maximum(0.0, 1 - ring / short), np.minimum(room, 1 + ring / short)


def _near(offsets: Short, inverse: Short, room: Real, shapes: Real, ring: float | None, step: int) -> NDArray[np.bool_]:
    """Return which offsets can lie between the bounds of discs of a group, whose centres lie off their bases.

    A few discs stand for all; their like size is that of the others.
    """
    some = np.unique(np.linspace(0, len(shapes) - 1, min(NEAR, len(shapes))).astype(int))
    inverse, room, shapes = inverse[some], room[some], shapes[some]
    rho = _radius(offsets[None, :, 1], offsets[None, :, 0], inverse)[0]
    low, high = _bounds(shapes, room, ring)
    slack = (step * 0.75 + 0.5) / np.linalg.svd(shapes, compute_uv=False)[:, 1]
    return np.asarray(((rho >= (low - slack)[:, None]) & (rho <= (high + slack)[:, None])).any(axis=0))


def _first(light: Short, rho: Short, weight: Short, blur: Real) -> Real:
    """Return parameters to begin with, (n, P): levels are means within and without the border."""
    inner, outer = weight * (rho < 1), weight * (rho >= 1)
    low, high = ((w * light).sum(axis=1) / np.maximum(w.sum(axis=1), 1) for w in (inner, outer))
    none = np.zeros(len(light))
    return np.column_stack([none, none, none + 1, blur, high, low - high, none, none]).astype(np.float64)


def _equations(light: Short, x: Short, y: Short, weight: Short, inverse: Short, state: Real) -> tuple[Real, Real, Real]:
    """Return the normal equations of a step, (n, P, P) and (n, P), and the sum of squares, (n,).

    Positions count from where the fit began; in float32, which holds them to 1e-6 px.
    """
    cx, cy, s, sigma, ground, step, gx, gy = (state[:, i, None].astype(np.float32) for i in range(P))
    rho, nx, ny = _radius(x - cx, y - cy, inverse)
    steep = np.sqrt(nx * nx + ny * ny) + np.float32(1e-6)  # 0 in the very centre
    t = (rho - s) / (steep * sigma)
    bell = np.exp(np.float32(-0.5) * t * t)
    inside = covered(t, bell)
    lamp = 1 + gx * x + gy * y
    shown = ground + step * inside
    slope = bell * lamp * (step * np.float32(0.3989422804) / sigma) / steep
    jacobian = np.empty((len(light), P, light.shape[1]), dtype=np.float32)
    np.multiply(slope, nx, out=jacobian[:, 0])
    np.multiply(slope, ny, out=jacobian[:, 1])
    jacobian[:, 2] = slope
    np.multiply(slope * steep, t, out=jacobian[:, 3])
    jacobian[:, 4] = lamp
    np.multiply(lamp, inside, out=jacobian[:, 5])
    np.multiply(shown, x, out=jacobian[:, 6])
    np.multiply(shown, y, out=jacobian[:, 7])
    jacobian *= weight[:, None, :]
    rest = (light - lamp * shown) * weight
    normal = (jacobian @ jacobian.swapaxes(1, 2)).astype(np.float64)
    right = (jacobian @ rest[..., None])[..., 0].astype(np.float64)
    return normal, right, np.einsum("nk,nk->n", rest, rest).astype(np.float64)
