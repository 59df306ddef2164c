"""A chart's artwork, 1:1 in mm, as SVG or PDF: its pieces, a bar to check the print by, and which chart it is.

The bare sheet reflects what the file says of its ground, solid ink what it says of its ink; a tone between is drawn as
the share of bare sheet that gives it (Murray and Davies), coded as sRGB (IEC 61966-2-1), which is what printers,
plotters and displays take grey for. What a print then reflects is calibrated, not assumed: `calibrated:` in the file.

References:
    A. Murray, J. Franklin Inst. 221 (1936) 721 (reflectance of a halftone). IEC 61966-2-1:1999 (sRGB).
    ISO 32000-1:2008 (PDF).
"""

from base64 import b64encode
from collections.abc import Iterator, Sequence
from html import escape
from io import BytesIO
from math import hypot
from typing import Any
from zlib import compress

from runner.errors import UsageError
from runner.report.chart_pieces import Area, Clipped, Disc, Picture, Piece, box, pieces
from runner.spec.chart_model import ChartFile, Point

BARS = (100.0, 50.0, 20.0, 10.0, 5.0, 2.0, 1.0)
"""Lengths of the bar, mm: the longest for which there is room."""
BAR_HEIGHT = 0.035
"""Of the bar's length: room for the bar and its word."""
KAPPA = 0.5522847498
"""Control points of four cubic arcs that make a circle within 0.03 % of its radius; geometry."""


def code(reflectance: float, chart: ChartFile) -> float:
    """Return the grey value, 0 to 1, under which a reflectance is drawn."""
    low, high = sorted((chart.ink, chart.ground))
    light = min(max((reflectance - low) / (high - low), 0.0), 1.0)
    return 12.92 * light if light <= 0.0031308 else 1.055 * light ** (1 / 2.4) - 0.055


def artwork_svg(chart: ChartFile) -> str:
    """Return the artwork as SVG in mm.

    Raises:
        UsageError: A feature cannot be drawn, or there is no room for the bar.
    """
    w, h = chart.size
    parts = [
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{w:g}mm" height="{h:g}mm" viewBox="0 0 {w:g} {h:g}">',
        f"<title>{escape(title(chart))}</title>",
        f'<rect width="{w:g}" height="{h:g}" fill="{_hex(chart.ground, chart)}"/>',
        f'<g transform="translate({w / 2:g} {h / 2:g})">',
        *_svg_pieces(list(pieces(chart)), chart),
    ]
    for area in bar(chart):
        parts += _svg_pieces([area], chart)
    for words, (x, y), size in notes(chart):
        parts.append(
            f'<text x="{x:.3f}" y="{y:.3f}" font-size="{size:.3f}" font-family="Helvetica, Arial, sans-serif" '
            f'fill="{_hex(chart.ink, chart)}">{escape(words)}</text>'
        )
    return "\n".join([*parts, "</g>", "</svg>", ""])


def _hex(reflectance: float, chart: ChartFile) -> str:
    value = round(255 * code(reflectance, chart))
    return f"#{value:02x}{value:02x}{value:02x}"


def _svg_pieces(found: Sequence[Piece], chart: ChartFile) -> Iterator[str]:
    for number, piece in enumerate(found):
        if isinstance(piece, Area):
            points = " ".join(f"{x:.4f},{y:.4f}" for x, y in piece.points)
            yield f'<polygon points="{points}" fill="{_hex(piece.reflectance, chart)}"/>'
        elif isinstance(piece, Disc):
            (x, y), r = piece.centre, piece.radius
            yield f'<circle cx="{x:.4f}" cy="{y:.4f}" r="{r:.4f}" fill="{_hex(piece.reflectance, chart)}"/>'
        elif isinstance(piece, Picture):
            (x, y), (w, h) = piece.centre, piece.size
            yield (
                f'<image x="{x - w / 2:.4f}" y="{y - h / 2:.4f}" width="{w:.4f}" height="{h:.4f}" '
                f'preserveAspectRatio="none" style="image-rendering:pixelated" href="{_png(piece, chart)}"/>'
            )
        else:
            (x, y), (w, h) = piece.centre, piece.size
            shape = (
                f'<ellipse cx="{x:.4f}" cy="{y:.4f}" rx="{w / 2:.4f}" ry="{h / 2:.4f}"/>'
                if piece.round
                else f'<rect x="{x - w / 2:.4f}" y="{y - h / 2:.4f}" width="{w:.4f}" height="{h:.4f}"/>'
            )
            yield f'<clipPath id="c{number}">{shape}</clipPath><g clip-path="url(#c{number})">'
            yield from _svg_pieces(piece.pieces, chart)
            yield "</g>"


