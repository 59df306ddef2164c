"""What the benchmarks measure on: large frames with many slanted edges, lots of small ones, and their specs."""

from pathlib import Path

import numpy as np
import tifffile

from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian

WIDTH, HEIGHT = 4000, 3000
COLUMNS, ROWS = 5, 5
REGION = (100, 160)
SIGMAS = tuple(0.5 + 0.01 * n for n in range(COLUMNS * ROWS))
"""px: Gaussian blur of each edge."""


def centres() -> list[tuple[int, int]]:
    """Return the centres of the 25 regions, px."""
    return [
        (WIDTH * (2 * i + 1) // (2 * COLUMNS), HEIGHT * (2 * j + 1) // (2 * ROWS))
        for j in range(ROWS)
        for i in range(COLUMNS)
    ]


def frame(seed: int = 1) -> np.ndarray:
    """Return a 12 MP 16-bit frame: noise around mid level with a slanted edge at each centre."""
    rng = np.random.default_rng(seed)
    codes = np.round(rng.normal(20000, 150, (HEIGHT, WIDTH))).astype(np.uint16)
    w, h = REGION[0] + 60, REGION[1] + 60
    for n, (x, y) in enumerate(centres()):
        scene = EdgeScene(Gaussian(SIGMAS[n]), size=(w, h), direction=4 + 0.2 * n, read_noise=150)
        codes[y - h // 2 : y - h // 2 + h, x - w // 2 : x - w // 2 + w] = scene.render(rng)
    return codes


SPEC = """\
probatum-spec: 1
document: {number: BENCH, revision: A, title: "Benchmark"}
unit: {product: BENCH, serial: 'B-[0-9]{4}'}
camera: {frame_size: 4000 x 3000 px, bit_depth: 16 bit, black_level: 0 DN, white_level: 65535 DN}
captures:
  chart:
    target: slanted edge
    frames: {names: 'chart-{repeat}.tif', count: 1}
    regions:
      edges:
        grid: {columns: 5, rows: 5, from: [10 %, 10 %], to: [90 %, 90 %]}
        size: [100 px, 160 px]
    limits:
      - {characteristic: 1, quantity: mtf50, where: edges, at_least: 0.15 cy/px}
      - {characteristic: 2, quantity: mtf, frequency: 0.25 cy/px, where: edges, at_least: 0.2}
"""


def lay_out(folder: Path) -> tuple[Path, Path]:
    """Write spec and one unit's frame; return their paths."""
    spec, unit = folder / "bench.yaml", folder / "frames" / "B-0001"
    unit.mkdir(parents=True)
    spec.write_text(SPEC)
    tifffile.imwrite(unit / "chart-1.tif", frame())
    return spec, unit / "chart-1.tif"


CAPTURE = """\
  chart{n}:
    target: slanted edge
    frames: {{names: 'chart{n}-{{repeat}}.tif', count: 1}}
    regions: {{edge: {{position: [50 %, 50 %], size: [100 px, 160 px]}}}}
    limits:
      - {{characteristic: {n}1, quantity: mtf50, where: edge, at_least: 0.15 cy/px}}
      - {{characteristic: {n}2, quantity: mtf, frequency: 0.25 cy/px, where: edge, at_least: 0.2}}
      - {{characteristic: {n}3, quantity: mtf, frequency: 0.125 cy/px, where: edge, at_least: 0.2}}
      - {{characteristic: {n}4, quantity: mtf, frequency: 0.35 cy/px, where: edge, at_least: 0.01}}
      - {{characteristic: {n}5, quantity: overshoot, where: edge, at_most: 10 %}}
"""


def lay_out_pictures(folder: Path) -> Path:
    """Write spec and one unit of six captures, each with one picture, one region and five limits; return the spec."""
    spec, unit = folder / "pictures.yaml", folder / "frames" / "B-0001"
    unit.mkdir(parents=True)
    head = SPEC.split("captures:", maxsplit=1)[0].replace("4000 x 3000 px", "1000 x 750 px")
    spec.write_text(head + "captures:\n" + "".join(CAPTURE.format(n=n) for n in range(1, 7)))
    rng = np.random.default_rng(2)
    for n in range(1, 7):
        scene = EdgeScene(Gaussian(0.5 + 0.02 * n), size=(1000, 750), direction=5, read_noise=150)
        tifffile.imwrite(unit / f"chart{n}-1.tif", scene.render(rng))
    return spec


LOT = """\
probatum-spec: 1
document: {number: BENCH-L, revision: A, title: "Benchmark of a lot"}
unit: {product: BENCH, serial: 'L-[0-9]{4}'}
camera: {frame_size: 640 x 480 px, bit_depth: 12 bit, black_level: 64 DN, white_level: 4095 DN}
captures:
  dark: {target: dark frame, frames: {names: 'dark-{repeat}.tif', count: 2}}
  chart:
    target: slanted edge
    frames: {names: 'chart-{repeat}.tif', count: 2}
    uses: {dark: dark}
    regions:
      edges: {grid: {columns: 2, rows: 2, from: [25 %, 25 %], to: [75 %, 75 %]}, size: [80 px, 120 px]}
    limits:
      - {characteristic: 1, quantity: mtf50, where: edges, at_least: 0.15 cy/px}
      - {characteristic: 2, quantity: mtf, frequency: 0.25 cy/px, where: edges, at_least: 0.2}
      - {characteristic: 3, quantity: overshoot, where: edges, at_most: 10 %}
"""


def lay_out_lot(folder: Path, units: int) -> None:
    """Write `spec.yaml` and, below `frames`, units of two dark frames and two charts of four edges each, 0.3 MP."""
    (folder / "spec.yaml").write_text(LOT)
    for number in range(units):
        rng = np.random.default_rng(number)
        unit = folder / "frames" / f"L-{number:04d}"
        unit.mkdir(parents=True)
        blur = Gaussian(0.5 + 0.2 * rng.random())
        scene = EdgeScene(blur, (140, 180), low=436, high=2936, black=64, white=4095, bits=12, read_noise=10)
        for repeat in (1, 2):
            chart = rng.normal(2000, 12, (480, 640))
            for x, y in ((160, 120), (480, 120), (160, 360), (480, 360)):
                chart[y - 90 : y + 90, x - 70 : x + 70] = scene.render(rng)
            tifffile.imwrite(unit / f"chart-{repeat}.tif", np.round(chart).astype(np.uint16))
            dark = np.round(rng.normal(64, 3, (480, 640))).astype(np.uint16)
            tifffile.imwrite(unit / f"dark-{repeat}.tif", dark)


def lay_out_large(folder: Path, units: int) -> None:
    """Write `spec.yaml` and units of one 12 MP frame each below `frames`."""
    (folder / "spec.yaml").write_text(SPEC)
    for number in range(units):
        unit = folder / "frames" / f"B-{number:04d}"
        unit.mkdir(parents=True)
        tifffile.imwrite(unit / "chart-1.tif", frame(number))


def lay_out_stacks(folder: Path, units: int) -> None:
    """Write `spec.yaml` and units of four 12 MP charts with four 12 MP dark frames that go with them."""
    dark = "captures:\n  dark: {target: dark frame, frames: {names: 'dark-{repeat}.tif', count: 4}}\n"
    spec = SPEC.replace("captures:\n", dark).replace("count: 1}\n", "count: 4}\n    uses: {dark: dark}\n")
    (folder / "spec.yaml").write_text(spec.replace("black_level: 0 DN", "black_level: 500 DN"))
    for number in range(units):
        rng = np.random.default_rng(number)
        unit = folder / "frames" / f"B-{number:04d}"
        unit.mkdir(parents=True)
        for repeat in range(1, 5):
            codes = np.round(rng.normal(500, 40, (HEIGHT, WIDTH))).astype(np.uint16)
            tifffile.imwrite(unit / f"dark-{repeat}.tif", codes)
            tifffile.imwrite(unit / f"chart-{repeat}.tif", frame(100 * number + repeat))
