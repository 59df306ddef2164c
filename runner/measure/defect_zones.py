"""Defects by zone: the middle of a region, and what lies around it.

A pixel belongs where it lies. A cluster belongs to the centre if one of its pixels does, a column or row if it runs
through the centre, a blemish if its middle does: the centre is the zone of which more is asked.

References:
    Zones of a sensor with limits of their own: common practice, no source.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from runner.measure.numerics.defects import Cluster, Defect
from runner.measure.numerics.large_defects import Blemish, LineDefect

CENTRE, OUTER = "centre", "outer"
"""Words that end a quantity of one zone."""
SIDES = {"row": 0, "column": 1}
"""Axis of the array along which rows and columns are counted."""


@dataclass(frozen=True)
class Zone:
    """One of the two zones of an array."""

    shape: tuple[int, int]
    """Rows and columns of the array."""
    share: float
    """Share of its rows and of its columns that the centre takes."""
    inner: bool
    """It is the centre, else what lies around."""

    @property
    def size(self) -> int:
        """Number of its pixels."""
        rows, columns = (len(range(*self._ends(side))) for side in self.shape)
        return rows * columns if self.inner else self.shape[0] * self.shape[1] - rows * columns

    @property
    def lines(self) -> tuple[int, int]:
        """How many rows and columns belong to it."""
        inside = [len(range(*self._ends(side))) for side in self.shape]
        rows, columns = inside if self.inner else [s - n for s, n in zip(self.shape, inside, strict=True)]
        return rows, columns

    def pixels(self, of: Sequence[Defect]) -> list[Defect]:
        """Return the pixels that lie in it."""
        return [one for one in of if self._is_in(one.y, one.x) is self.inner]

    def clusters(self, of: Sequence[Cluster]) -> tuple[Cluster, ...]:
        """Return its clusters."""
        return tuple(one for one in of if any(self._is_in(y, x) for x, y in one.pixels) is self.inner)

    def through(self, of: Sequence[LineDefect]) -> tuple[LineDefect, ...]:
        """Return its columns and rows."""
        return tuple(one for one in of if self._along(one.at, SIDES[one.direction]) is self.inner)

    def blemishes(self, of: Sequence[Blemish], rows: int) -> tuple[Blemish, ...]:
        """Return its blemishes.

        Args:
            of: Their middles count from the outer corner.
            rows: Rows of the array in one of the blemishes' rows: 2 for the green of a mosaic.
        """
        return tuple(one for one in of if self._is_in(rows * one.y - 0.5, one.x - 0.5) is self.inner)

    def _is_in(self, row: float, column: float) -> bool:
        return self._along(row, SIDES["row"]) and self._along(column, SIDES["column"])

    def _along(self, at: float, side: int) -> bool:
        first, end = self._ends(self.shape[side])
        return first <= at <= end - 1

    def _ends(self, side: int) -> tuple[int, int]:
        """Return the first row or column of the centre and the one after its last."""
        margin = round(side * (1 - self.share) / 2)
        return margin, side - margin


def split(quantity: str) -> tuple[str, str]:
    """Return a quantity's name without its zone, and the zone: `hot_pixels_centre` is `hot_pixels` of the centre."""
    name, _, zone = quantity.rpartition("_")
    return (name, zone) if zone in {CENTRE, OUTER} else (quantity, "")
