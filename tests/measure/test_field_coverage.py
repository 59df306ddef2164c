"""Study: do stated uncertainties hold for gratings and even fields of mosaics, RGB frames and tone curves?

Run with `tests/run studies`; prints the tables that stand in DEVELOPERS.md; a small sample runs always. Scenes are
closed forms or planted; the promise is |value - truth| ≤ 2u in 93-97 % and spread/u in 0.8-1.25.
"""

from collections import defaultdict
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
import pytest

from runner.capture.frame import Box, Frame, crop
from runner.measure.contract import Found, Sample
from runner.measure.methods import banding, frame_noise, grating_response
from runner.measure.reading import Reading
from runner.spec.model import Camera, Chart, Optics, Tone
from tests.measure.flat_samples import read, sample
from tests.scenes.flats import Pattern, Shading, Values, wave
from tests.scenes.gratings import GratingScene

ORDERS = ("RGGB", "GRBG", "GBRG", "BGGR")
CHANNELS = ("red", "green", "blue")
KINDS = ("mosaic", "rgb", "srgb", "gamma 2.2")
BLACK, WHITE = 500, 65535
SPAN = WHITE - BLACK

Truth = dict[str, float]


@dataclass(frozen=True)
class Device:
    """One camera and the channel that is measured."""

    camera: Camera
    """Levels, tone and mosaic."""
    channel: str
    """Measured channel."""
    own: np.ndarray
    """Where its pixels lie, rows × columns."""

    def codes(self, light: Values) -> np.ndarray:
        """Return the frame of a light in DN over black; other colours hold half of it, less even by noise."""
        size, tone = np.abs(light) / SPAN, self.camera.tone
        if tone.kind == "srgb":  # IEC 61966-2-1
            size = np.where(size <= 0.0031308, 12.92 * size, 1.055 * size ** (1 / 2.4) - 0.055)
        elif tone.kind == "gamma":
            size = size ** (1 / float(tone.gamma or 1))
        toned = np.clip(np.round(BLACK + SPAN * np.sign(light) * size), 0, WHITE).astype(np.uint16)
        half = np.clip(np.round(BLACK + light / 2), 0, WHITE).astype(np.uint16)
        if self.camera.mosaic != "none":
            return np.where(self.own, toned, half)
        if self.channel == "mono":
            return toned
        return np.stack([toned if name == self.channel else half for name in CHANNELS], axis=2)


