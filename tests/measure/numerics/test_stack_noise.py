"""Noise of stacks against planted patterns, the standard's own check, and its stated uncertainty."""

import numpy as np
import pytest

from runner.measure.numerics.stack_noise import Spread, mean_frame, signal_to_noise, stack_noise
from tests.scenes.flats import Pattern, Shading, Values, stack

PARTS = ("total", "pixel", "row", "column")


def test_eight_frames_of_known_noise() -> None:
    """ISO 15739 formulas: σ_temp 3, σ_fp 1, n = 8, 512² px give 3.000 ± 0.01 and 1.000 ± 0.01.

    Taking the spread of the mean frame as the fixed pattern would give √(1 + 9/8) = 1.4577.
    """
    rng = np.random.default_rng(100)
    pattern = rng.normal(0, 1, (512, 512))
    found = stack_noise(stack(100 + pattern, 8, Pattern(3), rng))

    assert found.temporal.total.value == pytest.approx(3.0, abs=0.01)
    assert found.fixed.total.value == pytest.approx(1.0, abs=0.01)
    assert found.total.value == pytest.approx(np.sqrt(10), abs=0.012)  # 0.01 of each, in quadrature


@pytest.mark.parametrize("count", [2, 6])
@pytest.mark.parametrize("gain_drift", [False, True])
def test_planted_patterns_under_shading_and_drift(count: int, gain_drift: bool) -> None:
    """Every part within 2 % of the pattern as it was drawn, under 40 % shading and a level that drifts by 1 %.

    320 × 240 px know rows and columns within their sampling only (temporal √(1/2M) = 5 %), so those get 4 u.
    """
    rng = np.random.default_rng(count)
    size = (320, 240)
    pixel, row, column = Pattern(0.012, 0.006, 0.005).draw(size, rng)
    shading = Shading(size, powers=((2, 0, -0.4), (0, 2, -0.4), (1, 0, 0.1))).frame()
    drift = 0.01 * np.sin(np.arange(count))
    planted = 0.5 * shading + pixel + row + column
    noise = Pattern(0.01, 0.004, 0.003)
    frames = stack(planted, count, noise, rng, levels=list(1 + drift) if gain_drift else ())
    if not gain_drift:
        frames = [f + d for f, d in zip(frames, drift, strict=True)]
    found = stack_noise(frames, gain_drift=gain_drift)

    drawn = {"total": (pixel + row + column).std(), "pixel": pixel.std(), "row": row.std(), "column": column.std()}
    sent = {"total": np.sqrt(0.01**2 + 0.004**2 + 0.003**2), "pixel": 0.01, "row": 0.004, "column": 0.003}
    for truth, parts in ((drawn, found.fixed), (sent, found.temporal)):
        for name in PARTS:
            spread = getattr(parts, name)
            allowed = 0.02 * truth[name] if name in {"total", "pixel"} else 4 * spread.u
            assert spread.value == pytest.approx(truth[name], abs=allowed), name
    assert found.drift == pytest.approx(np.std(drift, ddof=1) * found.level ** int(gain_drift), rel=0.1)
    assert found.shading_left < 0.02 * found.shading_rms


def test_a_lamp_that_drifts_under_shading_needs_to_be_told() -> None:
    """A gain taken for an offset leaves drift × shading in the temporal noise, in quadrature: ISO 15739 formulas."""
    rng = np.random.default_rng(5)
    shading = Shading((200, 160), powers=((1, 0, 1.0),)).frame()
    frames = stack(0.5 * shading, 2, Pattern(0.001), rng, levels=(1.0, 1.02))
    left = 0.01 * 0.5 * shading.std() * np.sqrt(2)  # half of 2 % each way; n/(n-1) is 2
    found = [stack_noise(frames, gain_drift=gain).temporal.total.value for gain in (False, True)]

    assert found == pytest.approx([np.hypot(0.001, left), 0.001], rel=0.02)


def _covered(spread: Spread, truth: float) -> tuple[bool, float | None]:
    if spread.value is None or spread.u is None:
        assert spread.bound is not None
        return truth <= spread.bound, None
    return abs(spread.value - truth) <= 2 * spread.u, (spread.value - truth) / spread.u


