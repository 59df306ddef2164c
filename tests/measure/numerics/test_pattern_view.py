"""A known pattern is found to a few hundredths of a pixel; another, a mirrored or a turned one is told."""

import numpy as np
import pytest
from skimage import data

from runner.measure.numerics.pattern_view import Pattern, PatternLost, register, start_view
from runner.measure.numerics.random_pattern import noise
from tests.scenes.random_patterns import NoiseScene

PATTERN = Pattern(noise(5, 256, 1.8, 0.1, 0.9))


def _truth(scene: NoiseScene, x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    turn = np.radians(scene.turn)
    dx, dy = x - scene.size[0] / 2 - scene.shift[0], y - scene.size[1] / 2 - scene.shift[1]
    bent = dx * (1 + scene.keystone * dx / scene.size[0])
    u = (np.cos(turn) * bent + np.sin(turn) * dy) * scene.cells_per_px + scene.cells / 2
    v = (-np.sin(turn) * bent + np.cos(turn) * dy) * scene.cells_per_px + scene.cells / 2
    return u, v


@pytest.mark.parametrize(
    "scene",
    [
        NoiseScene(),
        NoiseScene(turn=-3.0, shift=(11.3, -6.2), cells_per_px=0.83),
        NoiseScene(keystone=0.03, noise=0.02),
        NoiseScene(cells_per_px=0.7, noise=0.02, shading=0.1),
    ],
)
def test_the_map_is_found(scene: NoiseScene) -> None:
    """Wherever the pattern lies, every pixel's cell is right within 0.06 cells, shading and noise or not."""
    picture = scene.frame(np.random.default_rng(1))
    view = register(picture, PATTERN, start_view(scene.size, 0.78, 0.0, 256), search=True)
    x, y = np.meshgrid(np.linspace(20, 300, 8), np.linspace(20, 280, 8))
    u, v = view.cells(x, y)
    u0, v0 = _truth(scene, x, y)
    away = np.hypot((u - u0 + 128) % 256 - 128, (v - v0 + 128) % 256 - 128)

    assert away.max() < 0.06


def test_the_pattern_is_known_between_its_cells() -> None:
    """A wave at three tenths of a cycle per cell is interpolated within 0.3 % of its amplitude."""
    places = np.arange(64) + 0.5
    raster = 0.5 + 0.3 * np.cos(2 * np.pi * 19 / 64 * places)[None, :] * np.ones((64, 1))
    at = np.linspace(3, 60, 500)

    assert (
        np.abs(Pattern(raster).at(at, np.full(500, 20.0)) - 0.5 - 0.3 * np.cos(2 * np.pi * 19 / 64 * at)).max() < 1e-3
    )


@pytest.mark.parametrize(
    ("picture", "words"),
    [
        (NoiseScene().picture()[:, ::-1], "mirrored"),
        (NoiseScene().picture()[::-1, ::-1], "upside down"),
        (np.rot90(NoiseScene(size=(300, 300)).picture()), "turned by"),
        (NoiseScene(seed=6).picture(), "does not show the pattern"),
        (np.random.default_rng(0).normal(0.5, 0.1, (300, 320)), "does not show the pattern"),
        (np.asarray(data.camera(), dtype=np.float64)[:300, :320] / 255, "does not show the pattern"),  # type: ignore[no-untyped-call]
    ],
)
def test_what_is_not_the_pattern(picture: np.ndarray, words: str) -> None:
    """Mirrored, turned and other patterns, noise and photographs are refused with what they are."""
    size = (picture.shape[1], picture.shape[0])
    with pytest.raises(PatternLost, match=words):
        register(np.ascontiguousarray(picture), PATTERN, start_view(size, 0.8, 0.0, 256), search=True)
