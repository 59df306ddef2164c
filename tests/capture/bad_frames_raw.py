"""Staged bad captures of headerless files: sizes, packings, byte orders, rows, depths and ends not as declared."""

from dataclasses import replace
from pathlib import Path

import numpy as np
from scipy.special import erf

from runner.spec.files import Layout
from tests.capture.bad_frames import tiff, zero_tail
from tests.capture.raw_scenes import HEIGHT, WIDTH, Codes, write
from tests.capture.staged import LITTLE, Kind, Staged, changed, codes, frames_of, second, spec_text

PADDED = Layout("12 bit low bits first", "", 16, 512)
STACK = Layout("MIPI RAW12", frames_per_file=2)


def _layout(layout: Layout) -> str:
    parts = [f"packing: {layout.packing}"] + ([f"byte_order: {layout.byte_order}"] if layout.byte_order else [])
    parts += [f"row_padding: {layout.row_padding} bytes, header: {layout.header} bytes"]
    return f"  layout: {{{', '.join(parts)}, frames_per_file: {layout.frames_per_file}}}\n"


def _kind(layout: Layout) -> Kind:
    return Kind(spec_text(_layout(layout)), frames_of(lambda c: write(c, layout), "raw"))


def _pair(first: Codes) -> bytes:
    return write(np.stack([first, codes(int(first[0, 0]))]), STACK)


def _stack_unit(folder: Path, serial: str, seed: int) -> None:
    (folder / "flat-1.raw").write_bytes(_pair(codes(seed)))


WORDS, PACKED = _kind(LITTLE), _kind(PADDED)
STACKS = Kind(spec_text(_layout(STACK)), _stack_unit)


def _at_top(c: Codes) -> bytes:
    """Return a frame that clips where 10 bit end."""
    return write(np.minimum(c // 2, 1023), LITTLE)


def _on_its_side(_: Codes) -> bytes:
    """Return a picture of 144 x 192 px with a dark left and a bright right half."""
    y, x = np.mgrid[:WIDTH, :HEIGHT]
    light = 1500 + 1100 * erf((x - HEIGHT / 2 + 0.09 * (y - WIDTH / 2)) / 1.2)
    return write((light + np.random.default_rng(1).normal(0, 20, light.shape)).astype(np.uint16), LITTLE)


def _wider(_: Codes) -> bytes:
    """Return a picture of 216 x 128 px with a bright disc: its borders are alike, so that they leave no seam."""
    y, x = np.mgrid[:128, :216]
    light = 1500 + 1100 * erf((np.hypot(x - 108, y - 64) - 40) / 1.2)
    return write((light + np.random.default_rng(1).normal(0, 20, light.shape)).astype(np.uint16), LITTLE)


def _replaced(layout: Layout, **changes: object) -> Layout:
    return replace(layout, **changes)  # type: ignore[arg-type]


BAD_RAW = (
    Staged("raw cut", "the file is truncated: it holds 50000 bytes; 192 x 144 px of 16 bit fill 55296", WORDS,
           second(lambda c: write(c, LITTLE)[:50000], "raw")),
    Staged("raw without its last byte", "holds 55295 bytes", WORDS, second(lambda c: write(c, LITTLE)[:-1], "raw")),
    Staged("raw with bytes behind it", "would fit header: 100 bytes", WORDS,
           second(lambda c: write(c, LITTLE) + bytes(100), "raw")),
    Staged("raw with two frames", "would fit frames_per_file: 2", WORDS,
           second(lambda c: write(c, LITTLE) + write(c + 1, LITTLE), "raw")),
    Staged("raw packed, declared as words", "would fit 12 bit packed", WORDS,
           second(lambda c: write(c, Layout("MIPI RAW12")), "raw")),
    Staged("raw with padded rows, declared without", "would fit .*row_padding: 64 bytes", WORDS,
           second(lambda c: write(c, _replaced(LITTLE, row_padding=64)), "raw")),
    Staged("raw with a zero tail", "the last 2048 of 27648 pixels are zero", WORDS,
           second(lambda c: zero_tail(write(c, LITTLE), 4096), "raw")),
    Staged("raw nothing but zeros", "every pixel is zero", WORDS, second(lambda c: bytes(2 * c.size), "raw")),
    Staged("raw with swapped bytes", "likely is byte_order: big", WORDS,
           second(lambda c: write(c, _replaced(LITTLE, byte_order="big")), "raw")),
    Staged("raw left-aligned", "every code is a multiple of 16", WORDS, second(lambda c: write(c * 16, LITTLE), "raw")),
    Staged("raw of 10 bit", "none above: the frame clips as one of 10 bit does", WORDS, second(_at_top, "raw")),
    Staged("raw of 14 bit", "the highest code is 1", WORDS, second(lambda c: write(c * 4 + 1, LITTLE), "raw")),
    Staged("raw on its side", "repeats itself after 144 px, not after the declared 192 px", WORDS,
           second(_on_its_side, "raw")),
    Staged("raw of another row length, borders alike", "after 216 px, not after the declared 192 px of a row", WORDS,
           second(_wider, "raw")),
    Staged("raw with padding counted as picture", "the last 8 columns are zero in every row: padding", WORDS,
           second(lambda c: write(np.where(np.arange(WIDTH) < WIDTH - 8, c, 0), LITTLE), "raw")),
    Staged("TIFF as raw", "the file holds TIFF, its name ends in '.raw'", WORDS, second(tiff, "raw")),
    Staged("raw as TIFF", "no picture that is known here", WORDS, second(lambda c: write(c, LITTLE), "tif")),
    Staged("raw copied", "the same pixels as flat-1.raw", WORDS,
           changed("flat-2.raw", lambda f: (f / "flat-1.raw").read_bytes())),
    Staged("packed cut", "the file is truncated: it holds", PACKED,
           second(lambda c: write(c, PADDED)[:-100], "raw")),
    Staged("packed with a zero tail", "pixels are zero: a copy still under way", PACKED,
           second(lambda c: zero_tail(write(c, PADDED), 4096), "raw")),
    Staged("packed the other way round", "likely is packing: 12 bit high bits first", PACKED,
           second(lambda c: write(c, _replaced(PADDED, packing="12 bit high bits first")), "raw")),
    Staged("packed with nibbles in the middle", "likely is packing: 12 bit low nibbles in the middle", PACKED,
           second(lambda c: write(c, _replaced(PADDED, packing="12 bit low nibbles in the middle")), "raw")),
    Staged("packed as MIPI RAW12", "likely is packing: MIPI RAW12", PACKED,
           second(lambda c: write(c, _replaced(PADDED, packing="MIPI RAW12")), "raw")),
    Staged("packed without its header", "row_padding|truncated|exactly", PACKED,
           second(lambda c: write(c, _replaced(PADDED, header=0)), "raw")),
    Staged("words, declared as packed", "would fit .*packing: 16 bit|exactly", PACKED,
           second(lambda c: write(c, _replaced(PADDED, packing="16 bit", byte_order="little")), "raw")),
    Staged("stack cut between its frames", "frames_per_file: 1", STACKS,
           changed("flat-1.raw", lambda f: (f / "flat-1.raw").read_bytes()[: WIDTH * HEIGHT * 3 // 2])),
    Staged("stack of one frame twice", "the same pixels as page", STACKS,
           changed("flat-1.raw", lambda _: write(np.stack([codes(5)] * 2), STACK))),
)  # fmt: skip
"""Each spoils one headerless file."""