@pytest.mark.parametrize(
    ("count", "noise", "pattern"),
    [
        (2, Pattern(3, 1, 0.5), Pattern(1, 0.7, 0.5)),
        (8, Pattern(3, 0.1, 0.2), Pattern(0.2, 0.2, 0.05)),  # some parts near what can be told
        (4, Pattern(1), Pattern(3)),  # row and column parts of zero
    ],
    ids=["pair", "near the bound", "white"],
)
def test_the_uncertainty_holds(count: int, noise: Pattern, pattern: Pattern) -> None:
    """±2 u or the bound hold the truth in 93 to 97 % of 400 draws (± 2 binomial standard deviations, 2.2 %).

    Fixed: the pattern as drawn; temporal: the process. Zero parts are bounded in 95 % or more, never NaN.
    """
    rng = np.random.default_rng(count)
    size, draws = (72, 64), 400
    held: dict[str, list[bool]] = {}
    scores: dict[str, list[float]] = {}
    for _ in range(draws):
        parts = pattern.draw(size, rng)
        fixed = (sum(parts), *parts)
        found = stack_noise(stack(20 + np.asarray(fixed[0]), count, noise, rng))
        sent = (np.sqrt(noise.pixel**2 + noise.row**2 + noise.column**2), noise.pixel, noise.row, noise.column)
        for name, part, truth in zip(PARTS, fixed, sent, strict=True):
            drawn = float(np.asarray(part).std(ddof=1))
            for kind, spread, value in (
                ("temporal", getattr(found.temporal, name), truth),
                ("fixed", getattr(found.fixed, name), drawn),
            ):
                inside, score = _covered(spread, float(value))
                held.setdefault(f"{kind} {name}", []).append(inside)
                if score is not None:
                    scores.setdefault(f"{kind} {name}", []).append(score)

    for name, draws_held in held.items():
        share, bounded = float(np.mean(draws_held)), draws - len(scores.get(name, []))
        assert share >= 0.93 - 0.022, name
        assert share <= 0.97 + 0.022 or bounded > 0, name
        if bounded == 0:
            assert 0.8 < np.std(scores[name]) < 1.25, name
    assert np.mean(list(held.values())) == pytest.approx(0.95, abs=0.02)


def test_what_cannot_be_told_is_bounded() -> None:
    """Without any pattern the fixed pattern is a bound of the size of what noise leaves, σ_t/√n (2/P)^¼."""
    rng = np.random.default_rng(8)
    found = [stack_noise(stack(np.full((64, 64), 7.0), 8, Pattern(2), rng)).fixed.total for _ in range(100)]
    bounds = [f.bound for f in found if f.bound is not None]

    assert len(bounds) >= 90  # 97.7 % of a symmetric law; 90 is 5 binomial standard deviations less
    size = np.sqrt(2 * 4 / 8 * np.sqrt(2 / 64**2))  # two standard uncertainties of σ_t²/n, root
    assert np.median(bounds) == pytest.approx(size, rel=0.15)


def test_frames_without_noise() -> None:
    """Equal frames: temporal noise 0 with u 0, no ratio; a pattern of ±1 in a checkerboard is exactly 1."""
    board = 50 + np.indices((40, 60)).sum(axis=0) % 2 * 2.0
    found = stack_noise([board, board], shading_order=0)

    assert (found.temporal.total.value, found.temporal.total.u) == (0.0, 0.0)
    assert found.snr_temporal.value is None
    assert found.snr_temporal.bound is None
    assert found.fixed.total.value == pytest.approx(1.0, rel=1e-3)  # degrees of freedom: a part in 2400
    assert found.level == 51.0


def test_shading_that_the_order_does_not_take_is_told() -> None:
    """A quartic x⁴ under order 2 is left in the two next orders and told; under order 4 nothing is left."""
    rng = np.random.default_rng(2)
    shading = 0.5 + 0.1 * np.linspace(-1, 1, 200)[None, :] ** 4 + np.zeros((150, 1))
    frames = stack(shading, 2, Pattern(0.002), rng)
    left = 0.1 * 8 / 35 / 3  # x⁴ = 8/35 P4 + 4/7 P2 + 1/5, and the rms of P4 is 1/3

    assert stack_noise(frames).shading_left == pytest.approx(left, rel=0.03)
    assert stack_noise(frames, shading_order=4).shading_left < 0.0002


