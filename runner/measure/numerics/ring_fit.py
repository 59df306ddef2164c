"""Sub-pixel centres of round marks: the picture of a disc with a hole is fitted where the mark lies on the chart.

Every pixel is carried back onto the chart by the view that is known up to now, so that perspective and distortion are
followed inside a mark: what is found is the picture of the mark's centre, not the centre of an ellipse. Rim and hole
are steps blurred by a Gaussian, of free size (printers spread ink), on a ground that slopes.

    light = g0 + gx x + gy y + a (Φ((R - ρ)/σ) - Φ((r - ρ)/σ)),   ρ² = (x - dx)² + (y - dy)²

References:
    Gauss-Newton least squares with the covariance of the residuals' variance: JCGM 100:2008, H.3.
    J. Heikkilä, IEEE Trans. Pattern Anal. Mach. Intell. 22 (2000) 1066 (centres of circles under perspective).
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from runner.capture.frame import Codes, Signal
from runner.measure.numerics.chart_pose import ChartPose

Real = NDArray[np.float64]

REACH = 1.4
"""Radii from the centre that are used: inside the quiet ground around a mark."""
MOST_PIXELS = 2500
"""Of one mark; of larger ones every second, third … row and column."""
STEPS = 12
LEAST_PIXELS = 60
MOST_MOVE = 0.5
"""Radii; a mark further from where the view has it is another thing."""


@dataclass(frozen=True)
class Centre:
    """A mark's centre."""

    x: float
    """px of the frame."""
    y: float
    """px of the frame."""
    u: float
    """Standard uncertainty of either, px."""


def fit_ring(
    codes: Codes, light: Callable[[Codes], Signal], pose: ChartPose, at: tuple[float, float], radii: tuple[float, float]
) -> Centre | None:
    """Return the picture of a mark's centre, or None where no such mark lies wholly in the frame.

    Args:
        codes: Rows × columns.
        light: Turns codes into light.
        pose: The view, good to half a mark's radius.
        at: The mark's centre on the chart, mm.
        radii: Of disc and hole, mm.
    """
    centre = np.array([at])
    px, slope = pose.to_frame(centre)[0], pose.slopes(centre)[0]
    scale = float(np.sqrt(abs(np.linalg.det(slope))))
    reach = REACH * radii[0] * np.linalg.norm(slope, axis=1)
    (x0, y0), (x1, y1) = np.floor(px - reach).astype(int), np.ceil(px + reach).astype(int)
    if x0 < 0 or y0 < 0 or x1 > codes.shape[1] or y1 > codes.shape[0]:
        return None
    stride = int(np.ceil(np.sqrt((x1 - x0) * (y1 - y0) / MOST_PIXELS)))
    ys, xs = np.mgrid[y0:y1:stride, x0:x1:stride]
    level = light(codes[y0:y1:stride, x0:x1:stride]).ravel()
    places = pose.to_chart(np.column_stack([xs.ravel() + 0.5, ys.ravel() + 0.5])) - centre
    near = np.hypot(places[:, 0], places[:, 1]) < REACH * radii[0]
    if int(near.sum()) < LEAST_PIXELS:
        return None
    found = _fitted(places[near], level[near], radii, 1 / scale)
    if found is None:
        return None
    dx, dy, u = found
    there = pose.to_frame(centre + np.array([dx, dy]))[0]
    return Centre(float(there[0]), float(there[1]), u * scale)


def _fitted(places: Real, level: Real, radii: tuple[float, float], pixel: float) -> tuple[float, float, float] | None:
    """Return the centre and its standard uncertainty, mm."""
    x, y = places.T
    outer, inner = radii
    distance = np.hypot(x, y)
    ground = float(np.median(level[distance > 1.15 * outer]))
    rim = float(np.median(level[(distance < 0.9 * outer) & (distance > 1.1 * inner)]))
    p = np.array([ground, 0.0, 0.0, rim - ground, 0.0, 0.0, 0.7 * pixel, outer, inner])
    slopes = np.empty((len(x), 9))
    slopes[:, 0], slopes[:, 1], slopes[:, 2] = 1.0, x, y
    for _ in range(STEPS):
        g0, gx, gy, a, dx, dy, sigma, big, small = p
        ex, ey = x - dx, y - dy
        rho = np.maximum(np.hypot(ex, ey), 1e-9)
        t, s = (big - rho) / sigma, (small - rho) / sigma
        ft, fs = (np.exp(-0.5 * z * z) / np.sqrt(2 * np.pi) for z in (t, s))
        profile = ndtr(t) - ndtr(s)
        rest = level - (g0 + gx * x + gy * y + a * profile)
        slopes[:, 3] = profile
        along = a * (ft - fs) / sigma / rho
        slopes[:, 4], slopes[:, 5] = along * ex, along * ey
        slopes[:, 6] = -a * (t * ft - s * fs) / sigma
        slopes[:, 7], slopes[:, 8] = a * ft / sigma, -a * fs / sigma
        try:
            step = np.linalg.solve(slopes.T @ slopes, slopes.T @ rest)
        except np.linalg.LinAlgError:
            return None
        step[4:6] = np.clip(step[4:6], -0.3 * outer, 0.3 * outer)
        p = p + step
        p[6] = float(np.clip(p[6], 0.25 * pixel, 0.6 * outer))
        p[7], p[8] = float(np.clip(p[7], 0.7 * outer, 1.3 * outer)), float(np.clip(p[8], 0.5 * inner, 1.5 * inner))
        if np.abs(step[4:6]).max() < 1e-4 * pixel:
            break
    if not np.all(np.isfinite(p)) or np.hypot(p[4], p[5]) > MOST_MOVE * outer:
        return None
    variance = float(rest @ rest) / (len(x) - 9)
    if variance > (0.25 * p[3]) ** 2:  # what lies there is no mark: its picture explains too little of it
        return None
    covariance = np.linalg.inv(slopes.T @ slopes) * variance
    return float(p[4]), float(p[5]), float(np.sqrt((covariance[4, 4] + covariance[5, 5]) / 2))
