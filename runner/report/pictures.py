"""Overview pictures: a frame in full tone with the regions as found, numbered like the page's tables."""

import io
from collections.abc import Mapping, Sequence
from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Codes, linearise
from runner.resources import folder
from runner.spec.model import Camera

if TYPE_CHECKING:
    from PIL import Image, ImageDraw

WIDEST = 1000
"""px: enough to see where a region lies; values stand in the table, never in the picture."""
NARROWEST = 500
"""px: smaller frames are shown larger by whole pixels, else the balloons would cover them."""
GREYS = 64
"""Steps of grey kept, so that sensor noise does not fill the file."""
OUTLINE, SHADOW = (255, 196, 0), (20, 20, 20)
_COLOURED = 0.2
"""Share of coloured pixels up to which a picture counts as grey."""
_DISPLAY_GAMMA = 2.2
_BALLOON = 16.0
"""px: half of a balloon with its surroundings."""


def overview(codes: Codes, camera: Camera, regions: Sequence[Mapping[str, Any]]) -> bytes:
    """Return a PNG of a frame with thin region outlines and numbered balloons; same input, same bytes.

    Tone: light from black to white level, shown through a gamma of 2.2, not stretched; larger frames are averaged over
    whole blocks of pixels, the pixels of small ones are repeated.

    Args:
        codes: Rows × columns, DN.
        camera: Levels and tone.
        regions: `region`, `found`, `box` (x0, y0, x1, y1 in px, or None), `outline` ((x, y) px).
    """
    from PIL import Image, ImageDraw  # noqa: PLC0415 - heavy

    block = max(1, -(-codes.shape[1] // WIDEST))
    light = np.clip(linearise(_averaged(codes, block), camera), 0, 1) ** (1 / _DISPLAY_GAMMA)
    grey = (np.round(light * (GREYS - 1)) * (255 / (GREYS - 1))).astype(np.uint8)
    larger = max(1, NARROWEST // grey.shape[1])
    picture = Image.fromarray(grey.repeat(larger, axis=0).repeat(larger, axis=1)).convert("RGB")
    draw = ImageDraw.Draw(picture)
    for number, region in enumerate(regions, 1):
        _draw_region(draw, region, number, larger / block, picture.size)
    return png(picture)


def _averaged(codes: Codes, block: int) -> Codes:
    """Return the means of whole blocks of pixels; adding plane by plane takes a quarter of the time of a reshape."""
    rows, columns = codes.shape[0] // block, codes.shape[1] // block
    total = np.zeros((rows, columns))
    for y in range(block):
        for x in range(block):
            total += codes[y : rows * block : block, x : columns * block : block]
    return total / block**2


def _draw_region(
    draw: "ImageDraw.ImageDraw", region: Mapping[str, Any], number: int, scale: float, size: tuple[int, int]
) -> None:
    if region["box"] is None:
        return
    x0, y0, x1, y1 = (v * scale for v in region["box"])
    corners = [(x0, y0), (x1, y0), (x1, y1), (x0, y1), (x0, y0)]
    for colour, width in ((SHADOW, 4), (OUTLINE, 2)):
        if region["found"]:
            draw.line(corners, fill=colour, width=width)
        else:
            _dashed(draw, corners, colour, width)
    if len(region["outline"]) == 2:
        ends = [(x * scale, y * scale) for x, y in region["outline"]]
        draw.line(ends, fill=SHADOW, width=3)
        draw.line(ends, fill=OUTLINE, width=1)
    across = x1 + _BALLOON if x1 + 2 * _BALLOON <= size[0] else x0 - _BALLOON  # on the side where there is room
    inside = [min(max(place, _BALLOON), end - _BALLOON) for place, end in zip((across, y0), size, strict=True)]
    _balloon(draw, inside[0], inside[1], number)


def _dashed(
    draw: "ImageDraw.ImageDraw", corners: Sequence[tuple[float, float]], colour: tuple[int, int, int], width: int
) -> None:
    for (ax, ay), (bx, by) in pairwise(corners):
        length = max(abs(bx - ax), abs(by - ay), 1.0)
        for start in np.arange(0.0, length, 12.0):
            a, b = start / length, min(1.0, (start + 7.0) / length)
            ends = [(ax + a * (bx - ax), ay + a * (by - ay)), (ax + b * (bx - ax), ay + b * (by - ay))]
            draw.line(ends, fill=colour, width=width)


def _balloon(draw: "ImageDraw.ImageDraw", x: float, y: float, number: int) -> None:
    from PIL import ImageFont  # noqa: PLC0415 - heavy

    font = ImageFont.truetype(str(folder("templates") / "fonts" / "DejaVuSans-Bold.ttf"), 16)
    draw.ellipse((x - 14, y - 14, x + 14, y + 14), fill=SHADOW)
    draw.ellipse((x - 12, y - 12, x + 12, y + 12), fill=OUTLINE)
    draw.text((x, y), str(number), fill=SHADOW, font=font, anchor="mm")


def png(picture: "Image.Image") -> bytes:
    """Return an RGB picture as PNG with a palette of its own; the same picture gives the same bytes.

    A grey picture with a few colours on it keeps each of them; any other has its colours brought down to 160.
    """
    from PIL import Image  # noqa: PLC0415 - heavy

    small = _mostly_grey(np.asarray(picture))
    if small is None:
        small = picture.quantize(160, method=Image.Quantize.MEDIANCUT, dither=Image.Dither.NONE)
    out = io.BytesIO()
    small.save(out, "PNG", optimize=False, compress_level=6)
    return out.getvalue()


def _mostly_grey(pixels: NDArray[np.uint8]) -> "Image.Image | None":
    """Return a picture with exactly its own colours as palette, or None where they are many; rows × columns × 3."""
    from PIL import Image  # noqa: PLC0415 - heavy

    red, green, blue = (pixels[..., k] for k in range(3))
    coloured = (red != green) | (green != blue)
    if np.count_nonzero(coloured) > _COLOURED * coloured.size:
        return None
    greys = np.flatnonzero(np.bincount(red[~coloured], minlength=256))
    numbers = pixels[coloured].astype(np.int32) @ (1 << 16, 1 << 8, 1)
    colours, places = np.unique(numbers, return_inverse=True)
    if len(greys) + len(colours) > 256:
        return None
    index = np.zeros(256, dtype=np.uint8)
    index[greys] = np.arange(len(greys))
    indices = index[red]
    indices[coloured] = len(greys) + places
    small = Image.fromarray(indices, mode="P")
    palette = [part for grey in greys.tolist() for part in 3 * (grey,)]
    small.putpalette(palette + [part for number in colours.tolist() for part in number.to_bytes(3, "big")])
    return small
