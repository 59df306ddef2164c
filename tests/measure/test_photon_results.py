"""Gain, saturation and patterns from points: values with their parts, bounds, and refusals of what tells nothing."""

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from scipy import ndimage

from runner.errors import MeasurementRefused
from runner.measure.light_levels import series
from runner.measure.photon_levels import darks, points
from runner.measure.photon_results import (
    Figure,
    Transfer,
    beyond,
    dark_current,
    linearity,
    pattern,
    propagated,
    transfer,
)
from runner.measure.reading import Component
from tests.measure.photon_samples import Shot, camera, lit, sample, unlit
from tests.scenes.photons import Parts, Sensor

SENSOR = Sensor(shape=(96, 112), response=Parts(0.01, 0.004, 0.005), bend=0.02)


def _transfer(shots: list[Shot], without: list[Shot], **more: object) -> Transfer:
    of = camera(shots[0].codes, **more) if more else None
    found = series(sample(shots, of=of).frames)
    black = darks(series(sample(without, of=of).frames).levels, 0)
    return transfer(points(found.levels, black, 0), black, found.light_in)


@pytest.fixture(scope="module")
def whole() -> Transfer:
    """Return a series from 1/16 to beyond saturation."""
    rng = np.random.default_rng(1)
    return _transfer(lit(SENSOR, rng), unlit(SENSOR, rng))


def test_gain_and_saturation_of_a_series(whole: Transfer) -> None:
    """K 0.4 DN/e- and the light of greatest variance within 2 u, from levels of 0 to 70 % of it."""
    assert abs(whole.k - 0.4) < 2 * whole.gain.u
    assert [part.name for part in whole.gain.parts] == ["noise", "dark noise", "dark level"]
    assert whole.top / whole.k == pytest.approx(SENSOR.saturation(), rel=0.01)
    assert max(one.signal for one in whole.fitted) <= 0.7 * whole.top < whole.points[-1].signal
    assert whole.rounding == pytest.approx(1 / 12)
    assert not whole.rounded


def test_figures_carry_the_parts_of_what_they_follow_from(whole: Transfer) -> None:
    """A quotient's u is that of its inputs (JCGM 100:2008, 5.1.6): each by its share of top/K."""
    found = propagated(whole, lambda k, _v, top: top / k)
    parts = {part.name: part.u / float(found.value or 0) for part in found.parts}

    assert parts["system gain"] == pytest.approx(whole.gain.u / whole.k, rel=1e-3)
    for name, u in whole.saturation.parts:
        assert parts[name] == pytest.approx(u / whole.top, rel=1e-3)
    assert "dark noise" not in parts


def test_a_bound_takes_the_uncertainty_in() -> None:
    """Above means at least the value less 2 u, below at most the value and 2 u."""
    figure = Figure(10.0, (Component("a", 0.3, "A"), Component("b", 0.4, "B")))

    for side, end in (("above", 9.0), ("below", 11.0)):
        bound = beyond(figure, side).bound
        assert bound is not None
        assert bound[0] == side
        assert bound[1] == pytest.approx(end)


def test_linearity_is_of_the_levels_between_5_and_95_per_cent(whole: Transfer) -> None:
    """The planted bend's own error by NumPy's line, within 2 u and what noise adds."""
    found, used = linearity(whole)
    light = np.array([float(one.light or 0) / 100 for one in used]) * 1.15 * SENSOR.well

    assert all(0.05 * whole.top <= one.signal <= 0.95 * whole.top for one in used)
    assert found.error == pytest.approx(SENSOR.linearity_error(light), abs=2 * np.hypot(found.noise, found.folding))


@pytest.mark.parametrize("part", ["total", "row", "column", "pixel"])
def test_patterns_and_their_parts(whole: Transfer, part: str) -> None:
    """PRNU in % of the signal at half of saturation, DSNU in electrons: within 3 u of what was drawn, or bounded."""
    half = min(whole.points, key=lambda one: abs(one.signal - whole.top / 2))
    dark, response = pattern(half, whole, part)
    assert response.value == pytest.approx(100 * SENSOR.prnu.spread(part), abs=3 * response.u)
    if dark.value is None:
        assert SENSOR.dsnu.spread(part) <= (dark.bound or ("", 0.0))[1]
    else:
        assert dark.value == pytest.approx(SENSOR.dsnu.spread(part), abs=3 * dark.u)


