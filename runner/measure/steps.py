"""Frames along a capture's axes: which belong to one step, in which order, and what an axis says in numbers."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Protocol

from runner.errors import UsageError
from runner.spec.model import Amount
from runner.spec.units import parse_amount

SIDECAR_FIELDS: Mapping[str, tuple[str, ...]] = {
    "exposure": ("exposure",),
    "level": ("level",),
    "z": ("position",),
    "distance": ("position",),
}
"""Fields of sidecars that say where along an axis a frame lies."""


@dataclass(frozen=True)
class Group:
    """The frames of one step."""

    axes: Mapping[str, str]
    """Axes without repeats, as the files' names say."""
    members: tuple[int, ...]
    """Places of its frames in the capture."""


def groups(axes_of_frames: Sequence[Mapping[str, str]], axes: Sequence[str]) -> tuple[Group, ...]:
    """Return the steps of a capture in the order of its frames; one step where there are no axes.

    Args:
        axes_of_frames: What each frame's name says.
        axes: Those along which frames are no repeats.
    """
    found: dict[tuple[str, ...], list[int]] = {}
    for place, said in enumerate(axes_of_frames):
        found.setdefault(tuple(said.get(axis, "") for axis in axes), []).append(place)
    return tuple(Group(dict(zip(axes, key, strict=True)), tuple(members)) for key, members in found.items())


class Placed(Protocol):
    """Anything with a place along axes: a crop of a frame, a step of a capture."""

    @property
    def axes(self) -> Mapping[str, str]:
        """What names of files say."""
        ...

    @property
    def taken(self) -> Mapping[str, Amount]:
        """What sidecars say."""
        ...


def position(placed: Placed, axis: str) -> Amount | None:
    """Return where along an axis a frame or a step lies: as its sidecar says, else as its name says.

    A name says it as a number with its unit (`lens-0.25mm.tif` for `lens-{z}.tif`, a comma or `p` in place of the
    point is not read) or as a plain number, which is then only a place in a row.
    """
    for name in SIDECAR_FIELDS.get(axis, ()):
        if name in placed.taken:
            return placed.taken[name]
    said = placed.axes.get(axis, "")
    try:
        return Amount(float(said), "1") if said.isdecimal() else parse_amount(said)
    except UsageError:
        return None
