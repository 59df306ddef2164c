"""Defective pixels against planted ones: recall, false alarms, whole codes, time, clusters."""

import numpy as np
import pytest
from scipy import ndimage, stats

from runner.measure.numerics.defects import (
    Defect,
    K,
    clusters,
    equal_chance,
    expected_false,
    flat_pixels,
    hot_pixels,
    unsteady_pixels,
)
from tests.scenes.flats import Pattern, Shading, Values, plant, scattered, stack

SIZE = (640, 480)


def _places(defects: tuple[Defect, ...]) -> set[tuple[int, int]]:
    return {(d.x, d.y) for d in defects}


def test_every_defect_above_six_times_the_noise_is_found() -> None:
    """Of 400 planted pixels of 5 to 60 σ, both signs, under a lens: all that depart by 6 σ are found, none else.

    What departs counts with its own noise; between 5.2 and 6 σ a pixel may be found or not (0.4 σ are three standard
    deviations of what is not known of neighbours and noise).
    """
    rng = np.random.default_rng(1)
    light = 0.5 * Shading(SIZE, angle=20, axis=(40.0, 30.0)).frame()
    places = scattered(SIZE, 400, rng)
    noise = 0.004 * np.sqrt(light / 0.5)
    times = rng.uniform(5, 60, 400) * rng.choice([-1, 1], 400)
    steps = [n * noise[y, x] for n, (x, y) in zip(times, places, strict=True)]
    frame = plant(light + noise * rng.standard_normal(light.shape), places, steps)
    found = _places(flat_pixels(frame).defects)
    departs = np.abs(frame - light) / noise

    assert {(int(x), int(y)) for y, x in np.argwhere(departs > 6)} <= found
    assert all(departs[y, x] > 5.2 for x, y in found)


def test_false_alarms_of_normal_noise() -> None:
    """Fewer than one false pixel in 10 MP: 4 flats, 4 darks and 4 pairs of 1 MP have at most 4 (12 MP, chance 1 %)."""
    rng = np.random.default_rng(2)
    false = 0
    for _ in range(4):
        one, other = (100 + rng.standard_normal((1000, 1000), dtype=np.float32) for _ in range(2))
        false += len(flat_pixels(one).defects) + len(hot_pixels(other).defects)
        false += len(unsteady_pixels([one, other]).blinking.defects)

    assert false <= 4
    assert expected_false(K, 10_000_000) < 0.25
    assert expected_false(3.0, 1000) == pytest.approx(1000 * 2 * stats.norm.sf(3))
    assert expected_false(3.0, 1000, 1) == pytest.approx(1000 * stats.norm.sf(3))


def test_classes_and_contrasts_of_a_flat() -> None:
    """A pixel of 0, 30, 80, 150 % of its neighbours' light is dead, dead, dim, bright, by its contrast within 3 σ."""
    rng = np.random.default_rng(3)
    light = Shading(SIZE, angle=25).frame()
    places = [(100, 80), (0, 0), (639, 479), (320, 5)]
    shares = [0.0, 0.3, 0.8, 1.5]
    frame = light + rng.normal(0, 0.005, light.shape)
    for (x, y), share in zip(places, shares, strict=True):
        frame[y, x] = share * light[y, x]
    found = {(d.x, d.y): d for d in flat_pixels(frame).defects}

    assert [found[p].kind for p in places] == ["dead", "dead", "dim", "bright"]
    assert [found[p].contrast for p in places] == pytest.approx([s - 1 for s in shares], abs=0.02)
    assert found[100, 80].significance == pytest.approx(-light[80, 100] / 0.005, rel=0.05)
    assert {d.kind: d for d in flat_pixels(frame, dead=0.9).defects}["dead"].x in {0, 100, 639}


@pytest.mark.parametrize("noise", [0.02, 0.2, 0.5, 2.0])
def test_darks_of_whole_codes(noise: float) -> None:
    """Rounded darks of any noise have the planted pixels of +30 DN and no others; single steps are no defects."""
    rng = np.random.default_rng(int(100 * noise))
    places = scattered(SIZE, 60, rng)
    dark = np.round(plant(rng.normal(64, noise, SIZE[::-1]), places, 30.0)).astype(np.uint16)

    assert _places(hot_pixels(dark).defects) == set(places)


