"""Banding against planted sines, the law of periodogram ordinates, and its stated uncertainty."""

import numpy as np
import pytest

from runner.measure.numerics.banding import _highest, _Model, _spectrum, banding, frame_banding
from tests.scenes.flats import Pattern, Shading, Values, wave


@pytest.mark.parametrize("frequency", [0.0217, 0.1, 0.2503, 0.4711])
def test_a_line_of_a_third_of_the_noise(frequency: float) -> None:
    """Amplitude within 5 % and frequency within half a bin, at σ/3 of a pixel in 480 rows × 640 columns, under a lens.

    The rows' means have noise σ/√640, so the bound of the amplitude is √(2/480) of it: 0.8 %, six times less than 5 %.
    """
    rng = np.random.default_rng(int(1e4 * frequency))
    noise = 0.012
    light = 0.5 * Shading((640, 480), angle=25, axis=(30.0, 20.0)).frame()
    for _ in range(8):
        bands = wave(480, frequency, noise / 3, rng.uniform(0, 6))
        found = frame_banding(light + bands[:, None] + Pattern(noise).sum((640, 480), rng))
        assert found.rows.lines[0].amplitude == pytest.approx(noise / 3, rel=0.05)
        assert abs(found.rows.lines[0].frequency - frequency) < 0.5 / 480
        assert len(found.rows.lines) == 1
        assert found.columns.lines == ()


def test_power_of_a_line_over_that_of_noise() -> None:
    """Amplitude 0.5 at an exact bin in noise 2 averaged over 1024 rows: A² N/(4 σ²) = 16384, ±5 %.

    The noise's level that the lines are held against is the larger of two medians, of 512 and of 64 ordinates: up to
    a tenth more.
    """
    rng = np.random.default_rng(125)
    grid = np.arange(4, 513) / 1024
    noise, told = [], []
    for _ in range(30):
        ordinates, level = _spectrum(grid, wave(1024, 100 / 1024, 0.5) + rng.normal(0, 2 / 32, 1024))
        assert np.argmax(ordinates) == 96
        assert ordinates[96] == pytest.approx(0.25, rel=0.05)
        noise.append(float(np.delete(ordinates, 96).mean()))
        told.append(float(level[96]))

    assert 0.25 / np.mean(noise) == pytest.approx(16384, rel=0.05)
    assert 1 <= np.mean(told) / np.mean(noise) < 1.1


@pytest.mark.parametrize(("count", "allowed"), [(96, 0.3), (480, 0.3), (480, 0.05)])
def test_false_alarms_are_fewer_than_allowed(count: int, allowed: float) -> None:
    """White noise shows a line no more often than allowed (3 binomial standard deviations), nor hardly ever.

    The law is a bound, for ordinates a quarter of a bin apart are not independent: at least a tenth must remain.
    """
    rng = np.random.default_rng(count)
    draws = 300
    alarms = np.mean([bool(banding(rng.normal(0, 1, count), most=1, false_alarms=allowed).lines) for _ in range(draws)])

    assert alarms <= allowed + 3 * np.sqrt(allowed * (1 - allowed) / draws)
    assert alarms >= allowed / 10 - 3 * np.sqrt(allowed / 10 / draws)


@pytest.mark.parametrize("amplitude", [0.0, 0.25, 0.4, 0.8, 2.0])
def test_the_uncertainty_holds(amplitude: float) -> None:
    """±2 u, or the bound where no line is told, holds amplitude and frequency in 93 to 97 % of 300 draws (± 2.5 %).

    Noise 1 in 240 values: u is 0.091, lines are told from some 0.4 on. Where bounds take part only 93 % is asked.
    """
    rng = np.random.default_rng(int(100 * amplitude))
    held, placed, scores = [], [], []
    for _ in range(300):
        frequency = rng.uniform(0.04, 0.47)
        profile = wave(240, frequency, amplitude, rng.uniform(0, 6)) + rng.normal(0, 1, 240)
        found = banding(profile + 5 + 3 * np.linspace(-1, 1, 240) ** 3)
        line = next((one for one in found.lines if abs(one.frequency - frequency) < 1 / 240), None)
        if line is None:
            held.append(amplitude <= found.bound)
            continue
        scores.append((line.amplitude - amplitude) / line.amplitude_u)
        held.append(abs(scores[-1]) <= 2)
        placed.append(abs(line.frequency - frequency) <= 2 * line.frequency_u)

    assert np.mean(held) >= 0.93 - 0.025
    if amplitude >= 0.8:  # 8.8 u: its ordinate is 39 times the noise's on average, three times what is needed
        assert len(scores) > 0.9 * 300
    if len(scores) == 300:
        assert np.mean(held) <= 0.97 + 0.025
        assert 0.93 - 0.025 <= np.mean(placed) <= 0.97 + 0.025
        assert 0.8 < np.std(scores) < 1.25


