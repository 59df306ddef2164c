"""Order and timing of frames as reports state them: every planted fault found, none invented."""

import pytest

from runner.errors import UsageError
from runner.measure.contract import Measurement
from runner.measure.methods import frame_order
from runner.measure.reading import Reading
from tests.measure.sequence_samples import noisy, sample

FRAMES = [noisy(0.4, seed) for seed in range(12)]
TIMES = [10 + n / 25 for n in range(12)]


def _read(made: Measurement) -> dict[str, Reading]:
    return {r.quantity: r for r in made.readings}


def _measure(*args: object, **kwargs: object) -> Measurement:
    return frame_order.measure(sample(*args, **kwargs), frame_order.read_options({}))  # type: ignore[arg-type]


def test_a_sound_sequence() -> None:
    """No fault, 25 Hz, no jitter, and no frame is listed."""
    made = _measure(FRAMES, counters=range(100, 112), times=TIMES)
    found = _read(made)

    assert [found[name].value for name in ("lost_frames", "repeated_frames", "reordered_frames", "torn_frames")] == [
        0.0
    ] * 4
    assert all(found[name].count for name in ("lost_frames", "torn_frames"))
    assert found["frame_rate"].value == pytest.approx(25)
    assert found["timing_jitter"].value == pytest.approx(0, abs=1e-6)
    assert made.spots == ()


def test_planted_faults_are_counted_and_listed_by_file() -> None:
    """A gap of two, a frame delivered twice and a torn one: each is named with its file."""
    frames = [f.copy() for f in FRAMES]
    frames[5] = frames[4].copy()
    frames[8][:10] = frames[7][:10]
    counters = [0, 1, 2, 5, 6, 6, 7, 8, 9, 10, 11, 12]
    made = _measure(frames, counters=counters)
    found = _read(made)

    assert found["lost_frames"].value == 2
    assert found["lost_frames"].trials == 14
    assert found["repeated_frames"].value == 1
    assert found["torn_frames"].value == 1
    assert [(s.kind, s.words.split(":")[0]) for s in made.spots] == [
        ("lost frames", "seq-3.tif"),
        ("repeated frame", "seq-5.tif"),
        ("torn frame", "seq-8.tif"),
    ]


def test_what_is_not_known_is_not_measured() -> None:
    """Without counters and times there is no loss, no order and no rate; one frame has no order at all."""
    found = _read(_measure(FRAMES))
    single = _read(_measure(FRAMES[:1]))

    for name in ("lost_frames", "reordered_frames", "frame_rate", "timing_jitter"):
        refusal = found[name].refusal
        assert refusal is not None
        assert "not known" in refusal.because or "neither counters nor times" in refusal.because
    assert found["repeated_frames"].value == 0
    assert all(r.refusal is not None and r.refusal.cause in {"too few frames", "not defined"} for r in single.values())


def test_the_resolution_of_stamps_is_an_option_in_time() -> None:
    """It takes ms or s and nothing else."""
    assert frame_order.read_options({"time_resolution": "1 ms"}).time_resolution == pytest.approx(1e-3)
    assert frame_order.read_options({"time_resolution": "0.5 s"}).time_resolution == pytest.approx(0.5)
    with pytest.raises(UsageError, match="time_resolution is '3 px'"):
        frame_order.read_options({"time_resolution": "3 px"})
