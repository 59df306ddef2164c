"""A stream's faults come where they are put, and nowhere else."""

import numpy as np
import pytest

from runner.rehearse.sequences import SequenceFaults, moments


def test_a_sound_stream_is_even() -> None:
    """Counters run on, times are even, the level is steady and no frame comes twice."""
    found = list(moments(5, 25.0, SequenceFaults()))

    assert [(m.counter, m.level, m.again) for m in found] == [(n, 1.0, False) for n in range(1, 6)]
    assert np.allclose(np.diff([m.time_s for m in found]), 0.04)


def test_a_lost_frame_leaves_a_gap_in_counter_and_time() -> None:
    """Two frames lost: the others keep their own numbers and times."""
    found = list(moments(6, 10.0, SequenceFaults(lost=(2, 5), repeated=(4,))))

    assert [m.counter for m in found] == [1, 3, 4, 6]
    assert [m.again for m in found] == [False, False, True, False]
    assert found[1].time_s == pytest.approx(0.2)


def test_flicker_is_a_wave_of_its_frequency() -> None:
    """A wave of 5 Hz at 20 frames a second repeats after four frames, about the mean of 1."""
    levels = [m.level for m in moments(8, 20.0, SequenceFaults(flicker=0.1, flicker_hz=5.0))]

    assert np.allclose(levels[:4], [1.1, 1.0, 0.9, 1.0])
    assert np.allclose(levels[:4], levels[4:])
