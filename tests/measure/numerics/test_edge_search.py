"""Finding edges in arrays: closed-form scenes in, direction and place out."""

import numpy as np
import pytest
from scipy import ndimage

from runner.errors import MeasurementRefused
from runner.measure.numerics.edge_search import confirm_edge, trace_edge, without_specks
from tests.scenes.edges import EdgeScene, bar_scene, corner_scene
from tests.scenes.line_spreads import Gaussian


@pytest.mark.parametrize("direction", [3, 44, 87, 133, 176, 224, 272, 318])
@pytest.mark.parametrize("sigma", [0.4, 3.0])
def test_direction_and_place(direction: float, sigma: float) -> None:
    """Direction within 0.1° and place within 0.05 px of the scene's own, all round, noise 1 % of the step."""
    scene = EdgeScene(Gaussian(sigma), (100, 140), direction, offset=2.3, read_noise=320)
    trace = trace_edge(without_specks(scene.render(np.random.default_rng(5)).astype(float)))
    turn = (np.degrees(trace.normal) - direction + 180) % 360 - 180
    assert abs(turn) < 0.1
    assert trace.offset == pytest.approx(2.3, abs=0.05)
    assert np.degrees(trace.angle) == pytest.approx(scene.edge_angle, abs=0.1)


def test_specks_vanish_and_edges_stay() -> None:
    """A single dead or hot pixel is gone, a slanted edge moves by less than a thousandth of its step."""
    scene = EdgeScene()
    clean = scene.signal()
    spoilt = clean.copy()
    spoilt[[20, 60, 100], [10, 40, 70]] = [65535, 0, 65535]
    assert np.abs(without_specks(spoilt) - clean).max() < 0.25 * (scene.high - scene.low)
    assert np.mean(np.abs(without_specks(clean) - clean)) < 1e-3 * (scene.high - scene.low)
    assert without_specks(spoilt)[20, 10] == pytest.approx(scene.low, abs=1)


def test_levels_follow_shading() -> None:
    """The levels are those at the edge: within 2 % of the step under 20 % shading, modulation within 0.01."""
    scene = EdgeScene(size=(100, 120), shading=(0.1, 0.1, 0.0), low=5000, high=25000)
    signal = without_specks(scene.signal())
    levels = confirm_edge(signal, trace_edge(signal))
    assert levels.low == pytest.approx(5000, abs=400)
    assert levels.high == pytest.approx(25000, abs=400)
    assert levels.modulation == pytest.approx(scene.modulation, abs=0.01)


def _refusal(signal: np.ndarray) -> tuple[str, str]:
    clean = without_specks(signal + np.random.default_rng(2).normal(0, 150, signal.shape))
    with pytest.raises(MeasurementRefused, match=r"\d") as refused:
        confirm_edge(clean, trace_edge(clean))
    return refused.value.cause, refused.value.found


@pytest.mark.parametrize("width", [3, 8, 20, 40])
def test_bars_have_two_edges(width: float) -> None:
    """A bar of any width inside the region is refused as two edges, with the figures."""
    cause, found = _refusal(bar_scene(EdgeScene(size=(100, 120)), width))
    assert cause == "two edges"
    assert "%" in found


@pytest.mark.parametrize("other", [95, 50, 35, 20])
def test_corners_are_no_edges(other: float) -> None:
    """Two edges that meet in the region are refused, whatever their angle down to 15°."""
    scene = EdgeScene(size=(100, 120))
    cause, _ = _refusal(corner_scene(scene, EdgeScene(size=(100, 120), direction=other)))
    assert cause in {"two edges", "edge not straight"}


def test_shading_noise_and_texture_are_no_edges() -> None:
    """Linear, quadratic and cos⁴ shading, noise and random texture never pass for an edge."""
    y, x = np.mgrid[0:120, 0:100].astype(float)
    rng = np.random.default_rng(8)
    scenes = [10000 + 120 * x, 30000 - 4 * (x - 50) ** 2, 40000 * np.cos(np.arctan(np.hypot(x, y) / 200)) ** 4]
    scenes += [20000 + rng.normal(0, 3000, x.shape), np.full(x.shape, 20000.0)]
    for blur in (1, 3, 8):
        texture = ndimage.gaussian_filter(rng.normal(0, 1, x.shape), blur)
        scenes.append(20000 + 6000 * texture / texture.std())
    for signal in scenes:
        cause, _ = _refusal(signal)
        assert cause in {"no edge", "no modulation"}


def test_a_blur_without_plateaus_is_no_edge() -> None:
    """A transition as wide as the region is refused with its width; one that leaves plateaus is found."""
    cause, found = _refusal(EdgeScene(Gaussian(20), (80, 100)).signal())
    assert cause == "no edge"
    assert "transition takes" in found
    signal = EdgeScene(Gaussian(7), (80, 100)).signal()
    assert confirm_edge(signal, trace_edge(signal)).modulation > 0.6


def test_a_gentle_curve_is_an_edge() -> None:
    """A sagitta of 3 px over the region's length is followed, and its size returned within 10 %."""
    scene = EdgeScene(size=(80, 120), curve=(3.0,))
    signal = scene.signal()
    trace = trace_edge(signal)
    confirm_edge(signal, trace)
    assert trace.bend * (scene.half_length / trace.half) ** 2 == pytest.approx(3.0, rel=0.1)


def test_ends_lie_on_the_border() -> None:
    """The edge's line enters and leaves the array on its border; a line outside has no ends."""
    scene = EdgeScene(size=(80, 120), direction=5, offset=1.0)
    trace = trace_edge(scene.signal())
    ends = trace.ends((120, 80))
    assert ends is not None
    assert sorted(y for _, y in ends) == pytest.approx([0, 120])
    for mine, true in zip(ends, scene.edge_ends(), strict=True):
        assert mine == pytest.approx(true, abs=0.15)
    assert trace.moved(500, 0).ends((120, 80)) is None
