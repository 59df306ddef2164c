"""A small test spec of the invented board camera, and how faults are planted in it."""

from pathlib import Path

MARK = "§"
"""Stands in planted text just before the place that a complaint must name."""

TEXT = """\
probatum-spec: 1
document: {number: WS8-ACC, revision: C}
unit: {product: WS8, serial: 'WS8-[0-9]{6}'}
camera:
  frame_size: 1600 x 1200 px
  bit_depth: 12 bit
  black_level: 64 DN
  white_level: 4095 DN
  pixel_pitch: 3.0 um
  fill: 100 %
  processing: none
optics: {f_number: 2.8, wavelength: 550 nm, focal_length: 4.2 mm}
decision: {rule: proof either way, conformance_probability: 95 %}
captures:
  dark: {target: dark frame, frames: {names: 'dark-{repeat}.tif', count: 4}}
  chart:
    target: slanted edge
    frames: {names: 'chart-{repeat}.tif', count: 2}
    uses: {dark: dark}
    regions:
      centre: {position: [50 %, 50 %], size: [80 px, 120 px]}
      corners:
        position: {upper left: [15 %, 15 %], lower right: [85 %, 85 %]}
        size: [80 px, 120 px]
    measure: {edge response: {search: 10 px}}
    usable_if: {clipped: at most 0.01 %}
    limits:
      - {characteristic: 1, quantity: mtf, frequency: 0.25 cy/px, where: centre, at_least: 0.45}
      - {characteristic: 2, quantity: mtf50, where: corners, at_least: 0.20 cy/px}
      - {characteristic: 3, quantity: mtf50, where: corners, combine: range, at_most: 0.05 cy/px}
"""
"""Draws no complaint and no warning."""

FLAT = """\
probatum-spec: 1
document: {number: WS8-FLD, revision: A}
unit: {product: WS8, serial: 'WS8-[0-9]{6}'}
camera: {frame_size: 64 x 48 px, bit_depth: 12 bit, black_level: 64 DN, white_level: 4095 DN}
captures:
  flat:
    target: flat field
    frames: 'flat-{repeat}.npy'
    regions: {middle: {position: [50 %, 50 %], size: [16 px, 16 px]}}
    limits: [{characteristic: 1, quantity: level, where: middle, at_least: 20 %}]
"""
"""A spec of one evenly lit field of 64 x 48 px, for which small frames do."""


def planted(old: str, new: str) -> tuple[str, str]:
    """Return the spec's text with one part replaced, and `line:col` of the mark in it.

    Args:
        old: Text that stands in `TEXT` exactly once.
        new: Its replacement, with one `MARK`; an `old` that ends with a line may be replaced by several.
    """
    assert TEXT.count(old) == 1, old
    text = TEXT.replace(old, new)
    before, mark, after = text.partition(MARK)
    assert mark, new
    return before + after, f"{before.count(chr(10)) + 1}:{len(before) - before.rfind(chr(10))}"


def write(folder: Path, text: str = TEXT, name: str = "spec.yaml") -> Path:
    """Write a spec's text to a file of a folder and return its path."""
    path = folder / name
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(text, encoding="utf-8")
    return path
