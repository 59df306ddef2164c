"""Levels over their darks: what a point of photon transfer holds, and which frames make none."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import ndimage

from runner.errors import MeasurementRefused
from runner.measure.light_levels import LevelFrames, series
from runner.measure.photon_levels import Dark, Point, correlation, darks, points, unevenness
from runner.spec.model import Amount
from tests.measure.photon_samples import Shot, lit, sample, unlit
from tests.scenes.photons import Parts, Sensor

SENSOR = Sensor(shape=(96, 112), dark_current=2000.0, offset=Parts(2.0), response=Parts(0.01))
LEVELS = (0.1, 0.2, 0.3, 0.4)
FULL = 10_000.0
"""Electrons of the brightest light."""


def _levels(shots: list[Shot]) -> list[LevelFrames]:
    return list(series(sample(shots).frames).levels)


def _points(shots: list[Shot], without: list[Shot]) -> tuple[Point, ...]:
    return points(_levels(shots), darks(_levels(without), 0), 0)


def _timed(times: tuple[float, ...], rng: np.random.Generator) -> list[Shot]:
    """Return a series under a steady lamp in which each level has its own exposure time."""
    return [
        Shot(SENSOR.frame(FULL * time, rng, time=time), {"exposure": f"{1000 * time:g}ms", "repeat": str(n)})
        for time in times
        for n in (1, 2)
    ]


def test_a_point_holds_signal_variance_and_pattern_over_dark() -> None:
    """Signal K μ, variance K² (σ_d² + μ + dark electrons) + 1/12 and pattern K (PRNU μ) as planted, within 4 u."""
    rng = np.random.default_rng(1)
    found = _points(lit(SENSOR, rng, levels=LEVELS, top=FULL, repeats=3), unlit(SENSOR, rng, repeats=4))

    for one, level in zip(found, LEVELS, strict=True):
        electrons = FULL * level
        assert one.signal == pytest.approx(0.4 * electrons * (1 + SENSOR.prnu.all.mean()), abs=4 * one.signal_u + 0.02)
        variance = 0.16 * (25 + electrons) + 1 / 12
        assert abs(one.variance - variance) < 4 * one.variance_u
        assert one.variance_u == pytest.approx(one.variance * np.sqrt(2 / (2 * 96 * 112)), rel=0.05)
        assert one.pattern == pytest.approx(0.4 * np.hypot(electrons * SENSOR.prnu.spread("total"), 2), rel=0.03)
        assert one.light == pytest.approx(100 * level)


def test_a_lamp_that_drifts_leaves_the_variance_alone() -> None:
    """Two per cent between the frames of a pair, with 10 % of shading: told as drift, and not in the variance."""
    rng = np.random.default_rng(2)
    shading = 1 + 0.1 * np.linspace(-0.5, 0.5, 112)[None, :]
    pair = [
        Shot(SENSOR.frame(4000.0, rng, even=factor * shading), {"level": "1", "repeat": str(n)})
        for n, factor in enumerate((0.99, 1.01))
    ]
    (one,) = _points(pair, unlit(SENSOR, rng))

    assert one.drift == pytest.approx(0.02 / np.sqrt(2), rel=0.05)
    assert abs(one.variance - (0.16 * 4025 + 1 / 12)) < 4 * one.variance_u


def test_each_exposure_time_has_its_own_dark() -> None:
    """2000 e-/s: darks at the same times, or some of them and straight lines between, give the light's signal alone."""
    rng = np.random.default_rng(3)
    times = (0.05, 0.1, 0.15, 0.2)
    for of_darks in (times, (0.05, 0.2)):
        for one, time in zip(_points(_timed(times, rng), unlit(SENSOR, rng, times=of_darks)), times, strict=True):
            assert one.signal == pytest.approx(0.4 * FULL * time, rel=0.003)
            assert one.dark.level == pytest.approx(100 + 0.4 * 2000 * time, rel=0.003)


def test_names_without_units_still_match_darks() -> None:
    """`flat-50-1` and `dark-50-1` were exposed alike, whatever the 50 are."""
    rng = np.random.default_rng(4)
    bright, without = _timed((0.1, 0.2), rng), unlit(SENSOR, rng, times=(0.1, 0.2))
    for shots, times in ((bright, ("50", "50", "100", "100")), (without, ("50", "50", "100", "100"))):
        shots[:] = [replace(s, axes=dict(s.axes) | {"exposure": t}) for s, t in zip(shots, times, strict=True)]
    found = _points(bright, without)

    assert [one.dark.level for one in found] == pytest.approx([180, 260], rel=0.003)


def test_few_rows_are_measured_without_patterns() -> None:
    """Two rows tell no rows apart; the variance is the same as of all their pixels."""
    rng = np.random.default_rng(5)
    flat = replace(SENSOR, shape=(2, 5000))
    (one,) = points(
        _levels([Shot(flat.frame(4000.0, rng), {"level": "1", "repeat": n}) for n in "123"]),
        darks(_levels(unlit(flat, rng)), 0),
        0,
    )
    assert one.fixed is None
    assert abs(one.variance - (0.16 * 4025 + 1 / 12)) < 4 * one.variance_u


