"""Gratings as nobody meant them: narrow patches, axes and a hair off them, few codes, cut troughs, fine stripes.

From frame to reading as the session does it: found in the grey picture of all colours, measured in each.
"""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from runner.capture.frame import Frame, crop
from runner.capture.mosaic import grey
from runner.errors import MeasurementRefused
from runner.measure.contract import Found, Sample
from runner.measure.methods import grating_response
from runner.measure.reading import Reading
from runner.measure.targets import sinusoidal_grating
from runner.spec.model import Amount, Camera, Chart, Optics, Region
from tests.scenes.gratings import GratingScene

CAMERA = Camera(width=120, height=100, bit_depth=16, black_level=1000, white_level=61000)


def _codes(light: np.ndarray, camera: Camera) -> np.ndarray:
    codes = np.round(camera.black_level + light * (camera.white_level - camera.black_level))
    return np.clip(codes, 0, camera.white_level).astype(np.uint8 if camera.bit_depth == 8 else np.uint16)


def _read(codes: np.ndarray, camera: Camera) -> dict[str, dict[str, Reading]]:
    """Return the readings of every channel by quantity."""
    frame = Frame("stripes.tif", "", "", codes)
    whole = Region("patch", (Amount(50, "%"), Amount(50, "%")), (Amount(100, "%"), Amount(100, "%")))
    seen = replace(frame, codes=grey(codes, camera))
    (found,) = sinusoidal_grating.locate([seen], [whole], camera, sinusoidal_grating.Options())
    assert isinstance(found, Found), found
    read = {}
    for channel in camera.channels:
        taken = Sample(found, crop(frame, found.box, camera, channel), camera, Optics(), Chart(), wanted=())
        measured = grating_response.measure(taken, grating_response.Options())
        read[channel] = {one.quantity: one for one in measured.readings}
    return read


def _close(read: dict[str, Reading], frequency: float, direction: float, modulation: float) -> None:
    found: dict[str, Any] = {name: one.value for name, one in read.items()}
    assert found["modulation"] == pytest.approx(100 * modulation, rel=0.002)
    assert found["grating_frequency"] == pytest.approx(frequency, abs=1e-4)
    assert (found["grating_direction"] - direction + 90) % 180 - 90 == pytest.approx(0, abs=0.02)


@pytest.mark.parametrize("size", [(400, 40), (40, 400), (33, 57)])
@pytest.mark.parametrize("direction", [0.0, 90.0, 45.0, 0.3, 89.7, -45.3])
def test_narrow_patches(size: tuple[int, int], direction: float) -> None:
    """2.9 to 31 periods along axes, diagonals and a hair off them keep the bars: 0.2 %, 1e-4 cy/px, 0.02°."""
    turn = np.radians(direction)
    span = abs(np.cos(turn)) * size[0] + abs(np.sin(turn)) * size[1]
    for periods in (2.9, 5.0, 13.0, 31.0):
        f = periods / span
        u = f * np.cos(turn), f * np.sin(turn)
        if max(np.abs(u)) > 0.45:
            continue
        scene = GratingScene(size, u, phase=2.0, fill=1.0, shading=(0.15, -0.1))
        camera = replace(CAMERA, width=size[0], height=size[1])
        _close(_read(_codes(scene.light(), camera), camera)["mono"], f, direction, scene.seen_modulation)


@pytest.mark.parametrize("order", ["RGGB", "GRBG", "GBRG", "BGGR"])
@pytest.mark.parametrize(("frequency", "direction"), [(0.11, 45.0), (0.31, 5.0), (0.4, 90.0), (0.45, 3.0)])
def test_fine_stripes_of_a_mosaic(order: str, frequency: float, direction: float) -> None:
    """Stripes up to 0.45 cy/px are found as they are, not as what unlike colours make of them, and hold the bars.

    Red has a quarter of green's light: in the grey picture the beat at 0.05 cy/px is stronger than the stripes.
    """
    camera = replace(CAMERA, mosaic=order)
    turn = np.radians(direction)
    light = np.empty((100, 120))
    for letter, level in (("R", 0.15), ("G", 0.6), ("B", 0.3)):
        own = np.tile(np.array([one == letter for one in order]).reshape(2, 2), (50, 60))
        scene = GratingScene(
            (120, 100), (frequency * np.cos(turn), frequency * np.sin(turn)), level=level, modulation=0.5, phase=0.7
        )
        light[own] = scene.light()[own]
    for read in _read(_codes(light, camera), camera).values():
        _close(read, frequency, direction, 0.5)


@pytest.mark.parametrize(("codes", "noise"), [(3, 0.0), (10, 0.0), (3, 0.3), (10, 0.3)])
def test_gratings_of_few_codes(codes: int, noise: float) -> None:
    """In 8 bit, 3 or 10 codes from trough to crest: modulation is within 3 u, and u tells what rounding leaves.

    Without noise 3 codes may be 15 % off. Over 20 captures the rms of errors over u is 0.4 to 1.3.
    """
    rng = np.random.default_rng(4)
    camera = replace(CAMERA, bit_depth=8, black_level=0, white_level=255)
    off = []
    for _ in range(20):
        turn, level = rng.uniform(-1.5, 1.5), 100 + rng.uniform()
        u = 0.09 * np.cos(turn), 0.09 * np.sin(turn)
        scene = GratingScene(
            (120, 100), u, level=level / 255, modulation=codes / 2 / level, phase=rng.uniform(-3, 3), noise=noise / 255
        )
        reading = _read(_codes(scene.light(rng), camera), camera)["mono"]["modulation"]
        off.append(((reading.value or 0) - 100 * scene.modulation) / (reading.u or 1))

    assert max(map(abs, off)) < 3
    assert 0.4 < np.sqrt(np.mean(np.square(off))) < 1.3


def test_troughs_cut_at_code_0() -> None:
    """Without a black level noise in dark troughs is cut at code 0 as well, which costs 12 % here: it is refused."""
    camera = replace(CAMERA, black_level=0, white_level=65535)
    scene = GratingScene((120, 100), (0.061, 0.023), level=0.02, modulation=1.0, noise=0.01)

    with pytest.raises(MeasurementRefused, match=r"1[34]\.\d+ % of the patch's pixels lie at an end of the range"):
        _read(_codes(scene.light(np.random.default_rng(5)), camera), camera)


@pytest.mark.parametrize("ratio", [50, 20])
def test_noise_stays_near_the_bound(ratio: float) -> None:
    """Modulation and frequency scatter by at most 1.3 times the Cramér-Rao bound, at step/noise 50 and 20.

    Rife and Boorstyn (1974): amplitude σ √(2/N), frequency along x σ √24 / (2π A W √N). 120 draws tell the scatter
    within 6.5 %; at 60 % modulation the step is twice the amplitude.
    """
    rng = np.random.default_rng(6)
    amplitude, count = 0.3, 120 * 100
    noise = 2 * amplitude / ratio
    values = []
    for _ in range(120):
        scene = GratingScene((120, 100), (0.0831, 0.0), phase=rng.uniform(-3, 3), noise=noise)
        read = _read(_codes(scene.light(rng), CAMERA), CAMERA)["mono"]
        values.append((read["modulation"].value or 0, read["grating_frequency"].value or 0))
    modulation, frequency = np.std(values, axis=0)

    level = noise / np.sqrt(count) * 0.6  # the level's own share of the ratio
    bound = 100 * np.hypot(noise * np.sqrt(2 / count), level) / 0.5
    assert modulation < 1.3 * bound
    assert frequency < 1.3 * noise * np.sqrt(24 / count) / (2 * np.pi * amplitude * 120)
