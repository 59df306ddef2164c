"""Two good units of an invented camera, and staged bad captures of the first: one thing wrong in each.

A check that catches 59 staged errors out of 59 detects 95 % of such errors with 95 % confidence (0.95 ** 59 < 0.05,
binomial law); there are more here. The same captures serve for tests of the whole run.
"""

import io
import pickle
import struct
from collections.abc import Callable
from dataclasses import dataclass
from math import erf
from pathlib import Path
from typing import Any

import numpy as np
import tifffile
from numpy.typing import NDArray
from PIL import Image

Codes = NDArray[np.uint16]

UNIT, NEIGHBOUR = "WS8-000101", "WS8-000102"
WIDTH, HEIGHT, BLACK, WHITE = 160, 120, 64, 4095

SPEC_TEXT = f"""\
probatum-spec: 1
document: {{number: WS8-BAD, revision: A}}
unit: {{product: WS8, serial: 'WS8-[0-9]{{6}}'}}
camera:
  frame_size: {WIDTH} x {HEIGHT} px
  bit_depth: 12 bit
  black_level: {BLACK} DN
  white_level: {WHITE} DN
captures:
  dark: {{target: dark frame, frames: {{names: 'dark-{{repeat}}.tif', count: 2}}}}
  chart:
    target: slanted edge
    frames: {{names: 'chart-{{repeat}}.*', count: 2}}
    uses: {{dark: dark}}
    regions:
      centre: {{position: [50 %, 50 %], size: [60 px, 80 px]}}
    measure: {{edge response: {{search: 10 px}}}}
    limits:
      - {{characteristic: 1, quantity: mtf50, where: centre, at_least: 0.20 cy/px}}
"""


def chart_codes(seed: int) -> Codes:
    """Return one frame of an edge 5 degrees off the vertical, blurred with sigma 0.7 px, with noise."""
    noise = np.random.default_rng(seed).normal(0, 8, (HEIGHT, WIDTH))
    y, x = np.mgrid[0.5:HEIGHT, 0.5:WIDTH]
    across = (x - WIDTH / 2) * np.cos(np.radians(5)) + (y - HEIGHT / 2) * np.sin(np.radians(5))
    step: NDArray[np.float64] = np.vectorize(erf, otypes=[float])(across / (0.7 * np.sqrt(2)))
    return np.clip(np.rint(1700 + 1200 * step + noise), 0, WHITE).astype(np.uint16)


def dark_codes(seed: int) -> Codes:
    """Return one frame without light."""
    return np.random.default_rng(seed).normal(BLACK, 4, (HEIGHT, WIDTH)).round().clip(0).astype(np.uint16)


def good_unit(folder: Path, seed: int) -> None:
    """Write the two dark and two chart frames of a unit."""
    folder.mkdir(parents=True, exist_ok=True)
    for repeat in (1, 2):
        (folder / f"dark-{repeat}.tif").write_bytes(tiff(dark_codes(seed + repeat)))
        (folder / f"chart-{repeat}.tif").write_bytes(tiff(chart_codes(seed + 10 + repeat)))


def good_lot(root: Path) -> None:
    """Write two good units."""
    good_unit(root / UNIT, 100)
    good_unit(root / NEIGHBOUR, 200)


def tiff(codes: NDArray[np.generic], **options: Any) -> bytes:
    """Return a TIFF without a description."""
    file = io.BytesIO()
    tifffile.imwrite(file, codes, **{"metadata": None, "photometric": "minisblack", **options})
    return file.getvalue()


def npy(codes: NDArray[np.generic], *, pickled: bool = False) -> bytes:
    """Return an NPY file."""
    file = io.BytesIO()
    np.save(file, codes, allow_pickle=pickled)
    return file.getvalue()


def picture(image: Image.Image, kind: str) -> bytes:
    """Return a picture file written by Pillow."""
    file = io.BytesIO()
    image.save(file, kind)
    return file.getvalue()


def png(codes: NDArray[np.generic]) -> bytes:
    """Return a PNG."""
    return picture(Image.fromarray(codes), "PNG")


def zero_tail(data: bytes, size: int) -> bytes:
    """Return a file of the same length whose last bytes are still zero."""
    return data[:-size] + bytes(size)


@dataclass(frozen=True)
class BadCapture:
    """One staged error."""

    name: str
    """What was done."""
    says: str
    """Part of the sentence that must come, a regular expression."""
    spoil: Callable[[Path], None]
    """Spoils the first unit of a good lot, whose root it is given."""
    capture: str = "chart"
    """Capture of the first unit that must not be measured."""


