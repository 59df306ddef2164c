"""Tri-bar targets of several elements: a frame drawn from closed-form patterns, and the way to its readings."""

from collections.abc import Mapping
from dataclasses import replace
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Frame, crop
from runner.measure.contract import Found, NotFound, Sample, Scene, Step, Wanted
from runner.measure.methods import resolving_power, tri_bar_contrast
from runner.measure.reading import Reading
from runner.measure.targets import tri_bar_elements
from runner.spec.model import Amount, Camera, Chart, Optics, Region
from tests.scenes.bars import ThreeBars

CELL = 56
"""px of a square cell, one pattern in each."""
CAMERA = Camera(width=6 * CELL, height=2 * CELL, bit_depth=16, black_level=1000, white_level=61000)
SCALE = 800.0
"""px per mm."""
ELEMENTS = {f"{way[0]}{number}": f"6/{number} {way}" for way in ("vertical", "horizontal") for number in range(1, 7)}
"""Group 6 in two rows: bars up and down, then bars across; periods 12.5 to 7.0 px."""


def period(number: int) -> float:
    """Return the period of an element of group 6, px."""
    return SCALE / (64 * 2 ** ((number - 1) / 6))


def pattern(region: str, **changes: Any) -> ThreeBars:
    """Return the closed form of a region's pattern."""
    turn = 0.05 if region[0] == "v" else 0.05 + np.pi / 2
    made = ThreeBars((CELL, CELL), (0.4, -0.3), period(int(region[1])), turn, 0.7, 0.2, 0.7)
    return replace(made, **changes)


def draw(noise: float = 0.004, seed: int = 1, sigma: float = 0.7) -> NDArray[np.float64]:
    """Return the target's light: dark bars on a bright ground."""
    out = _quiet(sigma)
    return out + np.random.default_rng(seed).normal(0, noise, out.shape)


@lru_cache(maxsize=8)
def _quiet(sigma: float) -> NDArray[np.float64]:
    out = np.empty((2 * CELL, 6 * CELL))
    for region in ELEMENTS:
        row, column = (0 if region[0] == "v" else 1), int(region[1]) - 1
        light = pattern(region, sigma=sigma).light()
        out[row * CELL : (row + 1) * CELL, column * CELL : (column + 1) * CELL] = light
    return out


def frame_of(light: NDArray[np.float64]) -> Frame:
    """Return light from 0 to 1 as a frame."""
    return Frame("target.tif", "", "", np.clip(np.round(1000 + 60000 * light), 0, 61000).astype(np.uint16))


def regions() -> list[Region]:
    """Return one region for each element."""
    size = Amount(CELL, "px"), Amount(CELL, "px")
    return [
        Region(
            name,
            (Amount((int(name[1]) - 0.5) * CELL, "px"), Amount((0.5 if name[0] == "v" else 1.5) * CELL, "px")),
            size,
        )
        for name in ELEMENTS
    ]


def locate(frame: Frame, elements: Mapping[str, str] | None = None, **options: Any) -> list[Found | NotFound]:
    """Return what the target finds."""
    asked = tri_bar_elements.read_options({"elements": dict(ELEMENTS if elements is None else elements), **options})
    return list(tri_bar_elements.locate([frame], regions(), CAMERA, asked))


def contrasts(frame: Frame, found: list[Found | NotFound], **companions: Any) -> tuple[Reading, ...]:
    """Return the readings of every region that was found."""
    made: list[Reading] = []
    for one in found:
        if isinstance(one, Found):
            sample = Sample(one, crop(frame, one.box, CAMERA), CAMERA, Optics(), Chart(), (), **companions)
            made += tri_bar_contrast.measure(sample, tri_bar_contrast.Options()).readings
    return tuple(made)


def resolve(frame: Frame, **options: Any) -> dict[str, Reading]:
    """Return resolving powers by quantity."""
    found = locate(frame)
    lost = tuple(one for one in found if isinstance(one, NotFound))
    step = Step({}, {}, (), contrasts(frame, found))
    wanted = tuple(Wanted(name, {}, {}) for name in resolving_power.quantities())
    scene = Scene("", tuple(ELEMENTS), (step,), lost, (336, 112), CAMERA, Optics(), Chart(), wanted)
    asked = resolving_power.read_options({"elements": dict(ELEMENTS), **options})
    return {r.quantity: r for r in resolving_power.gather(scene, asked).readings}
