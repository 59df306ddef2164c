"""Levels of a sequence: planted drift, flicker and settling come back, dark and clipped frames are refused."""

import numpy as np
import pytest

from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Measurement
from runner.measure.methods import level_over_time
from runner.measure.reading import Reading
from tests.measure.sequence_samples import RGGB, noisy, sample

N = 40
TIMES = [n / 25 for n in range(N)]
WAVE = [0.4 * (1 + 0.03 * np.cos(2 * np.pi * 4.3 * t + 1) + 0.02 * (t / TIMES[-1] - 0.5)) for t in TIMES]


def _read(made: Measurement) -> dict[str, Reading]:
    return {r.quantity: r for r in made.readings}


def test_planted_drift_and_flicker() -> None:
    """2 % of drift and 3 % of flicker at 4.3 Hz lie within 3u; the curve holds every frame."""
    frames = [noisy(level, n) for n, level in enumerate(WAVE)]
    made = level_over_time.measure(sample(frames, times=TIMES), level_over_time.read_options({}))
    found = _read(made)

    for name, truth in (("level_drift", 2.0), ("level_flicker", 3.0), ("flicker_frequency", 4.3)):
        value, u = found[name].value, found[name].u
        assert value is not None
        assert u is not None
        assert abs(value - truth) <= 3 * u + 0.002 * truth, name
    assert len(made.curves[0].x) == N


def test_frames_are_taken_in_the_order_of_their_times() -> None:
    """Shuffled files with their times give the same values."""
    order = np.random.default_rng(3).permutation(N)
    frames = [noisy(level, n) for n, level in enumerate(WAVE)]
    plain = level_over_time.measure(sample(frames, times=TIMES), level_over_time.read_options({}))
    mixed = level_over_time.measure(
        sample([frames[n] for n in order], times=[TIMES[n] for n in order]), level_over_time.read_options({})
    )

    assert [r.value for r in mixed.readings] == pytest.approx([r.value for r in plain.readings])


def test_settling_in_frames_and_seconds() -> None:
    """An exposure that rises exponentially settles where the closed form says, to a frame."""
    levels = [0.5 * (1 - 0.6 * np.exp(-n / 3)) for n in range(N)]
    frames = [noisy(level, n) for n, level in enumerate(levels)]
    found = _read(level_over_time.measure(sample(frames, times=TIMES), level_over_time.read_options({})))
    first = int(np.ceil(3 * np.log(0.6 / 0.02)))

    assert found["settling_frames"].value == pytest.approx(first, abs=1)
    assert found["settling_time"].value == pytest.approx((first - 0.5) / 25, abs=1 / 25)


def test_colour_that_drifts_against_green() -> None:
    """Red rises by 5 % against green over the set, blue stays; green itself has nothing to be compared with."""
    frames = []
    for n in range(N):
        one = noisy(0.3, n, RGGB)
        one[0::2, 0::2] = noisy(0.3 * (1 + 0.05 * (n / (N - 1) - 0.5)), 1000 + n, RGGB)[0::2, 0::2]
        frames.append(one)
    red, blue, green = (
        _read(
            level_over_time.measure(
                sample(frames, times=TIMES, camera=RGGB, channel=channel, wanted=("colour_drift",)),
                level_over_time.read_options({}),
            )
        )["colour_drift"]
        for channel in ("red", "blue", "green")
    )

    assert red.value is not None
    assert red.u is not None
    assert abs(red.value - 5.0) <= 3 * red.u
    assert blue.value is not None
    assert blue.u is not None
    assert abs(blue.value) <= 3 * blue.u
    assert green.refusal is not None


@pytest.mark.parametrize(
    ("levels", "words"),
    [
        ([0.4] * 5, "holds 5 frames, a level over time needs 6"),
        ([0.4] * 7 + [1.2], "seq-7.tif: all pixels lie at the white level"),
        ([0.4] * 7 + [0.0], "seq-7.tif: the level is"),
    ],
)
def test_what_carries_no_level_is_refused(levels: list[float], words: str) -> None:
    """Too few frames, a clipped one and a dark one are named with their figures."""
    frames = [noisy(level, n) for n, level in enumerate(levels)]
    with pytest.raises(MeasurementRefused, match=words):
        level_over_time.measure(sample(frames), level_over_time.read_options({}))


def test_without_times_frequencies_are_not_known() -> None:
    """Numbers of frames are no seconds: no frequency, no settling time."""
    frames = [noisy(level, n) for n, level in enumerate(WAVE)]
    found = _read(level_over_time.measure(sample(frames), level_over_time.read_options({})))

    assert found["flicker_frequency"].refusal is not None
    assert found["settling_time"].refusal is not None
    assert found["level_flicker"].value == pytest.approx(3.0, abs=0.1)


def test_the_share_of_settling_is_kept_inside_its_meaning() -> None:
    """It lies between a hundredth of a per cent and a half."""
    with pytest.raises(UsageError, match="settled_within"):
        level_over_time.read_options({"settled_within": "80 %"})
