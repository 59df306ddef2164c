"""Codes become light: 0 at black, 1 at true white, the tone curve undone, nothing cut off at either end."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from skimage.color import rgb2xyz

from runner.capture.frame import Box, Frame, crop, linearise
from runner.spec.model import Camera, Tone

TABLE = ((0.0, 0.0), (0.25, 0.05), (0.5, 0.2), (1.0, 1.0))
TONES = {
    "linear": Tone(),
    "srgb": Tone("srgb"),
    "gamma 2.2": Tone("gamma", gamma=2.2),
    "table": Tone("table", table=TABLE),
}


def _camera(tone: str = "linear", black: float = 0, white: float = 255) -> Camera:
    return Camera(160, 120, 8, black, white, tone=TONES[tone])


def test_srgb_is_undone_as_the_standard_says() -> None:
    """Light encoded by IEC 61966-2-1 (12.92 L to L = 0.0031308, then 1.055 L^(1/2.4) - 0.055) comes back.

    The standard rounds where its two branches meet; 2e-7 is the jump of its own formulas there.
    """
    light = np.linspace(0, 1, 4001)
    encoded = np.where(light <= 0.0031308, 12.92 * light, 1.055 * light ** (1 / 2.4) - 0.055)

    assert np.abs(linearise(encoded * 255, _camera("srgb")) - light).max() < 2e-7


def test_srgb_agrees_with_an_independent_library() -> None:
    """All 256 grey codes have the luminance that scikit-image gives them (its white is Y = 1)."""
    codes = np.arange(256, dtype=np.uint8)
    luminance = rgb2xyz(np.stack([codes] * 3, -1)[np.newaxis])[0, :, 1]

    assert np.allclose(linearise(codes, _camera("srgb")), luminance / luminance[-1], rtol=0, atol=1e-12)


def test_gamma_and_table_are_undone() -> None:
    """A power is undone by its exponent; a table gives its own points back and straight lines between them."""
    light = np.linspace(0, 1, 101)
    assert np.allclose(linearise(255 * light ** (1 / 2.2), _camera("gamma 2.2")), light, rtol=0, atol=1e-12)

    points = np.array(TABLE)
    assert linearise(255 * points[:, 0], _camera("table")).tolist() == points[:, 1].tolist()
    assert linearise(np.array([0.375, 0.75]) * 255, _camera("table")) == pytest.approx([0.125, 0.6])


def test_black_and_white_level_are_the_cameras_own() -> None:
    """Full scale is the level at which the sensor clips, not the highest number of the file's type."""
    camera = Camera(160, 120, 12, 64, 3900)

    signal = linearise(np.array([64, 3900, 1982, 4095, 0], np.uint16), camera)

    assert signal == pytest.approx([0, 1, 0.5, 4031 / 3836, -64 / 3836], abs=1e-12)


@given(st.sampled_from(sorted(TONES)), st.lists(st.floats(-50, 400), min_size=2, max_size=20))
def test_nothing_is_cut_off_at_the_ends(tone: str, codes: list[float]) -> None:
    """More code is more light, also below black and above white; below black the curve is its own mirror image."""
    camera, ordered = _camera(tone, black=64, white=200), np.sort(codes)

    light = linearise(ordered, camera)

    assert (np.diff(light)[np.diff(ordered) > 1e-6] > 0).all()
    assert np.allclose(linearise(128 - ordered, camera), -light, rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize("tone", TONES)
def test_noise_below_black_is_kept(tone: str) -> None:
    """The mean of a dark frame's signal is zero within four standard errors: no half of its noise is lost."""
    codes = np.random.default_rng(3).normal(64, 4, 40000).round().astype(np.uint16)
    light = linearise(codes, _camera(tone, black=64))

    assert (light < 0).any()
    assert abs(light.mean()) < 4 * light.std() / 200


def test_a_crop_is_its_box_and_changes_nothing() -> None:
    """Columns x0 to x1-1 and rows y0 to y1-1, codes and light alike; the frame stays as it was."""
    codes = np.arange(120 * 160, dtype=np.uint16).reshape(120, 160)
    codes.flags.writeable = False
    frame = Frame("a.tif", "", "", codes, axes={"repeat": "2"})

    piece = crop(frame, Box(10, 20, 13, 22), Camera(160, 120, 16, 100, 1100))

    assert piece.codes.tolist() == [[20 * 160 + 10, 3211, 3212], [21 * 160 + 10, 3371, 3372]]
    assert piece.signal == pytest.approx((piece.codes.astype(float) - 100) / 1000)
    assert (piece.file, piece.box, piece.axes) == ("a.tif", Box(10, 20, 13, 22), {"repeat": "2"})
    assert frame.shape == (120, 160)


@pytest.mark.parametrize(
    ("box", "inside"),
    [
        (Box(0, 0, 160, 120), True),
        (Box(159, 119, 160, 120), True),
        (Box(-1, 0, 5, 5), False),
        (Box(0, 0, 161, 5), False),
        (Box(0, 0, 5, 121), False),
        (Box(5, 5, 5, 9), False),
        (Box(9, 5, 5, 9), False),
    ],
)
def test_inside_includes_the_borders(box: Box, inside: bool) -> None:
    """The whole frame and its last pixel are inside; one column beyond, or an empty box, is not."""
    assert box.inside(160, 120) is inside
