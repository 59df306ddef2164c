"""Flaws of a sensor: bands along rows or columns, and hot, dead and stuck pixels and weak columns."""

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from runner.rehearse.scene import Picture
from runner.rehearse.sensor import Pattern

MARGIN = 3
"""px between flawed pixels, so that none touches another and makes a cluster of it."""


@dataclass(frozen=True)
class Bands:
    """A sine that the readout adds to every row, or to every column, with another phase in each frame."""

    along: Literal["rows", "columns"]
    """`rows`: all pixels of a row get the same."""
    amplitude_dn: float
    """Half of peak to peak, DN."""
    frequency: float
    """From row to row, or from column to column, cy/px."""

    def picture(self, shape: tuple[int, int], rng: np.random.Generator) -> Picture:
        """Return what one frame gets, DN, to be added to rows × columns."""
        size = shape[0] if self.along == "rows" else shape[1]
        wave = self.amplitude_dn * np.cos(2 * np.pi * (self.frequency * np.arange(size) + rng.random()))
        return np.asarray(wave[:, None] if self.along == "rows" else wave[None, :])


@dataclass(frozen=True)
class Defects:
    """How many flawed pixels and columns a sensor has."""

    hot: int = 0
    """Pixels with a dark signal."""
    hot_e: float = 1000.0
    """Their dark signal in one frame, electrons; the weakest has half of it, the strongest twice."""
    dead: int = 0
    """Pixels that see no light."""
    stuck: int = 0
    """Pixels with one code whatever the light."""
    weak_columns: int = 0
    """Columns that see less light than their neighbours."""
    weakness: float = 0.05
    """How much less, as a share."""


def plant(pattern: Pattern, defects: Defects, top: int, rng: np.random.Generator) -> Pattern:
    """Return a sensor's pattern with its defects.

    Args:
        pattern: The sensor without them.
        defects: How many.
        top: Highest code; a stuck pixel has one between a fifth and four fifths of it.
        rng: Says where they are.
    """
    gain, hot, stuck = pattern.gain.copy(), pattern.dark_e.copy(), dict(pattern.stuck)
    columns = _columns(defects.weak_columns, gain.shape[1], rng)
    gain[:, columns] *= 1 - defects.weakness
    places = _places(defects.hot + defects.dead + defects.stuck, gain.shape, columns, rng)
    for y, x in places[: defects.hot]:
        hot[y, x] += defects.hot_e * 2 ** rng.uniform(-1, 1)
    for y, x in places[defects.hot : defects.hot + defects.dead]:
        gain[y, x] = 0.0
    for place in places[defects.hot + defects.dead :]:
        stuck[place] = int(rng.integers(top // 5, 4 * top // 5))
    return replace(pattern, gain=gain, dark_e=hot, stuck=stuck)


def planted(pattern: Pattern) -> Mapping[str, int]:
    """Return how many pixels of each kind a pattern holds."""
    return {
        "hot": int(np.count_nonzero(pattern.dark_e)),
        "dead": int(np.count_nonzero(pattern.gain == 0)),
        "stuck": len(pattern.stuck),
    }


def _columns(count: int, width: int, rng: np.random.Generator) -> NDArray[np.intp]:
    """Return columns away from the border and from one another."""
    slots = np.arange(10, width - 10, 2 * MARGIN)
    return np.sort(rng.permutation(slots)[:count])


def _places(
    count: int, shape: tuple[int, ...], columns: NDArray[np.intp], rng: np.random.Generator
) -> list[tuple[int, int]]:
    """Return places away from the border, from one another and from columns."""
    found: list[tuple[int, int]] = []
    while len(found) < count:
        y, x = (int(rng.integers(MARGIN, size - MARGIN)) for size in shape)
        alone = all(max(abs(y - b), abs(x - a)) > MARGIN for b, a in found)
        if alone and not np.any(np.abs(columns - x) <= MARGIN):
            found.append((y, x))
    return found
