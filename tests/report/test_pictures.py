"""Overview pictures: full tone, regions where they are, balloons that can be read, the same bytes each time."""

import io
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from PIL import Image

from runner.report.pictures import GREYS, OUTLINE, WIDEST, overview, png
from runner.spec.model import Camera, Tone

CAMERA = Camera(width=640, height=480, bit_depth=12, black_level=64, white_level=4095)


def _frame(code: int = 64, rows: int = 480, columns: int = 640) -> NDArray[np.uint16]:
    return np.full((rows, columns), code, dtype=np.uint16)


def _region(box: tuple[int, int, int, int] | None, **more: Any) -> dict[str, Any]:
    return {"region": "centre", "found": True, "box": box, "outline": ()} | more


def _pixels(data: bytes) -> NDArray[np.uint8]:
    return np.asarray(Image.open(io.BytesIO(data)).convert("RGB"))


def _bright(data: bytes) -> NDArray[np.bool_]:
    """Return where a picture has the colour of outlines, as near as its palette comes to it."""
    near: NDArray[np.bool_] = np.abs(_pixels(data).astype(int) - OUTLINE).max(axis=2) < 24
    return near


def _off(grey: NDArray[np.uint8], expected: float) -> float:
    return float(np.abs(grey.astype(float) - expected).max())


@pytest.mark.parametrize("part", [0.0, 0.18, 0.5, 1.0])
def test_tone_is_full_and_not_stretched(part: float) -> None:
    """A part L of the range over black shows as 255 L^(1/2.2), black as 0 and white as 255."""
    code = round(64 + part * (4095 - 64))
    grey = _pixels(overview(_frame(code), CAMERA, []))

    # half a step of grey from rounding, 0.5 DN of the code
    assert _off(grey, 255 * part ** (1 / 2.2)) <= 127.5 / (GREYS - 1) + 1


def test_tone_curves_are_undone() -> None:
    """A camera that delivers a gamma of 2.2 shows its own codes again."""
    grey = _pixels(overview(_frame(2080), replace(CAMERA, tone=Tone("gamma", 2.2)), []))

    assert _off(grey, 255 * (2080 - 64) / (4095 - 64)) <= 127.5 / (GREYS - 1) + 1


