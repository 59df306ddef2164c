"""Mean squares of stacks: the published split, a certified data set, and least squares with a written-out design."""

import numpy as np
import pytest

from runner.measure.numerics.two_way_layout import add_up, layout, split_variances
from tests.scenes.flats import Pattern, Values, stack


def _levelled(frames: list[Values]) -> tuple[Values, Values]:
    return np.ones(len(frames)), np.array([f.mean() for f in frames])


def _projector(columns: list[Values]) -> Values:
    q, r = np.linalg.qr(np.column_stack(columns))
    used = np.abs(np.diag(r)) > 1e-9
    return np.asarray(q[:, used] @ q[:, used].T)


def test_the_split_of_the_standard() -> None:
    """EMVA 1288 Release 4.0 Linear: 480 × 640 px with column, row and pixel variance 4, 1, 9."""
    c, r, t = 4 + 9 / 480, 1 + 9 / 640, 4.0 + 1 + 9

    assert (c, r) == pytest.approx((4.01875, 1.0140625), abs=1e-12)
    assert split_variances(t, r, c, (480, 640)) == pytest.approx((9, 1, 4), abs=1e-9)


def test_certified_spread_on_a_high_level() -> None:
    """NIST StRD NumAcc4: 10000000.2 and 500 pairs of .1 and .3 about it, standard deviation certified as 0.1.

    Level 1e7 times the double's 1.1e-16 leaves 2e-9 of each departure of 0.1, so 1e-7 of their squares is rounding.
    """
    values = np.concatenate([[10000000.2], np.tile([10000000.1, 10000000.3], 500)]).reshape(13, 77)
    sums = add_up([values, values], *_levelled([values, values]), 2)

    assert np.sqrt(sums.mean / 1000) == pytest.approx(0.1, rel=1e-7)
    assert sums.differences == pytest.approx(0, abs=1e-12)


@pytest.mark.parametrize("count", [2, 3])
@pytest.mark.parametrize("order", [0, 1, 3])
def test_mean_squares_are_those_of_least_squares(count: int, order: int) -> None:
    """Rows, columns, shading and the rest as projections on written-out design columns, 11 × 9 px.

    The polynomials x^a y^b, a + b ≤ order, come off first; what the rows then explain beyond them, what the columns
    do, and what is left, each over the rank of its projection. Rounding of sums of 99 terms: 1e-10.
    """
    rng = np.random.default_rng(count + 10 * order)
    frames = stack(rng.normal(50, 2, (11, 9)), count, Pattern(1, 0.5, 0.7), rng)
    got = layout(add_up(frames, *_levelled(frames), order + 2), order)

    y, x = (a.ravel().astype(float) for a in np.mgrid[:11, :9])
    whole = _projector([np.ones(99)])
    shading = _projector([x**a * y**b for a in range(order + 1) for b in range(order + 1 - a)])
    rows = _projector([(y == i).astype(float) for i in range(11)]) - whole
    columns = _projector([(x == j).astype(float) for j in range(9)]) - whole
    rest = np.eye(99) - whole - rows - columns
    flat = np.array([f.ravel() for f in frames])
    mean = flat.mean(axis=0)
    for stratum, project in ((got.rows, rows), (got.columns, columns), (got.rest, rest)):
        kept = project - project @ shading @ project
        dof = round(float(np.trace(kept)))
        temporal = sum(float((f - mean) @ project @ (f - mean)) for f in flat)
        assert stratum.dof == dof
        assert stratum.a == pytest.approx(float(mean @ kept @ mean) / dof, rel=1e-10)
        assert stratum.t == pytest.approx(temporal / (count - 1) / round(float(np.trace(project))), rel=1e-10)


def test_means_of_rows_and_columns() -> None:
    """The walk's means of rows and columns are those of each frame from its level, whatever the piece's height."""
    rng = np.random.default_rng(7)
    frames = [rng.normal(k, 1, (70, 1200)) for k in range(3)]  # 27 rows of 1200 px are one piece: two and a rest
    sums = add_up(frames, *_levelled(frames), 1)

    for k, frame in enumerate(frames):
        np.testing.assert_allclose(sums.rows[k], frame.mean(axis=1) - frame.mean(), atol=1e-12)
        np.testing.assert_allclose(sums.columns[k], frame.mean(axis=0) - frame.mean(), atol=1e-12)


def test_scatter_of_a_pattern_in_noise() -> None:
    """Variance of a stratum's pattern: 4 Σp² σ² + 2 f σ⁴ over f² for fixed p (non-central chi-square), by draws.

    20 000 draws know a variance within 1 % (√(2/n)); 5 % is allowed.
    """
    rng = np.random.default_rng(3)
    frames = stack(np.full((12, 10), 5.0) + rng.normal(0, 1, (12, 1)), 4, Pattern(2.0), rng)
    rows = layout(add_up(frames, *_levelled(frames), 2), 0).rows
    p = np.sqrt(3.0)
    e = rng.normal(0, np.sqrt(rows.noise), (20_000, 11))
    own = rng.normal(0, np.sqrt(rows.noise), (20_000, 33))
    drawn = np.mean((p + e) ** 2, axis=1) - np.mean(own**2, axis=1)

    assert rows.scatter(3.0) == pytest.approx(float(drawn.var()), rel=0.05)
