"""Honest scenes as a camera would take them, and headerless files of them, made by nothing that also reads them.

Packings after their published bit orders: MIPI CSI-2 11.4.4 and 11.4.5 (RAW10, RAW12), TIFF 6.0 (most significant bit
first), and the common practice of cameras for the others.
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import erf

from runner.spec.files import Layout
from runner.spec.model import Camera

Light = NDArray[np.float64]
Codes = NDArray[np.uint16]

WIDTH, HEIGHT = 192, 144
GAINS = {"grey": (1.0, 1.0, 1.0), "tungsten": (0.95, 0.8, 0.3), "daylight": (0.55, 1.0, 0.7), "red": (1.0, 0.35, 0.2)}
"""Response of red, green and blue pixels to a light."""


def _grid() -> tuple[Light, Light]:
    y, x = np.mgrid[0.5:HEIGHT, 0.5:WIDTH]
    return np.asarray(x, np.float64), np.asarray(y, np.float64)


def _across(angle: float) -> Light:
    x, y = _grid()
    return np.asarray((x - WIDTH / 2) * np.cos(np.radians(angle)) + (y - HEIGHT / 2) * np.sin(np.radians(angle)))


def edge(angle: float, blur: float = 0.7) -> Light:
    """Return an edge from 20 to 80 % of the light; its normal lies at an angle to the rows."""
    return np.asarray(0.5 + 0.3 * erf(_across(angle) / (blur * np.sqrt(2))))


def stripes(angle: float, period: float, *, sharp: bool) -> Light:
    """Return stripes from 10 to 90 % of the light, cut sharp at the pixels or sinusoidal."""
    phase = _across(angle) / period
    wave = np.where(np.floor(2 * phase + 1e-9) % 2 == 0, 1.0, -1.0) if sharp else np.sin(2 * np.pi * phase)
    return np.asarray(0.5 + 0.4 * wave)


def scenes() -> Iterator[tuple[str, Light]]:
    """Yield scenes by name, as shares of the range from black to white level."""
    x, y = _grid()
    r2: Light = ((x - WIDTH / 2) ** 2 + (y - HEIGHT / 2) ** 2) / (WIDTH / 2) ** 2
    rng = np.random.default_rng(5)
    yield "dark", np.zeros((HEIGHT, WIDTH))
    yield "flat", np.full((HEIGHT, WIDTH), 0.45)
    yield "bright flat", np.full((HEIGHT, WIDTH), 0.9)
    yield "shaded flat", np.asarray(0.7 / (1 + 0.6 * r2) ** 2, np.float64)
    yield "sloping flat", 0.2 + 0.5 * x / WIDTH
    for turn in (0, 2, 5, 30, 45, 85, 90, 95, 175):
        yield f"edge {turn}", edge(turn)
    for angle in (0, 10, 26.565, 45, 60, 63.435, 71.565, 90, 116.565, 135, 150, 178.2, 91.79):
        for period in (2, 3, 4, 5, 6.3, 10, 32):
            yield f"sharp stripes {angle} by {period}", stripes(angle, period, sharp=True)
            yield f"sine stripes {angle} by {period}", stripes(angle, period, sharp=False)
    squares = (np.floor(x / 24) + np.floor(y / 24)) % 2
    yield "chequered board", 0.2 + 0.6 * squares
    turned = (np.floor(_across(7) / 24) + np.floor(_across(97) / 24)) % 2
    yield "turned board", 0.2 + 0.6 * turned
    star: Light = 0.5 + 0.4 * np.sin(36 * np.arctan2(y - HEIGHT / 2, x - WIDTH / 2))
    yield "star", star
    yield "bar", np.asarray(0.2 + 0.6 * (np.abs(_across(45)) < 6), np.float64)
    yield "thin line", 0.2 + 0.7 * np.exp(-(_across(20) ** 2) / 2)
    points = np.zeros((HEIGHT, WIDTH))
    points[rng.integers(4, HEIGHT - 4, 30), rng.integers(4, WIDTH - 4, 30)] = 1
    yield "points", 0.02 + 0.9 * points
    yield "random texture", rng.random((HEIGHT, WIDTH))
    f = np.hypot(*np.meshgrid(np.fft.fftfreq(WIDTH), np.fft.fftfreq(HEIGHT)))
    f[0, 0] = 1
    cloud = np.fft.ifft2(np.fft.fft2(rng.normal(size=f.shape)) / f).real
    yield "clouds", np.clip(0.5 + 0.12 * cloud / cloud.std(), 0, 1)
    yield "half too bright", np.where(_across(3) > 0, 1.3, 0.3)
    yield "two steps", 0.2 + 0.3 * (x > WIDTH / 3) + 0.3 * (y > HEIGHT / 2)


def take(light: Light, camera: Camera, seed: int, colours: str = "grey", read_noise: float = 1.0) -> Codes:
    """Return codes of a scene: photon noise of 10 000 quanta at white, read noise, the mosaic's gains, clipped.

    Args:
        light: Rows × columns, 0 to 1.
        camera: Levels, depth, mosaic.
        seed: Of the noise.
        colours: One of `GAINS`.
        read_noise: Rms in DN of 10 bit, more or less in other depths.
    """
    rng, span = np.random.default_rng(seed), camera.white_level - camera.black_level
    if camera.mosaic != "none":
        gain = dict(zip("RGB", GAINS[colours], strict=True))
        cell = np.array([gain[letter] for letter in camera.mosaic]).reshape(2, 2)
        light = light * np.tile(cell, (HEIGHT // 2, WIDTH // 2))
    mean = camera.black_level + span * light
    noise = rng.normal(size=light.shape) * np.hypot(
        span * np.sqrt(np.clip(light, 0, None) / 1e4), read_noise * 2 ** (camera.bit_depth - 10)
    )
    codes: Codes = np.clip(np.rint(mean + noise), 0, camera.white_level).astype(np.uint16)
    return codes


def write(codes: NDArray[np.generic], layout: Layout, fill: int = 0) -> bytes:
    """Return a headerless file of one frame, or of several along the first axis."""
    frames = codes.reshape(-1, *codes.shape[-2:]).astype(np.uint16)
    rows = [row for frame in frames for row in (frame[::-1] if layout.first_row == "bottom" else frame)]
    packed = _packed(np.stack(rows), layout)
    padding = np.full((packed.shape[0], layout.row_padding), fill, np.uint8)
    return b"\x5a" * layout.header + np.hstack([packed, padding]).tobytes()


def _packed(rows: Codes, layout: Layout) -> NDArray[np.uint8]:
    """Return rows × bytes."""
    name, high = layout.packing, rows.shape[0]
    if name == "8 bit":
        return rows.astype(np.uint8)
    if name == "16 bit":
        return rows.astype(">u2" if layout.byte_order == "big" else "<u2").view(np.uint8)
    if name.endswith("bits first"):
        bits = int(name[:2])
        order = np.arange(bits) if "low" in name else np.arange(bits)[::-1]
        stream = (rows[..., np.newaxis] >> order & 1).astype(np.uint8).reshape(high, -1)
        return np.packbits(stream, axis=1, bitorder="little" if "low" in name else "big")
    if name == "MIPI RAW10":
        four = rows.reshape(high, -1, 4)
        last = (four & 3) @ np.array([1, 4, 16, 64], np.uint16)
        return np.dstack([*(four >> 2).transpose(2, 0, 1), last]).astype(np.uint8).reshape(high, -1)
    a, b = rows[:, ::2], rows[:, 1::2]
    low = (b & 15) * 16 + (a & 15)
    order3 = (a >> 4, low, b >> 4) if name == "12 bit low nibbles in the middle" else (a >> 4, b >> 4, low)
    return np.dstack(order3).astype(np.uint8).reshape(high, -1)


@dataclass(frozen=True)
class Right:
    """A camera whose layout is declared as its files are."""

    name: str
    """Words for it."""
    camera: Camera
    """The camera."""


def right_declarations() -> Iterator[Right]:
    """Yield every packing with the depths that it holds, padded and not, plain and with a mosaic."""
    kinds = [
        ("8 bit", "", 8),
        *((f"{b} bit low bits first", "", b) for b in (10, 12)),
        ("12 bit high bits first", "", 12),
    ]
    kinds += [("12 bit low nibbles in the middle", "", 12), ("MIPI RAW10", "", 10), ("MIPI RAW12", "", 12)]
    kinds += [("16 bit", order, depth) for order in ("little", "big") for depth in (10, 12, 14, 16)]
    for packing, order, depth in kinds:
        for padding in (0, 16):
            top = 2**depth
            camera = Camera(WIDTH, HEIGHT, depth, top // 64, top - 1, layout=Layout(packing, order, padding))
            yield Right(f"{packing} {order} {depth} +{padding}", camera)
