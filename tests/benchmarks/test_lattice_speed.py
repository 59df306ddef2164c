"""What finding and measuring a 12 MP dot grid costs: CPU time of one core."""

import numpy as np
import pytest
from scipy.ndimage import gaussian_filter
from scipy.special import ndtr

from runner.capture.frame import Crop, Frame, crop
from runner.measure.contract import Found, Sample
from runner.measure.methods import chromatic_displacement, geometry
from runner.measure.targets import checkerboard, dot_grid
from runner.spec.model import Camera, Chart, Optics
from tests.benchmarks.side_by_side import Row, best_cpu, show
from tests.measure.lattice_samples import camera, located
from tests.scenes.lattices import LatticeScene, Values

ROUNDS = 5
SCENE = LatticeScene(
    size=(4000, 3000), places=(39, 29), pitch=102, focal=5000, tilt=(2, -3), turn=3, radial=(-0.05, 0.01), blur=1.0
)
NOISE = 0.014


def _dots(scene: LatticeScene, rng: np.random.Generator) -> Values:
    """Return a large dot grid: each dot an ellipse of the local view with a Gaussian border; for speed alone."""
    light = np.full(scene.size[::-1], scene.bright)
    places, e = scene.all_places(), 1e-3
    centres = scene.seen(places)
    steps = np.stack([(scene.seen(places + d) - centres) / e for d in np.eye(2) * e], axis=2)
    for (x, y), step in zip(centres, steps, strict=True):
        rows, columns = (slice(int(c) - 36, int(c) + 37) for c in (y, x))
        part = light[rows, columns]
        if part.shape != (73, 73):
            continue
        dx, dy = np.meshgrid(
            np.arange(columns.start, columns.stop) + 0.5 - x, np.arange(rows.start, rows.stop) + 0.5 - y
        )
        away = np.hypot(*np.tensordot(np.linalg.inv(step * scene.radius), np.stack([dx, dy]), 1))
        part += (scene.dark - scene.bright) * ndtr((1 - away) * scene.radius * scene.pitch / 1.04)
    return light + rng.normal(0, NOISE, light.shape)


def _board(scene: LatticeScene, rng: np.random.Generator) -> Values:
    """Return a large board."""
    y, x = np.mgrid[0 : scene.size[1], 0 : scene.size[0]]
    u, v = (x - 0.06 * y) / scene.pitch, (y + 0.06 * x) / scene.pitch
    dark = (np.floor(u) + np.floor(v)) % 2
    soft = gaussian_filter(scene.bright - 0.7 * dark, scene.blur)
    return np.asarray(soft + rng.normal(0, NOISE, dark.shape))


def _coded(light: Values) -> Frame:
    codes = np.clip(np.round(64 + 4031 * light), 0, 4095)
    return Frame("grid.tif", "", "", codes.astype(np.uint16))


def _sample(frame: Frame, found: Found, device: Camera, channel: str) -> Sample:
    crops: dict[str, tuple[Crop, ...]] = {n: (crop(frame, found.box, device, n),) for n in device.channels}
    return Sample(found, crops[channel][0], device, Optics(), Chart(), (), frames=crops[channel], channels=crops)


@pytest.mark.benchmark
def test_a_12_mp_dot_grid() -> None:
    """1131 dots: finding and every figure of geometry at most 1.0 s; a board and a mosaic's colours beside it."""
    rng = np.random.default_rng(1)
    dots, board = _coded(_dots(SCENE, rng)), _coded(_board(SCENE, rng))
    device, mosaic = camera(dots.codes), camera(dots.codes, mosaic="RGGB")
    found, corners = located(dot_grid, dots), located(checkerboard, board)
    assert isinstance(found, Found)
    assert isinstance(corners, Found)
    options = geometry.read_options({"pitch": "5 mm"})

    def whole(target: object, frame: Frame) -> None:
        at = located(target, frame)  # type: ignore[arg-type]
        assert isinstance(at, Found)
        geometry.measure(_sample(frame, at, device, "mono"), options)

    best = best_cpu(
        {
            "find": lambda: located(dot_grid, dots),
            "dots": lambda: whole(dot_grid, dots),
            "board": lambda: whole(checkerboard, board),
            "colour": lambda: chromatic_displacement.measure(
                _sample(dots, found, mosaic, "red"), chromatic_displacement.Options()
            ),
        },
        ROUNDS,
    )
    rows = [
        Row(f"dot grid, {len(found.points['dots'])} dots, found and measured", best["dots"], "s", 1.0),
        Row("of it: found", best["find"], "s"),
        Row(f"board, {len(corners.points['corners'])} corners, found and measured", best["board"], "s"),
        Row("red against green of a mosaic, measured", best["colour"], "s"),
    ]
    show("A 12 MP lattice: best CPU time of one core", rows)
    assert len(found.points["dots"]) >= 1000