def test_noise_at_half_the_sampling_frequency() -> None:
    """There noise has one phase only and passes the exponential's level 30 times as often; false alarms do not.

    Any line is allowed in 30 % of profiles, by 241 ordinates: 4 of 3000 at this one, and that is a bound.
    """
    rng = np.random.default_rng(9)
    grid = np.append(np.arange(16, 255) / 512, 0.5)
    found = [
        _highest(grid, _Model([], [], rng.normal(0, 1, 128), np.zeros((0, 128)), np.arange(128.0)), [])
        for _ in range(3000)
    ]

    assert sum(f == 0.5 and chance < 0.3 for f, chance in found) <= 4


def test_several_lines_and_the_bound_of_the_rest() -> None:
    """Lines of 1, 0.3 and 0.15, two of them 4 bins apart, come in that order; with two asked for, the bound holds 0.15.

    4 u (0.026) is allowed for each amplitude: leakage of one line at the other would be a fifth of the stronger.
    """
    rng = np.random.default_rng(4)
    profile = wave(480, 0.1, 1.0, 1) + wave(480, 0.3, 0.3, 2) + wave(480, 0.1 + 4 / 480, 0.15, 3)
    profile = 40 + profile + rng.normal(0, 0.1, 480)
    found = banding(profile)

    assert [line.frequency for line in found.lines] == pytest.approx([0.1, 0.3, 0.1 + 4 / 480], abs=0.5 / 480)
    assert [line.amplitude for line in found.lines] == pytest.approx([1.0, 0.3, 0.15], abs=4 * 0.0065)
    assert found.bound < 0.05
    assert found.noise == pytest.approx(0.1, rel=0.1)
    assert found.mean == pytest.approx(40, abs=0.02)
    assert banding(profile, most=2).bound > 0.15


def test_every_other_row() -> None:
    """Rows that alternate by ±0.02 are a line at half the sampling frequency, of amplitude 0.02 and without phase."""
    rng = np.random.default_rng(5)
    for count in (480, 481):
        found = banding(0.02 * (-1.0) ** np.arange(count) + rng.normal(0, 0.03, count))
        assert found.lines[0].frequency == 0.5
        assert found.lines[0].amplitude == pytest.approx(0.02, abs=3 * 0.03 / np.sqrt(count))
        assert found.lines[0].amplitude_u == pytest.approx(0.03 / np.sqrt(count), rel=0.25)


@pytest.mark.parametrize(
    "scene",
    [
        Shading((640, 480), angle=38, axis=(20.0, 35.0)),
        Shading((640, 480), angle=20, vignette=0.6),
        Shading((640, 480), vignette=0.5, pupil=1.0, axis=(10.0, 30.0)),
    ],
    ids=["cos⁴", "rim", "cone"],
)
@pytest.mark.parametrize("order", [2, 4])
def test_shading_is_no_banding(scene: Shading, order: int) -> None:
    """Shading that the polynomial leaves is not told as a line, even of a field with a rim or a cone.

    In 20 draws of noise of 1 % of the light one false line is allowed (false alarms: 1 % of each).
    """
    rng = np.random.default_rng(order)
    profiles = [scene.frame().mean(axis=1) + rng.normal(0, 0.01 / np.sqrt(640), 480) for _ in range(20)]
    found = [banding(p, shading_order=order) for p in profiles]

    assert sum(bool(f.lines) for f in found) <= 1
    assert found[0].lowest == pytest.approx(order / 480)


