"""A star whose light follows a sine around its centre, painted on cells."""

from dataclasses import dataclass

import numpy as np

from runner.rehearse.optics import Values
from runner.rehearse.scene import Picture


@dataclass(frozen=True)
class Star:
    """The star as it was printed."""

    cycles: int
    """Cycles around it."""
    diameter_mm: float
    """Outer diameter; around it lies its mean."""
    modulation: float
    """(bright - dark) / (bright + dark)."""
    level: float
    """Mean light relative to a white board."""
    centre_mm: tuple[float, float] = (0.0, 0.0)
    """Its centre from the chart's middle."""

    def paint(self, x: Values, y: Values, side: float) -> Picture:
        """Return the mean light of cells, stripes taken for straight inside one."""
        u, v = x - self.centre_mm[0], y - self.centre_mm[1]
        r = np.maximum(np.hypot(u, v), 1e-6)
        across = self.cycles * side / (2 * np.pi * r)  # cycles that a cell holds, along the circle
        held = np.sinc(np.minimum(across * np.abs(v) / r, 1)) * np.sinc(np.minimum(across * np.abs(u) / r, 1))
        rim = np.clip(0.5 + (self.diameter_mm / 2 - r) / side, 0, 1)
        return np.asarray(self.level * (1 + self.modulation * held * rim * np.cos(self.cycles * np.arctan2(v, u))))