def _png(picture: Picture, chart: ChartFile) -> str:
    """Return a picture's cells as the address of an embedded PNG."""
    from PIL import Image  # noqa: PLC0415 - heavy

    rows = picture.reflectances
    stream = BytesIO()
    Image.frombytes("L", (len(rows[0]), len(rows)), _codes(picture, chart)).save(stream, "PNG")
    return f"data:image/png;base64,{b64encode(stream.getvalue()).decode()}"


def _codes(picture: Picture, chart: ChartFile) -> bytes:
    """Return a picture's cells as one byte each, row by row."""
    return bytes(round(255 * code(value, chart)) for row in picture.reflectances for value in row)


# ---- PDF


def artwork_pdf(chart: ChartFile) -> bytes:
    """Return the artwork as a PDF page of the sheet's size.

    Raises:
        UsageError: A feature cannot be drawn, or there is no room for the bar.
    """
    w, h = chart.size
    point = 72 / 25.4
    lines = [f"q {point:.8f} 0 0 {-point:.8f} {w / 2 * point:.6f} {h / 2 * point:.6f} cm"]
    drawn = list(pieces(chart))
    pictures = [piece for piece in drawn if isinstance(piece, Picture)]
    lines += _pdf_pieces([_sheet(chart), *drawn, *bar(chart)], chart)
    for words, (x, y), size in notes(chart):
        text = words.encode("cp1252", "replace").replace(b"\\", b"\\\\").replace(b"(", b"\\(").replace(b")", b"\\)")
        tone = f"{code(chart.ink, chart):.5f} g"
        lines.append(f"BT {tone} /F1 {size:.4f} Tf 1 0 0 -1 {x:.4f} {y:.4f} Tm ({text.decode('latin-1')}) Tj ET")
    stream = "\n".join([*lines, "Q"]).encode("latin-1")
    font = b"<< /Type /Font /Subtype /Type1 /BaseFont /Helvetica /Encoding /WinAnsiEncoding >>"
    names = [f"/I{number} {6 + number} 0 R" for number in range(len(pictures))]
    page = (
        f"<< /Type /Page /Parent 2 0 R /MediaBox [0 0 {w * point:.6f} {h * point:.6f}] /Contents 4 0 R "
        f"/Resources << /Font << /F1 5 0 R >> /XObject << {' '.join(names)} >> >> >>"
    ).encode()
    name = title(chart).encode("utf-16-be").hex()
    return _file(
        [
            b"<< /Type /Catalog /Pages 2 0 R /ViewerPreferences << /PrintScaling /None >> >>",
            b"<< /Type /Pages /Kids [3 0 R] /Count 1 >>",
            page,
            b"<< /Length %d >>\nstream\n%s\nendstream" % (len(stream), stream),
            font,
            *(_image(picture, chart) for picture in pictures),
            f"<< /Title <FEFF{name}> >>".encode(),
        ]
    )


def _image(picture: Picture, chart: ChartFile) -> bytes:
    rows = picture.reflectances
    data = compress(_codes(picture, chart), 9)
    head = (
        f"<< /Type /XObject /Subtype /Image /Width {len(rows[0])} /Height {len(rows)} /ColorSpace /DeviceGray "
        f"/BitsPerComponent 8 /Interpolate false /Filter /FlateDecode /Length {len(data)} >>"
    )
    return head.encode() + b"\nstream\n" + data + b"\nendstream"


def _file(objects: list[bytes]) -> bytes:
    """Return a PDF file of plain objects; the first is the catalogue, the last the information."""
    data = b"%PDF-1.7\n%\xe2\xe3\xcf\xd3\n"
    places = []
    for number, one in enumerate(objects, 1):
        places.append(len(data))
        data += b"%d 0 obj\n%s\nendobj\n" % (number, one)
    table = b"".join(b"%010d 00000 n \n" % place for place in places)
    count = len(objects) + 1
    trailer = b"trailer\n<< /Size %d /Root 1 0 R /Info %d 0 R >>\nstartxref\n%d\n%%%%EOF\n"
    return data + b"xref\n0 %d\n0000000000 65535 f \n" % count + table + trailer % (count, count - 1, len(data))


