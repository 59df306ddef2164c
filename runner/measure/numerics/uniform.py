"""Regions of frames that hold no structure: flat fields and darks."""

from collections.abc import Sequence

from runner.capture.frame import Box, Frame
from runner.measure.contract import Found, NotFound
from runner.spec.model import Camera, Region

DARK_LEVEL = 0.01
"""A lit field below 1 % of the range over the black level carries no shading worth dividing by."""
WHOLE_FRAME = ""
"""Region name of readings that belong to the whole frame."""


def locate_uniform(frame: Frame, regions: Sequence[Region], camera: Camera, *, lit: bool) -> list[Found | NotFound]:
    """Offer each region as it stands; without regions, the whole frame.

    Args:
        frame: Rows × columns.
        regions: Wished regions.
        camera: Black and white level.
        lit: The field must carry light. Methods are told so by `geometry`, `lit` 1 or 0: what drifts from frame to
            frame is then a lamp, a factor, or else the dark level, an offset.
    """
    rows, columns = frame.shape
    level = (float(frame.codes.mean()) - camera.black_level) / (camera.white_level - camera.black_level)
    if not regions:
        return [_offer(WHOLE_FRAME, Box(0, 0, columns, rows), level, lit=lit)]
    found: list[Found | NotFound] = []
    for region in regions:
        (x, y), (w, h) = region.centre_px(columns, rows), region.size_px(columns, rows)
        x0, y0 = round(x - w / 2), round(y - h / 2)
        box = Box(x0, y0, x0 + w, y0 + h)
        if not box.inside(columns, rows):
            sentence = f"it reaches to column {box.x1}, row {box.y1} of a frame of {columns} × {rows} px"
            found.append(NotFound(region.name, None, "off the frame", sentence))
        else:
            found.append(_offer(region.name, box, level, lit=lit))
    return found


def _offer(name: str, box: Box, level: float, *, lit: bool) -> Found | NotFound:
    if lit and level < DARK_LEVEL:
        sentence = (
            f"the field lies {100 * level:.2f} % of the range over the black level; {100 * DARK_LEVEL:g} % is needed"
        )
        return NotFound(name, box, "too dark", sentence)
    corners = ((box.x0, box.y0), (box.x1, box.y0), (box.x1, box.y1), (box.x0, box.y1))
    outline = tuple((float(x), float(y)) for x, y in corners)
    return Found(name, box, frozenset({"uniform"}), {"lit": 1.0 if lit else 0.0}, outline)