def _file(name: str, says: str, make: Callable[[Codes], bytes], ending: str = "tif") -> BadCapture:
    """Stage a chart frame that is replaced by another file."""

    def spoil(root: Path) -> None:
        (root / UNIT / "chart-2.tif").unlink()
        (root / UNIT / f"chart-2.{ending}").write_bytes(make(chart_codes(112)))

    return BadCapture(name, says, spoil)


def _patched(data: bytes, tag: int, value: int) -> bytes:
    """Return a little-endian TIFF with the value of one tag of its first page overwritten."""
    (first,) = struct.unpack_from("<I", data, 4)
    (count,) = struct.unpack_from("<H", data, first)
    out = bytearray(data)
    for entry in range(first + 2, first + 2 + 12 * count, 12):
        if struct.unpack_from("<H", data, entry)[0] == tag:
            struct.pack_into("<I", out, entry + 8, value)
            return bytes(out)
    raise AssertionError(tag)


def _in_a_circle(codes: Codes) -> bytes:
    data = bytearray(tiff(codes))
    (first,) = struct.unpack_from("<I", data, 4)
    (count,) = struct.unpack_from("<H", data, first)
    struct.pack_into("<I", data, first + 2 + 12 * count, first)
    return bytes(data)


def _broken_check_sum(codes: Codes) -> bytes:
    data = bytearray(png(codes))
    data[len(data) // 2] ^= 1
    return bytes(data)


def _holed(codes: Codes) -> bytes:
    lost = codes.astype(np.float32)
    lost[3, 4] = np.nan
    return tiff(lost)


def _endless(codes: Codes) -> bytes:
    lost = codes.astype(np.float64)
    lost[0, 0] = np.inf
    return tiff(lost)


def _thin_stack(codes: Codes) -> bytes:
    return npy(np.broadcast_to(codes[:1, :1], (1001, HEIGHT, WIDTH)).astype(np.uint8))


def _rgb(codes: Codes) -> NDArray[np.uint8]:
    grey = (codes // 16).astype(np.uint8)
    return np.stack([grey, grey // 2, grey], axis=-1)


def _damaged_strip(codes: Codes) -> bytes:
    data = bytearray(tiff(codes, compression="zlib"))
    data[-200:-100] = bytes(100)
    return bytes(data)


BAD_FILES = (
    _file("empty", "the file is empty", lambda _: b""),
    _file("nothing but zeros", "nothing but zeros: a copy still under way", lambda c: bytes(2 * c.size)),
    _file("TIFF cut in its header", r"the file is truncated: it points to byte", lambda c: tiff(c)[:6]),
    _file("TIFF cut in the middle", "the file is truncated: its picture goes to byte", lambda c: tiff(c)[:20000]),
    _file("TIFF without its last byte", "ends at byte", lambda c: tiff(c)[:-1]),
    _file("TIFF cut in its second page", "the file is truncated", lambda c: tiff(np.stack([c, c + 1]))[:60000]),
    _file("TIFF compressed and cut", "the file is truncated", lambda c: tiff(c, compression="zlib")[:9000]),
    _file("TIFF compressed and damaged", "cannot be decoded", _damaged_strip),
    _file("TIFF with a zero tail", "the last 4096 of 19200 pixels are zero", lambda c: zero_tail(tiff(c), 8192)),
    _file("TIFF compressed with a zero tail", "ends in .* bytes of zeros|cannot be decoded",
          lambda c: zero_tail(tiff(c, compression="lzw"), 5000)),
    _file("TIFF all pixels zero", "every pixel is zero, below the black level of 64 DN", lambda c: tiff(c * 0)),
    _file("TIFF with an unwritten strip", "a piece of the picture was never written",
          lambda c: _patched(tiff(c), 273, 0)),
    _file("TIFF pages in a circle", "point back at each other", _in_a_circle),
    _file("TIFF with pages only promised", "describes 3 frames, 1 can be found",
          lambda c: tiff(c, description="ImageJ=1.11a\nimages=3\nslices=3\n")),
    _file("TIFF of another size", "the frame is 158 x 120 px", lambda c: tiff(c[:, :158].copy())),
    _file("TIFF turned", "turned by 90 degrees", lambda c: tiff(np.rot90(c).copy())),
    _file("TIFF to be turned for viewing", r"\(orientation 6\)", lambda c: tiff(c, extratags=[(274, 3, 1, 6, True)])),
    _file("TIFF of 8 bit", "the file holds 8 bit per pixel", lambda c: tiff((c // 16).astype(np.uint8))),
    _file("TIFF of 1 bit", "the file holds 1 bit per pixel",
          lambda c: picture(Image.fromarray(c > 1700), "TIFF")),
    _file("TIFF left-aligned", "every code is a multiple of 16", lambda c: tiff(c * 16)),
    _file("TIFF stretched to 16 bit", "the highest code is 4.* DN",
          lambda c: tiff((c.astype(np.uint32) * 65535 // 4095).astype(np.uint16))),
    _file("TIFF with swapped bytes", "the bytes of each pixel seem swapped", lambda c: tiff(c.byteswap())),
    _file("TIFF signed with negative codes", "the lowest code is -", lambda c: tiff(c.astype(np.int16) - 1000)),
    _file("TIFF not a number", "1 of 19200 pixels are not finite", _holed),
    _file("TIFF infinite", "1 of 19200 pixels are not finite", _endless),
    _file("TIFF scaled to 1", "seems scaled to 0 … 1", lambda c: tiff((c / 4095).astype(np.float32))),
    _file("TIFF in half precision", "16 bit floating-point", lambda c: tiff(c.astype(np.float16))),
    _file("TIFF in colour", "3 colour channels", lambda c: tiff(_rgb(c), photometric="rgb")),
    _file("TIFF with transparency", "holds transparency",
          lambda c: tiff(np.stack([c, c], -1), planarconfig="contig", extrasamples=["unassalpha"])),
    _file("TIFF with a palette", "coded colours",
          lambda c: tiff((c // 16).astype(np.uint8), photometric="palette", colormap=np.zeros((3, 256), np.uint16))),
    _file("TIFF white as zero", "stores white as zero", lambda c: tiff(c, photometric="miniswhite")),
    _file("TIFF of lossy compression", "not known to be lossless",
          lambda c: tiff((c // 16).astype(np.uint8), compression="jpeg")),
    _file("PNG cut", "does not end with the end mark of a PNG", lambda c: png(c)[:15000], "png"),
    _file("PNG cut in its header", "inside its header", lambda c: png(c)[:20], "png"),
    _file("PNG with a zero tail", "bytes are zero", lambda c: zero_tail(png(c), 4096), "png"),
    _file("PNG with a wrong check sum", "cannot be decoded", _broken_check_sum, "png"),
    _file("PNG in colour", "3 colour channels", lambda c: png(_rgb(c)), "png"),
    _file("PNG with transparency", "transparency", lambda c: png(np.stack([_rgb(c)[..., 0]] * 2, -1)), "png"),
    _file("PNG with a palette", "a colour palette",
          lambda c: picture(Image.fromarray(_rgb(c)[..., 0]).convert("P"), "PNG"), "png"),
    _file("PNG of 1 bit", "1 bit per pixel", lambda c: picture(Image.fromarray(c > 1700), "PNG"), "png"),
    _file("PNG of 8 bit", "8 bit per pixel", lambda c: png((c // 16).astype(np.uint8)), "png"),
    _file("PNG of another size", "the frame is 160 x 119 px", lambda c: png(c[:119]), "png"),
    _file("NPY cut", "bytes of pixels are announced", lambda c: npy(c)[:30000], "npy"),
    _file("NPY cut in its header", "header cannot be read", lambda c: npy(c)[:50], "npy"),
    _file("NPY with a zero tail", "pixels are zero", lambda c: zero_tail(npy(c), 4096), "npy"),
    _file("NPY by columns with a zero tail", "pixels are zero",
          lambda c: zero_tail(npy(np.asfortranarray(c)), 4096), "npy"),
    _file("NPY with bytes behind it", "3 bytes follow the end", lambda c: npy(c) + b"abc", "npy"),
    _file("NPY with pickled objects", "pickled objects", lambda c: npy(c.astype(object), pickled=True), "npy"),
    _file("NPY of complex numbers", "values of type complex128", lambda c: npy(c.astype(complex)), "npy"),
    _file("NPY of truth values", "values of type bool", lambda c: npy(c > 1700), "npy"),
    _file("NPY in colour", "3 values per pixel", lambda c: npy(np.stack([c, c, c], -1)), "npy"),
    _file("NPY of one axis", "the array has 1 axes", lambda c: npy(c.ravel()), "npy"),
    _file("NPY of too many frames", "more than 1000 pages", _thin_stack, "npy"),
    _file("JPEG of a raw product", "holds a JPEG", lambda c: picture(Image.fromarray(_rgb(c)), "JPEG"), "jpg"),
    _file("BMP under another name", "a BMP picture", lambda c: picture(Image.fromarray(_rgb(c)), "BMP")),
    _file("PNG under another name", "the file holds PNG, its name ends in '.tif'", png),
    _file("text", "no picture that is known here", lambda _: b"exposure 20 ms\n" * 3000),
    _file("web page", "text with markup", lambda _: b"<!doctype html><title>404</title>"),
    _file("pickle", "a Python pickle", pickle.dumps, "npy"),
)  # fmt: skip
"""Each replaces the second chart frame by a file that cannot be evidence."""


def _move_into(root: Path, *attempts: str) -> None:
    """Move the chart frames' folder contents of the first unit into attempt folders, one good attempt in each."""
    for number, name in enumerate(attempts):
        good_unit(root / UNIT / name, 300 + 100 * number)


def _link(root: Path, target: str) -> None:
    (root / UNIT / "chart-2.tif").unlink()
    (root / UNIT / "chart-2.tif").symlink_to(target)


def _copy(source: str, target: str) -> Callable[[Path], None]:
    def spoil(root: Path) -> None:
        (root / target).write_bytes((root / source).read_bytes())

    return spoil


def _rename(source: str, target: str) -> Callable[[Path], None]:
    def spoil(root: Path) -> None:
        (root / UNIT / source).rename(root / UNIT / target)

    return spoil


def _as_png(root: Path) -> None:
    (root / UNIT / "chart-2.tif").unlink()
    (root / UNIT / "chart-2.png").write_bytes(png(tifffile.imread(root / UNIT / "chart-1.tif")))


def _named_inside(root: Path) -> None:
    data = tiff(chart_codes(112), description='{"serial": "WS8-000999"}')
    (root / UNIT / "chart-2.tif").write_bytes(data)


def _folder_for_a_file(root: Path) -> None:
    (root / UNIT / "chart-2.tif").unlink()
    (root / UNIT / "chart-2.tif").mkdir()


def _no_chart(root: Path) -> None:
    for file in (root / UNIT).glob("chart-*"):
        file.unlink()


def _one_more(root: Path) -> None:
    (root / UNIT / "chart-3.tif").write_bytes(tiff(chart_codes(9)))


def _stuck_buffer(root: Path) -> None:
    (root / UNIT / "chart-1.tif").unlink()
    (root / UNIT / "chart-2.tif").write_bytes(tiff(np.stack([chart_codes(111)] * 2)))


BAD_SETS = (
    BadCapture("frame copied", "the same pixels as chart-1.tif", _copy(f"{UNIT}/chart-1.tif", f"{UNIT}/chart-2.tif")),
    BadCapture("frame saved in two formats", "the same pixels as chart-", _as_png),
    BadCapture("frame of the neighbour", f"the same pixels as unit {NEIGHBOUR}, attempt 1, chart-2.tif",
               _copy(f"{NEIGHBOUR}/chart-2.tif", f"{UNIT}/chart-2.tif")),
    BadCapture("buffer stuck in a stack", "the same pixels as page", _stuck_buffer),
    BadCapture("serial of another unit inside", "says that it is of unit WS8-000999", _named_inside),
    BadCapture("serial of another unit in the name", "the name says unit WS8-000999",
               _rename("chart-2.tif", "chart-WS8-000999.tif")),
    BadCapture("frame lost", "1 of 2 frames 'chart-.*', repeat 1 missing",
               lambda r: (r / UNIT / "chart-1.tif").unlink()),
    BadCapture("frame too many", "3 frames 'chart-.*', the spec asks for 2",
               _one_more),
    BadCapture("no chart at all", "there is no frame 'chart-", _no_chart),
    BadCapture("copy under way", "1 of 2 frames", _rename("chart-2.tif", "chart-2.tif.part")),
    BadCapture("another case", "1 of 2 frames", _rename("chart-2.tif", "Chart-2.tif")),
    BadCapture("folder in place of a file", "1 of 2 frames", _folder_for_a_file),
    BadCapture("link to nowhere", "cannot be read", lambda r: _link(r, "nowhere.tif")),
    BadCapture("link to itself", "cannot be read", lambda r: _link(r, "chart-2.tif")),
    BadCapture("frames beside attempts", "both in the folder of WS8-000101 itself and in its attempt folders",
               lambda r: _move_into(r, "attempt-2")),
    BadCapture("dark frame copied", "the same pixels as dark-1.tif",
               _copy(f"{UNIT}/dark-1.tif", f"{UNIT}/dark-2.tif"), "dark"),
)  # fmt: skip
"""Each does something to the set of files."""

BAD_CAPTURES = BAD_FILES + BAD_SETS
