"""Slanted edges on the pixels of one colour of a mosaic: as good as any edge with as many pixels on it.

Green has a half, red and blue a quarter of the pixels: an edge twice or four times as long has as many pixels on it as
one in a plain region, and is held to that region's limits: MTF50's rms error over the set, and no capture worse than
three times that. All four orders of the filters, all colours, other colours' pixels filled with another edge. Angles
are those of the standard up to 10°, and every other one up to 42°, where a region must be wider too for a longer edge.

Run the study with `tests/run studies`; a small sample runs always.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
import pytest

from runner.errors import MeasurementRefused
from runner.measure.reading import Reading
from tests.measure.edge_samples import measure, value_of
from tests.scenes.edges import Codes, EdgeScene
from tests.scenes.line_spreads import Exponential, Gaussian, Pupil, triangle

ORDERS = ("RGGB", "GRBG", "GBRG", "BGGR")
CHANNELS = ("red", "green", "blue")
SPREADS = (Gaussian(0.6), Pupil(0.6), Gaussian(1.0), Pupil(0.7, coma=0.4), triangle(2.5), Exponential(0.4))
STEP = 32000.0
SIZES = {"40 × 60": (40, 60), "80 × 120": (80, 120), "200 × 300": (200, 300)}
LIMITS = {
    (100, "40 × 60"): 0.9,
    (100, "80 × 120"): 0.6,
    (100, "200 × 300"): 0.45,
    (30, "40 × 60"): 2.8,
    (30, "80 × 120"): 1.8,
    (30, "200 × 300"): 1.3,
}
"""Rms error of MTF50, %, by step over noise and the size of a plain region with as many pixels on the edge."""
NOISELESS = 0.5
"""The same without noise."""


@dataclass(frozen=True)
class Capture:
    """One edge in a mosaic."""

    scene: EdgeScene
    """As the measured colour sees it."""
    order: str
    """Filters."""
    channel: str
    """Measured colour."""

    def render(self, rng: np.random.Generator | None = None) -> Codes:
        """Return its codes: other colours see the edge displaced, turned and of other levels."""
        codes = self.scene.render(rng)
        others = replace(self.scene, direction=self.scene.direction + 3, offset=2.0, low=3000.0, high=20000.0).render()
        cell = np.array([letter == self.channel[0].upper() for letter in self.order]).reshape(2, 2)
        rows, columns = codes.shape
        own = np.tile(cell, (rows // 2 + 1, columns // 2 + 1))[:rows, :columns]
        return np.where(own, codes, others)

    def read(self, rng: np.random.Generator | None = None) -> Reading:
        """Return the reading of MTF50."""
        return measure(self.scene, self.render(rng), mosaic=self.order, channel=self.channel)["mtf50"]


def captures(alike: str, draws: int, rng: np.random.Generator, noise: float = 0.0) -> Iterator[Capture]:
    """Yield captures whose colour has as many pixels on the edge as a plain region of the given size."""
    for k in range(draws):
        channel = CHANNELS[k % 3]
        longer = 2 if channel == "green" else 4
        width, height = SIZES[alike]
        wide = k % 2 == 1 and not alike.startswith("200")
        scene = EdgeScene(
            SPREADS[k // 2 % len(SPREADS)],
            (width * (longer if wide else 1) + k % 2, height * longer + k // 2 % 2),
            (rng.uniform(10, 42) if wide else rng.uniform(2.7, 9.8)) + 180 * (k % 4 > 1),
            offset=rng.uniform(-0.5, 0.5),
            read_noise=noise,
        )
        yield Capture(scene, ORDERS[k // 3 % 4], channel)


def errors(alike: str, draws: int, ratio: float | None, seed: int) -> tuple[list[float], list[float], int]:
    """Return errors of MTF50 in %, the same over u, and how many captures were refused."""
    rng = np.random.default_rng(seed)
    off: list[float] = []
    scores: list[float] = []
    refused = 0
    for one in captures(alike, draws, rng, STEP / ratio if ratio else 0.0):
        try:
            reading = one.read(rng if ratio else None)
        except MeasurementRefused:
            refused += 1
            continue
        true = one.scene.mtf50()
        off.append(100 * (value_of(reading) / true - 1))
        scores.append((value_of(reading) - true) / (reading.u or 1e-9))
    return off, scores, refused


def _rms(values: list[float]) -> float:
    return float(np.sqrt(np.mean(np.square(values))))


@pytest.mark.parametrize("order", ORDERS)
def test_noiseless(order: str) -> None:
    """Without noise every colour of every order is within 0.5 %, exactly as 40 × 60 px of a plain frame must be."""
    rng = np.random.default_rng(1)
    for one in captures("40 × 60", 6, rng):
        reading = replace(one, order=order).read()
        assert abs(value_of(reading) / one.scene.mtf50() - 1) < NOISELESS / 100, one


def test_a_small_sample() -> None:
    """At step/noise 100, as many pixels on the edge as 40 × 60: 24 captures have an rms below 0.9 %, none is 2.7 %."""
    off, scores, refused = errors("40 × 60", 24, 100, 2)

    assert refused == 0
    assert _rms(off) < LIMITS[100, "40 × 60"]
    assert max(map(abs, off)) < 3 * LIMITS[100, "40 × 60"]
    assert np.mean(np.abs(scores) <= 2) >= 0.85


@pytest.mark.study
def test_study_of_limits() -> None:
    """All sizes and noises: rms below the limit; one capture in a hundred may be refused, or be three times that off.

    Refused is red at atan 1/2, where its samples lie 0.79 px apart. A pupil with coma reaches three times the limit of
    all spreads in plain frames too: rms 2.2 %, worst 5.4 % of 60 captures of 80 × 120 px at step/noise 30.
    """
    every: list[float] = []
    broken: list[str] = []
    for (ratio, alike), limit in LIMITS.items():
        off, scores, refused = errors(alike, 24 if alike.startswith("200") else 120, ratio, 10 * ratio + len(alike))
        every += scores
        worst, beyond = max(map(abs, off)), sum(abs(one) > 3 * limit for one in off)
        line = f"{ratio:4d} {alike:10s} n {len(off):3d} rms {_rms(off):.2f} % worst {worst:.2f} % limit {limit} %"
        print(f"{line} spread/u {np.std(scores):.2f} held {100 * np.mean(np.abs(scores) <= 2):.1f} refused {refused}")
        if _rms(off) > limit or beyond > max(1, 0.01 * len(off)) or refused > max(1, 0.01 * len(off)):
            broken.append(line)
    held = float(np.mean(np.abs(every) <= 2))
    print(f"| mtf50 of mosaics | {len(every)} | {np.mean(every):.2f} | {np.std(every):.2f} | {100 * held:.1f} |")
    assert broken == []
    slack = 3 * (0.05 * 0.95 / len(every)) ** 0.5  # three deviations of a share of so many
    assert 0.93 - slack <= held <= 0.97 + slack
    assert 0.8 < np.std(every) < 1.25
