"""Every cause has its row, and the capture is blamed only by what the unit cannot cause."""

from runner.judge.blame import BY_CAUSE, FILE, SETTLE, TWO_ATTEMPTS, UNUSABLE, UNUSABLE_OTHERWISE
from runner.measure.reading import CAUSES


def test_every_cause_has_a_row_and_no_row_is_spare() -> None:
    """A new cause cannot be forgotten by the judge."""
    assert set(BY_CAUSE) == set(CAUSES)


def test_whoever_is_blamed_there_is_a_sentence() -> None:
    """No blame without its reason."""
    for blame in (*BY_CAUSE.values(), *UNUSABLE.values(), UNUSABLE_OTHERWISE, FILE, TWO_ATTEMPTS):
        assert blame.at_fault in {"capture", "cannot tell", "program"}
        assert len(blame.because) > 20


def test_nobody_is_blamed_without_the_frame_that_would_settle_it() -> None:
    """`cannot tell` always says what would tell."""
    undecided = [b for b in BY_CAUSE.values() if b.at_fault == "cannot tell"]

    assert len(undecided) > 3
    assert all(SETTLE in b.because for b in undecided)


def test_blur_alone_never_blames_the_capture() -> None:
    """What a wholly defocused or dead unit looks like is not held against the bench."""
    assert {BY_CAUSE[c].at_fault for c in ("no edge", "no modulation", "no picture", "too noisy")} == {"cannot tell"}
