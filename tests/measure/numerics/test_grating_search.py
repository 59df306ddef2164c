"""The strongest line of a patch's spectrum, near enough for a fit to start from."""

import numpy as np
import pytest

from runner.measure.numerics.grating_search import spectrum, strongest_line
from tests.scenes.gratings import GratingScene


@pytest.mark.parametrize("size", [(60, 60), (64, 333), (200, 100)])
@pytest.mark.parametrize("periods", [3.0, 3.4, 5.77, 17.3])
@pytest.mark.parametrize("direction", [0, 1, 33, 45, 90, 120, 170])
def test_the_line_is_found_within_a_third_of_a_period(size: tuple[int, int], periods: float, direction: float) -> None:
    """Any orientation and number of periods from 3 under 30 % shading: a fit needs half a period over the patch."""
    f, turn = periods / min(size), np.radians(direction)
    u = np.array([f * np.cos(turn), f * np.sin(turn)])
    line = strongest_line(GratingScene(size, (u[0], u[1]), phase=1.0, shading=(0.3, 0.2)).light())

    assert line is not None
    found = np.array(line.frequency) * np.sign(np.dot(line.frequency, u))
    assert np.all(np.abs(found - u) * size < 1 / 3)


def test_a_line_of_amplitude_a_stands_at_a_quarter_of_its_square() -> None:
    """Amplitude-true spectrum at a whole number of periods (within 1 %: the Hann window's neighbours)."""
    power = spectrum(GratingScene((100, 100), (0.1, 0.2), level=0.5, modulation=0.4).light())

    assert power.max() == pytest.approx(0.2**2 / 4, rel=0.01)
    assert power.argmax() == 20 * power.shape[1] + 10


def test_energy_of_noise_is_kept() -> None:
    """Parseval: the ordinates of white noise sum to its variance times the window's mean square, 1.5 an axis."""
    noise = np.random.default_rng(2).normal(0.5, 0.1, (128, 128))
    power = spectrum(noise)
    whole = power[:, 0].sum() + power[:, -1].sum() + 2 * power[:, 1:-1].sum()

    assert whole == pytest.approx(0.01 * 1.5**2, rel=0.05)  # 16 384 values: 1.1 % of scatter


def test_a_weak_line_shows_above_noise() -> None:
    """2 % modulation in noise of the same size stands out; noise alone does not reach 40 times the median.

    Ordinates of noise are exponential: of 8192 the highest is about ln(8192)/ln 2 = 13 medians, 40 has odds of 1e-8.
    """
    rng = np.random.default_rng(4)
    weak = strongest_line(GratingScene((128, 128), (0.11, 0.03), modulation=0.04, noise=0.02).light(rng))
    noise = strongest_line(rng.normal(0.5, 0.02, (128, 128)))

    assert weak is not None
    assert noise is not None
    assert weak.contrast > 100
    assert noise.contrast < 40


def test_a_coarse_lattice_tells_frequencies_of_the_frame() -> None:
    """Every second column and row: frequencies come in cy/px of the whole frame."""
    light = GratingScene((128, 128), (0.11, 0.07)).light()
    line = strongest_line(light[::2, ::2], (2.0, 2.0))

    assert line is not None
    assert line.frequency == pytest.approx((0.11, 0.07), abs=0.002)


@pytest.mark.parametrize("patch", [np.full((50, 50), 0.5), np.eye(5)])
def test_nothing_to_find(patch: np.ndarray) -> None:
    """A constant patch or one of a few pixels has no line."""
    assert strongest_line(patch) is None