def _pdf_pieces(found: Sequence[Piece], chart: ChartFile) -> Iterator[str]:
    number = 0
    for piece in found:
        if isinstance(piece, Picture):
            (x, y), (w, h) = piece.centre, piece.size
            yield f"q {w:.5f} 0 0 {-h:.5f} {x - w / 2:.5f} {y + h / 2:.5f} cm /I{number} Do Q"
            number += 1
            continue
        if isinstance(piece, Clipped):
            (x, y), (w, h) = piece.centre, piece.size
            path = _ellipse((x, y), w / 2) if piece.round else f"{x - w / 2:.5f} {y - h / 2:.5f} {w:.5f} {h:.5f} re"
            yield f"q {path} W n"
            yield from _pdf_pieces(piece.pieces, chart)
            yield "Q"
            continue
        tone = f"{code(piece.reflectance, chart):.5f} g"
        if isinstance(piece, Disc):
            yield f"{tone} {_ellipse(piece.centre, piece.radius)} f"
        else:
            (x, y), *more = piece.points
            yield f"{tone} {x:.5f} {y:.5f} m " + " ".join(f"{a:.5f} {b:.5f} l" for a, b in more) + " h f"


def _ellipse(centre: Point, r: float) -> str:
    (x, y), k = centre, KAPPA * r
    arcs = (
        (r, k, k, r, 0, r),
        (-k, r, -r, k, -r, 0),
        (-r, -k, -k, -r, 0, -r),
        (k, -r, r, -k, r, 0),
    )
    curves = " ".join(
        " ".join(f"{(x if n % 2 == 0 else y) + part:.5f}" for n, part in enumerate(arc)) + " c" for arc in arcs
    )
    return f"{x + r:.5f} {y:.5f} m {curves} h"


def _sheet(chart: ChartFile) -> Area:
    return box((0.0, 0.0), chart.size, chart.ground)


# ---- bar and words


def title(chart: ChartFile) -> str:
    """Return which chart it is, in one line."""
    return f"{chart.name} · {chart.serial} · {chart.digest.removeprefix('sha256:')[:12]}"


def bar(chart: ChartFile) -> tuple[Area, ...]:
    """Return the bar and its two end strokes; its length, outside to outside, stands beside it."""
    (x, y), length, height = _bar_place(chart)
    thick, high = height * 0.12, height * 0.4
    strokes = [((x, y), (length, thick))]
    strokes += [((x + side * (length - thick) / 2, y), (thick, high)) for side in (-1, 1)]
    return tuple(box(centre, size, chart.ink) for centre, size in strokes)


def notes(chart: ChartFile) -> list[tuple[str, Point, float]]:
    """Return the words on the sheet with the places of their first letter's foot, mm, and their heights."""
    (x, y), length, height = _bar_place(chart)
    size = height * 0.42
    words = f"{length:g} mm   {title(chart)}"
    return [(words, (x - length / 2, y + height * 0.55), min(size, 1.8 * length / len(words)))]


def _bar_place(chart: ChartFile) -> tuple[Point, float, float]:
    """Return centre, length and height of free ground for the longest bar, nearest to the lower border."""
    for length in BARS:
        height = BAR_HEIGHT * length + 1.0
        room = (length * 1.02, height * 1.8)
        for y in _places(chart.size[1] / 2 - 2.0 - room[1] / 2, room[1]):
            for x in _places(chart.size[0] / 2 - 4.0 - room[0] / 2, room[0]):
                if _free((x, y), room, chart):
                    return (x, y - height * 0.2), length, height
    raise UsageError("there is no free ground for a bar to check the print by", next_step="leave some between features")


def _places(most: float, _room: float) -> list[float]:
    if most < 0:
        return []
    steps = int(most)
    return [most - n for n in range(2 * steps + 1)] if steps else [0.0]


def _free(centre: Point, room: Point, chart: ChartFile) -> bool:
    for mark in chart.marks.at:
        gaps = [max(abs(m - c) - r / 2, 0.0) for m, c, r in zip(mark, centre, room, strict=True)]
        if hypot(*gaps) < 0.8 * chart.marks.diameter:
            return False
    return all(
        any(abs(p - c) >= (s + r) / 2 for p, c, s, r in zip(one.position, centre, one.size, room, strict=True))
        for one in chart.features.values()
    )


def artwork(chart: ChartFile, ending: str) -> bytes:
    """Return the artwork as a file of one ending, `.svg` or `.pdf`.

    Raises:
        UsageError: Another ending, or a chart that cannot be drawn.
    """
    makers: dict[str, Any] = {".svg": lambda c: artwork_svg(c).encode(), ".pdf": artwork_pdf}
    if ending.lower() not in makers:
        raise UsageError(f"artwork cannot be written as '{ending}'", allowed=".pdf or .svg")
    data: bytes = makers[ending.lower()](chart)
    return data
