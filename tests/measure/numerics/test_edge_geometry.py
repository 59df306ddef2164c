"""Where an edge lies: distances, angles, lengths against the scenes' own geometry, and the robust start."""

import numpy as np
import pytest

from runner.errors import MeasurementRefused
from runner.measure.numerics.edge_geometry import EdgeLine, edge_length, find_edge
from tests.scenes.edges import EdgeScene, bar_scene
from tests.scenes.line_spreads import Gaussian

DIRECTIONS = [3, 44, 46, 87, 93, 133, 176, 184, 224, 272, 318, 357]


def _line(scene: EdgeScene) -> EdgeLine:
    return EdgeLine(np.radians(scene.direction), scene.half_length, np.array([scene.offset, 0.0]))


@pytest.mark.parametrize("direction", DIRECTIONS)
def test_distances_and_angles_are_the_scenes(direction: float) -> None:
    """Distances from a straight edge are exact, the angle is that from the nearest axis, the sides are the pixel's."""
    scene = EdgeScene(size=(50, 70), direction=direction, offset=1.7)
    line = _line(scene)
    u, v = line.along((70, 50))
    assert line.distance(u, v).reshape(70, 50) == pytest.approx(scene.distance(), abs=1e-9)
    assert abs(np.degrees(line.tilt)) == pytest.approx(scene.edge_angle, abs=1e-9)
    assert line.sides() == pytest.approx(scene.sides, abs=1e-12)
    assert line.sides(0.5) == pytest.approx(tuple(side / 2 for side in scene.sides), abs=1e-12)


def test_tilt_is_positive_clockwise_on_the_screen() -> None:
    """An edge whose upper end leans to the right is turned clockwise from the vertical: positive."""
    # the normal of an edge leaning right points right and down: a direction of +5°; the edge itself turns with it
    assert EdgeLine(np.radians(5), 60.0, np.zeros(2)).tilt == pytest.approx(np.radians(5))
    assert EdgeLine(np.radians(175), 60.0, np.zeros(2)).tilt == pytest.approx(np.radians(-5))


def test_turning_moves_nothing() -> None:
    """Taking a line's slope into its normal leaves every pixel's distance where it was, within 1e-9 px."""
    line = EdgeLine(0.3, 40.0, np.array([1.3, 2.1]))
    turned = line.turned()
    assert turned.coefficients[1] == 0
    shape = (60, 80)
    assert turned.distance(*turned.along(shape)) == pytest.approx(line.distance(*line.along(shape)), abs=1e-9)
    assert turned.tilt == pytest.approx(line.tilt)


@pytest.mark.parametrize("sagitta", [0.5, 2.0])
def test_distances_from_a_curve(sagitta: float) -> None:
    """Within 3 px of a curved edge the distance agrees with the exact foot point's within 0.01 px."""
    scene = EdgeScene(size=(80, 120), direction=5, curve=(sagitta,))
    # sagitta · t² = sagitta · (1/3 + 2/3 P2(t))
    line = EdgeLine(np.radians(5), scene.half_length, np.array([sagitta / 3, 0.0, 2 * sagitta / 3]))
    exact = scene.distance().ravel()
    near = np.abs(exact) < 3
    mine = line.distance(*line.along((120, 80)))
    assert mine[near] == pytest.approx(exact[near], abs=0.01)


def test_length_inside_the_region() -> None:
    """The edge's length is the distance between the points where it enters and leaves; outside it has none."""
    for direction in (5, 40, 85, 140):
        scene = EdgeScene(size=(80, 120), direction=direction)
        inside = [d for d in np.linspace(-90, 90, 180001) if _inside(scene, d)]
        assert edge_length((120, 80), np.radians(direction)) == pytest.approx(inside[-1] - inside[0], abs=2e-3)
    assert edge_length((120, 80), 0.0, 39.0) == pytest.approx(120)
    assert edge_length((120, 80), 0.0, 41.0) == 0


def _inside(scene: EdgeScene, along: float) -> bool:
    c, s = np.cos(np.radians(scene.direction)), np.sin(np.radians(scene.direction))
    return bool(abs(along * s) <= 40 and abs(along * c) <= 60)


@pytest.mark.parametrize("direction", DIRECTIONS)
@pytest.mark.parametrize("mosaic", [False, True])
def test_start_from_nothing(direction: float, mosaic: bool) -> None:
    """An edge of any direction and polarity is found within 1° and 1 px in noise of a tenth of its step.

    Also on a quarter of the pixels, with nonsense on all others.
    """
    rng = np.random.default_rng(3)
    scene = EdgeScene(Gaussian(1.0), (60, 80), direction, offset=4.3, read_noise=3200)
    signal = scene.render(rng).astype(float)
    sites = None
    if mosaic:
        sites = np.zeros(signal.shape, dtype=bool)
        sites[1::2, ::2] = True
        signal[~sites] = 65000
    line, low, high = find_edge(signal, sites)
    turn = (np.degrees(line.normal) - direction + 180) % 360 - 180
    assert abs(turn) < 1 if not mosaic else abs(turn) < 2
    assert line.coefficients[0] == pytest.approx(4.3, abs=1)
    assert (low, high) == pytest.approx((scene.low, scene.high), abs=1500)


def test_nothing_to_find() -> None:
    """Noise, and a bar whose two sides are alike, have no step; the sentence tells how far it stands out."""
    rng = np.random.default_rng(1)
    noise = rng.normal(20000, 300, (80, 60))
    bar = bar_scene(EdgeScene(size=(60, 80)), 20) + rng.normal(0, 300, (80, 60))
    for signal in (noise, bar, np.full((80, 60), 5.0)):
        with pytest.raises(MeasurementRefused, match=r"no step stands out .*scatter \d+\.\d\); at least 6") as refused:
            find_edge(signal)
        assert refused.value.cause == "no edge"
