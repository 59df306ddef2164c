"""Sub-pixel corners of a chequered board, many at once, with their uncertainty.

Each corner is the crossing of two straight borders, each a step blurred by a Gaussian (the pixel's aperture and the
optics together), under light that slopes:

    light = (1 + gx dx + gy dy) (mean + swing erf(d1 / √2 σ) erf(d2 / √2 σ)),   d = signed distance from a border

The model is the same when turned by half a turn, so what it lacks of symmetric kind does not move the corner.

References:
    Gauss-Newton least squares with the covariance of the residuals' variance: JCGM 100:2008, H.3.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.mark_pixels import Pixels, Real, Short, covered, inverses, solved

WINDOW = 0.3
"""Half the window's side, in pitches: it stays clear of the next borders and of a mark in a square's middle."""
LARGEST = 14.0
"""px; more room adds little, for borders bend."""
CHUNK = 40_000
"""Pixels fitted at a time."""
STEPS = 14
SETTLED = 3e-3
"""px; a smaller step of every corner ends the iteration."""
LEAST_BLUR = 0.25
P = 9
"""Parameters of a corner: place, two directions, blur, mean, swing, slopes."""


@dataclass(frozen=True)
class CornerFits:
    """What was found; rows belong to the corners that went in."""

    centres: Real
    """(n, 2), px, pixel centres at +0.5."""
    covariance: Real
    """Of each, (n, 2, 2), px²."""
    blur: Real
    """Standard deviation of the borders' Gaussian, px, (n,)."""
    mean: Real
    """Mean light, (n,)."""
    swing: Real
    """Light of the squares at the upper right and lower left less the mean, (n,)."""
    misfit: Real
    """Rms of what the model leaves, light, (n,)."""
    used: Real
    """Pixels, (n,)."""
    settled: NDArray[np.bool_]
    """The iteration came to rest near where it began."""
    extent: Real
    """Half the window's side that was used, in pitches, (n,)."""

    def some(self, which: NDArray[np.intp]) -> "CornerFits":
        """Return the fits of some corners."""
        return CornerFits(**{name: getattr(self, name)[which] for name in self.__dataclass_fields__})


def fit_corners(pixels: Pixels, centres: Real, steps: Real) -> CornerFits:
    """Fit corners.

    Args:
        pixels: The channel's pixels.
        centres: Where to begin, (n, 2), px: within a fifth of the pitch.
        steps: Steps of one column and one row about each, as columns of matrices, px, (n, 2, 2).
    """
    if not len(centres):
        none = np.zeros(0)
        return CornerFits(centres, np.zeros((0, 2, 2)), none, none, none, none, none, none.astype(bool), none)
    pitch = np.sqrt(np.abs(np.linalg.det(steps)))
    extent = np.minimum(WINDOW, LARGEST / pitch)
    reach = (np.abs(steps[:, :, 0]) + np.abs(steps[:, :, 1])) * extent[:, None]
    order = np.argsort(reach.max(axis=1), kind="stable")
    parts, at = [], 0
    while at < len(order):
        most = max(1.0, 4 * float(reach[order[at]].prod()) * pixels.share)
        group = order[at : at + max(1, int(CHUNK / most))]
        wide = (float(reach[group, 1].max()), float(reach[group, 0].max()))
        parts.append(_fit_group(pixels, centres[group], steps[group], extent[group], wide))
        at += len(group)
    place = np.empty(len(order), dtype=int)
    place[order] = np.arange(len(order))
    columns: list[Any] = [*(np.concatenate([part[i] for part in parts])[place] for i in range(8)), extent]
    return CornerFits(*columns)


