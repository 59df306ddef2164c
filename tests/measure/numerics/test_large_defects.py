"""Defective columns and rows, and blemishes, against planted ones."""

import numpy as np
import pytest

from runner.measure.numerics import large_defects
from runner.measure.numerics.defects import flat_pixels, hot_pixels
from runner.measure.numerics.large_defects import blemishes, line_defects, off_lines
from tests.scenes.flats import Shading, plant, scattered, spot

SIZE = (640, 480)
LENS = Shading(SIZE, angle=25, axis=(30.0, -20.0))


def test_defective_columns_and_rows() -> None:
    """Columns and rows off by 8 times the noise of their means are found, at the borders and side by side, none else.

    At the first and last three places the neighbours' slope comes from one side and costs a third: 11 times there.
    """
    rng = np.random.default_rng(1)
    frame = 0.5 * LENS.frame() + rng.normal(0, 0.005, SIZE[::-1])
    column, row = 0.005 / np.sqrt(480), 0.005 / np.sqrt(640)
    planted = {("column", 0): 11, ("column", 200): -8, ("column", 201): -9, ("column", 630): 8, ("row", 300): 8}
    planted[("row", 479)] = -12
    for (direction, at), times in planted.items():
        where = (slice(None), at) if direction == "column" else (at, slice(None))
        frame[where] += times * (column if direction == "column" else row)
    found = {(d.direction, d.at): d for d in line_defects(frame)}

    assert set(found) == set(planted)
    for key, times in planted.items():
        assert found[key].contrast == pytest.approx(times * (column if key[0] == "column" else row), rel=0.5)
        assert found[key].significance == pytest.approx(times, rel=0.5)


def test_single_pixels_make_no_column() -> None:
    """Saturated hot pixels lift their columns' means by five noises of these; known as pixels they no longer do."""
    rng = np.random.default_rng(2)
    places = scattered(SIZE, 50, rng)
    dark = plant(rng.normal(64, 4, SIZE[::-1]), places, 4000.0)
    pixels = hot_pixels(dark).defects

    assert len(line_defects(dark)) > 50
    assert line_defects(dark, pixels) == ()


def test_a_dead_column_is_one_defect() -> None:
    """A column without light is a column of full contrast, and none of its 480 pixels is counted again."""
    rng = np.random.default_rng(3)
    light = 0.5 * LENS.frame()
    frame = light + rng.normal(0, 0.005, light.shape)
    frame[:, 333] = 0
    frame[100, 50] += 0.2
    pixels = flat_pixels(frame).defects
    lines = line_defects(frame, pixels)

    assert len(pixels) == 481
    assert [(d.direction, d.at) for d in lines] == [("column", 333)]
    assert lines[0].contrast == pytest.approx(-light[:, 333].mean(), rel=0.01)
    assert [(p.x, p.y) for p in off_lines(pixels, lines)] == [(50, 100)]


def _edge(contrast: float, least: float, radius: float) -> float:
    """Return the radius at which a spot with a Gaussian border of a tenth of its radius has the least contrast left."""
    from scipy.special import ndtri

    return radius * (1 - 0.1 * float(ndtri(least / abs(contrast))))


@pytest.mark.parametrize(
    ("radius", "contrast", "least", "size"),
    [(10.0, -0.05, 0.02, 12.0), (8.0, 0.06, 0.02, 10.0), (16.0, -0.03, 0.01, 12.0)],
)
def test_blemishes_and_their_uncertainty(radius: float, contrast: float, least: float, size: float) -> None:
    """Planted round spots are found alone, anywhere; ±2 u holds contrast and size in 93 % or more of 25 draws (- 10 %).

    Size: side of the square of the area in which the closed form departs by the least contrast.
    """
    rng = np.random.default_rng(int(radius))
    light = LENS.frame()
    true_size = np.sqrt(np.pi) * _edge(contrast, least, radius)
    held = []
    for _ in range(25):
        at = (rng.uniform(40, 600), rng.uniform(40, 440))
        found = blemishes(light * spot(SIZE, at, radius, contrast) + rng.normal(0, 0.006, light.shape), least, size)
        assert len(found.spots) == 1
        one = found.spots[0]
        assert np.hypot(one.x - at[0], one.y - at[1]) < 1.5
        held.append([abs(one.contrast - contrast) <= 2 * one.contrast_u, abs(one.size - true_size) <= 2 * one.size_u])

    assert np.all(np.mean(held, axis=0) >= 0.93 - 0.1)


