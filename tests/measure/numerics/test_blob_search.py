"""Round blobs are found at any size of frame, under shading and blur, and squares are told by their moments."""

import numpy as np
import pytest

from runner.measure.numerics.blob_search import binned, find_blobs, first_binning, levels
from tests.scenes.lattices import LatticeScene, noisy


def test_means_of_squares() -> None:
    """Squares of 3 px are means of their nine pixels; what does not fill one is left out."""
    codes = np.arange(7 * 11, dtype=np.uint16).reshape(7, 11)
    expected = codes[:6, :9].reshape(2, 3, 3, 3).mean(axis=(1, 3))

    assert binned(codes, 3) == pytest.approx(expected)


def test_a_large_frame_is_made_small() -> None:
    """12 MP become 0.75 MP, 0.3 MP stay."""
    assert (first_binning((3000, 4000)), first_binning((480, 640))) == (4, 1)


@pytest.mark.parametrize("binning", [1, 2])
@pytest.mark.parametrize("dark", [True, False])
def test_all_dots_and_nothing_else(binning: int, *, dark: bool) -> None:
    """117 of 117 within a fifth of a pixel of the small picture, areas within 12 %, under 60 % of shading."""
    scene = LatticeScene(shading=(0.3, -0.3), turn=7, tilt=(4, -6), blur=1.2)
    if not dark:
        scene = LatticeScene(shading=(0.3, -0.3), turn=7, tilt=(4, -6), blur=1.2, dark=0.8, bright=0.1)
    light = noisy(scene.dots(), 0.014, np.random.default_rng(1))
    blobs = find_blobs(levels(np.round(1000 * light).astype(np.uint16), binning), dark=dark)
    truth = scene.seen(scene.all_places())
    away = np.hypot(*(blobs.centres[:, None] - truth[None]).transpose(2, 0, 1)).min(axis=1)

    assert len(blobs.centres) == 117
    assert away.max() < 0.2 * binning
    assert np.median(blobs.areas) == pytest.approx(np.pi * (0.25 * 22) ** 2, rel=0.12)
    assert np.median(blobs.roundness) > 0.96


def test_a_square_fills_less_of_its_ellipse() -> None:
    """A square of side a has area a² and moments a²/12: 12/(4π) = 0.9549 of the ellipse with its moments."""
    picture = np.full((120, 120), 900.0)
    picture[40:60, 50:70] = 100.0
    (roundness,) = find_blobs(levels(picture, 1), dark=True).roundness

    assert roundness == pytest.approx(3 / np.pi, abs=1e-4)


def test_an_empty_ground_has_no_blobs() -> None:
    """Noise on an even ground beside a few dots gives none: its tiles have too little contrast."""
    light = LatticeScene(places=(6, 5), pitch=20).dots()
    light = noisy(light, 0.02, np.random.default_rng(2))
    blobs = find_blobs(levels(np.round(1000 * light).astype(np.uint16), 1), dark=True)

    assert len(blobs.centres) == 30