def test_a_single_level_gives_the_gain() -> None:
    """One pair at a third of the range over darks: K within 2 u, no saturation, only a bound on it."""
    rng = np.random.default_rng(2)
    found = _transfer(lit(SENSOR, rng, levels=(0.3,)), unlit(SENSOR, rng))

    assert abs(found.k - 0.4) < 2 * found.gain.u
    assert found.saturation.value is None
    with pytest.raises(MeasurementRefused, match="0 levels lie between 5 and 95 % of saturation; 5 at least"):
        linearity(found)


def _denoised(shots: list[Shot]) -> list[Shot]:
    return [
        replace(s, codes=np.round(ndimage.uniform_filter(s.codes.astype(float), 3)).astype(np.uint16)) for s in shots
    ]


def _curved(shots: list[Shot]) -> list[Shot]:
    return [
        replace(s, codes=np.round(4600 * ((s.codes.clip(100) - 100) / 4600) ** 0.6 + 100).astype(np.uint16))
        for s in shots
    ]


def _twice(shots: list[Shot]) -> list[Shot]:
    return [replace(s, codes=shots[n // 2 * 2].codes) for n, s in enumerate(shots)]


def _disturbed(shots: list[Shot]) -> list[Shot]:
    patch = np.ones((96, 112))
    patch[20:60, 30:80] = 0.8
    codes = SENSOR.frame(1.15 * SENSOR.well * 5 / 16, np.random.default_rng(4), even=patch)
    return [replace(s, codes=codes) if n == 9 else s for n, s in enumerate(shots)]


@pytest.mark.parametrize(
    ("change", "cause", "said"),
    [
        (
            _curved,
            "not defined",
            r"level 6\.25% has a temporal variance of .* the other levels tell .*EMVA 1288 General",
        ),
        (_twice, "no picture", "light adds no noise: at most .* DN² over that of the darks"),
        (_disturbed, "another scene", r"level 31\.25% has a temporal variance of \d+ DN², the other levels tell \d+"),
        (lambda s: s[-4:], "too bright", r"no level lies between darkness and 70 % of saturation: the lowest has 4\d"),
        (lambda s: s[-2:], "no picture|too bright", "light adds no noise|no level lies"),
    ],
    ids=["curved", "copies", "disturbed", "all saturated", "one saturated"],
)
def test_series_that_are_no_photon_transfer_are_refused(
    change: Callable[[list[Shot]], list[Shot]], cause: str, said: str
) -> None:
    """A hidden tone, copies, something that moved, too much light: none ends with a gain."""
    rng = np.random.default_rng(3)
    with pytest.raises(MeasurementRefused, match=said) as refused:
        _transfer(change(lit(replace(SENSOR, bend=0.0), rng)), unlit(SENSOR, rng))
    assert refused.value.cause in cause.split("|")


def test_dark_current_by_level_and_by_variance() -> None:
    """200 e-/s as planted over six exposure times: the level rises by K times that, the variance by K² times."""
    rng = np.random.default_rng(5)
    warm = replace(SENSOR, dark_current=200.0)
    shots = unlit(warm, rng, repeats=4, times=(0.1, 0.3, 0.5, 0.7, 0.9, 1.1))
    found = darks(series(sample(shots).frames).levels, 0)
    for by_variance, truth in ((False, 0.4 * 200), (True, 0.16 * 200)):
        rise, u = dark_current(found, by_variance=by_variance)
        assert abs(rise - truth) < 2.5 * u
        assert u < 0.05 * truth
    with pytest.raises(MeasurementRefused, match="the darks have 2 known exposure times; 3 at least"):
        dark_current(found[:2])
