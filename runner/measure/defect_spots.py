"""Places and words of defects: every pixel, column, row, cluster and blemish of an array, where it lies in the frame.

Columns and rows count from 0; what is extended lies at its middle, in the same count.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from heapq import nlargest

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Box
from runner.measure import planes
from runner.measure.numerics.defects import Cluster, Defect
from runner.measure.numerics.large_defects import Blemish, LineDefect
from runner.measure.reading import Spot


@dataclass(frozen=True)
class Listed:
    """Makes places in the frame of what was found, each with its weight in the list."""

    region: str
    """Region's name."""
    box: Box
    """Where it lies."""
    frames: planes.Stack
    """The frames."""
    mean: NDArray[np.float32]
    """Their mean."""

    def strongest(
        self,
        most: int,
        pixels: Sequence[Defect],
        lines: Sequence[LineDefect] = (),
        groups: Sequence[Cluster] = (),
        blemishes: Sequence[Blemish] = (),
    ) -> tuple[Spot, ...]:
        """Return the strongest spots: columns, rows, clusters and blemishes before single pixels.

        Args:
            most: Number of spots at most.
            pixels: Single pixels of any kinds.
            lines: Columns and rows.
            groups: Clusters.
            blemishes: Blemishes, of `planes.square` pixels.
        """
        large = [(abs(one.significance), self._line(one)) for one in lines]
        large += [(float(one.size), self._cluster(one)) for one in groups]
        large += [(abs(one.significance), self._blemish(one)) for one in blemishes]
        first = [spot for _, spot in nlargest(most, large, key=lambda one: one[0])]
        single = nlargest(most - len(first), pixels, key=lambda one: abs(one.significance))
        return (*first, *(self._pixel(one) for one in single))

    def _spot(self, kind: str, place: tuple[float, float], words: str) -> Spot:
        return Spot(self.region, kind, float(place[0]), float(place[1]), words)

    def _pixel(self, one: Defect) -> Spot:
        departs = f"{_figure(100 * abs(one.contrast))} % {'above' if one.contrast > 0 else 'below'} its neighbours"
        words = {
            "hot": f"{_figure(one.contrast)} DN above its neighbours",
            "stuck": f"the same code in all {len(self.frames.frames)} frames",
            "blinking": f"{_figure(one.contrast)} times its neighbours' scatter from frame to frame",
        }.get(one.kind, departs)
        if one.kind in {"hot", "dead", "dim", "bright"}:
            words += f", {_figure(abs(one.significance))} times the noise"
        return self._spot(f"{one.kind} pixel", self.frames.grid.pixel(one.y, one.x), words)

    def _cluster(self, group: Cluster) -> Spot:
        places = np.array([self.frames.grid.pixel(y, x) for x, y in group.pixels], dtype=np.float64)
        return self._spot("cluster", tuple(places.mean(axis=0)), f"{group.size} defective pixels that touch")

    def _line(self, line: LineDefect) -> Spot:
        box, grid = self.box, self.frames.grid
        middle = (box.x0 + box.x1 - 1) / 2, (box.y0 + box.y1 - 1) / 2
        if line.direction == "row":
            place = middle[0], float(grid.pixel(line.at, 0)[1])
        else:
            place = float(grid.pixel(self._first(line.at), line.at)[0]), middle[1]
        way = "above" if line.contrast > 0 else "below"
        words = f"{_figure(abs(line.contrast))} DN {way} its neighbours"
        words += f", {_figure(abs(line.significance))} times their noise"
        return self._spot(f"defective {line.direction}", place, words)

    def _first(self, at: int) -> int:
        """Return which rows, even or odd, a column of the array departs in: of green they are two of the frame."""
        if not self.frames.grid.shift:
            return 0
        near = [i for i in range(at - 3, at + 4) if i != at and 0 <= i < self.mean.shape[1]]
        away = [self.mean[i::2, at].mean() - self.mean[i::2, near].mean() for i in (0, 1)]
        return int(np.argmax(np.abs(away)))

    def _blemish(self, one: Blemish) -> Spot:
        grid = self.frames.grid
        rows = 2 if grid.shift else 1
        x, y = grid.point(rows * one.y, one.x)
        way = "brighter" if one.contrast > 0 else "darker"
        words = f"{100 * abs(one.contrast):.2g} % {way} than around it, {grid.across * one.size:.0f} px wide"
        return self._spot("blemish", (x - 0.5, y - 0.5), words)


def _figure(value: float) -> str:
    """Return a number in three digits, or all before the point of a larger one."""
    return f"{value:.0f}" if value >= 100 else f"{value:.3g}"
