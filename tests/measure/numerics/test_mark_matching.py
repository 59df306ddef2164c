"""Which found mark is which: one answer, in any view, and none for another arrangement."""

import numpy as np
import pytest

from runner.measure.numerics.mark_matching import match_marks
from tests.scenes.chart_views import View

MARKS = np.array(
    [(-92, -56), (49, -66), (91, -28), (92, 43), (57, 65), (-52, 64), (-90, 54), (-91, 0), (10, 20)], float
)


def _found(view: View, seed: int, *, extra: int = 4, without: int = 0) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return rough centres and radii in an order of chance, false ones among them, and which mark each is."""
    random = np.random.default_rng(seed)
    order = random.permutation(len(MARKS))[without:]
    scale = np.sqrt(abs(np.linalg.det(view.to_frame(MARKS[:1] + np.eye(2)) - view.to_frame(MARKS[:1]))))
    centres = view.to_frame(MARKS)[order] + random.normal(0, 0.3, (len(order), 2))
    false = random.uniform((0, 0), view.size, (extra, 2))
    radii = 4 * scale * random.uniform(0.92, 1.08, len(order) + extra)
    return np.concatenate([centres, false]), radii, order


@pytest.mark.parametrize("turn", range(0, 360, 40))
@pytest.mark.parametrize("mirrored", [False, True])
def test_every_turn_has_one_answer(turn: int, mirrored: bool) -> None:
    """In any turn, as drawn or mirrored, tilted, through a barrel, with false marks, every mark gets its own name."""
    view = View(turn=turn, mirrored=mirrored, keystone=(0.06, -0.04), lens=(0.12, 0.02), scale=4.0)
    centres, radii, order = _found(view, turn)
    match, _ = match_marks(MARKS, 8.0, centres, radii, view.size)

    assert match is not None
    named = dict(zip(match.found, match.marks, strict=True))
    assert named == {n: int(mark) for n, mark in enumerate(order)}


def test_two_marks_may_be_hidden() -> None:
    """With two marks of nine hidden the others are still named; with four hidden nothing is claimed."""
    view = View(turn=12, scale=4.5)
    for seed in range(6):
        centres, radii, order = _found(view, seed, extra=2, without=2)
        match, _ = match_marks(MARKS, 8.0, centres, radii, view.size)
        assert match is not None
        assert [int(order[n]) for n in match.found] == list(match.marks)
        assert match_marks(MARKS, 8.0, *_found(view, seed, extra=2, without=4)[:2], view.size)[0] is None


def test_another_arrangement_is_not_taken() -> None:
    """Of 40 arrangements drawn by chance none is taken for the chart."""
    random = np.random.default_rng(8)
    view = View(scale=5)
    for _ in range(40):
        other = random.uniform((-92, -68), (92, 68), (9, 2))
        match, count = match_marks(MARKS, 8.0, view.to_frame(other), np.full(9, 20.0), view.size)
        assert match is None or match.pose.rms > 1.3  # 3 % of a mark, beyond which whoever refines a view refuses it
        assert count <= 7
