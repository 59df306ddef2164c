"""What a large patch of a sinusoidal grating costs."""

from dataclasses import replace

import numpy as np
import pytest

from runner.capture.frame import Box, Frame, crop
from runner.capture.mosaic import grey
from runner.measure.contract import Found, Measurement, Sample
from runner.measure.methods import grating_response
from runner.measure.targets import sinusoidal_grating
from runner.spec.model import Amount, Camera, Chart, Optics, Region
from tests.benchmarks.side_by_side import Row, best_cpu, show
from tests.scenes.gratings import GratingScene

SIDE = 1000
ROUNDS = 9
SCENE = GratingScene((SIDE, SIDE), (0.0713, 0.0211), shading=(0.08, -0.05), fill=1.0, phase=0.7, noise=0.01)


def _sample(mosaic: str, channel: str) -> tuple[Frame, Camera, Sample]:
    camera = Camera(width=SIDE, height=SIDE, bit_depth=16, black_level=1000, white_level=61000, mosaic=mosaic)
    light = SCENE.light(np.random.default_rng(1))
    frame = Frame("stripes-1.tif", "", "", np.round(1000 + 60000 * light).astype(np.uint16))
    seen = replace(frame, codes=grey(frame.codes, camera))  # as the session lets targets see it
    whole = Amount(100, "%"), Amount(100, "%")
    region = Region("patch", (Amount(50, "%"), Amount(50, "%")), whole)
    found = sinusoidal_grating.locate([seen], [region], camera, sinusoidal_grating.Options())[0]
    assert isinstance(found, Found)
    cut = crop(frame, Box(0, 0, SIDE, SIDE), camera, channel)
    return frame, camera, Sample(found, cut, camera, Optics(), Chart(), wanted=())


@pytest.mark.benchmark
def test_a_patch_of_one_megapixel() -> None:
    """Everything that is measured in a patch of 1 MP: at most 60 ms; a mosaic's channels beside it."""
    options = grating_response.read_options({"target_modulation": 0.8})
    rows = []
    for mosaic, channels in (("none", ["mono"]), ("RGGB", ["red", "green", "blue"])):
        samples = [_sample(mosaic, channel) for channel in channels]

        def measured(of: list[tuple[Frame, Camera, Sample]] = samples) -> list[Measurement]:
            fresh = [crop(frame, s.crop.box, camera, s.crop.channel) for frame, camera, s in of]
            return [
                grating_response.measure(Sample(s.found, cut, camera, s.optics, s.chart, ()), options)
                for (_, camera, s), cut in zip(of, fresh, strict=True)
            ]

        best = best_cpu({"measured": measured}, ROUNDS)
        what = "mono" if mosaic == "none" else "red, green and blue of a mosaic"
        bar = 60 if mosaic == "none" else None
        rows.append(Row(f"grating response, {what}", 1000 * best["measured"], "ms", bar))
        for one in measured():
            (value,) = (r.value for r in one.readings if r.quantity == "modulation")
            assert value == pytest.approx(100 * SCENE.seen_modulation, rel=0.01)
    show(f"A grating patch of {SIDE} × {SIDE} px, 16 bit: best CPU time of {ROUNDS} turns", rows)