def test_wide_frames_are_averaged_and_small_ones_enlarged() -> None:
    """Whole blocks of pixels, so that a region's place is that of the frame times one factor."""
    wide = _frame(columns=2600, rows=1300)
    wide[::2] = 4095
    shown, small = (_pixels(overview(frame, CAMERA, [])) for frame in (wide, _frame(rows=60, columns=80)))

    assert shown.shape[:2] == (1300 // 3, 2600 // 3)
    assert shown.shape[1] <= WIDEST
    # thirds of light and dark rows mix to 1/3 or 2/3 of the light
    assert {round(255 * part ** (1 / 2.2)) // 8 for part in (1 / 3, 2 / 3)} == {int(v) // 8 for v in np.unique(shown)}
    assert small.shape[:2] == (360, 480)


@pytest.mark.parametrize(("rows", "columns", "scale"), [(480, 640, 1.0), (960, 1280, 0.5), (60, 80, 6.0)])
def test_a_region_is_outlined_where_it_lies(rows: int, columns: int, scale: float) -> None:
    """The outline's outermost lines are the box's borders; its inside stays as the camera saw it."""
    box = (columns // 4, rows // 4, columns // 2, rows // 2)
    lines = _bright(overview(_frame(rows=rows, columns=columns), CAMERA, [_region(box)]))

    x0, y0, x1, y1 = (round(v * scale) for v in box)
    assert lines[y0 - 1 : y0 + 2, x0 + 20 : x1 - 20].any(axis=0).all()
    assert lines[y0 + 40 : y1 - 10, x0 - 1 : x0 + 2].any(axis=1).all()
    assert not lines[y0 + 6 : y1 - 6, x0 + 6 : x1 - 6].any()
    assert not lines[:, : x0 - 6].any()


def test_what_was_not_found_is_dashed() -> None:
    """A region without its target shows gaps in its outline; one without a place shows nothing."""
    box = (200, 200, 300, 300)
    whole, dashed = (overview(_frame(), CAMERA, [_region(box, found=found)]) for found in (True, False))

    top = [_bright(png)[199:202, 202:298].any(axis=0) for png in (whole, dashed)]
    assert top[0].all()
    assert 0.4 < top[1].mean() < 0.9
    assert not _bright(overview(_frame(), CAMERA, [_region(None)])).any()


def test_what_was_found_is_drawn() -> None:
    """The edge that a target found crosses its region."""
    lines = _bright(
        overview(_frame(), CAMERA, [_region((200, 200, 300, 300), outline=((240.0, 200.0), (260.0, 300.0)))])
    )

    assert lines[245:255, 246:255].any()


@pytest.mark.parametrize("box", [(560, 10, 640, 100), (0, 0, 640, 480), (0, 400, 60, 480), (600, 440, 640, 480)])
def test_balloons_stay_in_the_picture(box: tuple[int, int, int, int]) -> None:
    """A region at the border keeps its whole number: the balloon moves to where there is room."""
    assert _disc(_bright(overview(_frame(), CAMERA, [_region((300, 200, 340, 240))])))
    assert _disc(_bright(overview(_frame(), CAMERA, [_region(box)])))
    assert not _disc(_bright(overview(_frame(), CAMERA, [_region(None)])))


def _disc(bright: NDArray[np.bool_]) -> bool:
    """Tell whether a whole ring of a balloon, 10.5 px around some point, is there."""
    angles = np.linspace(0, 2 * np.pi, 48, endpoint=False)
    offsets = np.unique(np.round([10.5 * np.sin(angles), 10.5 * np.cos(angles)]).astype(int), axis=1)
    rows, columns = bright.shape
    inner = np.ones((rows - 24, columns - 24), dtype=bool)
    for dy, dx in offsets.T:
        inner &= bright[12 + dy : rows - 12 + dy, 12 + dx : columns - 12 + dx]
    return bool(inner.any())


def test_numbers_differ_and_bytes_repeat() -> None:
    """The second region's balloon is not the first's; the same frame gives the same file."""
    boxes = [_region((100, 100, 200, 200)), _region((400, 100, 500, 200))]
    png = overview(_frame(), CAMERA, boxes)
    one, two = (_bright(png)[80:120, left : left + 40] for left in (202, 502))

    assert (one != two).any()
    assert overview(_frame(), CAMERA, boxes) == png
    assert len(png) < 20_000


def test_a_grey_picture_keeps_every_colour() -> None:
    """Greys and the few colours drawn on them come back exactly."""
    pixels = np.arange(40 * 30, dtype=np.uint32).reshape(30, 40, 1).repeat(3, axis=2) % 200
    pixels[5, 3:20] = (255, 196, 0)
    pixels[6, 3:20] = np.arange(17)[:, None] * (1, 2, 3) + (90, 7, 11)
    picture = Image.fromarray(pixels.astype(np.uint8))

    read = Image.open(io.BytesIO(png(picture)))

    assert read.mode == "P"
    assert np.array_equal(np.asarray(read.convert("RGB")), np.asarray(picture))
    assert png(picture) == png(picture.copy())


def test_a_picture_of_many_colours_keeps_nearly_every_one() -> None:
    """Above 256 colours, or where colour is everywhere, 160 stand for all, each near to its own."""
    y, x = np.mgrid[0:60, 0:60]
    everywhere = np.stack([4 * x, 4 * y, 255 - 4 * x], axis=2).astype(np.uint8)
    few = np.full((60, 60, 3), 128, dtype=np.uint8)
    few[:10] = everywhere[25:35]

    for pixels in (everywhere, few):
        read = Image.open(io.BytesIO(png(Image.fromarray(pixels))))
        assert len(read.getcolors(256) or ()) <= 160
        assert np.abs(np.asarray(read.convert("RGB"), dtype=int) - pixels).mean() < 12
