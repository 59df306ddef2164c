"""A channel's own pixels as an array, and back to the frame: every pixel of every channel is found where it lies."""

import tracemalloc
from dataclasses import replace

import numpy as np
import pytest

from runner.capture.frame import Box, Frame, crop, linearise
from runner.errors import MeasurementRefused
from runner.measure import planes
from runner.spec.model import Camera, Tone

CAMERA = Camera(width=11, height=9, bit_depth=16, black_level=64, white_level=4095)
PLACES = np.arange(9)[:, None] * 100 + np.arange(11)[None, :]
"""Each pixel holds 100 times its row and its column."""


def _stack(codes: np.ndarray, camera: Camera, channel: str, box: Box | None = None) -> planes.Stack:
    whole = box or Box(0, 0, codes.shape[1], codes.shape[0])
    return planes.stack([crop(Frame("a.tif", "", "", codes), whole, camera, channel)])


@pytest.mark.parametrize("mosaic", ["RGGB", "GRBG", "GBRG", "BGGR"])
@pytest.mark.parametrize("channel", ["red", "green", "blue"])
@pytest.mark.parametrize("box", [Box(0, 0, 11, 9), Box(1, 0, 9, 8), Box(2, 3, 11, 9), Box(3, 1, 10, 6)])
def test_every_own_pixel_and_no_other(mosaic: str, channel: str, box: Box) -> None:
    """The array holds the channel's pixels, each named with its column and row in the frame, whatever the mosaic.

    What is left out are greens at the right border of an odd width alone.
    """
    camera = replace(CAMERA, mosaic=mosaic)
    found = _stack(PLACES.astype(np.uint16), camera, channel, box)
    values = found.frames[0]
    seen = set()
    for row in range(values.shape[0]):
        for column in range(values.shape[1]):
            x, y = found.grid.pixel(row, column)
            assert values[row, column] == 100 * y + x
            seen.add((x, y))
    letter = channel[0].upper()
    own = {
        (x, y) for y in range(box.y0, box.y1) for x in range(box.x0, box.x1) if mosaic[2 * (y % 2) + x % 2] == letter
    }

    assert seen <= own
    assert all(x == box.x1 - 1 and channel == "green" for x, _ in own - seen)


def test_points_between_pixels() -> None:
    """A pixel's centre is half a pixel from the outer corner; of green, the mean of an even and an odd row's."""
    camera = replace(CAMERA, mosaic="GRBG")
    codes: np.ndarray = PLACES.astype(np.uint16)

    assert _stack(codes, CAMERA, "mono", Box(2, 3, 9, 8)).grid.point(0.5, 0.5) == (2.5, 3.5)
    assert _stack(codes, camera, "blue").grid.point(1.5, 2.5) == (4.5, 3.5)
    grid = _stack(codes, camera, "green").grid
    ends = np.mean([np.array(grid.pixel(row, 2)) + 0.5 for row in (2, 3)], axis=0)
    assert grid.point(3.0, 2.5) == tuple(ends)


def test_codes_of_a_linear_camera_are_not_copied() -> None:
    """Mono, RGB planes, red and blue are views of the frame; green, or another tone, is made some rows at a time.

    16 frames of 12 MP at 2 bytes are 384 MB: under 700 MB with the one mean frame of a method.
    """
    codes = np.zeros((1200, 1600), dtype=np.uint16)
    rgb = np.zeros((1200, 1600, 3), dtype=np.uint8)

    assert np.shares_memory(_stack(codes, replace(CAMERA, width=1600, height=1200), "mono").frames[0], codes)
    assert np.shares_memory(_stack(rgb, replace(CAMERA, colour="rgb"), "green").frames[0], rgb)
    mosaic = replace(CAMERA, mosaic="RGGB")
    assert np.shares_memory(_stack(codes, mosaic, "blue").frames[0], codes)
    tone = replace(CAMERA, tone=Tone("srgb"))
    for camera, channel, total in ((mosaic, "green", np.uint32), (tone, "mono", np.float64)):
        one = crop(Frame("a.tif", "", "", codes), Box(0, 0, 1600, 1200), camera, channel)
        tracemalloc.start()
        (values, *_) = planes.stack([one] * 4).frames
        planes.sums(values, 1)
        peak = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
        assert peak < codes.nbytes / 4, channel  # a piece is 32 768 of 1 920 000 px, taken by indices of 8 bytes
        assert planes.sums(values, 0).dtype == total


