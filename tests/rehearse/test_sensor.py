"""Noise, pattern, clipping and firmware against their stated figures."""

from dataclasses import replace

import numpy as np
import pytest

from runner.rehearse.sensor import Firmware, Sensor, Sharpening

SENSOR = Sensor(
    quantum_efficiency=0.6,
    full_well_e=10500,
    read_noise_e=4.0,
    prnu=0.01,
    dsnu_e=6.0,
    dn_per_e=0.4,
    black_level=64,
    bit_depth=12,
)
SHAPE = (400, 500)
PIXELS = SHAPE[0] * SHAPE[1]


def _pair(photons: float) -> tuple[np.ndarray, np.ndarray]:
    pattern = SENSOR.pattern(SHAPE, np.random.default_rng(1))
    light = np.full(SHAPE, photons)
    first, second = (SENSOR.expose(light, pattern, np.random.default_rng(seed)) for seed in (2, 3))
    return first.astype(float), second.astype(float)


@pytest.mark.parametrize("photons", [0.0, 500.0, 11000.0])
def test_temporal_noise_is_that_of_the_photon_transfer_curve(photons: float) -> None:
    """Variance = K²(mean electrons + read noise²) + 1/12 DN²; EMVA 1288 Release 4.0, equation of the temporal noise.

    A variance from n pixels scatters by sqrt(2/n) = 0.3 %; four times that is allowed.
    """
    first, second = _pair(photons)

    stated = 0.4**2 * (0.6 * photons + 4.0**2) + 1 / 12

    assert (first - second).var() / 2 == pytest.approx(stated, rel=4 * np.sqrt(2 / PIXELS))


@pytest.mark.parametrize("photons", [0.0, 500.0, 11000.0])
def test_mean_follows_the_conversion(photons: float) -> None:
    """The mean code is black level + K × quantum efficiency × photons, within four standard errors."""
    first, _ = _pair(photons)

    assert first.mean() == pytest.approx(64 + 0.4 * 0.6 * photons, abs=4 * first.std() / np.sqrt(PIXELS))


def test_fixed_pattern_is_prnu_and_dsnu() -> None:
    """What two frames share has the spread K sqrt(DSNU² + (PRNU × electrons)²), within 4 sqrt(2/n) plus noise."""
    for photons in (0.0, 11000.0):
        first, second = _pair(photons)
        shared = ((first - first.mean()) * (second - second.mean())).mean()
        noise = (first - second).var() / 2  # a covariance of n pixels scatters by about (shared + noise)/sqrt(n)

        stated = 0.4**2 * (6.0**2 + (0.01 * 0.6 * photons) ** 2)

        assert shared == pytest.approx(stated, abs=6 * (stated + noise) / np.sqrt(PIXELS))


def test_codes_end_at_full_well_and_white_level() -> None:
    """A full pixel gives no more, and the converter ends at its highest code and at 0."""
    quiet = Sensor(1.0, 5000, 0.0, 0.0, 0.0, 0.4, 64, 12)
    flat = quiet.pattern((40, 40), np.random.default_rng(0))

    assert np.all(quiet.expose(np.full((40, 40), 9000.0), flat, np.random.default_rng(0)) == 64 + 2000)
    assert quiet.convert(np.array([[1e6, -1e6]])).tolist() == [[4095, 0]]
    assert quiet.convert(np.array([[1.2, 1.3]])).tolist() == [[64, 65]]


def test_sharpening_has_its_stated_transfer_function() -> None:
    """The transform of the firmware's response to one bright pixel is the stated function, in any direction."""
    mask = Sharpening(0.9, 1.0)
    point = np.zeros((65, 65))
    point[32, 32] = 1.0
    answer = mask.apply(point)
    rows, columns = np.mgrid[-32:33, -32:33]

    for f, angle in ((0.1, 0.0), (0.25, 5.0), (0.5, 33.0)):
        fx, fy = f * np.cos(np.deg2rad(angle)), f * np.sin(np.deg2rad(angle))
        transform = (answer * np.exp(-2j * np.pi * (fx * columns + fy * rows))).sum()
        assert mask.along(f, angle) == pytest.approx(transform, abs=1e-12)


def test_sharpening_leaves_a_flat_frame_alone() -> None:
    """A frame of one level keeps it, borders included."""
    assert Sharpening(0.9, 1.0).apply(np.full((20, 20), 700.0)) == pytest.approx(700.0)


def test_exposure_leaves_its_inputs_alone() -> None:
    """Light and pattern are not changed."""
    light = np.full((30, 30), 800.0)
    pattern = SENSOR.pattern((30, 30), np.random.default_rng(1))
    gain, offset = pattern.gain.copy(), pattern.offset_e.copy()

    SENSOR.expose(light, pattern, np.random.default_rng(2), Firmware(1.0, gain, Sharpening(0.5, 1.0)))

    assert np.array_equal(light, np.full((30, 30), 800.0))
    assert np.array_equal(pattern.gain, gain)
    assert np.array_equal(pattern.offset_e, offset)


def test_hot_pixels_have_shot_noise_of_their_own() -> None:
    """A dark signal of n electrons adds K n to the mean and K² n to the variance (EMVA 1288: dark current).

    A mean of n pixels scatters by σ/sqrt(n), a variance by sqrt(2/n); four times that is allowed.
    """
    pattern = replace(SENSOR.pattern(SHAPE, np.random.default_rng(1)), dark_e=np.full(SHAPE, 900.0))

    first, second = (SENSOR.expose(np.zeros(SHAPE), pattern, np.random.default_rng(n)).astype(float) for n in (2, 3))

    assert first.mean() == pytest.approx(64 + 0.4 * 900, abs=4 * first.std() / np.sqrt(PIXELS))
    stated = 0.4**2 * (900 + 4.0**2) + 1 / 12
    assert (first - second).var() / 2 == pytest.approx(stated, rel=4 * np.sqrt(2 / PIXELS))


def test_stuck_pixels_and_firmware_come_in_their_order() -> None:
    """A stuck code passes the shading correction like any other; what the readout adds comes before the converter."""
    quiet = Sensor(1.0, 10500, 0.0, 0.0, 0.0, 0.4, 64, 12)
    pattern = replace(quiet.pattern((4, 6), np.random.default_rng(0)), stuck={(1, 2): 264})
    gains = np.full((4, 6), 1.5)

    plain = quiet.expose(np.zeros((4, 6)), pattern, np.random.default_rng(0), Firmware(added_dn=10.0))
    corrected = quiet.expose(np.zeros((4, 6)), pattern, np.random.default_rng(0), Firmware(10.0, gains))

    assert (plain[0, 0], plain[1, 2]) == (64 + 10, 264)
    assert (corrected[0, 0], corrected[1, 2]) == (64 + 15, 64 + 300)
