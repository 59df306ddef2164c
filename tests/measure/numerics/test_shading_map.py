"""Shading maps against closed forms of light over the field, and their stated uncertainty."""

import numpy as np
import pytest

from runner.measure.numerics.shading_map import Figure, ShadingMap, shading_map
from tests.scenes.flats import Pattern, Shading, Values, stack

SIZE = (400, 300)
SCENES = {
    "cos⁴": Shading(SIZE, angle=38, axis=(25.0, -12.0)),
    "offset rim": Shading(SIZE, angle=15, vignette=0.6, axis=(-30.0, 18.0)),
    "polynomial": Shading(SIZE, powers=((1, 0, 0.08), (0, 1, -0.05), (2, 0, -0.25), (0, 2, -0.2), (3, 0, 0.04))),
}


def _blocks(scene: Shading, found: ShadingMap) -> Values:
    """Return the closed form's means over the same blocks."""
    return np.array(
        [
            [scene.mean(x0, x1, y0, y1) for x0, x1 in zip(found.x[:-1], found.x[1:], strict=True)]
            for y0, y1 in zip(found.y[:-1], found.y[1:], strict=True)
        ]
    )


def test_the_scenes_are_the_published_law() -> None:
    """cos⁴ at 10 to 45°: 0.940602, 0.779728, 0.5625, 0.344363, 0.25; a rim that cuts nothing: 1."""
    corner = np.array(0.0)
    found = [float(Shading(angle=a).at(corner, corner)) for a in (10, 20, 30, 40, 45)]

    assert found == pytest.approx([0.940602, 0.779728, 0.5625, 0.344363, 0.25], abs=1e-6)
    assert float(Shading(vignette=0.19).at(corner, corner)) == 1.0


@pytest.mark.parametrize("name", SCENES)
def test_maps_agree_with_closed_forms(name: str) -> None:
    """With noise of 1 % each block, corner, extreme and ratio lies within 0.2 % of the closed form.

    A block of 1200 px of two frames knows its mean within 0.02 %; 99 blocks and their ratio stay within 5 of that,
    and the rest is for sampling a curved surface at pixel centres.
    """
    scene, rng = SCENES[name], np.random.default_rng(3)
    found = shading_map(stack(0.6 * scene.frame(), 2, Pattern(0.006), rng, levels=(1.0, 1.01)), (9, 11))
    truth = _blocks(scene, found)
    relative, _ = found.to_centre
    to_maximum, _ = found.to_maximum

    np.testing.assert_allclose(relative, truth / truth[4, 5], atol=0.002)
    np.testing.assert_allclose(to_maximum, truth / truth.max(), atol=0.002)
    assert found.ratio.value == pytest.approx(truth.min() / truth.max(), abs=0.002)
    assert found.contrast.value == pytest.approx(np.ptp(truth) / (truth.max() + truth.min()), abs=0.002)
    ends = [truth[0, 0], truth[0, -1], truth[-1, 0], truth[-1, -1]] / truth[4, 5]
    assert [c.value for c in found.corners] == pytest.approx(list(ends), abs=0.002)


def test_the_centre_of_even_counts_and_uneven_blocks() -> None:
    """Of 4 × 6 blocks the centre is the mean of the middle four; 101 rows go into blocks of 25 or 26."""
    light = np.arange(101)[:, None] + 10.0 * np.arange(90)[None, :] + 100
    found = shading_map([light], (4, 6), noise=0.0)

    assert list(found.y) == [0, 25, 50, 76, 101]
    assert found.centre.value == pytest.approx(found.light[1:3, 2:4].mean())
    assert found.light[2, 0] == pytest.approx(light[50:76, :15].mean())
    assert found.maximum.at == (82.5, 88.5)
    assert found.minimum.at == (7.5, 12.5)


def test_the_largest_of_many_equal_blocks_is_not_too_large() -> None:
    """An even field of 99 noisy means: the bare maximum is 2.5 noises too large, the mended one clearly less."""
    rng = np.random.default_rng(9)
    maps = [shading_map([rng.normal(1, 0.05, (90, 132))], (9, 11), noise=0.05) for _ in range(60)]
    bare = np.mean([m.light.max() for m in maps]) - 1
    mended = np.mean([m.maximum.light.value for m in maps]) - 1

    assert bare == pytest.approx(2.5 * 0.05 / np.sqrt(120), rel=0.05)  # expected largest of 99 normals: 2.50
    assert abs(mended) < 0.65 * bare  # √2 - 1 of it is shown and taken off
    held = [abs(m.ratio.value - 1) <= 2 * m.ratio.u for m in maps]
    assert np.mean(held) >= 0.93 - 0.066  # two binomial standard deviations of 60


