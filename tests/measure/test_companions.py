"""Companions are cut like the region they serve; one that cannot be read is told from one that was never named."""

from collections.abc import Sequence
from types import SimpleNamespace
from typing import TYPE_CHECKING, cast

import numpy as np

from runner.capture.frame import Box, Frame
from runner.errors import FrameRefused
from runner.measure.companions import Companions
from runner.spec.model import Camera

if TYPE_CHECKING:
    from runner.measure.plan import Plan

MOSAIC = Camera(width=8, height=6, bit_depth=8, black_level=0, white_level=255, mosaic="RGGB")
BOX = Box(2, 2, 6, 4)


def _companions(calls: list[str]) -> Companions:
    def load(name: str) -> Sequence[Frame]:
        calls.append(name)
        if name == "lost":
            raise FrameRefused("broken", where="a.tif")
        return (Frame("d.tif", "", "", np.arange(48, dtype=np.uint8).reshape(6, 8)),)

    captures = [SimpleNamespace(capture=SimpleNamespace(name=n, camera=MOSAIC)) for n in ("dark", "lost", "faulty")]
    return Companions(cast("Plan", SimpleNamespace(captures=captures)), load, {"faulty": ("twice",)})


def test_a_companion_is_read_once_and_cut_alike() -> None:
    """Every region gets the same box of the companion's frames, in each colour channel with its own pixels."""
    calls: list[str] = []
    companions = _companions(calls)
    crops = companions.crops({"dark": "dark"}, BOX, "red")
    every = companions.by_channel({"dark": "dark"}, BOX)

    assert calls == ["dark"]
    assert crops["dark"][0].codes.tolist() == [[18, 19, 20, 21], [26, 27, 28, 29]]
    assert list(every["dark"]) == ["red", "green", "blue"]
    sites = [every["dark"][channel][0].sites for channel in every["dark"]]
    assert [int(np.sum(one)) for one in sites if one is not None] == [2, 4, 2]


def test_a_lost_companion_is_named() -> None:
    """A role whose capture has faults or cannot be read has no crops and stands among the lost ones."""
    companions = _companions([])
    uses = {"dark": "lost", "flat": "faulty"}

    assert companions.crops(uses, BOX, "red") == {}
    assert companions.by_channel(uses, BOX) == {}
    assert companions.lost(uses) == {"dark": "lost", "flat": "faulty"}