def test_few_and_many_cells_are_joined_alike(monkeypatch: pytest.MonkeyPatch) -> None:
    """Cells joined one by one and in a walk over all cells make the same blemishes, touching corners and all."""
    flat = 1000 * spot((300, 240), (80, 90), 12, -0.05) * spot((300, 240), (200, 150), 9, 0.04)
    flat += np.random.default_rng(8).normal(0, 4, flat.shape)
    found = []
    for share in (0.0, 1.0):
        monkeypatch.setattr(large_defects, "SPARSE", share)
        found.append(blemishes(flat, 0.015, 5.0))

    assert len(found[0].spots) == 2
    assert found[0] == found[1]


def test_what_is_below_contrast_or_size_is_none() -> None:
    """Half the contrast, or half the size, is no blemish; nor is a line, however long, nor a hot pixel."""
    rng = np.random.default_rng(4)
    frame = LENS.frame() * spot(SIZE, (150.0, 150.0), 16, -0.015) * spot(SIZE, (400.0, 300.0), 3, -0.2)
    frame[:, 500:503] *= 0.9
    frame[77, 88] = 3.0
    frame += rng.normal(0, 0.004, frame.shape)
    found = blemishes(frame, 0.03, 12)

    assert found.spots == ()
    assert found.least == pytest.approx(0.03)
    assert [(round(b.x / 50), round(b.y / 50)) for b in blemishes(frame, 0.01, 12).spots] == [(3, 3)]


@pytest.mark.parametrize(
    "scene",
    [Shading((1000, 750), angle=40, axis=(33.0, 12.0)), Shading((1000, 750), angle=25, vignette=0.9)],
    ids=["cos⁴ to 0.3", "rim to 0.4"],
)
def test_a_lens_makes_no_blemish(scene: Shading) -> None:
    """The fall-off of a lens, steep or with a rim, is background down to 0.5 % of it, in the corners too."""
    rng = np.random.default_rng(5)
    light = scene.frame()
    frame = light + 0.002 * np.sqrt(light) * rng.standard_normal(light.shape)

    for contrast, size in ((0.005, 6), (0.005, 10), (0.005, 40)):
        assert blemishes(frame, contrast, size).spots == ()


def test_noise_too_large_for_the_contrast_is_told() -> None:
    """With noise of 20 % a spot of 6 px cannot be told at 1 %: what could be is k times the noise of its cells."""
    rng = np.random.default_rng(6)
    found = blemishes(1 + 0.2 * rng.standard_normal((240, 320)), 0.01, 6)

    assert found.spots == ()
    assert found.least == pytest.approx(5.6 * 0.2 / 6, rel=0.15)


@pytest.mark.parametrize(
    ("contrast", "size", "level", "said"),
    [
        (0.0, 10, 1.0, r"contrast 0 and size 10 px; above 0"),
        (0.02, 80, 1.0, r"window of the background, 72 px of this frame"),
        (0.02, 10, 0.0, r"light falls to 0; light over black"),
    ],
)
def test_what_is_refused(contrast: float, size: float, level: float, said: str) -> None:
    """No contrast, a size that the background would swallow, and no light are refused with what is allowed."""
    with pytest.raises(ValueError, match=said):
        blemishes(np.full((480, 640), level), contrast, size)


def test_holes_are_refused() -> None:
    """Values that are no numbers make no column."""
    with pytest.raises(ValueError, match="not finite"):
        line_defects(np.full((40, 40), np.nan))
