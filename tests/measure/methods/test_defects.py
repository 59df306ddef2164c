"""Defects from frames to counts and places: planted ones found, none invented, mosaics, sets, refusals."""

from collections import Counter
from typing import Any

import numpy as np
import pytest

from runner.capture.frame import Box
from runner.errors import MeasurementRefused, UsageError
from runner.measure.methods import defects
from runner.measure.reading import Reading, Spot
from runner.spec.model import Camera
from tests.measure.flat_samples import camera, codes, read, sample, value
from tests.scenes.flats import Shading, scattered, spot

SIZE = (640, 480)
LENS = 20000 * Shading(SIZE, angle=20, axis=(30.0, -12.0)).frame()
NOISE = 100.0


def _measure(
    frames: list[np.ndarray], of: Camera | None = None, *, lit: bool = True, channel: str = "mono", **options: Any
) -> tuple[dict[str, Reading], tuple[Spot, ...]]:
    measured = defects.measure(sample(frames, of, lit=lit, channel=channel), defects.read_options(options))
    return read(measured), measured.spots


def _pair(light: np.ndarray, rng: np.random.Generator, count: int = 2, noise: float = NOISE) -> list[np.ndarray]:
    return [light + rng.normal(0, noise, light.shape) for _ in range(count)]


def _places(spots: tuple[Spot, ...], kind: str) -> set[tuple[float, float]]:
    return {(one.x, one.y) for one in spots if one.kind == kind}


def test_a_flat_with_every_kind_of_defect() -> None:
    """Dead, dim and bright pixels, a cluster, a column, a row and a blemish: all found, placed, and none besides."""
    rng = np.random.default_rng(1)
    light = LENS * spot(SIZE, (420.3, 300.8), 9.0, -0.06)
    dead, dim, bright = [(50, 60), (501, 77)], [(303, 201), (77, 410)], [(250, 44)]
    frames = _pair(light, rng)
    for frame in frames:
        for (x, y), share in ((dead[0], 0.0), (dead[1], 0.4), (dim[0], 0.9), (dim[1], 0.94), (bright[0], 1.08)):
            frame[y, x] = share * light[y, x]
        frame[120:122, 560:563] = 1.2 * light[120:122, 560:563]
        frame[:, 333] += 60
        frame[99] -= 60
    found, spots = _measure([codes(f) for f in frames])

    assert {name: value(one) for name, one in found.items() if one.value is not None} == {
        "dead_pixels": 2,
        "dim_pixels": 2,
        "bright_pixels": 7,
        "blinking_pixels": 0,
        "blemishes": 1,
        "clusters": 1,
        "largest_cluster": 6,
        "defective_columns": 1,
        "defective_rows": 1,
    }
    assert _places(spots, "dead pixel") == set(dead)
    assert _places(spots, "dim pixel") == set(dim)
    assert set(bright) < _places(spots, "bright pixel")
    assert _places(spots, "cluster") == {(561.0, 120.5)}
    assert _places(spots, "defective column") == {(333.0, 239.5)}
    assert _places(spots, "defective row") == {(319.5, 99.0)}
    (blemish,) = (one for one in spots if one.kind == "blemish")
    assert np.hypot(blemish.x - 419.8, blemish.y - 300.3) < 1
    assert float(blemish.words.split()[0]) == pytest.approx(6, abs=0.3)
    assert "darker than around it" in blemish.words
    words = {(one.x, one.y): one.words for one in spots}
    assert words[dead[1]].startswith("60 % below its neighbours, ")
    assert words[bright[0]].startswith("8")