@pytest.mark.parametrize("tone", [Tone("linear"), Tone("srgb")])
@pytest.mark.parametrize("mosaic", ["RGGB", "GRBG"])
def test_parts_are_those_of_the_whole(mosaic: str, tone: Tone) -> None:
    """Rows, some rows, rows one by one and single pixels of green are those that the mosaic's own pattern names."""
    codes = np.random.default_rng(5).integers(0, 4096, (31, 44)).astype(np.uint16)
    camera = replace(CAMERA, mosaic=mosaic, tone=tone)
    values = _stack(codes, camera, "green").frames[0]
    own = np.array([row[int(mosaic[2 * (y % 2)] != "G") :: 2] for y, row in enumerate(codes)])
    light = own if tone.kind == "linear" else (64 + 4031 * linearise(own, camera)).astype(np.float32)

    assert values.shape == own.shape == np.asarray(values).shape
    assert values.dtype == light.dtype
    for part in (slice(3, 9), slice(None), slice(4, 40), slice(0, None, 3), slice(2, 30, 5), slice(1, 29, 2)):
        np.testing.assert_allclose(values[part], light[part], rtol=1e-6)
    some = np.array([2, 3, 17, 30])
    np.testing.assert_allclose(values.take(some, axis=0), light[some], rtol=1e-6)
    np.testing.assert_allclose(values[some, some % 7], light[some, some % 7], rtol=1e-6)
    for axis in (0, 1):
        np.testing.assert_allclose(planes.sums(values, axis), light.sum(axis=axis, dtype=np.float64), rtol=1e-6)
    with pytest.raises(ValueError, match="axis 1; only rows"):
        values.take(some, axis=1)


@pytest.mark.parametrize("dtype", [np.uint8, np.uint16, np.int32])
@pytest.mark.parametrize("tone", [Tone("srgb"), Tone("gamma", gamma=2.2)])
def test_other_tones_become_linear_dn(dtype: type, tone: Tone) -> None:
    """Linear DN: black at the black level, white at the white level, light between in proportion (IEC 61966-2-1)."""
    camera = replace(CAMERA, tone=tone, bit_depth=8, black_level=10, white_level=250)
    codes: np.ndarray = np.arange(0, 256).reshape(16, 16).astype(dtype)
    values = _stack(codes, camera, "mono").frames[0]

    assert values.dtype == np.float32
    np.testing.assert_allclose(values, 10 + 240 * linearise(codes, camera), atol=2e-5)
    assert values[0, 10] == pytest.approx(10)
    assert values[15, 10] == pytest.approx(250)
    assert planes.step(_stack(np.full((4, 4), 130, dtype=dtype), camera, "mono")) == pytest.approx(
        float(values[8, 3] - values[8, 2]), rel=1e-4
    )


def _refusal(codes: np.ndarray, **ends: float) -> tuple[str, str]:
    with pytest.raises(MeasurementRefused, match=r"a\.tif") as refused:
        planes.refuse_clipped(_stack(codes, CAMERA, "mono"), **ends)
    return refused.value.cause, str(refused.value)


