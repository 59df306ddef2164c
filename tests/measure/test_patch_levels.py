"""A patch's level is that of its own pixels, with the noise of draws; what is not even is told with its number."""

import numpy as np
import pytest

from runner.capture.frame import Box, Frame, crop
from runner.errors import MeasurementRefused
from runner.measure.patch_levels import levels_of, part, refuse_uneven
from runner.spec.model import Camera, Tone

BOXES = [Box(4, 4, 36, 36), Box(44, 4, 76, 36)]


def _camera(**more: object) -> Camera:
    return Camera(80, 40, 12, 64, 4095, **more)  # type: ignore[arg-type]


def _codes(rng: np.random.Generator, noise: float = 20.0) -> np.ndarray:
    mean = np.full((40, 80), 1064.0)
    mean[:, 40:] = 2064.0
    return np.asarray(np.round(mean + noise * rng.standard_normal(mean.shape)).astype(np.uint16))


def test_levels_and_their_noise() -> None:
    """Codes over black 1000 and 2000, light their share of 4031; u is that of 1024 pixels, and of draws."""
    rng = np.random.default_rng(1)
    found = [
        levels_of(crop(Frame("a.tif", "", "", _codes(rng)), Box(0, 0, 80, 40), _camera()), BOXES) for _ in range(80)
    ]
    first = found[0]

    assert [level.code for level in first] == [pytest.approx(1000, abs=3), pytest.approx(2000, abs=3)]
    assert first[1].light == pytest.approx(2000 / 4031, abs=1e-3)
    assert first[0].count == 1024
    assert first[0].code_u == pytest.approx(20 / 32, rel=0.1)
    assert np.std([levels[0].code for levels in found]) == pytest.approx(20 / 32, rel=0.3)
    assert not any(level.clipped for level in first)
    assert max(level.uneven for level in first) == 0


def test_without_noise_whole_codes_are_the_doubt() -> None:
    """Codes that never change may hide half a step: 1/√12 DN, in light times the tone's slope."""
    frame = Frame("a.tif", "", "", np.full((40, 80), 2064, np.uint16))
    level = levels_of(crop(frame, Box(0, 0, 80, 40), _camera()), BOXES)[0]

    assert level.code_u == pytest.approx(1 / np.sqrt(12))
    assert level.light_u == pytest.approx(1 / np.sqrt(12) / 4031)


def test_a_mosaics_own_pixels_and_a_tone() -> None:
    """Of RGGB, red counts a quarter of the pixels; a tone changes light, never codes."""
    codes = _codes(np.random.default_rng(2))
    codes[0::2, 0::2] += 300
    camera = _camera(mosaic="RGGB", tone=Tone("gamma", gamma=2.0))
    whole = crop(Frame("a.tif", "", "", codes), Box(0, 0, 80, 40), camera, "red")
    level = levels_of(whole, BOXES)[0]

    assert level.count == 256
    assert level.code == pytest.approx(1300, abs=6)
    assert level.light == pytest.approx((1300 / 4031) ** 2, rel=0.01)
    assert part(whole, BOXES[1]).codes.shape == (32, 32)


def test_ends_of_the_range_and_uneven_patches() -> None:
    """Pixels at the white level or at code 0 make a patch clipped; a stain of a tenth over a quarter is told."""
    codes = _codes(np.random.default_rng(3))
    codes[10:20, 10:20] = 4095
    codes[20:36, 44:60] = np.round(0.85 * codes[20:36, 44:60]).astype(np.uint16)
    levels = levels_of(crop(Frame("a.tif", "", "", codes), Box(0, 0, 80, 40), _camera()), BOXES)

    assert levels[0].clipped
    assert levels[0].at_white == pytest.approx(100 / 1024)
    assert not levels[1].clipped
    with pytest.raises(MeasurementRefused, match=r"patch 1 is not even: its quarters differ by \d+ % of its level"):
        refuse_uneven([levels[1]])
