"""Bands and defects: as many, as strong and where they are said to be."""

import numpy as np
import pytest

from runner.rehearse.flaws import MARGIN, Bands, Defects, plant, planted
from runner.rehearse.sensor import Sensor

SENSOR = Sensor(0.6, 10500, 4.0, 0.005, 1.5, 0.4, 64, 12)
SHAPE = (120, 160)


def test_bands_are_a_sine_along_one_axis() -> None:
    """Along rows every row has one value; the spectrum of the rows holds the amplitude at the frequency alone."""
    bands = Bands("rows", 2.5, 0.125).picture(SHAPE, np.random.default_rng(1))
    across = Bands("columns", 1.0, 0.25).picture(SHAPE, np.random.default_rng(1))
    spectrum = 2 * np.abs(np.fft.rfft(bands[:, 0])) / SHAPE[0]

    assert (bands.shape, across.shape) == ((120, 1), (1, 160))
    assert spectrum[15] == pytest.approx(2.5)  # 15 of 120 rows' cycles are 0.125 cy/px
    assert np.delete(spectrum, 15).max() < 1e-12


def test_bands_have_another_phase_in_each_frame() -> None:
    """The mean over frames fades: phases are spread evenly, so 400 of them leave 1/20 of the amplitude on average.

    The mean's amplitude is Rayleigh distributed with mean square 1/400; four times its root is exceeded by e^-16.
    """
    rng = np.random.default_rng(2)

    mean = np.mean([Bands("rows", 1.0, 0.1).picture(SHAPE, rng) for _ in range(400)], axis=0)

    assert np.abs(mean).max() < 4 / np.sqrt(400)


def test_defects_are_planted_as_many_as_stated_and_apart() -> None:
    """Counts by kind are the stated ones; no flawed pixel touches another or a weak column; the rest is untouched."""
    whole = SENSOR.pattern(SHAPE, np.random.default_rng(3))
    flawed = plant(whole, Defects(6, 800.0, 4, 3, 2, 0.05), 4095, np.random.default_rng(4))
    weak = np.flatnonzero(np.median(flawed.gain / whole.gain, axis=0) < 0.97)
    places = [*np.argwhere(flawed.dark_e > 0), *np.argwhere(flawed.gain == 0), *map(np.array, flawed.stuck)]

    assert planted(flawed) == {"hot": 6, "dead": 4, "stuck": 3}
    assert planted(whole) == {"hot": 0, "dead": 0, "stuck": 0}
    assert len(weak) == 2
    assert flawed.gain[:, weak] == pytest.approx(0.95 * whole.gain[:, weak])
    assert np.count_nonzero(flawed.gain != whole.gain) == 2 * SHAPE[0] + 4
    for n, one in enumerate(places):
        assert all(np.abs(one - other).max() > MARGIN for other in places[:n])
        assert np.abs(weak - one[1]).min() > MARGIN


def test_strength_of_hot_and_stuck_pixels_stays_in_its_bounds() -> None:
    """Hot pixels have half to twice the stated signal, stuck ones a code from a fifth to four fifths of the range."""
    flawed = plant(SENSOR.pattern(SHAPE, np.random.default_rng(3)), Defects(50, 800.0, 0, 50), 4095, _rng())
    hot = flawed.dark_e[flawed.dark_e > 0]

    assert 400 <= hot.min() < 500
    assert 1300 < hot.max() <= 1600
    assert all(819 <= code < 3276 for code in flawed.stuck.values())


def test_sound_sensor_stays_as_it_is() -> None:
    """Without defects the pattern is the same."""
    whole = SENSOR.pattern(SHAPE, np.random.default_rng(3))
    same = plant(whole, Defects(), 4095, _rng())

    assert np.array_equal(same.gain, whole.gain)
    assert not same.dark_e.any()


def _rng() -> np.random.Generator:
    return np.random.default_rng(5)
