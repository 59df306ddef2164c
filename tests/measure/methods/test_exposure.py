"""Level and clipping against scenes whose answer is counted by hand."""

from dataclasses import replace

import numpy as np
import pytest

from runner.capture.frame import Box, Frame, crop
from runner.errors import MeasurementRefused
from runner.measure.contract import Found, Sample
from runner.measure.methods import exposure
from runner.spec.model import Camera, Chart, Optics, Tone

CAMERA = Camera(width=40, height=30, bit_depth=12, black_level=64, white_level=4095)


def _readings(codes: np.ndarray, camera: Camera = CAMERA) -> dict[str, tuple[float | None, float | None]]:
    box = Box(0, 0, codes.shape[1], codes.shape[0])
    sample = Sample(
        Found("all", box), crop(Frame("a.tif", "", "", codes), box, camera), camera, Optics(), Chart(), wanted=()
    )
    return {r.quantity: (r.value, r.u) for r in exposure.measure(sample, exposure.read_options({})).readings}


def test_the_level_is_a_share_of_the_range() -> None:
    """Half-way between black and white level reads 50 %, without uncertainty when there is no noise."""
    codes = np.full((30, 40), (64 + 4095) / 2)

    assert _readings(codes)["level"] == pytest.approx((50.0, 0.0))


def test_clipping_counts_both_true_ends_of_the_range() -> None:
    """Pixels at 4095 of a 12-bit camera and at code 0 are clipped; a code below the black level is noise."""
    codes = np.full((30, 40), 1000, dtype=np.uint16)
    codes[0, :3] = 4095
    codes[1, :2] = 0
    codes[2, :5] = 60

    assert _readings(codes)["clipped"][0] == pytest.approx(100 * 5 / 1200)


def test_code_zero_is_ordinary_where_black_level_is_zero() -> None:
    """Without an offset, code 0 is a dark value like any other."""
    codes = np.zeros((30, 40), dtype=np.uint8)
    camera = replace(CAMERA, bit_depth=8, black_level=0, white_level=255)

    assert _readings(codes, camera)["clipped"][0] == 0


def test_the_levels_uncertainty_covers_its_error() -> None:
    """Over 1000 noisy regions the level's error is as large as stated: spread over u within 0.9 to 1.1."""
    rng = np.random.default_rng(1)
    ratios = []
    for _ in range(1000):
        codes = 2000 + rng.normal(0, 20, (30, 40))
        value, u = _readings(codes)["level"]
        assert value is not None
        assert u is not None
        ratios.append((value - 100 * (2000 - 64) / (4095 - 64)) / u)

    assert 0.9 < np.std(ratios) < 1.1  # 1000 draws: the sample's own scatter is 2.2 %; robust noise adds 3 %


def test_of_large_regions_only_the_noise_is_sampled() -> None:
    """Of 3 MP the level is the mean of all pixels, one clipped pixel is counted, and u is within 2 % of the noise's.

    The noise is that of 100 000 differences, known within 0.5 % (see `ENOUGH`): 2 % is four times that.
    """
    rng = np.random.default_rng(2)
    codes = np.round(rng.normal(2000, 20, (1500, 2000))).astype(np.uint16)
    codes[7, 13] = 4095
    read = _readings(codes)
    mean = sum(codes.ravel().tolist()) / codes.size

    assert read["level"][0] == pytest.approx(100 * (mean - 64) / (4095 - 64), rel=1e-12)
    assert read["level"][1] == pytest.approx(100 * 20 / np.sqrt(codes.size) / (4095 - 64), rel=0.02)
    assert read["clipped"][0] == pytest.approx(100 / codes.size)


@pytest.mark.parametrize("dtype", [np.uint8, np.float32])
def test_the_level_is_that_of_the_light(dtype: type) -> None:
    """Half of the pixels at sRGB 188, half at 0: 188 is 50.29 % of the light (IEC 61966-2-1), so 25.14 % in all."""
    camera = replace(CAMERA, bit_depth=8, black_level=0, white_level=255, tone=Tone("srgb"))
    codes: np.ndarray = np.zeros((30, 40), dtype=dtype)
    codes[::2] = 188

    assert _readings(codes, camera)["level"] == pytest.approx((50 * ((188 / 255 + 0.055) / 1.055) ** 2.4, 0.0))
    assert _readings(codes, camera)["level"][0] == pytest.approx(25.14, abs=0.01)


def test_a_region_without_a_pixel_of_the_channel() -> None:
    """One row of a mosaic may hold no blue at all: refused in words, not by a division by zero."""
    camera = replace(CAMERA, mosaic="RGGB")
    box = Box(0, 0, 40, 1)
    cut = crop(Frame("a.tif", "", "", np.ones((30, 40), dtype=np.uint16)), box, camera, "blue")

    with pytest.raises(MeasurementRefused, match="1 × 40 px, none of them blue"):
        exposure.measure(Sample(Found("all", box), cut, camera, Optics(), Chart(), wanted=()), exposure.Options())


def test_the_frame_is_not_changed() -> None:
    """Measuring never writes into the pixels."""
    codes = np.arange(1200, dtype=np.uint16).reshape(30, 40)
    before = codes.copy()

    _readings(codes)

    assert np.array_equal(codes, before)


def test_every_quantity_has_a_unit_and_a_sentence() -> None:
    """Listings can say what each quantity means."""
    assert set(exposure.quantities()) == {"level", "clipped"}
    assert exposure.quantity("mtf") is None


def test_a_mosaics_channel_counts_its_own_pixels_only() -> None:
    """Level and clipping of blue come from the blue quarter; other colours clip beside it unnoticed."""
    camera = replace(CAMERA, mosaic="RGGB")
    codes = np.full((30, 40), 4095, dtype=np.uint16)
    codes[1::2, 1::2] = 1000
    codes[1, 1] = 4095
    box = Box(0, 0, 40, 30)
    cut = crop(Frame("a.tif", "", "", codes), box, camera, "blue")
    found = exposure.measure(Sample(Found("all", box), cut, camera, Optics(), Chart(), wanted=()), exposure.Options())
    values = {r.quantity: r.value for r in found.readings}

    assert values["clipped"] == pytest.approx(100 / 300)
    assert values["level"] == pytest.approx(100 * (299 * 1000 + 4095 - 300 * 64) / 300 / (4095 - 64))