def device(kind: str, k: int, size: tuple[int, int]) -> Device:
    """Return the k-th camera of a kind, for frames of width × height."""
    w, h = size
    plain: dict[str, Any] = {"width": w, "height": h, "bit_depth": 16, "black_level": BLACK, "white_level": WHITE}
    everywhere = np.ones((h, w), dtype=bool)
    if kind == "mosaic":
        order, channel = ORDERS[k // 3 % 4], CHANNELS[k % 3]
        cell = np.array([letter == channel[0].upper() for letter in order]).reshape(2, 2)
        return Device(Camera(**plain, mosaic=order), channel, np.tile(cell, (h // 2 + 1, w // 2 + 1))[:h, :w])
    if kind == "rgb":
        return Device(Camera(**plain, colour="rgb"), CHANNELS[k % 3], everywhere)
    tone = Tone("srgb") if kind == "srgb" else Tone("gamma", 2.2)
    return Device(Camera(**plain, tone=tone), "mono", everywhere)


def gratings(kind: str, draws: int, rng: np.random.Generator) -> Iterator[tuple[dict[str, Reading], Truth]]:
    """Yield readings and truths of gratings of all frequencies that the channel's pixels tell, step/noise about 50."""
    for k in range(draws):
        size = (int(rng.integers(64, 100)), int(rng.integers(60, 90)))
        of = device(kind, k, size)
        turn, least = rng.uniform(-90, 90), 4 / min(size)
        f = rng.uniform(least, 0.2 if of.channel in {"red", "blue"} and kind == "mosaic" else 0.3)
        u = f * np.cos(np.radians(turn)), f * np.sin(np.radians(turn))
        scene = GratingScene(
            size, u, level=0.4, modulation=rng.uniform(0.2, 0.9), phase=rng.uniform(-3, 3),
            shading=(rng.uniform(-0.1, 0.1), rng.uniform(-0.1, 0.1)), noise=0.4 / 50,
        )  # fmt: skip
        frame = Frame("stripes.tif", "", "", of.codes(SPAN * scene.light(rng)))
        found = Found("patch", Box(0, 0, *size), geometry={"frequency_x": u[0], "frequency_y": u[1]})
        taken = Sample(found, crop(frame, found.box, of.camera, of.channel), of.camera, Optics(), Chart(), wanted=())
        readings = grating_response.measure(taken, grating_response.Options()).readings
        truth = {"modulation": 100 * scene.modulation, "grating_frequency": f, "grating_direction": turn}
        yield {reading.quantity: reading for reading in readings}, truth


def noises(kind: str, draws: int, rng: np.random.Generator) -> Iterator[tuple[dict[str, Reading], Truth]]:
    """Yield readings and truths of sets of 2 or 5 flats under a lens, with rows, columns and pixels of their own."""
    size = (160, 120)
    for k in range(draws):
        of = device(kind, k, size)
        pixel, row, column = Pattern(60, 30, 25).draw(size, rng)
        pattern = pixel + row + column
        shading = Shading(size, angle=20, axis=(rng.uniform(-9, 9), rng.uniform(-9, 9))).frame()
        light = 15000 * shading / shading.mean() + pattern
        frames = [of.codes(light + Pattern(80, 20, 15).sum(size, rng)) for _ in range(2 + 3 * (k % 2))]
        found = read(frame_noise.measure(sample(frames, of.camera, channel=of.channel), frame_noise.Options()))
        ys, xs = np.nonzero(of.own)
        kinds = [pattern[y::2, x::2] for y, x in {(y % 2, x % 2) for y, x in zip(ys, xs, strict=True)}]
        kinds = [pattern] if of.own.all() else kinds
        rows = [row[np.unique(ys)]] if len(kinds) == 1 else [row[0::2], row[1::2]]
        columns = [column[:, np.unique(xs)]] if len(kinds) == 1 else [column[:, 0::2], column[:, 1::2]]
        rms = [float(np.sqrt(np.mean([np.var(p, ddof=1) for p in parts]))) for parts in (kinds, rows, columns)]
        sent = float(np.sqrt(80**2 + 20**2 + 15**2))
        truth = {"temporal_noise": sent, "temporal_row_noise": 20.0, "temporal_column_noise": 15.0}
        truth |= dict(zip(("fixed_pattern_noise", "row_noise", "column_noise"), rms, strict=True))
        truth |= {"total_noise": float(np.hypot(sent, rms[0])), "mean_level": float(light[of.own].mean())}
        yield found, truth


def bands(kind: str, draws: int, rng: np.random.Generator) -> Iterator[tuple[dict[str, Reading], Truth]]:
    """Yield readings and truths of flats with a line each way, from a sixth to a half of the noise, under a lens."""
    size = (200, 160)
    for k in range(draws):
        of = device(kind, k, size)
        most = 0.23 if kind == "mosaic" and of.channel != "green" else 0.47
        at, planted = rng.uniform(0.06, most, 2), rng.uniform(10, 30, 2)
        lines = wave(160, at[0], planted[0], rng.uniform(0, 6))[:, None] + wave(200, at[1], planted[1])[None, :]
        light = 9000 * Shading(size, angle=15, axis=(4.0, 6.0)).frame() + lines + rng.normal(0, 60, (160, 200))
        found = read(banding.measure(sample([of.codes(light)], of.camera, channel=of.channel), banding.Options()))
        truth = {"row_banding": planted[0], "column_banding": planted[1]}
        yield found, truth | {"row_banding_frequency": at[0], "column_banding_frequency": at[1]}


STUDIES = {"gratings": gratings, "noise": noises, "bands": bands}


def scores(study: str, kind: str, draws: int, seed: int) -> tuple[dict[str, list[bool]], dict[str, list[float]]]:
    """Return, by quantity, whether ±2u or the bound held, and errors over u where there was a value."""
    held: dict[str, list[bool]] = defaultdict(list)
    errors: dict[str, list[float]] = defaultdict(list)
    for found, truth in STUDIES[study](kind, draws, np.random.default_rng(seed)):
        for name, true in truth.items():
            reading = found[name]
            if reading.value is None or reading.u is None:
                if reading.bound is not None:
                    held[name].append(true <= reading.bound[1])
                continue
            error = reading.value - true
            error = (error + 90) % 180 - 90 if name == "grating_direction" else error
            errors[name].append(error / reading.u)
            held[name].append(abs(errors[name][-1]) <= 2)
    return held, errors


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("study", STUDIES)
def test_a_small_sample(study: str, kind: str) -> None:
    """Over 24 captures ±2u (or the bound) holds in 85 % of all quantities or more; 95 % less three deviations of 72."""
    held, _ = scores(study, kind, 24, 5)

    assert np.mean([one for some in held.values() for one in some]) >= 0.85


@pytest.mark.study
@pytest.mark.parametrize("study", STUDIES)
def test_study_of_coverage(study: str) -> None:
    """Over 1200 captures, 300 of each kind: each quantity ≥ 93 %, 93-97 % together, spread/u 0.8-1.25.

    Three deviations of 300 draws, 3.8 %, are allowed for one quantity of one kind, of 1200 together 1.9 %.
    """
    pooled: dict[str, tuple[list[bool], list[float]]] = defaultdict(lambda: ([], []))
    for number, kind in enumerate(KINDS):
        held, errors = scores(study, kind, 300, 40 + number)
        for name, some in held.items():
            print(f"{study:9s} {kind:10s} {name:26s} {100 * np.mean(some):5.1f} {np.std(errors[name]):.2f}")
            assert np.mean(some) >= 0.93 - 0.038, (kind, name)
            pooled[name][0].extend(some)
            pooled[name][1].extend(errors[name])
    for name, (some, off) in pooled.items():
        print(f"| {name} | {len(some)} | {np.mean(off):.2f} | {np.std(off):.2f} | {100 * np.mean(some):.1f} |")
        assert np.mean(some) >= 0.93 - 0.019, name
        assert 0.8 < np.std(off) < 1.25, name
