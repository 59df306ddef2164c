"""What a patch of texture costs, registration included."""

import numpy as np
import pytest

from runner.capture.frame import Box, Frame, crop
from runner.measure.contract import Found, Measurement, Sample
from runner.measure.methods import texture_response
from runner.spec.model import Camera, Chart, Optics
from tests.benchmarks.side_by_side import Row, best_cpu, show
from tests.scenes.random_patterns import NoiseScene

SIDE, ROUNDS = 512, 5


@pytest.mark.benchmark
def test_a_patch_of_texture() -> None:
    """A patch of 512 × 512 px in two frames: at most 500 ms; the pattern's own drawing, once a process, beside it."""
    scene = NoiseScene(size=(SIDE, SIDE), cells=512, cells_per_px=0.9, noise=0.02)
    camera = Camera(width=SIDE, height=SIDE, bit_depth=12, black_level=64, white_level=4095)
    rng, clean, box = np.random.default_rng(1), scene.picture(), Box(0, 0, SIDE, SIDE)
    frames = [
        Frame(f"t-{n}.tif", "", "", np.clip(np.round(64 + 4031 * scene.frame(rng, clean)), 0, 4095).astype(np.uint16))
        for n in range(2)
    ]
    options = texture_response.read_options({"pattern": "noise", "seed": 5, "cells": 512, "cells_per_px": 0.9})

    def measured() -> Measurement:
        crops = tuple(crop(one, box, camera) for one in frames)
        found = Found("patch", box, frozenset({"texture"}))
        return texture_response.measure(Sample(found, crops[0], camera, Optics(), Chart(), (), frames=crops), options)

    best = best_cpu({"measured": measured}, ROUNDS)
    rows = [Row("texture response, two frames", 1000 * best["measured"], "ms", 500)]
    show(f"A patch of texture of {SIDE} × {SIDE} px: best CPU time of {ROUNDS} turns", rows)
    (value,) = (r.value for r in measured().readings if r.quantity == "texture_mtf50")
    assert value is not None