def test_ratios() -> None:
    """ISO 15739 6.3: level 200 over black 64 with noise 1.36 is 100, 40 dB; u by JCGM 100: both parts in quadrature."""
    ratio = signal_to_noise(136.0, 0.68, Spread(1.36, 0.0136))

    assert ratio.value == pytest.approx(100)
    assert ratio.u == pytest.approx(np.hypot(0.5, 1.0))
    assert ratio.decibels == pytest.approx((40.0, 20 / np.log(10) * np.hypot(0.005, 0.01)))
    assert signal_to_noise(136.0, 0.68, Spread(None, None, 0.5)).bound == pytest.approx(272)


def test_codes_and_light_alike() -> None:
    """Whole codes give what the same values as float64 give, levels are over black, inputs stay as they are."""
    rng = np.random.default_rng(4)
    codes = [np.round(rng.normal(500, 20, (50, 80))).astype(np.uint16) for _ in range(3)]
    kept = [c.copy() for c in codes]
    one = stack_noise(codes, black=64)
    other = stack_noise(np.array(codes, dtype=np.float64), black=64)

    assert one.total == other.total
    assert one.level == pytest.approx(436, abs=1)
    np.testing.assert_array_equal(codes, kept)
    np.testing.assert_allclose(one.row_means.mean(axis=0), np.mean(codes, axis=(0, 2)) - 64, atol=1e-9)
    np.testing.assert_allclose(mean_frame(codes), np.mean(codes, axis=0), rtol=1e-6)
    kept_mean = stack_noise(codes, black=64, keep_mean=True).mean
    assert kept_mean is not None
    np.testing.assert_allclose(kept_mean, np.mean(codes, axis=0) - 64, rtol=1e-6)
    assert one.mean is None


@pytest.mark.parametrize(
    ("frames", "how", "said"),
    [
        ([np.ones((30, 30))], {}, r"1 frame tells nothing of temporal noise; at least 2 are needed"),
        ([np.ones((30, 30)), np.ones((30, 31))], {}, r"sizes \[\(30, 30\), \(30, 31\)\]; one size"),
        ([np.ones((5, 30))] * 2, {}, r"5 rows or columns; shading of order 2 needs 6"),
        ([np.ones((30, 30))] * 2, {"shading_order": -1}, r"order of the shading is -1; 0 or more"),
        ([np.full((30, 30), np.nan)] * 2, {}, r"not finite"),
        ([np.ones((30, 30))] * 2, {"black": 1.0, "gain_drift": True}, r"level of a frame is 0 over black"),
    ],
)
def test_what_is_refused(frames: list[Values], how: dict[str, float], said: str) -> None:
    """A stack that tells nothing is refused with what was found and what is allowed."""
    with pytest.raises(ValueError, match=said):
        stack_noise(frames, **how)  # type: ignore[arg-type] # a table of options of several kinds


def test_kinds_of_rows_are_arrays_of_their_own() -> None:
    """Even and odd rows with unlike levels, shadings and columns pool to the means of what each kind alone gives.

    Variances of parts are linear in mean squares, so they are the means of both kinds' to the last digits.
    """
    rng = np.random.default_rng(19)
    codes = 900 + rng.normal(0, 4, (3, 60, 50)) + rng.normal(0, 5, (60, 1)) + rng.normal(0, 6, (60, 50))
    codes[:, 0::2] += rng.normal(0, 7, 50) + 0.02 * np.arange(50) ** 2
    codes[:, 1::2] += rng.normal(0, 7, 50) + 40
    both = stack_noise(codes, kinds=2)
    each = [stack_noise(codes[:, kind::2]) for kind in (0, 1)]

    for name in ("row", "column", "total"):
        mean = np.mean([(getattr(alone.fixed, name).value or 0.0) ** 2 for alone in each])
        assert (getattr(both.fixed, name).value or 0.0) ** 2 == pytest.approx(mean, rel=1e-9)
        one, two = (getattr(alone.fixed, name).u or 0.0 for alone in each)
        assert getattr(both.fixed, name).u == pytest.approx(np.hypot(one, two) / 2, rel=0.2)
    assert both.level == pytest.approx(codes.mean(), rel=1e-12)
    np.testing.assert_allclose(both.row_means, codes.mean(axis=2), atol=0.6)
