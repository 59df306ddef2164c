"""Pictures on paper: the PNG's own compressed pixels, shown exactly, and none of a file that is not in order."""

import io
import struct
import subprocess
import zlib
from pathlib import Path

import numpy as np
import pikepdf
import pytest
from PIL import Image

from runner.report.document import canonical
from runner.report.pdf import render_pdf
from runner.report.pdf_pictures import indexed
from tests.report import printed_world as world


def _png(colours: int, size: tuple[int, int] = (37, 23)) -> bytes:
    """Return a PNG with a palette of so many colours, none of them grey."""
    rng = np.random.default_rng(colours)
    picture = Image.fromarray(rng.integers(0, colours, size[::-1], dtype=np.uint8), mode="P")
    picture.putpalette(rng.integers(0, 256, 3 * colours, dtype=np.uint8).tobytes())
    return _saved(picture)


def _saved(picture: Image.Image, **options: object) -> bytes:
    out = io.BytesIO()
    picture.save(out, "PNG", **options)
    return out.getvalue()


def _images(pdf: pikepdf.Pdf) -> list[pikepdf.Stream]:
    return [one for one in pdf.objects if isinstance(one, pikepdf.Stream) and one.get("/Subtype") == "/Image"]


@pytest.mark.parametrize("colours", [2, 16, 160])
def test_other_programs_read_the_same_pixels_out_of_the_pdf(colours: int, tmp_path: Path) -> None:
    """What pikepdf and Poppler extract is what Pillow reads from the PNG, at 1, 4 and 8 bits per pixel."""
    png, document = _png(colours), world.document()
    pdf = render_pdf(document, {world.PICTURE: png}, canonical(document))
    (tmp_path / "report.pdf").write_bytes(pdf)
    true = np.asarray(Image.open(io.BytesIO(png)).convert("RGB"))

    with pikepdf.open(io.BytesIO(pdf)) as opened:
        (image,) = _images(opened)
        assert np.array_equal(np.asarray(pikepdf.PdfImage(image).as_pil_image().convert("RGB")), true)
    if colours > 2:  # Poppler's extraction shows any picture of one bit as black and white
        subprocess.run(["pdfimages", "-png", "report.pdf", "picture"], cwd=tmp_path, check=True, timeout=60)
        (path,) = tmp_path.glob("picture-*.png")
        assert np.array_equal(np.asarray(Image.open(path).convert("RGB")), true)


def test_overviews_are_taken_over_as_they_are() -> None:
    """What `pictures` writes is shown by its own compressed bytes: nothing is encoded again."""
    png, document = world.picture(), world.document()
    picture = indexed(png)

    assert picture is not None
    assert (picture.width, picture.height) == Image.open(io.BytesIO(png)).size
    assert picture.packed in png
    with pikepdf.open(io.BytesIO(render_pdf(document, world.pictures(), canonical(document)))) as pdf:
        (image,) = _images(pdf)
        assert image.read_raw_bytes() == picture.packed


@pytest.mark.parametrize("mode", ["L", "RGBA"])
def test_pictures_without_a_palette_are_left_to_the_renderer(mode: str) -> None:
    """Grey and transparent pictures are not taken over, and are printed all the same."""
    png, document = _saved(Image.new(mode, (40, 30))), world.document()

    assert indexed(png) is None
    pdf = render_pdf(document, {world.PICTURE: png}, canonical(document))
    with pikepdf.open(io.BytesIO(pdf)) as opened:
        assert {(int(one.Width), int(one.Height)) for one in _images(opened)} == {(40, 30)}


def _chunk(name: bytes, data: bytes) -> bytes:
    return struct.pack(">I", len(data)) + name + data + struct.pack(">I", zlib.crc32(name + data))


def _made(rows: bytes, width: int = 4, height: int = 2, interlace: int = 0, palette: bytes = bytes(6)) -> bytes:
    head = struct.pack(">IIBBBBB", width, height, 8, 3, 0, 0, interlace)
    parts = ((b"IHDR", head), (b"PLTE", palette), (b"IDAT", zlib.compress(rows)), (b"IEND", b""))
    return b"\x89PNG\r\n\x1a\n" + b"".join(_chunk(*part) for part in parts)


def test_a_picture_that_is_not_whole_is_never_taken_over() -> None:
    """Bytes put into a PDF unseen are exactly the rows that its size promises: no less, no more, no bomb."""
    whole = _made(bytes(10))

    assert indexed(whole) is not None
    assert indexed(_made(bytes(9))) is None, "a row is short"
    assert indexed(_made(bytes(11))) is None, "there is more than the rows"
    assert indexed(_made(bytes(60_000_000))) is None, "a small file that unpacks to 60 MB"
    assert indexed(_made(bytes(10), width=2**31, height=2**31 - 1)) is None
    assert indexed(_made(bytes(10), width=0)) is None
    assert indexed(_made(bytes(10), interlace=1)) is None
    assert indexed(_made(bytes(10), palette=b"")) is None
    assert indexed(_made(bytes(10), palette=bytes(7))) is None
    assert indexed(_saved(Image.open(io.BytesIO(_png(4))), transparency=1)) is None, "it has see-through pixels"
    for at in range(len(whole)):
        assert indexed(whole[:at]) is None, "it is cut off"
        assert indexed(whole[:at] + bytes([whole[at] ^ 1]) + whole[at + 1 :]) is None, "a bit is damaged"