def test_ends_of_the_range() -> None:
    """Pixels at the white level, at code 0 and at a cut below the stated white level are told; a dead frame is too.

    0.1 % of 200 × 200 px is 40: 41 are refused, 40 are not. Of large frames, some rows alone do not decide.
    """
    rng = np.random.default_rng(1)
    codes = np.round(rng.normal(2000, 20, (200, 200))).astype(np.uint16)
    for count in (40, 41):
        for end, code, ends in ((4095, 4095, "most_high"), (0, 0, "most_low")):
            cut = codes.copy()
            cut[7, :count] = code
            if count == 40:
                planes.refuse_clipped(_stack(cut, CAMERA, "mono"), **{ends: planes.MOST_CLIPPED})
                continue
            cause, sentence = _refusal(cut, **{ends: planes.MOST_CLIPPED})
            assert cause == "clipped"
            assert "0.10 % of the pixels" in sentence
            assert ("white level" if end else "code 0") in sentence

    assert _refusal(np.minimum(codes, 2010), most_high=0.001)[1].startswith("a.tif: 31")
    assert _refusal(np.full((200, 200), 4095, np.uint16))[0] == "no picture"
    assert _refusal(np.where(rng.random(codes.shape) < 0.6, 4095, codes), most_high=0.001)[0] == "too bright"
    large = np.full((1100, 2000), 1000, dtype=np.uint16)
    large[:, ::2] = 1001
    large[3] = 4095  # 1 of 1100 rows is 0.09 %, of the 367 rows looked at first it is 0.27 %
    planes.refuse_clipped(_stack(large, CAMERA, "mono"), most_high=planes.MOST_CLIPPED)


def test_one_clipped_kind_of_green_is_seen() -> None:
    """Greens beside blue that are all at the white level are refused, though of large frames some rows tell enough."""
    codes = np.round(np.random.default_rng(6).normal(2000, 20, (2000, 2400))).astype(np.uint16)
    codes[1::2, ::2] = 4095

    with pytest.raises(MeasurementRefused, match=r"50\.00 % of the pixels lie at the white level"):
        planes.refuse_clipped(_stack(codes, replace(CAMERA, mosaic="RGGB"), "green"), most_high=planes.MOST_CLIPPED)


def test_quiet_fields_are_not_cut() -> None:
    """A field of few codes has many pixels at its highest one and yet is a field, down to noise of 0.15 steps."""
    rng = np.random.default_rng(2)
    for level, noise in ((200.0, 0.15), (200.3, 0.3), (199.9, 0.8)):
        codes = np.round(rng.normal(level, noise, (300, 300))).astype(np.uint8)
        planes.refuse_clipped(_stack(codes, CAMERA, "mono"), most_high=planes.MOST_CLIPPED)


def test_one_dark_frame_among_lit_ones() -> None:
    """The lamp that failed on the second frame is named with the frame."""
    lit, dark = (np.full((20, 30), level, dtype=np.uint16) for level in (2000, 70))
    crops = [crop(Frame(n, "", "", c), Box(0, 0, 30, 20), CAMERA) for n, c in (("a.tif", lit), ("b.tif", dark))]

    with pytest.raises(MeasurementRefused, match=r"b\.tif: the field lies 0\.15 % of the range"):
        planes.refuse_dark(planes.stack(crops))
    planes.refuse_dark(planes.stack(crops[:1]))


def test_two_kinds_of_green() -> None:
    """Greens beside blue that are 3 % brighter come to one level as light, and 5 DN to one dark level; red is left."""
    rng = np.random.default_rng(3)
    camera = replace(CAMERA, mosaic="RGGB")
    light = 1000 + rng.normal(0, 1, (200, 300))
    light[1::2] *= 1.03
    green = _stack(light, camera, "green")
    values = green.frames[0].astype(np.float32)

    assert planes.green_balance(values, green.grid) == pytest.approx(30, abs=0.1)
    planes.balance_greens(values, green.grid, gain=True)
    assert planes.green_balance(values, green.grid) == pytest.approx(0, abs=1e-3)
    assert values.std() == pytest.approx(1, rel=0.05)
    values[1::2] += 5
    planes.balance_greens(values, green.grid, gain=False)
    assert planes.green_balance(values, green.grid) == pytest.approx(0, abs=1e-3)
    red = _stack(light, camera, "red")
    assert planes.green_balance(red.frames[0], red.grid) == 0
    np.testing.assert_allclose(planes.square(values[:5], green.grid)[0], (values[:4:2] + values[1:4:2]) / 2)
    assert planes.square(red.frames[0], red.grid)[1] == 1


def test_a_mosaic_too_narrow() -> None:
    """One row of a mosaic is no region: it lacks whole colours."""
    codes = np.ones((1, 30), dtype=np.uint16)

    with pytest.raises(MeasurementRefused, match="1 × 30 px; a mosaic needs 2 × 2"):
        _stack(codes, replace(CAMERA, mosaic="RGGB"), "red")
