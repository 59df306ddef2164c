"""The colour difference CIEDE2000, with all parametric factors 1.

References:
    ISO/CIE 11664-6 (CIEDE2000).
    G. Sharma, W. Wu, E. N. Dalal, Color Res. Appl. 30 (2005) 21 (implementation notes: mean of hues, zero chroma).
"""

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]


def ciede2000(one: Real, other: Real) -> Real:
    """Return the difference of two colours in L*, a*, b*.

    Args:
        one: (…, 3).
        other: (…, 3), broadcast.
    """
    l1, a1, b1 = (one[..., n] for n in range(3))
    l2, a2, b2 = (other[..., n] for n in range(3))
    c7 = _seventh((np.hypot(a1, b1) + np.hypot(a2, b2)) / 2)
    stretch = 1 + 0.5 * (1 - np.sqrt(c7 / (c7 + 25.0**7)))
    a1, a2 = stretch * a1, stretch * a2
    c1, c2 = np.hypot(a1, b1), np.hypot(a2, b2)
    h1, h2 = (_hue(a, b) for a, b in ((a1, b1), (a2, b2)))
    grey = c1 * c2 == 0
    dh = h2 - h1
    dh = np.where(grey, 0.0, np.where(dh > 180, dh - 360, np.where(dh < -180, dh + 360, dh)))
    turn = 2 * np.sqrt(c1 * c2) * np.sin(np.radians(dh) / 2)
    # the mean of hues lies on the shorter arc; without chroma the other colour's hue counts
    total, far = h1 + h2, np.abs(h1 - h2) > 180
    mean = np.where(far, np.where(total < 360, total + 360, total - 360), total) / 2
    mean = np.where(grey, total, mean)
    t = (
        1
        - 0.17 * np.cos(np.radians(mean - 30))
        + 0.24 * np.cos(np.radians(2 * mean))
        + 0.32 * np.cos(np.radians(3 * mean + 6))
        - 0.20 * np.cos(np.radians(4 * mean - 63))
    )
    light, chroma = ((l1 + l2) / 2 - 50) ** 2, (c1 + c2) / 2
    sl, sc, sh = 1 + 0.015 * light / np.sqrt(20 + light), 1 + 0.045 * chroma, 1 + 0.015 * chroma * t
    dl, dc, dt = (l2 - l1) / sl, (c2 - c1) / sc, turn / sh
    m7 = _seventh(chroma)
    rotation = -2 * np.sqrt(m7 / (m7 + 25.0**7)) * np.sin(np.radians(60 * np.exp(-(((mean - 275) / 25) ** 2))))
    return np.asarray(np.sqrt(np.maximum(dl**2 + dc**2 + dt**2 + rotation * dc * dt, 0)))


def _seventh(x: Real) -> Real:
    """Return the seventh power, which `**` takes five times as long for."""
    square = x * x
    return np.asarray(square * square * square * x)


def _hue(a: Real, b: Real) -> Real:
    """Return the hue angle, 0 to 360 degrees."""
    angle = np.degrees(np.arctan2(b, a))
    return np.asarray(np.where(angle < 0, angle + 360, angle))
