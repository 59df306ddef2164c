"""The edge scenes against published numbers, brute force and their own geometry."""

import numpy as np
import pytest
from scipy.special import ndtr

from tests.scenes.edges import EdgeScene, bar_scene, corner_scene
from tests.scenes.line_spreads import Boxes, Exponential, Gaussian, Pupil, Sharpened, box, triangle


def test_square_pixel_at_an_angle() -> None:
    """A pixel alone transfers sinc(f cos t) sinc(f sin t): closed form of geometry, tol 1e-6."""
    pixel = EdgeScene(optics=Boxes(()), direction=5)
    assert pixel.mtf([0.1, 0.25, 0.5]) == pytest.approx([0.983632, 0.900347, 0.637046], abs=1e-6)


def test_pixel_along_an_axis() -> None:
    """Along an axis the pixel is sinc(f), also for half the area filled: closed forms, tol 1e-6."""
    pixel = EdgeScene(optics=Boxes(()), direction=0)
    f = [0.1, 0.2, 0.25, 0.3, 0.4, 0.5, 0.75]
    assert pixel.mtf(f) == pytest.approx(
        [0.983632, 0.935489, 0.900316, 0.858394, 0.756827, 0.636620, 0.300105], abs=1e-6
    )
    assert pixel.mtf50() == pytest.approx(0.603355, abs=1e-6)
    half = EdgeScene(optics=Boxes(()), direction=0, fill=0.5)
    assert half.mtf([0.25, 0.5]) == pytest.approx([0.949383, 0.806700], abs=1e-6)


@pytest.mark.parametrize(
    ("sigma", "mtf50", "mtf10", "nyquist"),
    [(0.5, 0.32309, 0.58128, 0.18539), (0.7, 0.24711, 0.44859, 0.05672), (1.0, 0.17996, 0.32766, 0.00458)],
)
def test_gaussian_through_pixel(sigma: float, mtf50: float, mtf10: float, nyquist: float) -> None:
    """A Gaussian through a pixel has the crossings of the closed form, tol 1e-5."""
    scene = EdgeScene(optics=Gaussian(sigma), direction=0)
    assert scene.mtf50() == pytest.approx(mtf50, abs=1e-5)
    assert scene.mtf_crossing(0.1) == pytest.approx(mtf10, abs=1e-5)
    assert float(scene.mtf(0.5)) == pytest.approx(nyquist, abs=1e-5)


def test_defocus_reverses_contrast() -> None:
    """At W20 = 0.75 waves and s = 0.4 the transfer is -0.03734: modulus 0.0373, phase 180 degrees."""
    value = Pupil(1.0, defocus=0.75).transfer(0.4)
    assert value.real == pytest.approx(-0.03734, abs=1e-4)
    assert abs(np.degrees(np.angle(value))) == pytest.approx(180, abs=1e-6)


def test_pixels_by_oversampling() -> None:
    """Every pixel of a small scene is the mean of the blurred edge over its square, by 30 × 30 Gauss points."""
    scene = EdgeScene(optics=Gaussian(0.5), size=(9, 7), direction=203, offset=0.3, low=100, high=900)
    nodes, weights = np.polynomial.legendre.leggauss(30)
    phi = np.radians(203)
    for row, column in ((0, 0), (3, 4), (3, 5), (6, 2)):
        x = column + 0.5 - 4.5 + nodes[None, :] / 2
        y = row + 0.5 - 3.5 + nodes[:, None] / 2
        d = x * np.cos(phi) + y * np.sin(phi) - 0.3
        mean = weights @ ndtr(d / 0.5) @ weights / 4
        assert scene.signal()[row, column] == pytest.approx(100 + 800 * mean, abs=1e-8)


@pytest.mark.parametrize("direction", [5, 95, 185, 275, -30, 133])
def test_bright_side_follows_the_direction(direction: float) -> None:
    """The bright side lies where the normal points, in every direction; turning by 180 degrees swaps the sides."""
    scene = EdgeScene(size=(60, 60), direction=direction, offset=1.2)
    s = scene.signal()
    phi = np.radians(direction)
    row, column = round(29.5 + 20 * np.sin(phi)), round(29.5 + 20 * np.cos(phi))
    assert s[row, column] == pytest.approx(scene.high)
    turned = EdgeScene(size=(60, 60), direction=direction + 180, offset=-1.2).signal()
    assert s + turned == pytest.approx(np.full(s.shape, scene.low + scene.high))


def test_edge_angle_is_from_the_nearest_axis() -> None:
    """The angle from the nearest axis is the same for all four directions of one tilt."""
    for direction in (7, 83, 97, 173, 187, 263, 277, 353):
        assert EdgeScene(direction=direction).edge_angle == pytest.approx(7)


def test_curved_edge_has_its_sagitta() -> None:
    """The zero of the distance lies on the curve: displaced by nothing in the middle and by the sagitta at the ends."""
    scene = EdgeScene(size=(60, 101), direction=0, curve=(1.5,), optics=Gaussian(0.6))
    d = scene.distance()
    zeros = [float(np.interp(0, row, np.arange(60) + 0.5 - 30)) for row in (d[0], d[50], d[100])]
    assert zeros[1] == pytest.approx(0, abs=1e-3)
    assert zeros[0] == pytest.approx(1.5 * (50 / 50.5) ** 2, abs=2e-3)
    assert zeros[2] == pytest.approx(zeros[0], abs=1e-9)
    straight = EdgeScene(size=(60, 101), direction=0, curve=(0.0,)).distance()
    assert straight == pytest.approx(EdgeScene(size=(60, 101), direction=0).distance())