def test_a_dark_that_is_clamped_at_zero() -> None:
    """All zeros but for two hot pixels: found, with finite significance."""
    dark = np.zeros((120, 160), dtype=np.uint16)
    dark[30, 40], dark[119, 159] = 400, 900
    found = hot_pixels(dark)

    assert _places(found.defects) == {(40, 30), (159, 119)}
    assert all(np.isfinite(d.significance) for d in found.defects)
    assert hot_pixels(np.zeros((120, 160))).defects == ()


def test_a_step_that_is_known() -> None:
    """In a mean of 4 quiet frames, all 64 DN, a pixel one step of 1/4 DN up is no defect if that step is told."""
    dark = np.full((120, 160), 64.0)
    dark[50, 60], dark[70, 80] = 64.25, 70.0

    assert _places(hot_pixels(dark, step=0.25).defects) == {(80, 70)}


def test_tails_heavier_than_the_normals_are_told() -> None:
    """Noise of Student's t with 3 degrees of freedom has some 15 times the normal's share beyond 3.5 σ by MAD."""
    rng = np.random.default_rng(4)
    share = 2 * stats.t.sf(3.5 * 1.4826 * stats.t.ppf(0.75, 3), 3) / (2 * stats.norm.sf(3.5))

    assert hot_pixels(rng.standard_t(3, (480, 640))).tail == pytest.approx(share, rel=0.15)
    assert hot_pixels(rng.standard_normal((480, 640))).tail == pytest.approx(1, abs=0.7)


@pytest.mark.parametrize("gain_drift", [False, True])
def test_stuck_and_blinking_pixels(gain_drift: bool) -> None:
    """In 8 frames of whole codes, noise 8 DN: stuck pixels have one code, blinking ones six times the noise of others.

    Six times the noise passes what chi-square of 7 degrees of freedom gives at k = 5.6 (2.9 times) but for 0.1 %.
    """
    rng = np.random.default_rng(5)
    light = 500 + 1500 * Shading(SIZE, angle=25).frame()
    chosen = scattered(SIZE, 80, rng)
    stuck, blinking = chosen[:40], chosen[40:]
    levels = 1 + 0.01 * rng.standard_normal(8)
    frames = []
    for frame in stack(light, 8, Pattern(8.0), rng, levels=list(levels) if gain_drift else ()):
        codes = np.round(plant(frame, blinking, (rng.normal(0, 47, 40)).tolist()))
        for x, y in stuck:
            codes[y, x] = 900 + x % 7
        frames.append(codes.astype(np.uint16))
    found = unsteady_pixels(frames, gain_drift=gain_drift)

    assert found.stuck is not None
    assert _places(found.stuck) == set(stuck)
    assert len(set(blinking) - _places(found.blinking.defects)) <= 1
    assert len(_places(found.blinking.defects) - set(blinking)) == 0
    assert found.blinking.noise == pytest.approx(np.sqrt(64 + 2 / 12), rel=0.05)
    assert np.median([d.contrast for d in found.blinking.defects]) == pytest.approx(6, rel=0.15)


@pytest.mark.parametrize("gain_drift", [False, True])
@pytest.mark.parametrize("count", [3, 5])
def test_bands_that_run_make_no_pixel_blink(count: int, gain_drift: bool) -> None:
    """Bands that stand elsewhere in the last frame, ten times the noise together, are no pixel's own.

    A pixel's variance passes the limit there in half of the frame; only four pixels jump, and only they are found.
    """
    rng = np.random.default_rng(12)
    blinking = scattered(SIZE, 4, rng)
    y, x = np.arange(SIZE[1])[:, None], np.arange(SIZE[0])
    frames = []
    for number in range(count):
        turn = np.pi * (number == count - 1)
        bands = 12 * np.sin(2 * np.pi * y / 37 + turn) + 8 * np.cos(2 * np.pi * x / 61 + turn)
        frame = 400 + bands + rng.normal(0, 2, bands.shape)
        frames.append(np.round(plant(frame, blinking, [30.0 * (-1) ** number] * 4)).astype(np.uint16))

    assert _places(unsteady_pixels(frames, gain_drift=gain_drift).blinking.defects) == set(blinking)