def test_uneven_light_and_filtered_noise_are_told() -> None:
    """A tilt of 10 % over the field reads so; raw noise has no neighbours, a 3 × 3 mean makes them two thirds alike."""
    rng = np.random.default_rng(6)
    large = replace(SENSOR, shape=(200, 256), response=Parts())
    tilt = 1 + 0.1 * (np.arange(256)[None, :] - 127.5) / 256
    shots = [Shot(large.frame(5000.0, rng, even=tilt), {"level": "1", "repeat": n}) for n in "12"]
    without = unlit(large, rng)
    (one,) = _points(shots, without)
    blocks = int(np.sqrt(200 * 256 / 1000))

    assert unevenness(one).span == pytest.approx(0.1 * (1 - 1 / blocks), rel=0.06)
    assert max(map(abs, correlation(one))) < 0.02
    even = [Shot(large.frame(5000.0, rng), {"level": "1", "repeat": n}) for n in "12"]
    spans = [unevenness(point) for point in _points(even, without)]
    assert [s.blocks for s in spans] == [blocks**2]
    assert spans[0].noise == pytest.approx(np.sqrt(5025) / 5000 * blocks / np.sqrt(200 * 256), rel=0.05)
    assert 0.4 < spans[0].span / spans[0].by_noise < 1.8  # the span of 49 normal values scatters by 16 % about its mean
    soft = [replace(s, codes=np.round(ndimage.uniform_filter(s.codes.astype(float), 3))) for s in shots]
    assert correlation(_points(soft, without)[0]) == pytest.approx((2 / 3, 2 / 3), abs=0.03)


def _bad(kind: str) -> tuple[list[Shot], list[Shot]]:
    rng = np.random.default_rng(7)
    shots, without = lit(SENSOR, rng, levels=LEVELS, top=FULL), unlit(SENSOR, rng)
    if kind == "lamp off":
        shots = lit(SENSOR, rng, levels=LEVELS, top=40.0)
    elif kind == "one level off":
        shots[4:6] = [replace(s, codes=SENSOR.frame(0.0, rng)) for s in shots[4:6]]
    elif kind == "swapped":
        shots = [replace(s, axes=shots[k].axes) for s, k in zip(shots, (0, 1, 4, 5, 2, 3, 6, 7), strict=True)]
    elif kind == "mixed pair":
        shots[3] = replace(shots[3], codes=shots[6].codes)
    elif kind == "single":
        shots = shots[::2]
    elif kind == "single dark":
        without = without[:1]
    elif kind == "lit darks":
        without = [replace(s, axes={"repeat": str(n)}) for n, s in enumerate(lit(SENSOR, rng, levels=(1.0,), top=FULL))]
    elif kind == "clamped":
        without = [replace(s, codes=s.codes.clip(100) - 100) for s in without]
    elif kind == "same darks":
        without = [without[0]] * 2
    elif kind == "short darks":
        shots, without = _timed((0.05, 0.1, 0.15), rng), unlit(SENSOR, rng, times=(0.05, 0.1))
    elif kind == "unknown time":
        without = unlit(SENSOR, rng, times=(0.05, 0.1))
    return shots, without


@pytest.mark.parametrize(
    ("kind", "cause", "said"),
    [
        ("lamp off", "too dark", r"the brightest level lies 0\.0\d % of the range over the darks; 1 % is needed"),
        ("one level off", "too dark", r"level 30% lies .* DN over dark, its light should give 1\.2e\+03 DN"),
        ("swapped", "another scene", "level 30% is darker than level 20%, against their order; find out which folder"),
        ("mixed pair", "another scene", r"the frames of level 20% differ by \d+ % in their level; 5 %; let the lamp"),
        ("single", "too few frames", "level 10% has 1 frame; 2 frames of the same light at least"),
        ("single dark", "too few frames", "level 1 has 1 dark frame; 2 frames"),
        ("lit darks", "too bright", r"the darks lie 6\.\d % of the range over the black level of 100 DN; 2 % at the"),
        ("clamped", "clipped", r"dark-1\.tif: .* % of the pixels lie at code 0|lit-1\.tif: .* lie at code 0"),
        ("same darks", "no picture", "all 2 dark frames are the same: there is no noise at all"),
        ("short darks", "missing companion", r"exposure 150ms was exposed 0\.15 s, the darks 0\.05 to 0\.1 s; capture"),
        (
            "unknown time",
            "missing companion",
            "there are darks of 2 exposure times, and level 10% does not say its own",
        ),
    ],
)
def test_frames_that_make_no_series_are_refused(kind: str, cause: str, said: str) -> None:
    """Each staged capture ends with its own cause and a sentence with figures and what to do."""
    with pytest.raises(MeasurementRefused, match=said) as refused:
        _points(*_bad(kind))
    assert refused.value.cause == cause


def test_darks_come_by_exposure_time() -> None:
    """Whatever the order of the files, the shortest exposure is first."""
    rng = np.random.default_rng(8)
    found: tuple[Dark, ...] = darks(_levels(unlit(SENSOR, rng, times=(0.2, 0.05, 0.1))), 0)

    assert [one.exposure for one in found] == [0.05, 0.1, 0.2]
    taken = [replace(s, axes={}, taken={"exposure": Amount(7, "ms")}) for s in unlit(SENSOR, rng)]
    assert darks(_levels(taken), 0)[0].exposure == pytest.approx(0.007)