def test_counts_by_zone() -> None:
    """Hot pixels, a cluster, a column and blinking pixels in the centre and around it add up to those of all.

    The centre takes 50 % of width and height: columns 160 to 479, rows 120 to 359 of 640 × 480.
    """
    rng = np.random.default_rng(21)
    frames = _pair(np.full(SIZE[::-1], 500.0), rng, 6, 20.0)
    centre, outer = [(320, 240), (161, 121), (470, 350)], [(20, 30), (159, 200), (300, 119), (600, 400)]
    for frame in frames:
        for x, y in (*centre, *outer, (479, 200), (480, 200)):  # the last two touch across the border
            frame[y, x] += 400
        frame[:, 100] += 30
    for y, x in ((50, 60), (300, 300)):  # their means stay, so that they are not hot as well
        frames[2][y, x] += 300
        frames[4][y, x] -= 300
    names = ("hot_pixels", "clusters", "defective_columns", "blinking_pixels", "largest_cluster")
    seen = sample(
        [codes(f) for f in frames], lit=False, wanted=(*(f"{n}_{z}" for n in names for z in ("centre", "outer")),)
    )
    found = read(defects.measure(seen, defects.read_options({})))

    assert {n: (value(found[f"{n}_centre"]), value(found[f"{n}_outer"])) for n in names} == {
        "hot_pixels": (4, 5),
        "clusters": (1, 0),
        "defective_columns": (0, 1),
        "blinking_pixels": (1, 1),
        "largest_cluster": (2, 0),
    }
    assert value(found["hot_pixels"]) == 9
    assert (found["hot_pixels_centre"].trials, found["hot_pixels_outer"].trials) == (320 * 240, 640 * 480 - 320 * 240)
    assert found["defective_columns_outer"].trials == 320
    assert defects.quantity("hot_pixels_edge") is None
    info = defects.quantity("hot_pixels_outer")
    assert info is not None
    assert info.sentence.endswith("; in what lies around the centre of the region.")


def test_zones_refuse_what_the_whole_does_not_hold() -> None:
    """Hot pixels of the centre are counted in a dark frame, as those of all; stuck pixels take some ten frames."""
    rng = np.random.default_rng(22)
    seen = sample([codes(f) for f in _pair(LENS, rng)], wanted=("hot_pixels_centre", "stuck_pixels_outer"))
    found = read(defects.measure(seen, defects.read_options({"centre": "30 %"})))

    refusals = [found[name].refusal for name in ("hot_pixels_centre", "stuck_pixels_outer")]
    assert [r.cause for r in refusals if r is not None] == ["not defined", "too few frames"]


def test_a_column_counts_by_half_of_its_length() -> None:
    """A column that departs in its upper half is defective, as where halves are read out apart; a dark spot is none.

    The spot takes 6 % of the light off 18 of 480 rows: 45 DN of a column's mean, 14 times the noise of such means.
    """
    rng = np.random.default_rng(15)
    light = 20000 * np.ones(SIZE[::-1]) * spot(SIZE, (200.0, 300.0), 9.0, -0.06)
    light[:240, 500] += 120
    found, spots = _measure([codes(f) for f in _pair(light, rng)])

    assert _places(spots, "defective column") == {(500.0, 239.5)}
    assert value(found["defective_rows"]) == 0
    assert value(found["blemishes"]) == 1


def test_counts_are_counts() -> None:
    """Counts have no uncertainty of their own; those of pixels, columns and rows are out of so many."""
    found, _ = _measure([codes(f) for f in _pair(LENS, np.random.default_rng(2))])

    for name, one in found.items():
        if one.value is not None:
            assert (one.count, one.u, one.components, one.measured_in) == (True, 0.0, (), "1"), name
    assert found["dead_pixels"].trials == 640 * 480
    assert (found["defective_columns"].trials, found["defective_rows"].trials) == (640, 480)
    assert found["blemishes"].trials is None


def test_over_six_times_the_noise_in_ten_megapixels() -> None:
    """Every pixel that departs by 6.1 to 9 times the noise of the mean frame is found; fewer than one false in 10 MP.

    Of 10 MP lit and 10 MP dark some 0.6 false ones are expected in all; three or more come once in forty times.
    """
    rng = np.random.default_rng(3)
    size = (3600, 2800)
    places = scattered(size, 120, rng, apart=64)
    x, y = (np.array(v) for v in zip(*places, strict=True))
    departs = rng.uniform(6.1, 9, 120)
    false = 0
    for lit, level in ((True, 12000.0), (False, 0.0)):
        sign = rng.choice([-1, 1], 120) if lit else np.ones(120)
        frames = []
        for _ in range(2):
            frame = level + rng.normal(0, NOISE, size[::-1]).astype(np.float32)
            frame[y, x] = level + sign * departs * NOISE / np.sqrt(2)
            frames.append(codes(frame.astype(np.float64), 2000))
        of = camera(frames[0], black_level=2000)
        found, spots = _measure(frames, of, lit=lit)
        kinds = ("dim pixel", "bright pixel") if lit else ("hot pixel",)
        seen = {place for kind in kinds for place in _places(spots, kind)}
        assert set(places) <= seen
        false += len(seen) - 120 + int(value(found["blinking_pixels"]))
        assert found["defective_columns"].value == found["defective_rows"].value == 0

    assert false <= 2


