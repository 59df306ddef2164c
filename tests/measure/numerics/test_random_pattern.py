"""Patterns are what their recipe says, drawn anew the same to the last bit."""

import numpy as np
import pytest

from runner.measure.numerics.random_pattern import dead_leaves, noise
from tests.scenes.random_patterns import NoiseScene


def test_noise_has_its_spectrum() -> None:
    """Every ring of waves has the power |k|^-slope exactly, the range holds it, and a second draw is the same."""
    cells, slope = 128, 1.6
    raster = noise(3, cells, slope, 0.1, 0.9)
    k = np.fft.fftfreq(cells) * cells
    size = np.hypot(k[:, None], k[None, :])
    power = np.abs(np.fft.fft2(raster - raster.mean())) ** 2
    inside = (size > 0) & (size < cells / 2)
    scaled = power[inside] * size[inside] ** slope

    assert scaled.max() / scaled.min() - 1 < 1e-9
    assert np.all(power[~inside] < 1e-12 * power.max())
    assert raster.std() == pytest.approx(0.09 * 0.8)
    assert 0.1 < raster.min() < raster.max() < 0.9
    noise.cache_clear()
    assert np.array_equal(noise(3, cells, slope, 0.1, 0.9), raster)


def test_noise_is_the_one_of_the_published_recipe() -> None:
    """A renderer that draws the pattern by itself gets the same values at the cells' centres."""
    scene = NoiseScene(
        size=(64, 64), cells=64, seed=9, cells_per_px=1.0, turn=0.0, transfer=np.ones_like, light=1.0, slope=1.8
    )
    spectrum = np.fft.fft2(scene.picture())
    pixel = np.sinc(np.fft.fftfreq(64))
    seen = np.fft.ifft2(spectrum / np.outer(pixel, pixel)).real

    assert np.abs(seen - noise(9, 64, 1.8, 0.1, 0.9)).max() < 2e-3  # of the spline between its fine samples


def test_dead_leaves_cover_everything() -> None:
    """Greys lie in their range, borders are one cell wide, and the histogram of greys is even."""
    raster = dead_leaves(2, 256, 2.0, 60.0, 0.2, 0.8)
    counts, _ = np.histogram(raster, bins=6, range=(0.2, 0.8))

    assert 0.2 <= raster.min() < 0.21
    assert 0.79 < raster.max() <= 0.8
    assert counts.min() > 0.4 * counts.mean()
    assert np.mean(np.diff(raster, axis=1) == 0) > 0.3  # inside leaves nothing changes


def test_dead_leaves_fall_off_as_a_power() -> None:
    """Between the largest and the smallest leaves the spectrum falls by a power of 1.5 to 2.5 (radii with r⁻³)."""
    spectra = []
    for seed in range(4):
        raster = dead_leaves(seed, 256, 2.0, 60.0, 0.1, 0.9)
        spectra.append(np.abs(np.fft.fft2(raster - raster.mean())) ** 2)
    k = np.hypot(*np.meshgrid(np.fft.fftfreq(256) * 256, np.fft.fftfreq(256) * 256))
    low, high = (np.mean(spectra, axis=0)[(k >= a) & (k < b)].mean() for a, b in ((6, 10), (24, 40)))

    assert 1.5 < np.log(low / high) / np.log(4) < 2.5
