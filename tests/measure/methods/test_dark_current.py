"""Dark current from frames to readings: planted currents, cameras that hold their dark level, what is refused."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest

from runner.errors import MeasurementRefused, UsageError
from runner.measure.methods import dark_current
from runner.measure.reading import Reading
from tests.measure.photon_samples import Shot, read, sample, unlit, value
from tests.scenes.photons import Sensor

TIMES = (0.1, 0.3, 0.5, 0.7, 0.9, 1.1)
SENSOR = Sensor(shape=(96, 112), dark_current=300.0)


def _measure(shots: Sequence[Shot], wanted: Sequence[str] = (), **options: object) -> dict[str, Reading]:
    return read(dark_current.measure(sample(shots, wanted=wanted), dark_current.read_options(options)))


def test_level_and_variance_rise_by_the_dark_current() -> None:
    """300 e-/s at 0.4 DN/e- are 120 DN/s; both routes give the electrons within 2.5 u, the gain's 2 % taken in."""
    rng = np.random.default_rng(1)
    found = _measure(unlit(SENSOR, rng, repeats=4, times=TIMES), system_gain="0.4 DN/e-", system_gain_u="2 %")

    for name, truth in (("dark_signal", 120), ("dark_current", 300), ("dark_current_from_variance", 300)):
        assert abs(value(found[name]) - truth) < 2.5 * (found[name].u or 0), name
    assert (found["dark_current"].u or 0) == pytest.approx(0.02 * 300, rel=0.1)
    assert (found["dark_current_from_variance"].u or 0) > 0.04 * 300
    assert [part.shared for part in found["dark_current"].components] == [None, "system gain"]


def test_a_camera_that_holds_its_dark_level_shows_it_in_the_variance() -> None:
    """Levels brought back to black: no signal rises, the variance tells the 300 e-/s all the same."""
    rng = np.random.default_rng(2)
    shots = [
        replace(s, codes=np.round(s.codes - s.codes.mean() + 100).astype(np.uint16))
        for s in unlit(SENSOR, rng, repeats=4, times=TIMES)
    ]
    found = _measure(shots, system_gain=0.4)

    assert abs(value(found["dark_current"])) < 2
    held = found["dark_current_from_variance"]
    assert abs(value(held) - 300) < 2.5 * (held.u or 0)


def test_the_uncertainty_of_both_routes_holds() -> None:
    """Of 150 series whose dark level drifts by 0.1 DN, ± 2 u holds in 93 % or more, but for twice chance: 4.2 %."""
    rng = np.random.default_rng(3)
    small = replace(SENSOR, shape=(40, 50))
    held: dict[str, list[bool]] = {"dark_signal": [], "dark_current_from_variance": []}
    for _ in range(150):
        shots = [
            replace(s, codes=s.codes + np.float32(0.1 * rng.standard_normal()))
            for s in unlit(small, rng, repeats=3, times=TIMES)
        ]
        found = _measure(shots, system_gain=0.4, system_gain_u=0.0)
        for name, truth in (("dark_signal", 120), ("dark_current_from_variance", 300)):
            held[name].append(abs(value(found[name]) - truth) <= 2 * (found[name].u or 0))
    for name, hits in held.items():
        assert np.mean(hits) >= 0.93 - 2 * np.sqrt(0.93 * 0.07 / 150), name


def test_curves_hold_level_and_variance_by_time() -> None:
    """Times rise, whatever the order of the files."""
    rng = np.random.default_rng(4)
    shots = unlit(SENSOR, rng, times=(0.5, 0.1, 0.3))
    level, variance = dark_current.measure(sample(shots), dark_current.read_options({})).curves

    assert (level.name, level.x, level.x_in, level.y_in) == ("dark level", (0.1, 0.3, 0.5), "s", "DN")
    assert variance.x == level.x
    assert level.y[0] < level.y[1] < level.y[2]


@pytest.mark.parametrize(
    ("times", "repeats", "cause", "said"),
    [
        ((0.1, 0.5), 2, "too few frames", "the darks have 2 known exposure times; 3 at least, EMVA 1288 asks for 6"),
        ((), 4, "too few frames", "the darks have 0 known exposure times"),
        ((0.1, 0.5, 0.9), 1, "too few frames", "exposure 0.1s has 1 dark frame; 2 frames of the same light at least"),
    ],
)
def test_darks_that_are_no_series_are_refused(times: tuple[float, ...], repeats: int, cause: str, said: str) -> None:
    """Too few times and single frames are told with figures."""
    with pytest.raises(MeasurementRefused, match=said) as refused:
        _measure(unlit(SENSOR, np.random.default_rng(5), repeats=repeats, times=times))
    assert refused.value.cause == cause


def test_electrons_need_a_gain() -> None:
    """Without one only the signal is told; a limit on electrons is refused with what is missing."""
    shots = unlit(SENSOR, np.random.default_rng(6), times=TIMES)
    assert set(_measure(shots)) == {"dark_signal"}
    refusal = _measure(shots, wanted=("dark_current",))["dark_current"].refusal
    assert refusal is not None
    assert refusal.because.startswith("nothing says how many codes an electron makes; give the option system_gain")
    with pytest.raises(UsageError, match=r"system_gain is '0\.4 e-'; allowed is 0 DN/e- to"):
        dark_current.read_options({"system_gain": "0.4 e-"})
