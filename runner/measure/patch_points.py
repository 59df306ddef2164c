"""Points of a curve over frequency, one from each patch or group of a capture, for methods that gather them."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from runner.measure.contract import Scene
from runner.measure.reading import Reading, Refusal

Array = NDArray[np.float64]

SAME = 0.02
"""Patches whose frequencies differ by a smaller share are repeats of one frequency and averaged."""


@dataclass(frozen=True)
class Points:
    """Values at frequencies, rising; 0 is not among them."""

    f: Array
    """cy/px."""
    values: Array
    """Mean of the patches of each frequency."""
    own: Array
    """Standard uncertainty that belongs to each point alone."""
    shared: Mapping[str, Array]
    """Standard uncertainties that points have in common, by the shared word."""

    def u(self) -> Array:
        """Return the combined standard uncertainty of each point."""
        return np.sqrt(self.own**2 + sum((part**2 for part in self.shared.values()), np.zeros_like(self.own)))


def lost_patch(scene: Scene, quantity: str, word: str) -> Refusal | None:
    """Return why a patch is missing, or None where all of them are there.

    Args:
        scene: The capture, or a group of its regions.
        quantity: What each patch must have.
        word: What a patch is called, e.g. `group`.
    """
    if scene.lost:
        return Refusal(scene.lost[0].cause, f"{word} {scene.lost[0].region}: {scene.lost[0].because}")
    for reading in scene.steps[0].readings:
        if reading.quantity == quantity and reading.refusal is not None:
            return Refusal(reading.refusal.cause, f"{word} {reading.region}: {reading.refusal.because}")
    return None


def points_of(readings: Sequence[Reading], frequency: str, quantity: str) -> Points:
    """Return the points that patches make.

    Args:
        readings: Of all regions.
        frequency: Quantity that holds a patch's frequency.
        quantity: Quantity that is drawn over it.
    """
    at = {r.region: r.value for r in readings if r.quantity == frequency and r.value is not None}
    found = [(at[r.region], r) for r in readings if r.quantity == quantity and r.value is not None and r.region in at]
    groups: list[list[tuple[float, Reading]]] = []
    for f, reading in sorted(found, key=lambda one: one[0]):
        if groups and f - groups[-1][0][0] <= SAME * f:
            groups[-1].append((f, reading))
        else:
            groups.append([(f, reading)])
    words = sorted({c.shared for _, r in found for c in r.components if c.shared})
    return Points(
        np.array([_mean([f for f, _ in group]) for group in groups]),
        np.array([_mean([float(r.value or 0.0) for _, r in group]) for group in groups]),
        np.array([sqrt(sum(_part(r, None) ** 2 for _, r in group)) / len(group) for group in groups]),
        {word: np.array([_mean([_part(r, word) for _, r in group]) for group in groups]) for word in words},
    )


def _mean(values: Sequence[float]) -> float:
    return sum(values) / len(values)


def _part(reading: Reading, word: str | None) -> float:
    """Return the standard uncertainty that a reading shares under a word; None is what it shares with nobody."""
    return sqrt(sum(c.u**2 for c in reading.components if (c.shared or None) == word))
