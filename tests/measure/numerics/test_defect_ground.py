"""Local level and noise of frames, and the search for what stands out of them, against direct calculation."""

import numpy as np
import pytest

from runner.measure.numerics import defect_ground
from runner.measure.numerics.defect_ground import ground, local_medians, outstanding, points, smallest_step, surface
from tests.scenes.flats import Shading, plant, scattered


def test_level_and_noise_follow_the_frame() -> None:
    """Under a lens with shot noise the level holds within 5 of its own uncertainties, the noise within 15 % all over.

    144 sampled pixels know a median within 1.25/12 of the noise, which grows by 1.6 on the way to the corner. The noise
    is known within 1.4 %, at the corner of so small a frame 3 %, and the window's 9 blocks reach over a tenth of its
    fall there.
    """
    rng = np.random.default_rng(1)
    scene = Shading((640, 480), angle=25)
    light = scene.frame()
    noise = 0.01 * np.sqrt(light)
    found = ground((light + noise * rng.standard_normal(light.shape)).astype(np.float32))
    rows, columns = (a.ravel() for a in np.indices(light.shape))
    level, local = found.at(rows, columns)

    assert np.abs(level - light.ravel()).max() < 5 * 0.01 * 1.25 / 12 * 1.6
    np.testing.assert_allclose(local, noise.ravel(), rtol=0.15)
    assert found.tail == pytest.approx(1, abs=1)  # 20 of 43 200 samples lie there, ± 4.5


def test_defects_do_not_raise_the_noise() -> None:
    """5 % of pixels at a hundred times the noise change the noise by what a median of 95 % must: under 8 %."""
    rng = np.random.default_rng(2)
    frame = rng.normal(100, 1, (300, 400))
    frame[rng.random(frame.shape) < 0.05] = 200
    found = ground(frame)

    assert np.median(found.noise) == pytest.approx(1, rel=0.08)
    assert found.tail > 50


@pytest.mark.parametrize("noise", [0.15, 0.3, 0.6, 1.2, 4.0])
def test_whole_codes_never_have_too_little_noise(noise: float) -> None:
    """Rounded noise is at least 0.37 steps, and from one step on the true one with both roundings, √(σ² + 2/12).

    The medians of blocks are whole codes too, so a level half a step off adds to it: up to 6 %.
    """
    rng = np.random.default_rng(int(10 * noise))
    found = ground(np.round(rng.normal(64, noise, (400, 400))).astype(np.uint16))

    assert found.step == 1
    assert np.median(found.noise) >= 0.36
    if noise > 1:
        assert np.median(found.noise) == pytest.approx(np.sqrt(noise**2 + 2 / 12), rel=0.06)


@pytest.mark.parametrize("at_once", [defect_ground.AT_ONCE, 7])
def test_the_search_misses_nothing_and_adds_nothing(monkeypatch: pytest.MonkeyPatch, at_once: int) -> None:
    """Pixels beyond a limit are those that a look at every pixel finds, both signs and each alone, however many cells.

    None is found twice.
    """
    monkeypatch.setattr(defect_ground, "AT_ONCE", at_once)
    rng = np.random.default_rng(3)
    frame = 0.5 * Shading((330, 270), angle=30, axis=(40.0, 10.0)).frame() + rng.normal(0, 0.004, (270, 330))
    frame = plant(frame, scattered((330, 270), 40, rng), rng.uniform(-0.05, 0.05, 40).tolist())
    of = ground(frame)
    level, noise = of.at(*(a.ravel() for a in np.indices(frame.shape)))
    away = (frame - level.reshape(frame.shape)) / noise.reshape(frame.shape)

    for low, high in ((3.5, 3.5), (None, 3.0), (4.0, None)):
        wanted = np.zeros(frame.shape, dtype=bool)
        if low is not None:
            wanted |= away < -low
        if high is not None:
            wanted |= away > high
        found = np.zeros(frame.shape, dtype=bool)
        places = outstanding(frame, of, low, high)
        found[places] = True
        np.testing.assert_array_equal(found, wanted)
        assert places[0].size == np.count_nonzero(wanted)


def test_medians_of_neighbours() -> None:
    """The median of 13 × 13 pixels about a pixel; at the border the window is moved inside."""
    rng = np.random.default_rng(4)
    frame = rng.normal(0, 1, (40, 50))
    rows, columns = np.array([20, 0, 39, 3]), np.array([25, 0, 49, 30])
    windows = [frame[14:27, 19:32], frame[:13, :13], frame[27:, 37:], frame[:13, 24:37]]

    assert list(local_medians(frame, rows, columns)) == pytest.approx([np.median(w) for w in windows])


def test_a_plane_is_its_own_surface() -> None:
    """Bilinear between blocks, and straight on beyond the outer ones: a plane is exact at every pixel."""
    y, x = np.array([10.0, 30.0, 50.0]), np.array([8.0, 24.0])
    level = 3 + 0.5 * y[:, None] - 0.2 * x[None, :]
    rows, columns = np.arange(60), np.arange(32)
    plane = 3 + 0.5 * (rows[:, None] + 0.5) - 0.2 * (columns[None, :] + 0.5)

    np.testing.assert_allclose(surface(level, y, x, rows, columns), plane, atol=1e-12)
    np.testing.assert_allclose(points(level, y, x, np.array([0, 59]), np.array([31, 5])), plane[[0, 59], [31, 5]])
    np.testing.assert_allclose(surface(level[:1], y[:1], x, rows, columns)[7], plane[9] + 0.25, atol=1e-12)


def test_steps_of_codes() -> None:
    """The step is that of the codes, rounding of their fractions apart; 0, or what is known, where all are the same.

    A value that one pixel in 5000 has is a defect and no code, unless nothing else is known.
    """
    codes = np.arange(1000, 1040)
    light = (codes - 64.0) / 4031
    both = np.concatenate([light, light + 1e-17, (light * 3) / 3])

    assert smallest_step(both, 0.002) == pytest.approx(1 / 4031, rel=1e-9)
    assert smallest_step(np.full(20, 0.3), 0.0) == 0.0
    assert smallest_step(np.full(20, 0.3), 0.0, 0.01) == 0.01
    quiet = np.append(np.full(5000, 64.0), 94.0)
    assert smallest_step(quiet, 0.0, 1.0) == 1.0
    assert smallest_step(quiet, 0.0) == 30.0
    assert smallest_step(np.append(quiet, np.full(50, 66.0)), 0.0, 1.0) == 2.0