@pytest.mark.parametrize("mosaic", ["RGGB", "GRBG"])
def test_a_defect_of_green_alone(mosaic: str) -> None:
    """A dim pixel, a column and a spot of green alone are found in green, where they lie in the frame, and only there.

    The greens of odd rows are 2 % brighter, and red and blue have other levels: neither is a defect.
    """
    rng = np.random.default_rng(4)
    light = LENS.copy()
    light[1::2] *= 1.02
    cell = np.array(list(mosaic)).reshape(2, 2)
    green = np.tile(cell == "G", (240, 320))
    light[~green] *= 0.6
    light[green] *= spot(SIZE, (200.4, 350.6), 12.0, -0.06)[green]
    ys, xs = np.nonzero(green)
    y, x = int(ys[54321]), int(xs[54321])
    frames = _pair(light, rng, noise=50)
    for frame in frames:
        frame[y, x] *= 0.9
        frame[green[:, 501].nonzero()[0], 501] += 80
    of = camera(frames[0], mosaic=mosaic)
    for channel in ("red", "green", "blue"):
        found, spots = _measure([codes(f) for f in frames], of, channel=channel)
        own = channel == "green"
        assert _places(spots, "dim pixel") == ({(float(x), float(y))} if own else set())
        assert _places(spots, "defective column") == ({(501.0, 239.5)} if own else set())
        assert value(found["blemishes"]) == int(own)
        assert all(np.hypot(bx - 199.9, by - 350.1) < 1.5 for bx, by in _places(spots, "blemish"))
        assert sum(Counter(one.kind for one in spots).values()) == (3 if own else 0)
        assert found["dim_pixels"].trials == 640 * 480 // (2 if own else 4)


def test_stuck_and_blinking_pixels_of_a_set() -> None:
    """Twelve frames tell pixels that never change and pixels that change too much; a stuck one may be of any level."""
    rng = np.random.default_rng(5)
    frames = _pair(LENS, rng, 12)
    stuck, blinking = [(100, 200), (401, 33)], [(320, 240), (11, 470)]
    for frame in frames:
        for x, y in stuck:
            frame[y, x] = LENS[y, x] + 40
        for x, y in blinking:
            frame[y, x] = LENS[y, x] + rng.normal(0, 5 * NOISE)
    found, spots = _measure([codes(f) for f in frames])

    assert _places(spots, "stuck pixel") == set(stuck)
    assert _places(spots, "blinking pixel") == set(blinking)
    assert (value(found["stuck_pixels"]), value(found["blinking_pixels"])) == (2, 2)
    assert {one.words for one in spots if one.kind == "stuck pixel"} == {"the same code in all 12 frames"}


def test_a_hot_pixels_own_noise_is_no_blinking() -> None:
    """Dark signal has shot noise (EMVA 1288 Release 4.0): forty hot pixels count once, and one that jumps blinks."""
    rng = np.random.default_rng(8)
    hot = scattered(SIZE, 41, rng)
    jumping = hot.pop()
    frames = []
    for number in range(4):
        frame = rng.normal(0, 15, (SIZE[1], SIZE[0]))
        for x, y in hot:
            frame[y, x] += 10 * rng.poisson(300)  # 10 DN for an electron: 173 DN of noise among 15
        frame[jumping[1], jumping[0]] += (-1) ** number * 160
        frames.append(codes(frame))
    found, spots = _measure(frames, lit=False)

    assert _places(spots, "hot pixel") == set(hot)
    assert _places(spots, "blinking pixel") == {jumping}
    assert (value(found["hot_pixels"]), value(found["blinking_pixels"])) == (40, 1)