def test_a_profile_without_noise() -> None:
    """A constant has no line and the bound 0."""
    found = banding(np.full(100, 7.0))

    assert found.lines == ()
    assert found.bound == pytest.approx(0, abs=1e-12)


@pytest.mark.parametrize(
    ("profile", "said"),
    [
        (np.ones(20), r"shape \(20,\); one of at least 32 values"),
        (np.ones((40, 40)), r"shape \(40, 40\)"),
        (np.full(40, np.nan), r"not finite"),
    ],
)
def test_what_is_refused(profile: Values, said: str) -> None:
    """A profile too short, of two dimensions or with holes is refused with what is allowed."""
    with pytest.raises(ValueError, match=said):
        banding(profile)


@pytest.mark.parametrize("bins", [0.1, 0.2, 0.3, 0.4])
def test_within_half_a_bin_of_half_the_sampling_frequency_nothing_is_told(bins: float) -> None:
    """A band of 20 DN, a fraction of a bin off 0.5 cy/px, is never given a wrong amplitude: it is not told, or right.

    Amplitude and phase are not told apart there: 40 phases. Right is within 4 u or within the 3 % by which what
    alternates may change along the profile unseen.
    """
    rng = np.random.default_rng(6)
    for phase in rng.uniform(0, 2 * np.pi, 40):
        found = banding(wave(480, 0.5 - bins / 480, 20.0, phase) + rng.normal(0, 2.7, 480))
        for line in found.lines[:1]:
            assert not line.told or abs(line.amplitude - 20) < max(4 * line.amplitude_u, 0.6), phase


def test_an_even_alternation_is_told() -> None:
    """Rows that alternate by ± 5 DN all along are a line of 0.5 cy/px with that amplitude, within 4 u."""
    rng = np.random.default_rng(7)
    (line, *_) = banding(5.0 * (-1.0) ** np.arange(480) + rng.normal(0, 1, 480)).lines

    assert line.told
    assert line.frequency == 0.5
    assert abs(line.amplitude - 5) < 4 * line.amplitude_u


def test_defective_rows_do_not_hide_a_band() -> None:
    """Three dead rows of 4000 DN, one at the border, in a steep light: the band of 5 DN reads as it does without them.

    Within 3 u, and with less than one and a half times that u: three of 480 values are lost.
    """
    rng = np.random.default_rng(8)
    values = np.linspace(4000, 9000, 480) + wave(480, 0.137, 5.0, 0.4) + rng.normal(0, 1.5, 480)
    (clean,) = banding(values).lines
    values[[0, 77, 300]] -= 4000
    (line,) = banding(values).lines

    assert line.frequency == pytest.approx(0.137, abs=0.5 / 480)
    assert abs(line.amplitude - 5) < 3 * line.amplitude_u
    assert line.amplitude_u < 1.5 * clean.amplitude_u


def test_pulses_that_repeat_are_bands() -> None:
    """One bright row in every 16 is a band of 1/16 cy/px and its multiples: 2 h/16 for pulses of height h."""
    rng = np.random.default_rng(9)
    values = rng.normal(0, 1, 480)
    values[5::16] += 40
    found = banding(values)

    assert len(found.lines) == 3
    for line in found.lines:
        assert line.amplitude == pytest.approx(5.0, rel=0.05)
        assert line.frequency * 16 == pytest.approx(round(line.frequency * 16), abs=0.02)


@pytest.mark.parametrize("width", [15, 30, 60])
def test_a_spot_is_no_band(width: int) -> None:
    """A dent of 60 times the noise over a part of the profile is no line, wherever it lies; a line beside it is.

    A dust spot on 20 places each; the line's amplitude may take 10 % from the dent's own spectrum.
    """
    rng = np.random.default_rng(10)
    for place in rng.uniform(40, 600, 20):
        dent = -60.0 * np.sqrt(np.maximum(0, 1 - ((np.arange(640) - place) / width) ** 2))
        values = dent + rng.normal(0, 1, 640)
        assert banding(values).lines == (), place
        lines = banding(values + wave(640, 0.2137, 20.0, 0.3)).lines
        assert lines[0].frequency == pytest.approx(0.2137, abs=0.5 / 640)
        assert lines[0].amplitude == pytest.approx(20.0, rel=0.1)
