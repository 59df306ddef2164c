"""Shading from frames to readings: closed forms of lenses, colours, blacks, refusals, and how well u covers."""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from runner.capture.frame import Box
from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Measurement
from runner.measure.methods import shading
from tests.measure.flat_samples import BLACK, camera, codes, read, sample, value
from tests.scenes.flats import Pattern, Shading, stack

LENS = Shading((640, 480), angle=30, axis=(24.0, -14.0))
RIM = Shading((660, 495), angle=15, vignette=0.5, pupil=1.1, axis=(-20.0, 12.0))


def _measure(frames: list[np.ndarray], of: Any = None, channel: str = "mono", **options: Any) -> Measurement:
    return shading.measure(sample(frames, of, channel=channel), shading.read_options(options))


def _truth(scene: Shading, blocks: tuple[int, int] = (11, 9)) -> np.ndarray:
    """Return the blocks' means by quadrature of the closed form, relative to the middle block, rows × columns."""
    (w, h), (across, down) = scene.size, blocks
    x, y = np.round(np.linspace(0, w, across + 1)), np.round(np.linspace(0, h, down + 1))
    means = np.array([[scene.mean(x[i], x[i + 1], y[j], y[j + 1]) for i in range(across)] for j in range(down)])
    return np.asarray(means / means[down // 2, across // 2])


def _seen(scene: Shading) -> np.ndarray:
    """Return the blocks' means of the frame itself, relative to the middle block, rows × columns."""
    blocks = _blocks(scene.frame())
    return np.asarray(blocks / blocks[4, 5])


def _blocks(light: np.ndarray) -> np.ndarray:
    y, x = (np.round(np.linspace(0, size, n + 1)).astype(int) for size, n in zip(light.shape, (9, 11), strict=True))
    sums = np.add.reduceat(np.add.reduceat(light, y[:-1], axis=0), x[:-1], axis=1)
    return np.asarray(sums / np.outer(np.diff(y), np.diff(x)))


@pytest.mark.parametrize("scene", [LENS, RIM], ids=["cos⁴", "rim"])
def test_closed_forms_of_lenses(scene: Shading) -> None:
    """Shading, corner and map within 0.2 % of the closed form, with photon-like noise of 1 % of the light, two frames.

    A block of 3000 px is then known within 0.013 %; so the bound is on what blocks and cells make of the field.
    """
    rng = np.random.default_rng(1)
    frames = [codes(f) for f in stack(20000 * scene.frame(), 2, Pattern(200), rng, levels=[1.0, 1.01])]
    measured = _measure(frames)
    found, blocks = read(measured), _truth(scene)
    ratio = blocks.min() / blocks.max()

    assert value(found["uniformity"]) == pytest.approx(100 * ratio, abs=0.2)
    assert value(found["luminance_shading"]) == pytest.approx(100 * (1 - ratio), abs=0.2)
    corner = min(blocks[0, 0], blocks[0, -1], blocks[-1, 0], blocks[-1, -1])
    assert value(found["darkest_corner"]) == pytest.approx(100 * corner, abs=0.2)
    offset = 100 * np.hypot(*scene.axis) / scene.half_diagonal
    assert value(found["centre_offset"]) == pytest.approx(offset, abs=0.5)
    assert (found["centre_offset"].u or 0) < 0.5
    (area,) = measured.maps
    np.testing.assert_allclose(np.array(area.values), 100 * blocks, atol=0.2)
    assert area.x[0] == pytest.approx(scene.size[0] / 22, abs=0.5)
    assert [words.split()[0] for _, _, words in area.marks] == ["brightest", "darkest"]


def test_cosine_fourth_at_the_corner() -> None:
    """Published values of cos⁴: 0.779728 at 20 degrees, 0.562500 at 30, within 0.3 %.

    A corner block's middle lies short of the corner by half its width: 20 and 40 blocks a side are taken on to none.
    """
    for angle, table in ((20, 0.779728), (30, 0.562500)):
        light = [codes(40000 * Shading((800, 600), angle=angle).frame())]
        coarse, fine = (
            value(read(_measure(light, blocks_across=n, blocks_down=n))["darkest_corner"]) for n in (20, 40)
        )
        assert 2 * fine - coarse == pytest.approx(100 * table, abs=0.3)


def test_a_region_has_its_own_middle() -> None:
    """Blocks, centre and places belong to the region; places of the map are px of the frame."""
    scene = Shading((640, 480), angle=30)
    seen = sample([codes(20000 * scene.frame())], box=Box(320, 240, 640, 480))
    measured = shading.measure(seen, shading.Options())
    found = read(measured)
    (area,) = measured.maps

    assert measured.readings[0].region == area.region == "part"
    assert found["centre_offset"].refusal is not None
    assert "lies at the border" in found["centre_offset"].refusal.because
    assert area.x[0] == pytest.approx(320 + 320 / 22, abs=0.5)
    assert area.y[-1] == pytest.approx(480 - 240 / 18, abs=0.5)
    assert area.marks[0][:2] == (area.x[0], area.y[0])


def _colours(size: tuple[int, int], **lenses: Shading) -> np.ndarray:
    """Return an RGGB mosaic of three lights, black apart."""
    cell = {"red": (0, 0), "blue": (1, 1)}
    out = 20000 * lenses["green"].frame()
    for name, (y, x) in cell.items():
        out[y::2, x::2] = 12000 * lenses[name].frame()[y::2, x::2]
    assert out.shape == size[::-1]
    return out


@pytest.mark.parametrize("kind", ["mosaic", "rgb"])
def test_colours_that_shade_apart(kind: str) -> None:
    """Red falls off more than green, blue as green: the largest departure of red/green from the middle's, within 0.2 %.

    Green itself is what they are held against: its reading says which channels to name.
    """
    rng = np.random.default_rng(2)
    size = (640, 480)
    same, more = Shading(size, angle=20), Shading(size, angle=26)
    if kind == "mosaic":
        light = _colours(size, red=more, green=same, blue=same)
        frames = [codes(light + rng.normal(0, 60, light.shape)) for _ in range(2)]
        of = camera(frames[0], mosaic="RGGB")
    else:
        planes = [12000 * more.frame(), 20000 * same.frame(), 9000 * same.frame()]
        frames = [codes(np.stack(planes, axis=2) + rng.normal(0, 60, (480, 640, 3))) for _ in range(2)]
        of = camera(frames[0], colour="rgb")
    ratio = _truth(more) / _truth(same)
    red = read(_measure(frames, of, "red"))["colour_shading"]
    blue = read(_measure(frames, of, "blue"))["colour_shading"]

    assert value(red) == pytest.approx(100 * np.abs(ratio - 1).max(), abs=0.2)
    assert value(blue) < 0.2
    assert value(blue) < 2 * (blue.u or 0)
    green = sample(frames, of, channel="green", wanted=("colour_shading",))
    refusal = read(shading.measure(green, shading.Options()))["colour_shading"].refusal
    assert refusal is not None
    assert (refusal.cause, "channel: red or channel: blue" in refusal.because) == ("not defined", True)
    assert "colour_shading" not in read(_measure(frames, of, "green"))


def test_where_black_comes_from() -> None:
    """A dark that glows by 900 DN on one side is subtracted block by block, as one level, or not at all, as asked.

    Lit evenly by 3000 DN, a field over the glow looks uneven by 900 DN unless the mean frame is taken.
    """
    rng = np.random.default_rng(3)
    glow = np.linspace(0, 900, 160)[None, :] + np.zeros((120, 1))
    darks = [codes(glow + rng.normal(0, 5, glow.shape)) for _ in range(3)]
    seen = sample([codes(3000 + glow + rng.normal(0, 20, glow.shape)) for _ in range(2)], darks=darks)
    ends = _blocks(glow)[0, [0, -1]]
    level = 450.0
    wanted = {
        "auto": 100.0,
        "mean frame": 100.0,
        "mean level": 100 * np.divide(*(3000 + ends - level)),
        "black level": 100 * np.divide(*(3000 + ends)),
    }
    words = {"auto": "mean of 3 dark frames", "mean level": "mean level of 3 dark frames", "black level": "500 DN"}
    for dark, uniformity in wanted.items():
        found = read(shading.measure(seen, shading.read_options({"dark": dark})))
        assert value(found["uniformity"]) == pytest.approx(uniformity, abs=0.2)
        assert words.get(dark, "") in found["luminance_shading"].flags[0]
        assert ("dark frames" in str(found["uniformity"].components)) is (dark != "black level")


def test_a_companion_that_is_asked_for_must_be_there() -> None:
    """The mean frame of a companion that nobody captured is refused; `auto` then takes the stated black and says so."""
    frames = [codes(np.full((120, 160), 9000.0) + np.arange(160))]

    with pytest.raises(MeasurementRefused, match="'dark' whose mean frame is black is missing or unusable; name it"):
        _measure(frames, dark="mean frame")
    assert read(_measure(frames))["luminance_shading"].flags == (f"black is the stated black level of {BLACK} DN",)


def test_a_companion_that_was_lost_is_not_passed_over() -> None:
    """Where the spec names darks and they cannot be used, shading is not measured with another black in silence."""
    frames = [codes(np.full((120, 160), 9000.0) + np.arange(160))]
    lost = replace(sample(frames), lost_companions={"dark": "cap on"})

    for dark, taken in (("auto", "mean frame"), ("mean level", "mean level")):
        said = rf"'cap on' whose {taken} is black cannot be used; capture it again, or write dark: black level"
        with pytest.raises(MeasurementRefused, match=said) as caught:
            shading.measure(lost, shading.read_options({"dark": dark}))
        assert caught.value.cause == "missing companion"
    assert read(shading.measure(lost, shading.read_options({"dark": "black level"})))["uniformity"].value is not None
    other = replace(lost, lost_companions={"flat": "lit"})
    assert read(shading.measure(other, shading.Options()))["uniformity"].value is not None


def test_a_mosaics_channel_and_its_dark() -> None:
    """The companion's own pixels of the channel are subtracted: red glows and green does not."""
    rng = np.random.default_rng(4)
    glow = np.zeros((240, 320))
    glow[::2, ::2] = np.linspace(0, 900, 160)
    flat = [codes(3000 + glow + rng.normal(0, 20, glow.shape)) for _ in range(2)]
    seen = {
        name: sample(flat, camera(flat[0], mosaic="RGGB"), channel=name, darks=[codes(glow)])
        for name in ("red", "green")
    }
    for one in seen.values():
        found = read(shading.measure(one, shading.Options()))
        assert value(found["uniformity"]) == pytest.approx(100, abs=0.3)
    assert value(read(shading.measure(seen["red"], shading.Options()))["colour_shading"]) < 0.3


FIELD = codes(9000 * Shading((160, 120), angle=20).frame())


@pytest.mark.parametrize(
    ("frame", "options", "cause", "said"),
    [
        (codes(67000 * Shading((160, 120), angle=20).frame()), {}, "clipped", "pixels lie at the white level; at most"),
        (FIELD[:16], {}, "outside the estimator's limits", "16 rows and 160 columns of its own for 9 × 11 blocks"),
        (codes(np.linspace(0, 9000, 160) + np.zeros((120, 1)) - 400), {}, "too dark", "shading needs light over black"),
        (np.full((120, 160), 9000, dtype=np.uint16), {}, "no picture", "every pixel has the code 9000"),
    ],
    ids=["white", "small", "half dark", "constant"],
)
def test_wrong_uses(frame: np.ndarray, options: dict[str, Any], cause: str, said: str) -> None:
    """What carries no shading is refused with what was found."""
    with pytest.raises(MeasurementRefused, match=said) as refused:
        _measure([frame], **options)
    assert refused.value.cause == cause


def test_a_dark_frame_and_a_lamp_that_failed() -> None:
    """A frame without light has no shading, nor has a set of which one is without."""
    dark = codes(np.random.default_rng(5).normal(0, 5, (120, 160)))

    with pytest.raises(MeasurementRefused, match="this is a frame without light"):
        shading.measure(sample([dark], lit=False), shading.Options())
    with pytest.raises(
        MeasurementRefused, match=r"field-2\.tif: the field lies -?0\.\d+ % .* stated black level of 500"
    ):
        _measure([FIELD, dark])


@pytest.mark.parametrize(
    ("options", "said"),
    [
        ({"blocks_across": 1}, "blocks_across is 1; allowed are whole numbers from 2 to 40"),
        ({"blocks_down": 9.5}, r"blocks_down is 9\.5"),
        ({"dark": "none"}, "dark is 'none'; allowed are auto, mean frame, mean level, black level"),
        ({"block": 3}, "unknown option 'block'"),
    ],
)
def test_options_are_held_to_their_meaning(options: dict[str, Any], said: str) -> None:
    """One block, half a block and a black that is none of four are told."""
    with pytest.raises(UsageError, match=said):
        shading.read_options(options)


def coverage(draws: int, seed: int = 21) -> dict[str, tuple[float, float]]:
    """Return, by quantity, how often ±2 u held the truth, and the spread over u.

    Flats of 1 to 3 frames of 176 × 144 px: lenses of some strength and axis, or none, red falling off apart from green,
    a dark of two frames subtracted in every other draw. The truth is the block means of the closed form.
    """
    rng = np.random.default_rng(seed)
    scores: dict[str, list[float]] = {}
    for draw in range(draws):
        axis, angle = (rng.uniform(-20, 20), rng.uniform(-16, 16)), 0.0 if draw % 5 == 4 else 20.0
        green, red = (Shading((176, 144), angle=a, axis=axis) for a in (angle, angle + 6 * (draw % 2)))
        glow = rng.normal(0, 3, (144, 176)) + np.linspace(0, 30, 176) * (draw % 2)
        light = np.stack([6000 * red.frame(), 9000 * green.frame(), 6000 * green.frame()], axis=2) + glow[:, :, None]
        count = 1 + draw % 3
        frames = [codes(f + rng.normal(0, 60, f.shape)) for f in [light] * count]
        of = camera(frames[0], colour="rgb")
        seen = sample(frames, of, channel="red")
        if draw % 2:
            seen = sample(frames, of, channel="red", darks=[_rgb(glow + rng.normal(0, 8, glow.shape)) for _ in "ab"])
        found = read(shading.measure(seen, shading.Options()))
        blocks, ratio = _seen(red), _seen(red) / _seen(green)
        corner = min(blocks[0, 0], blocks[0, -1], blocks[-1, 0], blocks[-1, -1])
        truth = {"uniformity": 100 * blocks.min() / blocks.max(), "darkest_corner": 100 * corner}
        truth |= {"centre_offset": 100 * np.hypot(*axis) / red.half_diagonal}
        truth |= {"colour_shading": 100 * np.abs(ratio - 1).max()}
        if draw % 2:  # the stated black leaves the glow in
            del truth["colour_shading"]
        if found["centre_offset"].refusal is not None:
            assert angle == 0
            del truth["centre_offset"]
        for name, planted in truth.items():
            scores.setdefault(name, []).append((value(found[name]) - planted) / (found[name].u or 1e-9))
    return {n: (float(np.mean(np.abs(s) <= 2)), float(np.std(s))) for n, s in scores.items()}


def _rgb(plane: np.ndarray) -> np.ndarray:
    return codes(np.stack([plane] * 3, axis=2))


def test_the_uncertainty_holds() -> None:
    """±2 u holds the truth in 93 % of 120 draws or more (two binomial standard deviations, 4.7 %, are allowed).

    What extremes and a maximum carry for their bias dominates in part: no upper end for those.
    """
    for name, (share, spread) in coverage(120).items():
        assert share >= 0.93 - 0.047, name
        assert spread < 1.25, name


@pytest.mark.study
def test_study_of_coverage() -> None:
    """The same over 1500 draws, without an allowance; the figures are printed for the handbook."""
    found = coverage(1500, seed=22)
    for name, (share, spread) in found.items():
        print(f"| {name} | {share:.3f} | {spread:.2f} |")
    assert min(share for share, _ in found.values()) >= 0.93
