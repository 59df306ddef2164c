"""Every planted fault of a sequence is found and none is invented, from counters, from times, from pixels alone."""

import numpy as np
import pytest

from runner.measure.numerics.frame_order import Order, numbered, put_in_order, row_digests, timing


def _rows(count: int, seed: int = 0) -> list[list[bytes]]:
    rng = np.random.default_rng(seed)
    return [row_digests(rng.integers(0, 4096, (20, 30))) for _ in range(count)]


def test_a_sound_sequence_has_no_fault() -> None:
    """Counters that follow one another, even times, new pixels: nothing is the matter."""
    clean = Order((), (), (), ())

    assert put_in_order([7, 8, 9, 10], [None] * 4, _rows(4)) == clean
    assert put_in_order([None] * 4, [0.0, 0.04, 0.0801, 0.12], _rows(4)) == clean


def test_planted_faults_by_counters_and_by_times() -> None:
    """500 random sequences with lost, repeated and swapped frames: the same faults are found both ways."""
    rng = np.random.default_rng(4)
    for _ in range(500):
        numbers = list(range(12))
        lost = sorted(rng.choice(np.arange(1, 11), size=int(rng.integers(0, 3)), replace=False).tolist())
        left = [n for n in numbers if n not in lost]
        swap = int(rng.integers(0, len(left) - 1)) if rng.random() < 0.5 else None
        if swap is not None:
            left[swap], left[swap + 1] = left[swap + 1], left[swap]
        pixels = _rows(12)
        rows = [pixels[n] for n in left]
        twice = int(rng.integers(0, len(left))) if rng.random() < 0.5 else None
        if twice is not None:
            left.insert(twice + 1, left[twice])
            rows.insert(twice + 1, rows[twice])
        times = [0.04 * n + 0.002 * float(np.sin(n)) for n in left]
        for found in (put_in_order(left, [None] * len(left), rows), put_in_order([None] * len(left), times, rows)):
            assert sum(count for _, count in found.lost or ()) == len(lost) - sum(n in {0, 11} for n in lost)
            assert len(found.repeated) == (twice is not None)
            assert len(found.reordered or ()) == (swap is not None)
            assert found.torn == ()


def test_without_counters_and_times_the_order_is_not_known() -> None:
    """Pixels alone tell repeated and torn frames, never lost ones."""
    rows = _rows(3)
    found = put_in_order([None] * 3, [None] * 3, [rows[0], rows[1], rows[0]])

    assert (found.lost, found.reordered) == (None, None)
    assert found.repeated == (2,)


def test_a_torn_frame_keeps_rows_of_the_one_before() -> None:
    """From four rows of the older frame on it is torn; three could not be, and constant rows tell nothing."""
    rows = _rows(2)
    torn = [*rows[0][:4], *rows[1][4:]]
    constant = [b""] * 20

    assert put_in_order([1, 2], [None] * 2, [rows[0], torn]).torn == (1,)
    assert put_in_order([1, 2], [None] * 2, [rows[0], [*rows[0][:3], *rows[1][3:]]]).torn == ()
    assert put_in_order([1, 2], [None] * 2, [constant, constant]) == Order((), (), (), ())
    assert row_digests(np.full((2, 5), 7)) == [b"", b""]


def test_rate_and_jitter_within_their_uncertainty() -> None:
    """25 frames a second with 0.5 ms of jitter, stamps to 1 ms, gaps: 93 % and more of 500 draws within 2u."""
    rng = np.random.default_rng(9)
    inside = []
    for _ in range(500):
        n = np.delete(np.arange(100), [10, 11, 50])
        times = np.round(0.04 * n + 5e-4 * rng.standard_normal(n.size), 3)
        found = timing(n.tolist(), times.tolist(), 1e-3)
        assert found is not None
        inside.append((abs(found.period - 0.04) <= 2 * found.period_u, abs(found.jitter - 5e-4) <= 2 * found.jitter_u))

    assert np.all(np.mean(inside, axis=0) >= 0.93)
    assert np.mean(inside, axis=0)[0] <= 0.98  # the jitter's u holds a bound for rounding: it may cover more


def test_too_few_frames_have_no_rate() -> None:
    """Three different frames leave one degree of freedom: no spread is told from that."""
    assert timing([0, 1, 2, 2], [0.0, 0.1, 0.2, 0.2]) is None


@pytest.mark.parametrize(("times", "numbers"), [([0.0, 1.0, 2.1, 4.0], [0, 1, 2, 4]), ([3.0], [0]), ([], [])])
def test_numbers_by_times(times: list[float], numbers: list[int]) -> None:
    """The usual distance of neighbours is one; a gap of two periods lost one frame."""
    assert numbered(times) == numbers
