"""Puts the regions of a spec onto a frame as whole pixels, for targets whose regions stay where the spec has them."""

from runner.capture.frame import Box, Frame
from runner.measure.contract import NotFound
from runner.spec.model import Region


def place(region: Region, frame: Frame) -> Box | NotFound:
    """Return the box of a region, or say that it reaches over the frame's border.

    Args:
        region: As the spec has it.
        frame: Rows × columns.
    """
    rows, columns = frame.shape
    (x, y), (w, h) = region.centre_px(columns, rows), region.size_px(columns, rows)
    x0, y0 = round(x - w / 2), round(y - h / 2)
    box = Box(x0, y0, x0 + w, y0 + h)
    if box.inside(columns, rows):
        return box
    sentence = (
        f"it reaches from column {box.x0}, row {box.y0} to column {box.x1}, row {box.y1} of a frame of "
        f"{columns} × {rows} px"
    )
    cut = Box(max(0, box.x0), max(0, box.y0), min(columns, box.x1), min(rows, box.y1))
    return NotFound(region.name, cut if cut.inside(columns, rows) else None, "off the frame", sentence)


def outline(box: Box) -> tuple[tuple[float, float], ...]:
    """Return a box's corners, (x, y) px, clockwise from the upper left."""
    corners = ((box.x0, box.y0), (box.x1, box.y0), (box.x1, box.y1), (box.x0, box.y1))
    return tuple((float(x), float(y)) for x, y in corners)
