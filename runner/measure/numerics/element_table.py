"""Elements of tri-bar resolution targets: their frequencies by group and number, and how the spec writes them.

    R = 2^(G + (E - 1)/6) line pairs per millimetre,

bars 1/(2R) wide and five times as long.

References:
    MIL-STD-150A (1959) 5.1.1.7.
"""

import re
from collections.abc import Mapping
from dataclasses import dataclass

STEP = 2 ** (1 / 6)
"""From one element to the next."""
HORIZONTAL, VERTICAL = "horizontal", "vertical"
_WRITTEN = re.compile(r"\s*(-?\d{1,2})\s*/\s*([1-6])\s+(horizontal|vertical)\s*")


@dataclass(frozen=True)
class Element:
    """One pattern of three bars."""

    group: int
    """G."""
    number: int
    """E, 1 to 6."""
    bars: str
    """How its bars run: `horizontal` or `vertical`."""

    @property
    def frequency(self) -> float:
        """Line pairs per millimetre on the target."""
        return float(2.0 ** (self.group + (self.number - 1) / 6))

    def __str__(self) -> str:
        """Return it as the spec writes it."""
        return f"{self.words} {self.bars}"

    @property
    def words(self) -> str:
        """`6/3`."""
        return f"{self.group}/{self.number}"


def read_element(written: object) -> Element:
    """Read `6/3 vertical`: group, number, and how the bars run.

    Raises:
        ValueError: It is not written so.
    """
    match = _WRITTEN.fullmatch(written) if isinstance(written, str) else None
    if match is None:
        raise ValueError(f"element is {written!r}; allowed is group/number and how its bars run, e.g. '6/3 vertical'")
    return Element(int(match[1]), int(match[2]), match[3])


def read_elements(asked: object) -> dict[str, Element]:
    """Read a mapping of regions to elements.

    Raises:
        TypeError: It is no mapping.
        ValueError: An element is not written as it must be.
    """
    if not isinstance(asked, Mapping):
        raise TypeError(f"elements is {asked!r}; allowed is a mapping of regions, e.g. {{a: 6/3 vertical}}")
    return {str(region): read_element(written) for region, written in asked.items()}