def test_what_too_few_frames_cannot_tell() -> None:
    """One frame tells nothing that blinks, two nothing that is stuck: refused with the reason, the rest is counted."""
    rng = np.random.default_rng(6)
    frames = [codes(f) for f in _pair(LENS, rng)]
    one, two = _measure(frames[:1])[0], _measure(frames)[0]

    for refused, words in (
        (one["stuck_pixels"], "one frame does not tell what changes; capture 2"),
        (one["blinking_pixels"], "one frame does not tell what changes"),
        (two["stuck_pixels"], "the same code in all 2 frames with a probability of 0.00"),
    ):
        assert refused.refusal is not None
        assert refused.refusal.cause == "too few frames"
        assert words in refused.refusal.because
    assert value(two["blinking_pixels"]) == 0
    assert value(one["dead_pixels"]) == 0


def test_a_dark_and_a_flat_each_tell_their_own() -> None:
    """Hot pixels are counted in a dark, blemishes in a flat; asked of the other they are refused, else left out."""
    rng = np.random.default_rng(7)
    dark = rng.normal(0, 8, (120, 160))
    dark[40, 70] += 900
    frames = [codes(dark)]
    found, spots = _measure(frames, lit=False)

    assert value(found["hot_pixels"]) == 1
    (hot,) = spots
    assert (hot.kind, hot.x, hot.y) == ("hot pixel", 70, 40)
    assert hot.words.startswith(("8", "9"))
    assert "DN above its neighbours" in hot.words
    assert not {"dead_pixels", "blemishes"} & set(found)
    asked = sample(frames, lit=False, wanted=("blemishes",))
    refusal = read(defects.measure(asked, defects.Options()))["blemishes"].refusal
    assert refusal is not None
    assert (refusal.cause, refusal.because) == ("not defined", "blemishes are counted in an evenly lit field")


def test_single_steps_of_a_quiet_dark_are_no_hot_pixels() -> None:
    """Where nearly all pixels have one code, those of the next are noise; one that is 12 codes high is hot."""
    rng = np.random.default_rng(16)
    dark = np.full((240, 320), 30.0)
    dark[40, 70] += 12
    found, spots = _measure([codes(dark + rng.normal(0, 0.17, dark.shape)) for _ in range(4)], lit=False)

    assert value(found["hot_pixels"]) == 1
    assert _places(spots, "hot pixel") == {(70.0, 40.0)}


def test_a_region_counts_its_own_pixels() -> None:
    """Places of a region are px of the frame, and defects outside it are not counted."""
    rng = np.random.default_rng(8)
    light = LENS.copy()
    light[200, 300] = light[20, 20] = 0
    seen = sample([codes(f) for f in _pair(light, rng)], box=Box(250, 150, 410, 270))
    measured = defects.measure(seen, defects.Options())

    assert _places(measured.spots, "dead pixel") == {(300.0, 200.0)}
    assert {one.region for one in measured.spots} == {"part"}


def test_of_very_many_the_strongest_are_listed() -> None:
    """Of 900 hot pixels the 500 strongest are listed; the count says so, and that the noise is far from normal."""
    rng = np.random.default_rng(9)
    size = (320, 240)
    dark = rng.normal(0, 8, size[::-1])
    places = scattered(size, 900, rng, apart=8)
    for (x, y), height in zip(places, np.linspace(200, 2000, 900), strict=True):
        dark[y, x] = height
    found, spots = _measure([codes(dark)], lit=False)

    assert value(found["hot_pixels"]) == 900
    listed, heavy = found["hot_pixels"].flags
    assert listed == "500 of them are listed"
    assert float(heavy.split()[0]) == pytest.approx(900 / 320 / 240 / 4.65e-4, rel=0.2)  # share beyond 3.5 σ, of normal
    seen = _places(spots, "hot pixel")
    assert len(seen) == 500
    assert {(float(x), float(y)) for x, y in places[425:]} < seen  # 25 places are 50 DN, 6 times the noise