@pytest.mark.parametrize("count", [2, 3])
def test_a_blinking_pixels_scatter(count: int) -> None:
    """Contrast is the pixel's standard deviation over the frames over its neighbours', drift taken out (n-1)."""
    rng = np.random.default_rng(9)
    frames = [np.round(rng.normal(2000, 20, (160, 200))) for _ in range(count)]
    for frame, code in zip(frames, (3000, 1500, 2000), strict=False):
        frame[70, 90] = code
    codes = [(frame * gain).astype(np.uint16) for frame, gain in zip(frames, (1.0, 1.02, 0.98), strict=False)]
    (one,) = unsteady_pixels(codes, gain_drift=True).blinking.defects

    assert (one.x, one.y) == (90, 70)
    planted = np.std([frame[70, 90] for frame in frames], ddof=1) / 20
    assert one.contrast == pytest.approx(planted, rel=0.06)  # the local noise is known within 2 %, the gain adds 1 %


def test_two_frames_of_whole_codes_tell_nothing_of_stuck_pixels() -> None:
    """In a pair of noise 8 DN one pixel in 28 is equal by chance: stuck pixels are not told, and the chance is."""
    rng = np.random.default_rng(6)
    frames = [np.round(f) for f in stack(np.full((200, 300), 700.0), 2, Pattern(8.0), rng)]
    found = unsteady_pixels(frames)

    assert found.stuck is None
    assert found.stuck_chance == pytest.approx(np.mean(frames[0] == frames[1]), rel=0.1)


@pytest.mark.parametrize(("noise", "count"), [(0.3, 3), (1.0, 2), (1.0, 4), (5.0, 3)])
def test_the_chance_of_equal_codes(noise: float, count: int) -> None:
    """Share of pixels of random level whose rounded values are all equal, from 2e5 draws (3 standard deviations)."""
    rng = np.random.default_rng(count)
    codes = np.round(rng.uniform(0, 1, (200_000, 1)) + noise * rng.standard_normal((200_000, count)))
    seen = float(np.mean(np.all(codes == codes[:, :1], axis=1)))
    chance = equal_chance(noise, count)

    assert chance == pytest.approx(seen, abs=3 * np.sqrt(chance / 200_000))
    assert equal_chance(0.0, count) == 1
    assert equal_chance(np.inf, count) == 0


def test_clusters_are_those_of_labelling() -> None:
    """Groups by sides or corners, of two or more, the largest first: as labelling of the whole frame gives them."""
    rng = np.random.default_rng(7)
    mask = rng.random((60, 80)) < 0.12
    mask[10, 79], mask[11, 0] = True, True  # the end of one row and the start of the next do not touch
    labels, count = ndimage.label(mask, np.ones((3, 3)))
    wanted = [{(int(x), int(y)) for y, x in np.argwhere(labels == n)} for n in range(1, count + 1)]
    defects = [Defect(int(x), int(y), "hot", 1.0, 9.0) for y, x in np.argwhere(mask)]
    found = clusters([*defects, *defects[:10]])

    assert sorted(map(sorted, wanted)) == sorted(
        [sorted(c.pixels) for c in found] + [sorted(w) for w in wanted if len(w) == 1]
    )
    assert [c.size for c in found] == sorted((c.size for c in found), reverse=True)
    assert clusters([]) == clusters(defects[:1]) == ()


@pytest.mark.parametrize(
    ("frame", "k", "said"),
    [
        (np.ones((40, 40)), 1.0, r"k is 1; above 2 is allowed"),
        (np.ones(40), K, r"shape \(40,\); rows × columns"),
        (np.full((40, 40), np.nan), K, r"not finite"),
        (np.zeros((40, 40)), K, r"median light is 0; light over black"),
    ],
)
def test_what_is_refused(frame: Values, k: float, said: str) -> None:
    """A flat without light, of another shape or with holes, and a k that noise passes, are refused."""
    with pytest.raises(ValueError, match=said):
        flat_pixels(frame, k)


def test_sets_that_are_refused() -> None:
    """One frame, or frames of two sizes, tell nothing in time."""
    with pytest.raises(ValueError, match=r"1 frames of sizes \[\(40, 40\)\]; 2 of one size"):
        unsteady_pixels([np.ones((40, 40))])