@pytest.mark.parametrize(
    ("scene", "count", "shot"),
    [
        (Shading((132, 108), angle=35, axis=(9.0, -5.0)), 2, True),
        (Shading((132, 108), angle=35), 1, False),
        (Shading((132, 108), powers=((1, 0, 0.2), (0, 2, -0.2))), 4, False),
    ],
    ids=["pair, shot noise", "single", "four"],
)
def test_the_uncertainty_holds(scene: Shading, count: int, shot: bool) -> None:
    """±2 u holds the closed form for map, corners, centre, extremes and ratios: 93 to 97 % of 200 draws (± 3 %).

    Extremes of blocks nearly alike only need 93 %: what their bias may be is counted in full.
    """
    rng = np.random.default_rng(count)
    light = 0.5 * scene.frame()
    noise = 0.02 * np.sqrt(light / 0.5) if shot else np.full(light.shape, 0.02)
    held: dict[str, list[float]] = {}
    truth = 0.5 * _blocks(scene, shading_map([light], (9, 11)))
    top, low, middle = truth.max(), truth.min(), truth[4, 5]
    for _ in range(200):
        found = shading_map([light + noise * rng.standard_normal(light.shape) for _ in range(count)], (9, 11))
        relative, u = found.to_centre
        others = u > 0  # the centre itself is 1, exactly
        held.setdefault("map", []).append(float(np.mean(np.abs(relative - truth / middle)[others] <= 2 * u[others])))
        figures: dict[str, tuple[Figure, float]] = {
            "centre": (found.centre, middle),
            "corner": (found.corners[0], truth[0, 0] / middle),
            "maximum": (found.maximum.light, top),
            "minimum": (found.minimum.light, low),
            "ratio": (found.ratio, low / top),
            "contrast": (found.contrast, (top - low) / (top + low)),
        }
        for name, (figure, value) in figures.items():
            held.setdefault(name, []).append(float(abs(figure.value - value) <= 2 * figure.u))

    for name, inside in held.items():
        assert np.mean(inside) >= 0.93 - 0.03, name
    for name in ("map", "centre", "corner"):
        assert np.mean(held[name]) <= 0.97 + 0.03, name


@pytest.mark.parametrize("count", [1, 2, 3])
def test_the_noise_of_a_block_is_that_of_its_pixels(count: int) -> None:
    """White noise σ in k px of n frames gives σ/√(k n); the centre relative to itself is 1 with u 0, exactly.

    Each block's 1200 px know the noise within 2 to 4 %, the mean of 99 blocks within 0.5 %; 3 % is allowed, for from
    several frames u is never below what their blocks' scatter says (99 blocks: 7 % of its own, on one side).
    """
    rng = np.random.default_rng(count)
    found = shading_map([rng.normal(1, 0.01, (360, 330)) for _ in range(count)], (9, 11))
    relative, u = found.to_centre

    assert found.light_u.mean() == pytest.approx(0.01 / np.sqrt(1200 * count), rel=0.03 if count == 1 else 0.12)
    assert (relative[4, 5], u[4, 5]) == (1.0, 0.0)
    assert u[0, 0] == pytest.approx(np.sqrt(2) * found.light_u.mean(), rel=0.15)


def test_rows_that_move_together_raise_u() -> None:
    """Row noise makes blocks scatter beyond the noise within them, and u follows it within a third."""
    rng = np.random.default_rng(12)
    maps = [shading_map(stack(np.full((90, 132), 1.0), 2, Pattern(0.01, 0.01), rng), (9, 11)) for _ in range(40)]
    truth = np.sqrt((0.01**2 / 120 + 0.01**2 / 10) / 2)  # of a block of 10 rows × 12 columns, two frames

    assert np.mean([m.light_u.mean() for m in maps]) == pytest.approx(truth, rel=0.33)


@pytest.mark.parametrize(
    ("frames", "blocks", "said"),
    [
        ([np.ones((20, 40))], (11, 5), r"11 × 5 blocks of 20 rows × 40 columns; 2 or more each way"),
        ([np.ones((20, 40)), np.ones((20, 41))], (2, 2), r"one size of rows × columns is needed"),
        ([np.full((20, 40), np.inf)], (2, 2), r"not finite"),
        ([np.zeros((20, 40))], (2, 2), r"light of a frame is 0; shading needs light over black"),
        ([np.pad(np.ones((10, 40)), ((0, 10), (0, 0)))], (2, 2), r"a block's light is 0"),
    ],
)
def test_what_is_refused(frames: list[Values], blocks: tuple[int, int], said: str) -> None:
    """Fields without light, of unequal size or of too few pixels for the blocks are refused with what is allowed."""
    with pytest.raises(ValueError, match=said):
        shading_map(frames, blocks)
