"""What the benchmarks of even fields measure on: 12 MP flats and darks with shading, patterns, bands and defects."""

from pathlib import Path

import numpy as np
import tifffile

from tests.scenes.flats import Pattern, Shading, plant, scattered, spot, wave

WIDTH, HEIGHT = 4000, 3000
BLACK = 64
SPOTS = 200
"""Defective pixels planted in the sensor."""

HEAD = """\
probatum-spec: 1
document: {{number: BENCH-F, revision: A, title: "Benchmark of even fields"}}
unit: {{product: BENCH, serial: 'F-[0-9]{{4}}'}}
camera: {{frame_size: 4000 x 3000 px, {camera}}}
captures:
"""
DEEP = "bit_depth: 12 bit, black_level: 64 DN, white_level: 4095 DN"
SHORT = "bit_depth: 8 bit, black_level: 0 DN, white_level: 255 DN, colour: rgb, tone: srgb"
FLAT = """\
  flat:
    target: flat field
    frames: {{names: 'flat-{{repeat}}.tif', count: {count}}}
    measure: [shading, frame noise, banding, defects]
    limits:
      - {{characteristic: F1, quantity: uniformity, at_least: 10 %}}
"""
DARK = """\
  dark:
    target: dark frame
    frames: {{names: 'dark-{{repeat}}.tif', count: {count}}}
    measure: [frame noise, banding, defects]
    limits:
      - {{characteristic: D1, quantity: hot_pixels, at_most: 100000}}
"""


def light(rng: np.random.Generator, *, lit: bool) -> np.ndarray:
    """Return the light of a unit's field over black, DN: what stays from frame to frame."""
    size = WIDTH, HEIGHT
    if lit:
        field = 2400 * Shading(size, angle=25, axis=(60, -40)).frame()
        field *= 1 + Pattern(pixel=0.003, row=0.0005, column=0.001).sum(size, rng)
        field[1000:1400, 800:1200] *= spot((400, 400), (200, 200), 40, -0.04)
    else:
        field = 4 + Pattern(pixel=0.5, row=0.05, column=0.2).sum(size, rng)
    places = scattered(size, SPOTS, rng)
    return plant(field, places, 1200.0 if not lit else -1200.0)


def frames(count: int, *, lit: bool, seed: int = 1) -> list[np.ndarray]:
    """Return 12-bit frames of one unit, rows × columns, each with its own noise and faint bands that move."""
    rng = np.random.default_rng(seed)
    field = light(rng, lit=lit)
    made = []
    for n in range(count):
        noise = Pattern(pixel=np.sqrt(2400 / 4) if lit else 3.0, row=0.3, column=0.1).sum((WIDTH, HEIGHT), rng)
        noise += wave(HEIGHT, 0.0123, 0.5, n)[:, None] + wave(WIDTH, 0.0717, 3.0, n)[None, :]
        made.append(np.clip(np.round(field + noise + BLACK), 0, 4095).astype(np.uint16))
    return made


def lay_out(folder: Path, *, lit: bool) -> tuple[Path, list[Path]]:
    """Write the spec and one unit's pair of flats, or of darks; return the spec and the files."""
    name = "flat" if lit else "dark"
    spec, unit = folder / f"{name}.yaml", folder / name / "F-0001"
    unit.mkdir(parents=True)
    spec.write_text((HEAD + (FLAT if lit else DARK)).format(camera=DEEP, count=2))
    files = [unit / f"{name}-{n}.tif" for n in (1, 2)]
    for file, codes in zip(files, frames(2, lit=lit), strict=True):
        tifffile.imwrite(file, codes)
    return spec, files


def lay_out_set(folder: Path, count: int, kind: str) -> None:
    """Write `spec.yaml` and one unit of so many flats below `frames`.

    Args:
        folder: Where.
        count: Frames.
        kind: `mono`, `mosaic` (RGGB, 12 bit) or `rgb` (three 8-bit planes, sRGB).
    """
    camera = SHORT if kind == "rgb" else DEEP + (", mosaic: RGGB" if kind == "mosaic" else "")
    (folder / "spec.yaml").write_text((HEAD + FLAT).format(camera=camera, count=count))
    unit = folder / "frames" / "F-0001"
    unit.mkdir(parents=True)
    rng = np.random.default_rng(3)
    field = (120 if kind == "rgb" else 2400) * Shading((WIDTH, HEIGHT), angle=25, axis=(60, -40)).frame()
    for n in range(count):
        noise = rng.standard_normal((HEIGHT, WIDTH), dtype=np.float32)
        if kind == "rgb":
            planes = [field * gain + 1.5 * np.roll(noise, 100 * k) for k, gain in enumerate((0.8, 1.0, 0.9))]
            codes = np.clip(np.round(np.stack(planes, axis=-1)), 0, 255).astype(np.uint8)
        else:
            codes = np.clip(np.round(field + 24 * noise + BLACK), 0, 4095).astype(np.uint16)
        tifffile.imwrite(unit / f"flat-{n + 1}.tif", codes, photometric="rgb" if kind == "rgb" else "minisblack")
