"""Frames of a bench: windows, steps, stray light, colours and streams are those of scene and unit."""

from itertools import pairwise

import numpy as np
import pytest

from runner.rehearse import bench
from runner.rehearse.bench_captures import BenchCapture, BenchUnit, Step
from runner.rehearse.delivery import Shot
from runner.rehearse.denoising import Denoising
from runner.rehearse.mosaics import Mosaic
from runner.rehearse.optics import Transfer
from runner.rehearse.patches import Area, PatchChart
from runner.rehearse.sensor import Sensor
from runner.rehearse.sequences import SequenceFaults

SENSOR = Sensor(0.5, 9000.0, 3.0, 0.01, 1.0, 0.4, 64, 12)
HALF_BLACK = PatchChart((1.0, 1.0, 1.0), {"left": Area((-16.0, 0.0), (32.0, 64.0), (0.0, 0.0, 0.0))})


def _camera(own: BenchUnit) -> bench.Camera:
    pattern = SENSOR.pattern((48, 64), np.random.default_rng(5))
    system = Transfer(2.4, 0.55, 0.0, 1.2, 3.0)
    return bench.Camera(SENSOR, Mosaic("RGGB", (0.8, 1.0, 0.6)), pattern, lambda _x, _y: system, 1.0, own)


def _taken(capture: BenchCapture, own: BenchUnit | None = None) -> list[Shot]:
    seeds: dict[str, int] = {}

    def source(name: str) -> np.random.Generator:
        seeds[name] = len(seeds)
        return np.random.default_rng(seeds[name])

    return list(bench.shots([capture], _camera(own or BenchUnit()), 8000.0, source))


def test_even_light_gives_each_colour_its_electrons() -> None:
    """8000 photons × 0.5 × the colour's sensitivity × 0.4 DN/e- over black; 800 pixels tell it to 0.3 %."""
    (shot,) = _taken(BenchCapture("even", (64, 48), 1, None))

    colours = Mosaic().colours((48, 64))
    for colour, part in enumerate((0.8, 1.0, 0.6)):
        assert shot.codes[colours == colour].mean() - 64 == pytest.approx(1600 * part, rel=0.003)


def test_levels_and_windows_are_those_asked_for() -> None:
    """A step of half the light gives half the codes; a window is the middle of one and the same fixed pattern."""
    steps = (Step("50", light=0.5), Step("100"))
    shots = _taken(BenchCapture("series", (32, 16), 2, None, steps=steps))

    assert [(shot.step, shot.repeat) for shot in shots] == [("50", 1), ("50", 2), ("100", 1), ("100", 2)]
    levels = [shot.codes.mean() - 64 for shot in shots]
    assert levels[0] == pytest.approx(levels[2] / 2, rel=0.01)
    windows = ((64, 48), (32, 16))
    whole, part = (np.mean([s.codes for s in _taken(BenchCapture("x", w, 60, None))], axis=0) for w in windows)
    red = (slice(16, 32, 2), slice(16, 48, 2))  # 1 % of pattern, 13 DN, in the 2.9 DN that 60 frames leave of noise
    assert np.corrcoef(whole[red].ravel(), part[::2, ::2].ravel())[0, 1] > 0.85


def test_a_veil_takes_light_from_the_bright_and_gives_it_to_the_black() -> None:
    """Half of the picture is black: a veil of 10 % puts 5 % of white there, and leaves the mean."""
    capture = BenchCapture("glare", (64, 48), 1, HALF_BLACK)
    plain, veiled = (bench.lit(capture, Step(""), _camera(BenchUnit(veil=v))) for v in (0.0, 0.1))

    green = Mosaic().colours((48, 64)) == 1
    assert veiled[green].mean() == pytest.approx(plain[green].mean(), rel=1e-3)
    assert (veiled - plain)[20:28, 8:12][green[20:28, 8:12]].mean() == pytest.approx(0.05, abs=0.003)


def test_only_finished_frames_are_smoothed() -> None:
    """What firmware does is left out of frames straight from the sensor."""
    own = BenchUnit(denoising=Denoising(300.0, 2))
    noise = {}
    for firmware in (True, False):
        (shot,) = _taken(BenchCapture("even", (64, 48), 1, None, firmware=firmware), own)
        noise[firmware] = float(shot.codes[::2, ::2].std())

    assert noise[True] < 0.4 * noise[False]


def test_a_stream_says_its_counters_and_delivers_pixels_twice() -> None:
    """A lost frame leaves its number out; a repeated one has the pixels of the one before; times are 40 ms apart."""
    faults = SequenceFaults(lost=(2,), repeated=(4,))
    shots = _taken(BenchCapture("stream", (16, 16), 5, None, rate_hz=25.0), BenchUnit(stream=faults))

    said = [shot.said for shot in shots]
    assert [one["counter"] for one in said] == [1, 3, 4, 5]
    assert [one["time"][17:] for one in said] == ["00.000000Z", "00.080000Z", "00.120000Z", "00.160000Z"]
    same = [np.array_equal(a.codes, b.codes) for a, b in pairwise(shots)]
    assert same == [False, True, False]


def test_what_is_known_of_a_unit_is_plain_data() -> None:
    """Every fault is named."""
    known = bench.known(BenchUnit(veil=0.06, stream=SequenceFaults(lost=(3,)), mirrored=frozenset({"dots"})))

    assert (known["veil"], known["lost frames"], known["seen from behind"]) == (0.06, [3], ["dots"])