def test_shading_multiplies_light_above_black() -> None:
    """Dividing by the flat frame removes the shading exactly, black level taken off first."""
    scene = EdgeScene(shading=(0.1, -0.05, 0.04), black=500, low=4000, high=20000)
    plain = EdgeScene(black=500, low=4000, high=20000)
    ratio = (scene.signal() - 500) / (scene.flat() - 500)
    assert ratio == pytest.approx((plain.signal() - 500) / (20000 - 500))


def test_noise_has_its_variance() -> None:
    """Shot and read noise add in variance: (DN - black)/K + r² on both plateaus, within 5 % of 5000 pixels."""
    scene = EdgeScene(
        size=(120, 120), direction=5, read_noise=20, electrons_per_dn=0.5, black=200, low=2200, high=20200
    )
    codes = scene.render(np.random.default_rng(3)).astype(float)
    assert codes[:, :40].var() == pytest.approx(2000 / 0.5 + 400, rel=0.08)
    assert codes[:, -40:].var() == pytest.approx(20000 / 0.5 + 400, rel=0.08)


def test_codes_round_clip_and_take_a_tone() -> None:
    """Codes are whole, clip at white, and the tone curve leaves black and white where they are."""
    scene = EdgeScene(bits=12, white=4095, low=0, high=9000)
    codes = scene.render()
    assert codes.dtype == np.uint16
    assert (codes.min(), codes.max()) == (0, 4095)
    for tone in ("srgb", 2.2):
        toned = EdgeScene(tone=tone, black=64, white=4095, bits=12, low=64, high=4095, size=(80, 40)).render()
        assert (toned.min(), toned.max()) == (64, 4095)
    middle = EdgeScene(tone=2.2, low=32767.5, high=65535).render()[0, 0]
    assert middle == pytest.approx(65535 * 0.5 ** (1 / 2.2), abs=1)


def test_widths_of_known_shapes() -> None:
    """Widths that closed forms give: a Gaussian's FWHM 2.3548 σ and 10-90 % width 2.5631 σ once the pixel is small."""
    scene = EdgeScene(optics=Gaussian(1.5), fill=1e-6)
    assert scene.lsf_fwhm() == pytest.approx(2.354820 * 1.5, abs=1e-4)
    assert scene.edge_width() == pytest.approx(2.563103 * 1.5, abs=1e-4)
    assert scene.overshoot() == 0


def test_overshoot_of_an_unsharp_mask() -> None:
    """Overshoot is what (1+g) Φ(x/σ) - g Φ(x/s) reaches beyond 1, found by brute force on a fine grid."""
    scene = EdgeScene(optics=Sharpened(Gaussian(0.5), 1.0, 1.5), fill=1e-6)
    x = np.linspace(0, 10, 200001)
    reached = (2 * ndtr(x / 0.5) - ndtr(x / np.hypot(0.5, 1.5))).max() - 1
    assert scene.overshoot() == pytest.approx(reached, abs=1e-6)
    assert reached > 0.1


@pytest.mark.parametrize(
    "optics", [box(1.5), triangle(2.5), Exponential(0.4), Pupil(0.5), Pupil(0.6, coma=0.4)], ids=repr
)
def test_crossings_lie_on_the_transfer_function(optics: object) -> None:
    """At the crossing the modulus has its level, and not below it before."""
    scene = EdgeScene(optics=optics)  # type: ignore[arg-type]
    f50 = scene.mtf50()
    assert float(scene.mtf(f50)) == pytest.approx(0.5, abs=1e-9)
    assert np.all(scene.mtf(np.linspace(0, f50, 50)[:-1]) > 0.5)


def test_corner_and_bar_have_two_edges() -> None:
    """A corner keeps one bright quarter, a bar both dark sides: scenes that a finder of one edge must refuse."""
    first = EdgeScene(size=(80, 80), direction=5)
    corner = corner_scene(first, EdgeScene(size=(80, 80), direction=95))
    assert corner[70, 70] == pytest.approx(first.high)
    assert corner[5, 5] == pytest.approx(first.low)
    bar = bar_scene(first, 20)
    assert bar[40, 40] == pytest.approx(first.high)
    assert bar[40, [2, 77]] == pytest.approx([first.low] * 2)


def test_edge_ends_lie_on_the_edge() -> None:
    """The ends of the edge line are a full edge length apart and at distance zero."""
    scene = EdgeScene(size=(80, 120), direction=5, offset=0.7)
    (x0, y0), (x1, y1) = scene.edge_ends()
    phi = np.radians(5)
    for x, y in ((x0, y0), (x1, y1)):
        assert (x - 40) * np.cos(phi) + (y - 60) * np.sin(phi) == pytest.approx(0.7)
    assert np.hypot(x1 - x0, y1 - y0) == pytest.approx(120 / np.cos(phi))