def _fit_group(pixels: Pixels, centres: Real, steps: Real, extent: Real, wide: tuple[float, float]) -> tuple[Real, ...]:
    offsets, bases = pixels.offsets(wide), pixels.bases(centres)
    seen, across, down, there = pixels.around(bases, offsets)
    light: Short = seen.astype(np.float32)
    x: Short = (across - centres[:, :1]).astype(np.float32)
    y: Short = (down - centres[:, 1:]).astype(np.float32)
    inverse: Short = np.linalg.inv(steps).astype(np.float32)
    weight: Short = there.astype(np.float32)
    for i in (0, 1):
        weight *= np.abs(inverse[:, i, :1] * x + inverse[:, i, 1:] * y) <= extent[:, None]
    used = weight.sum(axis=1, dtype=np.float64)
    state = _first(light, x, y, weight, steps)
    pitch = np.sqrt(np.abs(np.linalg.det(steps)))
    normal, left, moved = np.zeros((len(state), P, P)), np.zeros(len(state)), np.full(len(state), np.inf)
    at = np.arange(len(state))
    for _ in range(STEPS):  # only of those that have not settled
        normal[at], right, squares = _equations(light[at], x[at], y[at], weight[at], state[at])
        change = solved(normal[at], right)
        left[at] = squares - np.einsum("ni,ni->n", right, change)
        size, blur = pitch[at, None], state[at, 4]
        change[:, :2] = np.clip(change[:, :2], -0.06 * size, 0.06 * size)
        change[:, 2:4] = np.clip(change[:, 2:4], -0.15, 0.15)
        change[:, 4] = np.clip(change[:, 4], -0.4 * blur, 0.6 * blur)
        state[at] += change
        state[:, 4] = np.clip(state[:, 4], LEAST_BLUR, 0.5 * pitch)
        moved[at] = np.hypot(change[:, 0], change[:, 1])
        at = at[moved[at] >= SETTLED]
        if not len(at):
            break
    variance = np.maximum(left, 0.0) / np.maximum(used - P, 1)
    covariance = inverses(normal)[:, :2, :2] * variance[:, None, None]
    settled = (moved < 3 * SETTLED) & (np.hypot(state[:, 0], state[:, 1]) < 0.2 * pitch) & (used > 3 * P)
    return (
        state[:, :2] + centres,
        covariance,
        state[:, 4],
        state[:, 5],
        state[:, 6],
        np.sqrt(variance),
        used,
        settled,
    )


def _first(light: Short, x: Short, y: Short, weight: Short, steps: Real) -> Real:
    """Return parameters to begin with, (n, P)."""
    turn = np.arctan2(steps[:, 1, :], steps[:, 0, :])
    one, two = (-np.sin(turn[:, i, None]) * x + np.cos(turn[:, i, None]) * y for i in (0, 1))
    sign, count = np.sign(one * two) * weight, np.maximum(weight.sum(axis=1), 1)
    mean = (light * weight).sum(axis=1) / count
    swing = 1.2 * ((light - mean[:, None]) * sign).sum(axis=1) / count
    none = np.zeros(len(light))
    blur = np.maximum(0.6, 0.04 * np.sqrt(np.abs(np.linalg.det(steps))))
    return np.column_stack([none, none, turn, blur, mean, swing, none, none]).astype(np.float64)


def _equations(light: Short, x: Short, y: Short, weight: Short, state: Real) -> tuple[Real, Real, Real]:
    """Return the normal equations of a step, (n, P, P) and (n, P), and the sum of squares, (n,).

    Positions count from where the fit began; in float32, which holds them to 1e-6 px.
    """
    cx, cy, one, two, sigma, mean, swing, gx, gy = (state[:, i, None].astype(np.float32) for i in range(P))
    dx, dy = x - cx, y - cy
    lamp = 1 + gx * x + gy * y
    sides, bells, along, away = [], [], [], []
    for turn in (one, two):
        c, s = np.cos(turn), np.sin(turn)
        d = (c * dy - s * dx) / sigma
        bell = np.exp(np.float32(-0.5) * d * d)
        away.append(d)
        along.append(c * dx + s * dy)
        sides.append(1 - 2 * covered(d, bell))
        bells.append(bell * (np.float32(0.7978845608) / sigma))
    crossed = sides[0] * sides[1]
    shown = mean + swing * crossed
    first, second = (lamp * swing * bells[i] * sides[1 - i] for i in (0, 1))
    jacobian = np.empty((len(light), P, light.shape[1]), dtype=np.float32)
    jacobian[:, 0] = first * np.sin(one) + second * np.sin(two)
    jacobian[:, 1] = -first * np.cos(one) - second * np.cos(two)
    jacobian[:, 2] = -first * along[0]
    jacobian[:, 3] = -second * along[1]
    jacobian[:, 4] = -(first * away[0] + second * away[1])
    jacobian[:, 5] = lamp
    jacobian[:, 6] = lamp * crossed
    jacobian[:, 7] = shown * x
    jacobian[:, 8] = shown * y
    jacobian *= weight[:, None, :]
    rest = (light - lamp * shown) * weight
    normal = (jacobian @ jacobian.swapaxes(1, 2)).astype(np.float64)
    right = (jacobian @ rest[..., None])[..., 0].astype(np.float64)
    return normal, right, np.einsum("nk,nk->n", rest, rest).astype(np.float64)