def test_noise_that_hides_what_is_asked_for() -> None:
    """Blemishes of 0.2 % cannot be told in noise of 5 %: not measured, for none found would prove nothing."""
    rng = np.random.default_rng(10)
    found, _ = _measure([codes(f) for f in _pair(LENS, rng, noise=1000)], blemish_contrast="0.2 %")
    refusal = found["blemishes"].refusal

    assert refusal is not None
    assert refusal.cause == "too noisy"
    assert "0.2 % is asked for; more frames or more light" in refusal.because


def test_options_say_what_counts() -> None:
    """A dim pixel is dead by `dead_below`, a blemish vanishes by contrast or size, a low threshold says its price."""
    rng = np.random.default_rng(11)
    light = LENS * spot(SIZE, (420.0, 300.0), 9.0, -0.06)
    light[99, 50] *= 0.6
    frames = [codes(f) for f in _pair(light, rng)]
    asked: dict[str, dict[str, Any]] = {
        "plain": {},
        "dead": {"dead_below": "80 %"},
        "contrast": {"blemish_contrast": "10 %"},
        "size": {"blemish_size": "30 px"},
        "low": {"threshold": 4},
    }
    counts = {}
    for name, options in asked.items():
        found, _ = _measure(frames, **options)
        counts[name] = {q: one.value for q, one in found.items()}
        if name == "low":
            assert any("noise alone gives some 20 pixels" in flag for flag in found["dim_pixels"].flags)

    assert (counts["plain"]["dead_pixels"], counts["plain"]["dim_pixels"], counts["plain"]["blemishes"]) == (0, 1, 1)
    assert (counts["dead"]["dead_pixels"], counts["dead"]["dim_pixels"]) == (1, 0)
    assert (counts["contrast"]["blemishes"], counts["size"]["blemishes"]) == (0, 0)


@pytest.mark.parametrize(
    ("level", "noise", "lit", "cause", "said"),
    [
        (64500.0, 300.0, True, "clipped", r"at the white level; at most 0\.1 % may"),
        (-500.0, 5.0, False, "clipped", "lie at code 0; at most 25 % may"),
        (9000.0, 0.0, True, "no picture", "every pixel has the code 9500"),
    ],
)
def test_wrong_uses(level: float, noise: float, lit: bool, cause: str, said: str) -> None:
    """A saturated flat hides what is bright, a dark that is cut has no noise to hold pixels against."""
    frame = codes(np.random.default_rng(12).normal(level, noise, (120, 160)))

    with pytest.raises(MeasurementRefused, match=said) as refused:
        _measure([frame], lit=lit)
    assert refused.value.cause == cause


def test_regions_too_small() -> None:
    """A region below one block of local noise is refused; one too small for blemishes lacks only those."""
    frames = [codes(f) for f in _pair(LENS[:31, :200], np.random.default_rng(13))]

    with pytest.raises(MeasurementRefused, match="31 rows and 200 columns of its own; the local noise needs 32"):
        _measure(frames)
    found, _ = _measure([codes(f) for f in _pair(LENS[:60, :200], np.random.default_rng(14))], blemish_size="12 px")
    assert value(found["dead_pixels"]) == 0
    refusal = found["blemishes"].refusal
    assert refusal is not None
    assert "blemishes of 12 px are asked for; in this region 2 px to 9 px" in refusal.because


@pytest.mark.parametrize(
    ("options", "said"),
    [
        ({"threshold": 2}, "threshold is 2; allowed is 3 to 100"),
        ({"dead_below": "100 %"}, r"dead_below is '100 %'; allowed is 1 % to 99 %"),
        ({"blemish_contrast": "5 px"}, r"blemish_contrast is '5 px'; allowed is 0\.1 % to 90 %"),
        ({"blemish_size": "5 %"}, "blemish_size is '5 %'; allowed is 2 px to 1000 px"),
        ({"blemish_size": "wide"}, "blemish_size is 'wide': 'wide' is no number with a unit"),
        ({"hot_above": 5}, "unknown option 'hot_above'"),
    ],
)
def test_options_are_held_to_their_meaning(options: dict[str, Any], said: str) -> None:
    """A threshold in the noise, a share of all, another unit and an unknown key are told."""
    with pytest.raises(UsageError, match=said):
        defects.read_options(options)
